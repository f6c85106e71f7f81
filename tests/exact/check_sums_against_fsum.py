"""Holds the library's sums, extremes and counts against Python's own, bit for bit.

Usage: check_sums_against_fsum.py EXACT_SUMS LEND_LISTS LIMNOGRAPH FOLDER

The same lists of doubles go to the public Rust interface (the example `exact_sums`) and to the library as hosts link
it (tests/exact/lend_lists.c); LIMNOGRAPH, the program, reads the rows back. What is right says Python's standard
library:

- `math.fsum`, a correctly rounded sum of doubles (Shewchuk 1997, Discrete & Computational Geometry 18, 305);
- where that raises OverflowError on the way, and beside it everywhere else, the sum as an exact rational number
  (`fractions.Fraction`), rounded once to the nearest double, ties to even, as the division of two integers is in
  Python; beyond the largest double it is infinite;
- `max`, `sum` of integers and `len` for extremes and counts.

No unit stands between a sum and its column: a mass of 1 is 1 Msun, and a list of one number comes back as it is. The
columns of black_holes pass through grams, which the same two operations do here.
"""

import csv
import functools
import math
import operator
import random
import struct
import subprocess
import sys
from collections import Counter
from fractions import Fraction

from lists import all_lists, double_double_sum

# The nominal solar mass parameter (IAU 2015 resolution B3) over CODATA 2022 G, in g.
SOLAR_MASS = 1.3271244e26 / 6.6743e-8
SPECIES = ("gas", "star", "dark_matter", "wind", "black_hole")
YEAR = 365.25 * 86400.0
SCALE = 2**1074

problems = []
compared = Counter()


def bits(value):
    return struct.unpack("<Q", struct.pack("<d", value))[0]


def check(what, found, expected):
    """Equal to the bit, or told."""
    compared[what] += 1
    same = bits(found) == bits(expected) if isinstance(expected, float) else found == expected
    if not same and len(problems) < 40:
        problems.append(f"{what}: expected {expected!r}, found {found!r}")


def require(condition, what):
    if not condition:
        problems.append(what)


