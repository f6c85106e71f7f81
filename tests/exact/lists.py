"""Lists of doubles on which sums go wrong that are not exact: a name and the lists of each kind.

The lists are drawn from a fixed sequence. `double_double_sum` is the arithmetic that some of them are made to defeat.
"""

import itertools
import math
import random
import struct

LARGEST = 1.7976931348623157e308  # (2 - 2^-52) 2^1023
SMALLEST_NORMAL = 2.0**-1022
SMALLEST = 2.0**-1074


def two_sum(a, b):
    """The sum rounded, and what rounding took away (Knuth, The Art of Computer Programming 2, 4.2.2)."""
    total = a + b
    part = total - a
    return total, (a - (total - part)) + (b - part)


def double_double_sum(values):
    """A sum kept in two doubles, as in Hida, Li & Bailey 2001 (ARITH-15), "double-double + double"."""
    high = low = 0.0
    for value in values:
        high, error = two_sum(high, value)
        low += error
        high, low = high + low, low - ((high + low) - high)
    return high + low


def as_float(value):
    """The nearest number of single precision."""
    return struct.unpack("<f", struct.pack("<f", value))[0]


def draw(rng, low, high):
    """A double of either sign with 2^low <= |value| < 2^(high + 1), its exponent drawn evenly."""
    value = math.ldexp(rng.randrange(2**52, 2**53), rng.randint(low, high) - 52)
    return rng.choice((-1.0, 1.0)) * value


def singles(rng):
    yield []
    fixed = [0.0, 1.0, math.pi, 0.1, LARGEST, SMALLEST_NORMAL, SMALLEST, SMALLEST_NORMAL - SMALLEST]
    for value in fixed + [draw(rng, -1074, 1023) for _ in range(24)]:
        yield [value]
        yield [-value]


def far_apart(rng):
    for length in (2, 3, 5, 8, 31, 32, 33, 63, 64, 65, 200, 1023, 1024, 1025, 2047, 2048, 2049, 3000, 5000):
        yield [draw(rng, -1074, 1012) for _ in range(length)]
        yield [draw(rng, -400, 400) for _ in range(length)]


def ordinary(rng):
    for length in (7, 100, 1000, 1024, 2500, 4096, 5000):
        yield [rng.random() for _ in range(length)]
        yield [rng.gauss(0.0, 1e10) for _ in range(length)]
        yield [rng.lognormvariate(10.0, 3.0) for _ in range(length)]
        yield [0.1] * length


def cancelling(rng):
    """Nearly everything cancels; what is left is a small part of any term."""
    for length in (1, 3, 20, 33, 500, 511, 512, 1700, 2499):
        for low, high, left in ((-30, 30, -80), (-300, 300, -900), (900, 1010, -1070), (-1074, -1000, -1074)):
            values = [draw(rng, low, high) for _ in range(length)]
            values += [-value for value in values]
            values.append(draw(rng, left, left + 2))
            rng.shuffle(values)
            yield values


def zero_sums(rng):
    """The sum is exactly zero, which is +0."""
    yield [0.0] * 3
    yield [-0.0]
    yield [-0.0] * 5000
    yield [0.0, -0.0, -0.0]
    for length in (1, 2, 17, 40, 700, 2500):
        values = [draw(rng, -1074, 1000) for _ in range(length)]
        values += [-value for value in values]
        rng.shuffle(values)
        yield values
        yield values + [-0.0]


def subnormals(rng):
    for length in (1, 2, 10, 64, 1000, 5000):
        yield [SMALLEST * rng.randint(-(2**40), 2**40) for _ in range(length)]
        yield [SMALLEST * rng.randint(1, 2**52 - 1) for _ in range(length)]
        # Sums that cross from subnormal to normal and back.
        yield [rng.choice((-1, 1)) * (SMALLEST_NORMAL + SMALLEST * rng.randint(-9, 9)) for _ in range(length)]
        yield [SMALLEST] * length


def half_way(rng):
    """The true sum lies half-way between two doubles, or a hair beside."""
    for _ in range(40):
        value = draw(rng, -800, 900)
        half = math.ulp(value) / 2
        hair = max(math.ulp(half) * 2.0 ** -rng.randint(1, 200), SMALLEST)
        for sign in (-1.0, 1.0):
            yield [value, sign * half]
            yield [value, sign * half, hair]
            yield [value, sign * half, -hair]
            yield [hair, value, -hair, sign * half]
    # Half-way beyond the largest double, where an infinity begins.
    for sign in (-1.0, 1.0):
        edge = sign * 2.0**970  # half the spacing of the largest doubles
        yield [sign * LARGEST, edge]
        yield [sign * LARGEST, edge, -sign * SMALLEST]
        yield [sign * LARGEST, edge, sign * SMALLEST]
        yield [sign * LARGEST, edge / 2]


