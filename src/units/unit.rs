//! A unit: what one of something is in cgs, with its powers of the Hubble parameter and scale factor.

use std::fmt;

use super::constants::SOLAR_MASS;
use super::dimension::Dimension;
use super::parse;

/// A unit of measurement. One of it is `factor_cgs · h^h_power · a^a_power` in cgs units, where h is the
/// Hubble constant in 100 km/s/Mpc and a the scale factor, 1 today.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Unit {
    /// Value in cgs base units (cm, g, s, K) at h = a = 1; finite and greater than 0.
    pub factor_cgs: f64,
    /// Power of the Hubble parameter h.
    pub h_power: f64,
    /// Power of the scale factor a.
    pub a_power: f64,
    /// What it is a unit of.
    pub dimension: Dimension,
}

/// Names whose value a host may hold to differ.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Symbols {
    /// What `Msun` is to the host (g).
    pub solar_mass_g: f64,
}

impl Default for Symbols {
    /// The solar mass of [`SOLAR_MASS`].
    fn default() -> Symbols {
        Symbols {
            solar_mass_g: SOLAR_MASS,
        }
    }
}

/// Why a unit cannot be used.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct UnitError {
    /// The character of the text at which reading stopped, counted from 1; 0 where no text was read.
    pub position: usize,
    /// What was found there, what was expected and what to write instead.
    pub message: String,
}

impl fmt::Display for UnitError {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self.position {
            0 => formatter.write_str(&self.message),
            position => write!(formatter, "at character {position}: {}", self.message),
        }
    }
}

impl std::error::Error for UnitError {}

impl Unit {
    /// A unit given by its value in cgs, without powers of h or a.
    ///
    /// # Errors
    /// When `factor_cgs` is not a finite number greater than 0.
    pub fn from_cgs(factor_cgs: f64, dimension: Dimension) -> Result<Unit, UnitError> {
        Unit {
            factor_cgs,
            h_power: 0.0,
            a_power: 0.0,
            dimension,
        }
        .checked()
    }

    /// Reads a unit: names, numbers, products, quotients, powers and brackets, as in `1e10 Msun/h`,
    /// `a Mpc/h`, `(km/s)**2`, `g cm^-3`, `solMass.yr**-1.Mpc**-3`. `h` is the Hubble parameter and `a` the
    /// scale factor. Quotients bind from left to right; where a space after a quotient could be read in two
    /// ways (`Msun/yr Mpc^3`) the text is refused.
    ///
    /// # Errors
    /// Says at which character, what was expected, and for an unknown name the nearest one that exists.
    pub fn parse(text: &str, symbols: &Symbols) -> Result<Unit, UnitError> {
        parse::parse(text, symbols)
    }

    /// Value of one of this unit in cgs, for the given Hubble parameter and scale factor.
    pub fn to_cgs(&self, h: f64, a: f64) -> f64 {
        self.factor_cgs * raise(h, self.h_power) * raise(a, self.a_power)
    }

    /// The product of two units.
    ///
    /// # Errors
    /// When the result is too large or too small for a number, or its powers are.
    pub fn times(&self, other: &Unit) -> Result<Unit, UnitError> {
        Unit {
            factor_cgs: self.factor_cgs * other.factor_cgs,
            h_power: self.h_power + other.h_power,
            a_power: self.a_power + other.a_power,
            dimension: self.dimension.times(other.dimension).ok_or_else(too_far)?,
        }
        .checked()
    }

    /// The quotient of two units.
    ///
    /// # Errors
    /// As for [`Unit::times`].
    pub fn over(&self, other: &Unit) -> Result<Unit, UnitError> {
        Unit {
            factor_cgs: self.factor_cgs / other.factor_cgs,
            h_power: self.h_power - other.h_power,
            a_power: self.a_power - other.a_power,
            dimension: self.dimension.over(other.dimension).ok_or_else(too_far)?,
        }
        .checked()
    }

    /// The unit raised to a power.
    ///
    /// # Errors
    /// As for [`Unit::times`]; and when an exponent of the result is not a multiple of 1/6.
    pub fn power(&self, power: f64) -> Result<Unit, UnitError> {
        let dimension = self.dimension.power(power).ok_or_else(|| {
            failure(format!(
                "the power {power} of {} is not supported: exponents must be multiples of 1/6",
                self.dimension
            ))
        })?;
        Unit {
            factor_cgs: raise(self.factor_cgs, power),
            h_power: self.h_power * power,
            a_power: self.a_power * power,
            dimension,
        }
        .checked()
    }

    /// The same unit with the scale factor taken out.
    pub fn without_scale_factor(self) -> Unit {
        Unit {
            a_power: 0.0,
            ..self
        }
    }

    fn checked(self) -> Result<Unit, UnitError> {
        let usable = self.factor_cgs.is_normal() && self.factor_cgs > 0.0;
        if !usable {
            return Err(failure(format!(
                "comes to {:e} in cgs units, which is not a usable number: it must be greater than 0 and within \
                 the range of double precision",
                self.factor_cgs
            )));
        }
        if !(self.h_power.abs() <= LARGEST_POWER && self.a_power.abs() <= LARGEST_POWER) {
            return Err(too_far());
        }
        Ok(self)
    }
}

/// Cgs base units with every digit, so that reading it back gives the same unit.
impl fmt::Display for Unit {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(formatter, "{:e}", self.factor_cgs)?;
        if self.dimension != Dimension::NUMBER {
            write!(formatter, " {}", self.dimension.in_base_units())?;
        }
        for (name, power) in [("h", self.h_power), ("a", self.a_power)] {
            if power == 1.0 {
                write!(formatter, " {name}")?;
            } else if power != 0.0 {
                write!(formatter, " {name}^{power}")?;
            }
        }
        Ok(())
    }
}

/// Powers of h and a beyond this are taken for a mistake.
pub(super) const LARGEST_POWER: f64 = 1000.0;

/// `base` to `power`, without the detour through logarithms where a few operations do.
pub(crate) fn raise(base: f64, power: f64) -> f64 {
    if power == 0.0 {
        1.0
    } else if power == 1.0 {
        base
    } else if power == -1.0 {
        1.0 / base
    } else if power == 2.0 {
        base * base
    } else if power == 0.5 {
        base.sqrt()
    } else {
        base.powf(power)
    }
}

pub(super) fn failure(message: String) -> UnitError {
    UnitError {
        position: 0,
        message,
    }
}

fn too_far() -> UnitError {
    failure("has exponents too large to be meant".to_string())
}
