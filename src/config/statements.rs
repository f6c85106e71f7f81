//! What a config comes to, in plain words.

use super::problem::brief;
use super::{Config, Coordinate};
use crate::units::constants::GIGAYEAR;
use crate::units::{Cosmology, Expansion, Parameters};

impl Config {
    /// What the config comes to, in plain words, one statement a line: for people to check before a run that
    /// takes months. A wrong unit shows here as an absurd mass or age.
    pub fn statements(&self) -> Vec<String> {
        let mut lines = self.units.statements();
        lines.push(match &self.expansion {
            Expansion::Static => "cosmology: none, a = 1".to_string(),
            Expansion::Expanding(cosmology) => of_cosmology(cosmology),
        });
        lines.push(format!("time: {}", self.of_time()));
        lines.push(format!("volume: {}", self.of_volume()));
        let gauges: Vec<&str> = self.gauges.iter().map(|(name, _)| name.as_str()).collect();
        lines.push(format!(
            "gauges: {}",
            if gauges.is_empty() {
                "none".to_string()
            } else {
                gauges.join(", ")
            }
        ));
        lines
    }

    fn of_time(&self) -> String {
        let clock = of_coordinate(self.clockwork.coordinate);
        let births = of_coordinate(self.clockwork.birth);
        let stamp = match self.clockwork.birth_stamp {
            super::BirthStamp::StepEnd => "ends",
            super::BirthStamp::StepStart => "starts",
        };
        format!(
            "the clock counts in {clock}, births in {births}; a birth time is the moment the star's step {stamp}"
        )
    }

    fn of_volume(&self) -> String {
        let edges = self.volume.edges(1.0).map(|[x, y, z]| {
            let axes: String = ["x", "y", "z"]
                .iter()
                .zip(self.volume.periodic())
                .filter_map(|(axis, is_periodic)| is_periodic.then_some(*axis))
                .collect();
            let axes = if axes.is_empty() {
                "no axis".to_string()
            } else {
                axes
            };
            format!("a box of {x} x {y} x {z} host lengths at a = 1, periodic in {axes}; ")
        });
        let volume = match self.volume.comoving_volume_mpc3() {
            Some(volume) => format!("densities refer to {} comoving Mpc^3", brief(volume)),
            None => "none, densities are not measured".to_string(),
        };
        edges.unwrap_or_default() + &volume
    }
}

fn of_cosmology(cosmology: &Cosmology) -> String {
    let Parameters {
        h,
        omega_matter,
        omega_lambda,
        omega_radiation,
        w,
    } = cosmology.parameters();
    let age = cosmology.age(1.0) / GIGAYEAR;
    format!(
        "cosmology: h = {h}, omega_matter = {omega_matter}, omega_lambda = {omega_lambda}, omega_radiation = \
         {omega_radiation}, curvature = {}, w = {w}; age {age:.4} Gyr at a = 1",
        brief(cosmology.omega_curvature())
    )
}

fn of_coordinate(coordinate: Coordinate) -> &'static str {
    match coordinate {
        Coordinate::ScaleFactor => "a",
        Coordinate::LogScaleFactor => "ln a",
        Coordinate::Time => "t",
        Coordinate::Redshift => "z",
    }
}
