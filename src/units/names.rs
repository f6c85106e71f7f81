//! The names of units that are understood.

use super::constants::{
    ASTRONOMICAL_UNIT, DAY, ELECTRONVOLT, PARSEC, PROTON_MASS, SOLAR_LUMINOSITY, SPEED_OF_LIGHT,
    YEAR,
};
use super::dimension::Dimension;
use super::unit::{Symbols, Unit};

/// Name, cgs value, dimension.
const FIXED: [(&str, f64, Dimension); 38] = [
    ("cm", 1.0, Dimension::LENGTH),
    ("m", 1e2, Dimension::LENGTH),
    ("km", 1e5, Dimension::LENGTH),
    ("AU", ASTRONOMICAL_UNIT, Dimension::LENGTH),
    ("au", ASTRONOMICAL_UNIT, Dimension::LENGTH),
    ("lyr", SPEED_OF_LIGHT * YEAR, Dimension::LENGTH),
    ("pc", PARSEC, Dimension::LENGTH),
    ("kpc", 1e3 * PARSEC, Dimension::LENGTH),
    ("Mpc", 1e6 * PARSEC, Dimension::LENGTH),
    ("Gpc", 1e9 * PARSEC, Dimension::LENGTH),
    ("g", 1.0, Dimension::MASS),
    ("kg", 1e3, Dimension::MASS),
    ("m_p", PROTON_MASS, Dimension::MASS),
    ("s", 1.0, Dimension::TIME),
    ("d", DAY, Dimension::TIME),
    ("day", DAY, Dimension::TIME),
    ("yr", YEAR, Dimension::TIME),
    ("year", YEAR, Dimension::TIME),
    ("kyr", 1e3 * YEAR, Dimension::TIME),
    ("Myr", 1e6 * YEAR, Dimension::TIME),
    ("Gyr", 1e9 * YEAR, Dimension::TIME),
    ("K", 1.0, Dimension::TEMPERATURE),
    ("dyn", 1.0, Dimension::new(1, 1, -2, 0)),
    ("N", 1e5, Dimension::new(1, 1, -2, 0)),
    ("Pa", 1e1, Dimension::new(-1, 1, -2, 0)),
    ("erg", 1.0, Dimension::ENERGY),
    ("J", 1e7, Dimension::ENERGY),
    ("eV", ELECTRONVOLT, Dimension::ENERGY),
    ("keV", 1e3 * ELECTRONVOLT, Dimension::ENERGY),
    ("MeV", 1e6 * ELECTRONVOLT, Dimension::ENERGY),
    ("W", 1e7, Dimension::POWER),
    ("Lsun", SOLAR_LUMINOSITY, Dimension::POWER),
    ("L_sun", SOLAR_LUMINOSITY, Dimension::POWER),
    ("solLum", SOLAR_LUMINOSITY, Dimension::POWER),
    // Comoving lengths: the scale factor is added when one is looked up.
    ("cpc", PARSEC, Dimension::LENGTH),
    ("ckpc", 1e3 * PARSEC, Dimension::LENGTH),
    ("cMpc", 1e6 * PARSEC, Dimension::LENGTH),
    ("cGpc", 1e9 * PARSEC, Dimension::LENGTH),
];

const COMOVING: [&str; 4] = ["cpc", "ckpc", "cMpc", "cGpc"];
const SOLAR_MASS: [&str; 4] = ["Msun", "M_sun", "Msol", "solMass"];
const HUBBLE: &str = "h";
const SCALE_FACTOR: &str = "a";

/// The unit of that name.
pub(super) fn look_up(name: &str, symbols: &Symbols) -> Option<Unit> {
    let plain = |factor_cgs, dimension| Unit {
        factor_cgs,
        h_power: 0.0,
        a_power: 0.0,
        dimension,
    };
    if name == HUBBLE {
        return Some(Unit {
            h_power: 1.0,
            ..plain(1.0, Dimension::NUMBER)
        });
    }
    if name == SCALE_FACTOR {
        return Some(Unit {
            a_power: 1.0,
            ..plain(1.0, Dimension::NUMBER)
        });
    }
    if SOLAR_MASS.contains(&name) {
        return Some(plain(symbols.solar_mass_g, Dimension::MASS));
    }
    let (_, factor, dimension) = FIXED.iter().find(|(known, _, _)| *known == name)?;
    let a_power = if COMOVING.contains(&name) { 1.0 } else { 0.0 };
    Some(Unit {
        a_power,
        ..plain(*factor, *dimension)
    })
}

/// Every name there is.
pub(super) fn all() -> impl Iterator<Item = &'static str> {
    FIXED
        .iter()
        .map(|(name, _, _)| *name)
        .chain(SOLAR_MASS)
        .chain([HUBBLE, SCALE_FACTOR, "sqrt"])
}
