"""Holds limnograph's units, constants and cosmology against astropy and scipy.

usage: check_units_and_cosmology.py FILE

FILE is what `cargo run --example print_units_and_cosmology -- FILE` writes. Constants and units are held
against astropy.constants and astropy.units (to 1e-12); ages and expansion rates against astropy.cosmology
up to redshift 6 (to 1e-9), and everywhere against tight quadrature (scipy.integrate.quad) of the Friedmann
equation, because astropy's own ages lose digits at high redshift. Prints what fails, then a summary; the exit
status is 1 when anything failed.
"""

import json
import math
import sys
import warnings
from collections import Counter

import numpy as np
from astropy import constants, cosmology, units
from scipy.integrate import quad

UNIT_TOLERANCE = 1e-12
AGE_TOLERANCE = 1e-9
INVERSE_TOLERANCE = 1e-12
# Of the library against tight quadrature, at every redshift.
QUADRATURE_TOLERANCE = 1e-11

passed = Counter()
failed = Counter()
worst = Counter()

# Exponents such as ^(1/2) are written on purpose.
warnings.filterwarnings("ignore", message=".*multiple slashes.*")


def check(group, what, found, expected, tolerance):
    error = abs(found - expected) / abs(expected or 1.0) if found is not None else math.inf
    worst[group] = max(worst[group], error)
    is_right = error <= tolerance
    (passed if is_right else failed)[group] += 1
    if not is_right and failed[group] <= 20:
        print(f"FAILED {group}: {what}: found {found!r}, expected {expected!r}")


def check_true(group, what, is_right):
    (passed if is_right else failed)[group] += 1
    if not is_right and failed[group] <= 20:
        print(f"FAILED {group}: {what}")


def check_constant(record):
    quantity = {"kpc": units.kpc}.get(record["name"]) or getattr(constants, record["name"])
    check("constants", record["name"], record["cgs"], float((1 * quantity).cgs.value), UNIT_TOLERANCE)


def check_unit(record):
    text = record["text"]
    if "error" in record:
        check_true("unit texts", f"{text!r} was refused: {record['error']}", False)
        return
    expected = units.Unit(text).cgs
    check("unit texts", text, record["cgs"], expected.scale, UNIT_TOLERANCE)
    same_kind = units.Unit(record["base"]).is_equivalent(expected) if record["base"] != "1" else (
        expected.physical_type == "dimensionless")
    check_true("unit texts", f"{text!r} is in {record['base']}, astropy says {expected}", same_kind)


# What each quantity is by default, as a product of the base units: (length, mass, velocity, time) powers.
DEFAULTS = {
    "time": (1, 0, -1, 0),
    "star_formation_rate": (0, 1, 0, -1),
    "accretion_rate": (0, 1, 0, -1),
    "internal_energy": (0, 0, 2, 0),
    "energy": (0, 1, 2, 0),
    "momentum": (0, 1, 1, 0),
    "density": (-3, 1, 0, 0),
}
VELOCITY_FORMS = {"peculiar": (0, 0), "peculiar/sqrt(a)": (0.5, 0), "dx/dt": (1, 0), "a^2 dx/dt": (-1, 0)}


def powers_of(form):
    return (form["a"], form["h"]) if isinstance(form, dict) else VELOCITY_FORMS[form]


def check_system(record):
    if "error" in record:
        check_true("unit systems", f"refused: {record['error']} in\n{record['config']}", False)
        return
    h, a, stated, forms = record["h"], record["a"], record["stated"], record["forms"]
    host_sun = units.def_unit("host_sun", record["solar_mass_g"] * units.g) if record["solar_mass_g"] else units.Msun
    names = {"Msun": host_sun}

    def cgs(unit):
        """Value in cgs of one stated unit, with h but without a."""
        parsed = eval(unit["name"].replace("^", "**").replace(" ", "*"), {}, ASTROPY_NAMES | names)
        return unit["number"] * (1 * parsed).cgs.value * h ** unit["h"]

    base = {key: cgs(stated[key]) for key in ("length", "mass", "velocity")}
    base["time"] = cgs(stated["time"]) if "time" in stated else base["length"] / base["velocity"]

    def value(key):
        if key in stated:
            return cgs(stated[key]) * a ** stated[key]["a"]
        length, mass, velocity, time = DEFAULTS[key]
        return (base["length"] ** length * base["mass"] ** mass * base["velocity"] ** velocity * base["time"] ** time)

    is_comoving = forms.get("positions", "comoving") == "comoving"
    is_dense_comoving = is_comoving if "density" not in stated else forms["density_form"] == "comoving"
    v_a, v_h = powers_of(forms["velocity_form"])
    u_a, u_h = powers_of(forms.get("internal_energy_form", {"a": 0, "h": 0}))
    expected = {
        "length": base["length"] * (a if is_comoving else 1),
        "comoving length": base["length"] * (1 if is_comoving else 1 / a),
        "mass": base["mass"],
        "velocity": base["velocity"] * a**v_a * h**v_h,
        "time": base["time"],
        "internal energy": value("internal_energy") * a**u_a * h**u_h,
        "density": value("density") * (a**-3 if is_dense_comoving else 1),
        "star formation rate": value("star_formation_rate"),
        "accretion rate": value("accretion_rate"),
        "energy": value("energy"),
        "momentum": value("momentum"),
        "temperature": cgs(stated["temperature"]) if "temperature" in stated else 1.0,
    }
    check_true("unit systems", "every quantity has a factor", expected.keys() == record["factors"].keys())
    for quantity, factor in record["factors"].items():
        check("unit systems", f"{quantity} in\n{record['config']}", factor, expected[quantity], UNIT_TOLERANCE)
    edge = record["edge"] * base["length"] * units.cm
    check("unit systems", "volume", record["volume_mpc3"], (edge**3).to_value(units.Mpc**3), UNIT_TOLERANCE)


