"""Holds rows of a Saltmarsh series against sums done here on the dumped particles of one step.

    python check_saltmarsh_rows.py DUMP CONFIG RUN_CSV SHELLS_CSV

DUMP       what `saltmarsh --dump STEP DUMP` wrote (layout: ffi-examples/saltmarsh/dump.h)
CONFIG     the limnograph.toml of that run
RUN_CSV    `limnograph export … --to csv`
SHELLS_CSV the same with `--table wind_shells`

The reference is general-purpose: numpy for the contributions, in the order of operations that the gauges
document, Python's math.fsum (correctly rounded) for the sums, astropy for constants, units, ages and expansion
rates. Sums must agree to the last digit; a factor of units may round differently, so values are compared to
four units in the last place.
"""

import csv
import math
import struct
import sys
import tomllib

import numpy as np
from astropy import constants, units
from astropy.cosmology import LambdaCDM

TOLERANCE = 4 * np.finfo(float).eps


def read_dump(path):
    with open(path, "rb") as file:
        data = file.read()
    assert data[:8] == b"SALTDUMP", "not a dump"
    version, step = struct.unpack_from("<QQ", data, 8)
    assert version == 1
    names = ("scale_factor", "age", "scale_step", "age_step", "box", "h")
    head = dict(zip(names, struct.unpack_from("<6d", data, 24)), step=step)
    (count,) = struct.unpack_from("<Q", data, 72)
    offset, tables = 80, {}
    for _ in range(count):
        name = data[offset : offset + 32].rstrip(b"\0").decode()
        rows, columns = struct.unpack_from("<QQ", data, offset + 32)
        offset += 48
        labels = [data[offset + 32 * c : offset + 32 * (c + 1)].rstrip(b"\0").decode() for c in range(columns)]
        offset += 32 * columns
        values = np.frombuffer(data, "<f8", rows * columns, offset).reshape(rows, columns)
        offset += 8 * rows * columns
        tables[name] = {label: values[:, c].copy() for c, label in enumerate(labels)}
    return head, tables


def read_csv(path):
    with open(path, newline="") as file:
        rows = list(csv.reader(file))
    names = [cell.split(" [")[0] for cell in rows[0]]
    return [dict(zip(names, row)) for row in rows[1:]]


class Check:
    def __init__(self):
        self.passed = self.failed = 0

    def same(self, what, found, expected, tolerance=TOLERANCE):
        found = float(found) if found != "" else None
        if found is not None and (found == expected or abs(found - expected) <= tolerance * abs(expected)):
            self.passed += 1
        else:
            self.failed += 1
            print(f"FAILED {what}: found {found!r}, expected {expected!r}")


def fsum(values):
    return math.fsum(values.tolist())


