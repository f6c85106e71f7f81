//! What all gauges may know of the moment that a row describes.

use crate::config::{BirthWindow, Config, Quantity};

/// Factors that turn the host's numbers into cgs at this moment.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Factors {
    /// Positions and other lengths as the host keeps them, to physical cm.
    pub position: f64,
    /// Mass to g.
    pub mass: f64,
    /// Velocity as the host keeps it, to peculiar cm/s.
    pub velocity: f64,
    /// Star formation rate to g/s.
    pub star_formation_rate: f64,
    /// Accretion rate to g/s.
    pub accretion_rate: f64,
    /// Energy to erg.
    pub energy: f64,
    /// Momentum to g cm/s.
    pub momentum: f64,
}

impl Factors {
    /// The factors of a config at a scale factor.
    pub fn at(config: &Config, scale_factor: f64) -> Factors {
        let factor = |quantity| config.units.factor(quantity, scale_factor);
        Factors {
            position: factor(Quantity::Length),
            mass: factor(Quantity::Mass),
            velocity: factor(Quantity::Velocity),
            star_formation_rate: factor(Quantity::StarFormationRate),
            accretion_rate: factor(Quantity::AccretionRate),
            energy: factor(Quantity::Energy),
            momentum: factor(Quantity::Momentum),
        }
    }
}

/// From the last row to this one.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interval {
    /// How long it was, in s.
    pub seconds: f64,
    /// Birth times, in the convention of the lent field, that fall in it.
    pub births: BirthWindow,
}

/// The moment of a row.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Moment {
    /// The host's step number.
    pub step: u64,
    /// The declared time coordinate.
    pub time: f64,
    /// Length of the host's step in the same coordinate; 0 when not given.
    pub step_length: f64,
    /// Scale factor; 1 where nothing expands.
    pub scale_factor: f64,
    /// Redshift; none where nothing expands.
    pub redshift: Option<f64>,
    /// Seconds since the Big Bang, or since the host's time zero where nothing expands.
    pub age: f64,
    /// Expansion rate in 1/s; 0 where nothing expands.
    pub hubble: f64,
    /// From host units to cgs.
    pub factors: Factors,
    /// Comoving volume in Mpc³, where there is one.
    pub volume: Option<f64>,
    /// Since the last row of this leg; none in its first.
    pub interval: Option<Interval>,
}
