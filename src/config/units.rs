//! What one of each of the host's quantities is in cgs.

use super::problem::brief;
use crate::units::constants::{GIGAYEAR, KILOPARSEC, SOLAR_MASS, YEAR};
use crate::units::{Dimension, raise};

/// What a host's number measures.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Quantity {
    /// A coordinate or length as the host holds it, to physical cm.
    Length,
    /// The same, to comoving cm.
    ComovingLength,
    /// A mass, to g.
    Mass,
    /// A velocity in the host's form, to peculiar cm/s.
    Velocity,
    /// A time, to s.
    Time,
    /// Internal energy per mass, to physical erg/g.
    SpecificEnergy,
    /// A density, to physical g/cm³.
    Density,
    /// A star formation rate, to g/s.
    StarFormationRate,
    /// A black-hole accretion rate, to g/s.
    AccretionRate,
    /// An energy, to erg.
    Energy,
    /// A momentum, to g cm/s.
    Momentum,
    /// A temperature, to K.
    Temperature,
}

impl Quantity {
    /// All of them, in the order in which they are declared.
    pub const ALL: [Quantity; 12] = [
        Quantity::Length,
        Quantity::ComovingLength,
        Quantity::Mass,
        Quantity::Velocity,
        Quantity::Time,
        Quantity::SpecificEnergy,
        Quantity::Density,
        Quantity::StarFormationRate,
        Quantity::AccretionRate,
        Quantity::Energy,
        Quantity::Momentum,
        Quantity::Temperature,
    ];

    /// In plain words.
    pub fn name(self) -> &'static str {
        match self {
            Quantity::Length => "length",
            Quantity::ComovingLength => "comoving length",
            Quantity::Mass => "mass",
            Quantity::Velocity => "velocity",
            Quantity::Time => "time",
            Quantity::SpecificEnergy => "internal energy",
            Quantity::Density => "density",
            Quantity::StarFormationRate => "star formation rate",
            Quantity::AccretionRate => "accretion rate",
            Quantity::Energy => "energy",
            Quantity::Momentum => "momentum",
            Quantity::Temperature => "temperature",
        }
    }

    /// Its dimension.
    pub fn dimension(self) -> Dimension {
        match self {
            Quantity::Length | Quantity::ComovingLength => Dimension::LENGTH,
            Quantity::Mass => Dimension::MASS,
            Quantity::Velocity => Dimension::VELOCITY,
            Quantity::Time => Dimension::TIME,
            Quantity::SpecificEnergy => Dimension::SPECIFIC_ENERGY,
            Quantity::Density => Dimension::DENSITY,
            Quantity::StarFormationRate | Quantity::AccretionRate => Dimension::MASS_PER_TIME,
            Quantity::Energy => Dimension::ENERGY,
            Quantity::Momentum => Dimension::MOMENTUM,
            Quantity::Temperature => Dimension::TEMPERATURE,
        }
    }

    /// A unit of everyday use in the trade: its name, and its value in cgs.
    fn customary(self) -> (&'static str, f64) {
        match self {
            Quantity::Length | Quantity::ComovingLength => ("kpc", KILOPARSEC),
            Quantity::Mass => ("Msun", SOLAR_MASS),
            Quantity::Velocity => ("km/s", 1e5),
            Quantity::Time => ("Gyr", GIGAYEAR),
            Quantity::SpecificEnergy => ("(km/s)^2", 1e10),
            Quantity::Density => (
                "Msun/kpc^3",
                SOLAR_MASS / (KILOPARSEC * KILOPARSEC * KILOPARSEC),
            ),
            Quantity::StarFormationRate | Quantity::AccretionRate => ("Msun/yr", SOLAR_MASS / YEAR),
            Quantity::Energy => ("erg", 1.0),
            Quantity::Momentum => ("Msun km/s", SOLAR_MASS * 1e5),
            Quantity::Temperature => ("K", 1.0),
        }
    }
}

/// Whether coordinates follow the expansion.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Positions {
    /// A particle at rest in the expanding frame keeps its coordinates.
    Comoving,
    /// Coordinates are lengths at the present moment.
    Physical,
}

/// The host's units, resolved: every power of h is folded in, every power of a is kept.
#[derive(Clone, Debug, PartialEq)]
pub struct Units {
    pub(super) positions: Positions,
    /// In the order of [`Quantity::ALL`].
    pub(super) scales: [Scale; Quantity::ALL.len()],
}

/// One of something in cgs is `cgs · a^a_power`.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Scale {
    pub(super) cgs: f64,
    pub(super) a_power: f64,
    pub(super) is_stated: bool,
}

impl Units {
    /// What a host value is multiplied by to be the physical (for [`Quantity::ComovingLength`] comoving)
    /// quantity in cgs, at scale factor `a`. Without a cosmology `a` is 1.
    pub fn factor(&self, quantity: Quantity, a: f64) -> f64 {
        let scale = self.scale(quantity);
        scale.cgs * raise(a, scale.a_power)
    }

    /// The power of the scale factor in [`Units::factor`].
    pub fn scale_factor_power(&self, quantity: Quantity) -> f64 {
        self.scale(quantity).a_power
    }

    /// Whether the config states the unit of this quantity, or it follows from others.
    pub fn is_stated(&self, quantity: Quantity) -> bool {
        self.scale(quantity).is_stated
    }

    /// Whether there is a scale factor at all.
    pub fn is_expanding(&self) -> bool {
        self.scale(Quantity::Length).a_power != self.scale(Quantity::ComovingLength).a_power
    }

    /// Whether coordinates are comoving.
    pub fn positions(&self) -> Positions {
        self.positions
    }

    /// One line for each quantity that says in plain words what a host's 1 means, for people to check.
    pub fn statements(&self) -> Vec<String> {
        Quantity::ALL
            .iter()
            .map(|quantity| self.statement(*quantity))
            .collect()
    }

    /// `length: 1 = 4.408111e24 cm * a = 1428.571 kpc * a`
    fn statement(&self, quantity: Quantity) -> String {
        let scale = self.scale(quantity);
        let power = match scale.a_power {
            0.0 => String::new(),
            1.0 => " * a".to_string(),
            power => format!(" * a^{power}"),
        };
        let base = quantity.dimension().in_base_units();
        let mut line = format!(
            "{}: 1 = {} {base}{power}",
            quantity.name(),
            brief(scale.cgs)
        );
        let (customary, value) = quantity.customary();
        if customary != base {
            line += &format!(" = {} {customary}{power}", brief(scale.cgs / value));
        }
        if !scale.is_stated {
            line += " (follows from the others)";
        }
        line
    }

    fn scale(&self, quantity: Quantity) -> Scale {
        self.scales[quantity as usize]
    }
}