def main(dump_path, config_path, run_path, shells_path):
    head, tables = read_dump(dump_path)
    with open(config_path, "rb") as file:
        config = tomllib.load(file)
    run = read_csv(run_path)
    place = next(i for i, row in enumerate(run) if int(row["step"]) == head["step"])
    row, before = run[place], run[place - 1]
    gas, stars, holes = tables["gas"], tables["stars"], tables["black_holes"]
    events = tables["events"]
    assert len(gas["mass"]) > 0 and len(stars["mass"]) > 0, "dump a later step: there are no stars yet"
    check = Check()

    # Units as ffi-examples/saltmarsh/units.h states them, through astropy; a solar mass of the host's own if any.
    a, h = head["scale_factor"], head["h"]
    solar = config["units"].get("solar_mass_in_grams", constants.M_sun.to_value("g"))
    our_solar = constants.M_sun.to_value("g")
    mpc, year, kpc = units.Mpc.to("cm"), units.yr.to("s"), units.kpc.to("cm")
    mass = 1e10 * solar / h
    length = a * mpc / h
    velocity = 1e5 / a
    rate = mass / (mpc / h / 1e5)

    cosmology = LambdaCDM(
        H0=config["cosmology"]["hubble"], Om0=config["cosmology"]["omega_matter"], Ode0=config["cosmology"]["omega_lambda"]
    )
    z = 1 / a - 1
    check.same("scale factor", row["scale_factor"], a, 0.0)
    check.same("redshift", row["redshift"], z, 1e-12)
    # astropy integrates ages to about 2e-9 at high redshift (measured against tight quadrature).
    check.same("age", row["age"], cosmology.age(z).to_value("Gyr"), 1e-8)

    # Star formation.
    volume = (head["box"] / h) ** 3
    sfr = fsum(gas["star_formation_rate"]) * rate / our_solar * year
    check.same("star_formation_rate", row["star_formation_rate"], sfr)
    check.same("star_formation_rate_density", row["star_formation_rate_density"], sfr / volume)
    born = stars["birth_scale_factor"]
    new = (born > float(before["scale_factor"])) & (born <= a)
    check.same("stars_formed", row["stars_formed"], int(new.sum()), 0.0)
    check.same("stellar_mass_formed", row["stellar_mass_formed"], fsum(stars["birth_mass"][new]) * mass / our_solar)

    # Masses.
    species = {"gas": gas, "star": stars, "black_hole": holes, "dark_matter": tables["dark_matter"]}
    for name, table in species.items():
        check.same(f"mass_{name}", row[f"mass_{name}"], fsum(table["mass"]) * mass / our_solar)
    baryons = np.concatenate([gas["mass"], stars["mass"], holes["mass"]])
    check.same("baryon_mass", row["baryon_mass"], fsum(baryons) * mass / our_solar)

    # Black holes. Eddington rate 4 pi G M m_p / (epsilon sigma_T c): Salpeter 1964, ApJ 140, 796.
    check.same("black_holes", row["black_holes"], len(holes["mass"]), 0.0)
    total = fsum(holes["subgrid_mass"])
    accretion = fsum(holes["accretion_rate"]) * rate
    check.same("black_hole_mass", row["black_hole_mass"], total * mass / our_solar)
    check.same("black_hole_accretion_rate", row["black_hole_accretion_rate"], accretion / our_solar * year)
    if len(holes["mass"]):
        efficiency = config["gauges"]["black_holes"].get("radiative_efficiency", 0.1)
        eddington = (
            4 * math.pi * constants.G * constants.m_p / (efficiency * constants.sigma_T * constants.c)
        ).to_value("1/s") * total * mass
        check.same("black_hole_eddington_ratio", row["black_hole_eddington_ratio"], accretion / eddington, 1e-9)
        largest = holes["subgrid_mass"].max()
        check.same("black_hole_largest_mass", row["black_hole_largest_mass"], largest * mass / our_solar)
        named = holes["id"][holes["subgrid_mass"] == largest].max()
        check.same("black_hole_largest_id", row["black_hole_largest_id"], named, 0.0)

    # Tallies of the step.
    for code, channel in enumerate(("wind", "stellar_return", "black_hole")):
        of = events["channel"] == code
        check.same(f"tally_{channel}_events", row[f"tally_{channel}_events"], int(of.sum()), 0.0)
        check.same(f"tally_{channel}_mass", row[f"tally_{channel}_mass"], fsum(events["mass"][of]) * mass / our_solar)
        energy = fsum(events["energy"][of]) * mass * 1e10
        check.same(f"tally_{channel}_energy", row[f"tally_{channel}_energy"], energy)

    # Shells, in the order of operations that src/gauges/wind_shells.rs states, in host units.
    gauge = config["gauges"]["wind_shells"]
    assert gauge["lengths"] == "physical" and gauge["unit"] == "kpc"
    centre, box = np.array(gauge["station"]["position"], float), head["box"]
    d = [gas[f"position_{x}"] - c for x, c in zip("xyz", centre)]
    d = [x - box * np.round(x / box) for x in d]
    r = np.sqrt(d[0] * d[0] + d[1] * d[1] + d[2] * d[2])
    v = [gas[f"velocity_{x}"] for x in "xyz"]
    along = d[0] * v[0] + d[1] * v[1] + d[2] * v[2]
    hubble = cosmology.H(z).to_value("1/s")
    shells = [row for row in read_csv(shells_path) if int(row["step"]) == head["step"]]
    assert shells, "no shells in that step"
    seen = 0
    for shell in shells:
        inner, outer = float(shell["radius_inner"]) * kpc / length, float(shell["radius_outer"]) * kpc / length
        inside = (r >= inner) & (r < outer)
        seen += int(inside.sum())
        name = f"shell {shell['shell']}"
        if shell["gas_mass"] == "":
            # Physical shells of early times may not fit in the comoving box.
            check.same(f"{name} fits", float(2 * outer > box), 1.0, 0.0)
            continue
        check.same(f"{name} elements", shell["elements"], int(inside.sum()), 0.0)
        check.same(f"{name} gas_mass", shell["gas_mass"], fsum(gas["mass"][inside]) * mass / our_solar)
        speed = along[inside] / r[inside] + hubble * length / velocity * r[inside]
        flux = gas["mass"][inside] * speed
        to_rate = mass * velocity / ((outer - inner) * length) * year / our_solar
        # The expansion rate is astropy's own, good to about 1e-12 of the flux in all.
        scale = fsum(np.abs(flux)) * to_rate * 1e-11
        for column, expected in (
            ("mass_outflow_rate", fsum(flux[speed >= 0]) * to_rate),
            ("mass_inflow_rate", 0.0 - fsum(flux[speed < 0]) * to_rate),
        ):
            found = float(shell[column])
            check.same(f"{name} {column}", found if abs(found - expected) > scale else expected, expected)
    assert seen > 0, "no gas in any shell: the check would be empty"

    print(f"{check.passed} passed, {check.failed} failed")
    return check.failed


if __name__ == "__main__":
    if len(sys.argv) != 5:
        sys.exit(__doc__)
    sys.exit(1 if main(*sys.argv[1:]) else 0)