def exact_sum(values):
    """The sum times 2^1074, an integer."""
    total = 0
    for value in values:
        numerator, denominator = value.as_integer_ratio()
        total += numerator * (SCALE // denominator)
    return total


def rounded(total):
    """The double nearest to an exact sum."""
    fraction = Fraction(total, SCALE)
    try:
        return fraction.numerator / fraction.denominator
    except OverflowError:
        return math.inf if total > 0 else -math.inf


def reference(values):
    """The sum as Python has it, and whether fsum could tell it."""
    expected = rounded(exact_sum(values))
    try:
        found = math.fsum(values)
    except OverflowError:
        return expected, False
    require(bits(found) == bits(expected), f"math.fsum and Fraction disagree: {found!r}, {expected!r}")
    return expected, True


def through_rust(program, lists, expected):
    message = b"".join(struct.pack(f"<Q{len(values)}d", len(values), *values) for values in lists)
    run = subprocess.run([program], input=message, capture_output=True, check=True)
    lines = run.stdout.decode().splitlines()
    require(len(lines) == len(lists), f"{len(lists)} lists went in, {len(lines)} sums came out")
    for number, (line, right) in enumerate(zip(lines, expected)):
        for how, word in zip(("added one by one", "added as a slice", "merged"), line.split(), strict=True):
            check(how, struct.unpack("<d", int(word, 16).to_bytes(8, "little"))[0], right)


class Holes:
    """What the black holes of a list are."""

    def __init__(self, rng, masses):
        self.masses = masses
        self.rates = [rng.choice((1.0, -1.0)) * rng.lognormvariate(0.0, 20.0) for _ in masses]
        self.ids = [rng.choice((rng.getrandbits(64), rng.getrandbits(63) | 1 << 63, 0, 2**64 - 1)) for _ in masses]
        for bad in range(len(masses) // 400):
            self.rates[rng.randrange(len(masses))] = rng.choice((math.nan, math.inf, -math.inf))

    def whole(self):
        return [item for item in zip(self.masses, self.rates, self.ids) if math.isfinite(item[0] + 0 * item[1])]


def with_bad_numbers(rng, lists):
    """Some of the lists, with numbers that are not finite strewn in."""
    for values in rng.sample([values for values in lists if 3 < len(values) < 6000], 60):
        values = values[:]
        for _ in range(rng.randint(1, 5)):
            values.insert(rng.randrange(len(values) + 1), rng.choice((math.nan, -math.nan, math.inf, -math.inf)))
        yield values
    yield [math.nan]
    yield [math.inf, -math.inf]


def equal_masses(rng):
    """Several of the largest mass: the one with the largest identity counts, zeros of either sign too."""
    for length in (2, 10, 1500):
        yield [3.5] * length
        yield [rng.choice((-1.0, -2.0)) for _ in range(length)]
        yield [rng.choice((5e-324, 0.0, 1e-310)) for _ in range(length)]


def finite(values):
    return [value for value in values if math.isfinite(value)]


def expected_row(hole, total, first):
    """What stands in the row of a list: cells that are doubles, cells that are texts, and what the host is told."""
    right = rounded(total)
    numbers = {f"mass_{species}": right for species in SPECIES}
    numbers["baryon_mass"] = rounded(4 * total)
    numbers["baryon_mass_drift"] = rounded(4 * total - first) / rounded(first)
    # What is not finite is left out of everything that needs it, and counted.
    bad = len(hole.masses) - len(finite(hole.masses))
    bad_rates = len(hole.rates) - len(finite(hole.rates))
    texts = {f"not_finite_{species}_mass": str(bad) for species in SPECIES}
    texts["not_finite_black_hole_accretion_rate"] = str(bad_rates)
    told = [f"{bad} of {species} mass" for species in SPECIES if bad]
    told += [f"{bad_rates} of black_hole accretion_rate"] * (bad_rates > 0)
    # Counts, and the largest one of several.
    whole = hole.whole()
    texts["black_holes"] = str(len(whole))
    if whole:
        mass, _, identity = max(whole, key=lambda item: (item[0], math.copysign(1.0, item[0]), item[2]))
        numbers["black_hole_largest_mass"] = mass * SOLAR_MASS / SOLAR_MASS
        texts["black_hole_largest_id"] = str(identity)
    else:
        texts["black_hole_largest_mass"] = texts["black_hole_largest_id"] = ""
    if hole.masses:
        rates = rounded(exact_sum(rate for _, rate, _ in whole))
        numbers["black_hole_accretion_rate"] = rates * YEAR / SOLAR_MASS
        numbers["black_hole_mass"] = rounded(exact_sum(mass for mass, _, _ in whole)) * SOLAR_MASS / SOLAR_MASS
    return numbers, texts, told


def through_a_host(host, limnograph, folder, threads, vectors, holes, expected):
    """Lends every list in a step of its own, and checks the rows; False where the machine cannot hide its vectors."""
    name = f"{folder}/threads_{threads}_vectors_{vectors}"
    with open(f"{folder}/lists", "wb") as out:
        for hole in holes:
            count = len(hole.masses)
            out.write(struct.pack(f"=Q{2 * count}d{count}Q", count, *hole.masses, *hole.rates, *hole.ids))
    command = [host, f"{folder}/lists", f"{name}.limno", str(threads), vectors]
    run = subprocess.run(command, capture_output=True, text=True)
    if run.returncode == 77 and vectors != "native":
        return False
    if run.returncode != 0:
        raise SystemExit(f"the host ended with status {run.returncode}: {run.stderr}")
    *answers, floats = run.stdout.splitlines()
    require(int(floats.split()[0]) >= 15, f"too few lists of floats: {floats}")
    require(len(answers) == len(holes), f"{len(holes)} steps, {len(answers)} answers")
    subprocess.run([limnograph, "export", f"{name}.limno", "--to", "csv", "-o", f"{name}.csv"], check=True)
    with open(f"{name}.csv", newline="") as lines:
        rows = list(csv.reader(line for line in lines if not line.startswith("#")))
    names = [column.split(" [")[0] for column in rows[0]]
    rows = [dict(zip(names, row)) for row in rows[1:]]
    steps = [int(row["step"]) for row in rows]
    require(steps == list(range(1, len(holes) + 1)), f"expected a row a step, found {len(rows)}")
    for row, answer, (numbers, texts, told) in zip(rows, answers, expected):
        for column, right in numbers.items():
            check(column, float(row[column] or "nan"), right)
        for column, right in texts.items():
            check(column, row[column], right)
        check("status", answer.split()[0], "LIMNO_LEFT_OUT" if told else "LIMNO_OK")
        for part in told:
            check("text of an error", part if part in answer else answer, part)
    return True


def main():
    exact_sums, lend_lists, limnograph, folder = sys.argv[1:]
    rng = random.Random("limnograph black holes")
    lists, kinds, raised, infinite = [], Counter(), 0, 0
    for kind, values in [("singles", [0.1])] + list(all_lists()):
        expected, told = reference(values)
        lists.append(values)
        kinds[kind] += 1
        raised += not told
        infinite += math.isinf(expected)
        # The cases must be what they say that they are.
        if kind == "beyond_double_double":
            require(bits(double_double_sum(values)) != bits(expected), f"two doubles can sum {values[:5]}")
        if kind == "zero_sums":
            require(bits(expected) == 0, f"the sum of {values[:5]} is not zero")
        if kind == "subnormals":
            require(abs(expected) < 1e-300, f"{values[:5]} are not small")
    sums = [exact_sum(values) for values in lists]
    expected = [rounded(total) for total in sums]
    plain = [functools.reduce(operator.add, values, 0.0) for values in lists]
    plain_wrong = sum(bits(found) != bits(right) for found, right in zip(plain, expected))
    require(len(kinds) == 14 and min(kinds.values()) >= 15, f"kinds of lists are missing: {kinds}")
    require(raised >= 10 and infinite >= 5, f"fsum raised on {raised} lists, {infinite} sums are infinite")
    require(min(map(len, lists)) == 0 and max(map(len, lists)) > 5000, "the lengths are not 0 to beyond 5000")

    through_rust(exact_sums, lists, expected)
    more = list(with_bad_numbers(rng, lists)) + list(equal_masses(rng))
    holes = [Holes(rng, values) for values in lists + more]
    sums += [exact_sum(finite(values)) for values in more]
    rows = [expected_row(hole, total, 4 * sums[0]) for hole, total in zip(holes, sums)]
    for threads, vectors in ((1, "native"), (3, "native"), (1, "128"), (4, "256")):
        if not through_a_host(lend_lists, limnograph, folder, threads, vectors, holes, rows):
            print(f"this machine cannot hide vectors wider than {vectors} bits: not tried with narrower ones")

    print(f"{len(lists)} lists of {sum(map(len, lists))} doubles: " + ", ".join(f"{n} {k}" for k, n in kinds.items()))
    print(f"math.fsum raised on {raised}, {infinite} sums are infinite, plain addition is wrong on {plain_wrong}")
    print(f"{sum(compared.values())} values compared bit for bit: " + ", ".join(f"{n} {k}" for k, n in compared.items()))
    for problem in problems:
        print(f"FAILED: {problem}")
    return 1 if problems else 0


if __name__ == "__main__":
    sys.exit(main())