ASTROPY_NAMES = {name: getattr(units, name) for name in (
    "cm m km pc kpc Mpc lyr g kg s yr Myr Gyr K erg J keV").split()}


def check_cosmology(record):
    parameters = [record[key] for key in ("h", "omega_matter", "omega_lambda", "omega_radiation", "w")]
    h, matter, dark, radiation, w = parameters
    if "error" in record:
        check_true("ages", f"{parameters} was refused: {record['error']}", False)
        return
    curvature = 1 - matter - dark - radiation
    hubble = (100 * h * units.km / units.s / units.Mpc).to_value(1 / units.s)

    def rate(a):
        return math.sqrt(radiation * a**-4 + matter * a**-3 + curvature * a**-2 + dark * a ** (-3 * (1 + w)))

    def integrand(s):
        """dt/ds times H0 for a = s^2, which is smooth at 0 with and without radiation."""
        a = s * s
        return 2 * s / math.sqrt(radiation * a**-2 + matter / a + curvature + dark * a ** (-1 - 3 * w)) if s else 0.0

    outside = astropy_cosmology(record)
    for point in record["points"]:
        a = point["a"]
        label = f"{parameters} at a = {a}"
        pieces = np.concatenate(([0.0], np.geomspace(1e-4 * math.sqrt(a), math.sqrt(a), 13)))
        exact = math.fsum(
            quad(integrand, low, high, epsabs=0, epsrel=1e-13, limit=200)[0] for low, high in zip(pieces, pieces[1:]))
        check("ages against quadrature", label, point["age"], exact / hubble, QUADRATURE_TOLERANCE)
        check("rates", label, point["hubble_rate"], hubble * rate(a), UNIT_TOLERANCE * 10)
        check("inverse", label, point["inverse"], a, INVERSE_TOLERANCE)
        earlier = point["earlier"]
        middle = 0.5 * (earlier + a)
        # Over one part in ten million of a the midpoint rule errs by parts in 1e15; a itself is rounded.
        check("short steps", label, point["between"], (a - earlier) / (middle * hubble * rate(middle)), 1e-12)
        density = 3 * (hubble * rate(a)) ** 2 / (8 * math.pi * constants.G.cgs.value)
        check("critical density", label, point["critical_density"], density, UNIT_TOLERANCE * 10)
        redshift = 1 / a - 1
        if outside is not None and 0 <= redshift <= 6.0001:
            age = outside.age(redshift).to_value(units.s)
            check("ages against astropy", label, point["age"], age, AGE_TOLERANCE)
            outside_rate = outside.H(redshift).to_value(1 / units.s)
            check("rates against astropy", label, point["hubble_rate"], outside_rate, AGE_TOLERANCE)


def astropy_cosmology(record):
    """The same model in astropy. Its radiation is stated as a temperature, so that is chosen to give the density
    and held against it; neutrinos are left out."""
    hubble = 100 * record["h"]
    radiation = record["omega_radiation"]
    temperature = 0.0
    if radiation > 0:
        trial = cosmology.wCDM(hubble, 0.3, 0.7, Tcmb0=1.0, Neff=0)
        temperature = (radiation / float(trial.Ogamma0)) ** 0.25
    model = cosmology.wCDM(
        hubble, record["omega_matter"], record["omega_lambda"], w0=record["w"], Tcmb0=temperature, Neff=0)
    check("radiation density", "density for the temperature", float(model.Ogamma0), radiation, 1e-13)
    return model


CHECKS = {"constant": check_constant, "unit": check_unit, "system": check_system, "cosmology": check_cosmology}
LEAST = {"constant": 11, "unit": 200, "system": 200, "cosmology": 70}


def main():
    if len(sys.argv) != 2:
        sys.exit(__doc__)
    seen = Counter()
    with open(sys.argv[1], encoding="utf-8") as lines:
        for line in lines:
            record = json.loads(line)
            seen[record["kind"]] += 1
            CHECKS[record["kind"]](record)
    for kind, least in LEAST.items():
        check_true("coverage", f"{seen[kind]} records of {kind}, at least {least} expected", seen[kind] >= least)
    for group in sorted(passed | failed):
        print(f"{group:28} {passed[group]:6} passed, {failed[group]} failed, largest error {worst[group]:.1e}")
    print(f"{passed.total()} passed, {failed.total()} failed")
    sys.exit(1 if failed else 0)


if __name__ == "__main__":
    main()