def beyond_double_double(rng):
    """Three sizes more than 53 binary places apart: two doubles cannot hold them all until the large ones cancel."""
    for _ in range(60):
        gap, other = rng.randint(54, 300), rng.randint(54, 300)
        large, middle = draw(rng, 300, 340), draw(rng, 300 - gap, 301 - gap)
        small = draw(rng, 299 - gap - other, 300 - gap - other)
        yield [large, middle, small, -large, -middle]
        yield [small, middle, large, -middle, -large]
    # In many terms.
    for length in (10, 300, 1500):
        values = []
        for _ in range(length):
            values += [draw(rng, 500, 520), draw(rng, 300, 320), draw(rng, 0, 20)]
        yield values + [-value for value in values if abs(value) > 2.0**200]


def overflowing(rng):
    """Parts of the sum are beyond the largest double, and in some the sum itself is."""
    yield [LARGEST, LARGEST]
    yield [-LARGEST, -LARGEST]
    yield [LARGEST, LARGEST, -LARGEST]
    yield [LARGEST, LARGEST, -LARGEST, -LARGEST]
    yield [LARGEST] * 2500 + [-LARGEST] * 2499
    yield [LARGEST] * 5000
    yield [-LARGEST] * 5000
    for length in (2, 40, 1024, 2400):
        values = [draw(rng, 1020, 1023) for _ in range(length)]
        values = sorted(values + [-value for value in values[1:]])
        yield values
        yield values + [draw(rng, -1074, 1000) for _ in range(100)]
        yield [abs(value) for value in values]


def narrow_bands(rng):
    """Sizes within some binary places of each other, as quick sums like them, and lists with one that does not fit."""
    for width in (0, 1, 10, 30, 40, 45, 50, 53, 60, 64, 70, 75, 80, 85, 90, 100, 110, 130, 200):
        for length in (33, 1024, 1300, 2048):
            low = rng.randint(-1000, 800)
            values = [draw(rng, low, low + width) for _ in range(length)]
            yield values
            values = values[:]
            values[rng.randrange(length)] = draw(rng, low - 300, low - 60) if low > -700 else SMALLEST
            yield values
            values = values[:]
            values[rng.randrange(length)] = draw(rng, low + width + 1, low + width + 120)
            yield values


def crowded(rng):
    """As much as possible of one sign and size: whatever takes up carries must be emptied in time."""
    for exponent in (-1073, -1022, -500, 0, 52, 500, 900, 1003):
        below = math.nextafter(2.0**exponent, 0.0) if exponent > -1073 else SMALLEST
        yield [below] * 5000
        yield [-below] * 4999
        yield [below, -below] * 1200 + [below] * 2000
    yield [math.nextafter(2.0**40, 0.0)] * 300_000
    yield [-math.nextafter(1.0, 0.0)] * 300_001


def floats(rng):
    """Numbers of single precision, subnormal ones too."""
    for length in (1, 50, 1024, 3000, 5000):
        yield [as_float(rng.gauss(0.0, 1e3)) for _ in range(length)]
        yield [as_float(draw(rng, -148, 126)) for _ in range(length)]
        yield [rng.randint(-(2**20), 2**20) * 2.0**-149 for _ in range(length)]


def every_order(rng):
    """All orders of a few numbers of very different size that cancel in part."""
    for _ in range(2):
        large, middle = draw(rng, 200, 300), draw(rng, 100, 140)
        values = [large, middle, -large, -middle, draw(rng, -60, 0)]
        yield from map(list, itertools.permutations(values))


def some_orders(rng):
    """Long lists forwards, backwards, by size, and shuffled."""
    for low, high in ((-1074, 1000), (-50, 50), (980, 1023)):
        values = [draw(rng, low, high) for _ in range(3000)]
        yield values
        yield values[::-1]
        yield sorted(values)
        yield sorted(values, key=abs)
        yield sorted(values, key=abs, reverse=True)
        for _ in range(4):
            values = values[:]
            rng.shuffle(values)
            yield values


KINDS = (
    singles,
    far_apart,
    ordinary,
    cancelling,
    zero_sums,
    subnormals,
    half_way,
    beyond_double_double,
    overflowing,
    narrow_bands,
    crowded,
    floats,
    every_order,
    some_orders,
)


def all_lists():
    """Pairs of the name of a kind and a list."""
    for kind in KINDS:
        rng = random.Random(f"limnograph {kind.__name__}")
        for values in kind(rng):
            yield kind.__name__, values
