//! Black holes: how many, how heavy, how fast they grow, and how close to the Eddington limit.
//!
//! Masses are subgrid masses where the host lends them, else particle masses. The Eddington rate at a
//! radiative efficiency ε is Ṁ = 4π G M m_p / (ε σ_T c) (Salpeter 1964, ApJ 140, 796); it is linear in mass,
//! so the total of all black holes follows from their total mass.

use super::plan::{Counts, Plan, Sums, Top};
use super::{Entry, Gauge, Moment, Reading, Sample};
use crate::config::{Config, Section};
use crate::exact::{from_order_key, order_key};
use crate::lend::{Field, Species};
use crate::series::record::Value;
use crate::series::schema::{Kind, ValueType};
use crate::sweep::{Block, Work};
use crate::units::constants::{
    GRAVITATION, PROTON_MASS, SOLAR_MASS, SPEED_OF_LIGHT, THOMSON_CROSS_SECTION, YEAR,
};

const MASS: usize = 0;
const RATE: usize = 1;

struct BlackHoles {
    number: Counts,
    sums: Sums,
    most_massive: Top,
    efficiency: f64,
}

pub(super) fn build(section: &mut Section, _config: &Config, plan: &mut Plan) -> Box<dyn Gauge> {
    let efficiency = section
        .number_in("radiative_efficiency", 1e-6..=1.0)
        .or(0.1);
    for field in [Field::Mass, Field::AccretionRate] {
        plan.need(Species::BlackHole, field);
    }
    for field in [Field::SubgridMass, Field::Id] {
        plan.may_use(Species::BlackHole, field);
    }
    plan.typed_column(
        "black_holes",
        "",
        Kind::Instant,
        ValueType::Unsigned,
        "number of black holes",
    );
    plan.column(
        "black_hole_mass",
        "solMass",
        Kind::Instant,
        "total mass of all black holes (subgrid mass where it is lent)",
    );
    plan.column(
        "black_hole_mass_density",
        "solMass.Mpc**-3",
        Kind::Instant,
        "total mass of all black holes per comoving volume",
    );
    plan.column(
        "black_hole_accretion_rate",
        "solMass.yr**-1",
        Kind::Instant,
        "total rate at which black holes accrete",
    );
    plan.column(
        "black_hole_accretion_rate_density",
        "solMass.yr**-1.Mpc**-3",
        Kind::Instant,
        "total accretion rate per comoving volume",
    );
    plan.column(
        "black_hole_eddington_ratio",
        "",
        Kind::Instant,
        format!("total accretion rate over the total Eddington rate at a radiative efficiency of {efficiency}"),
    );
    plan.column(
        "black_hole_largest_mass",
        "solMass",
        Kind::Extreme,
        "mass of the most massive black hole",
    );
    plan.typed_column(
        "black_hole_largest_id",
        "",
        Kind::Extreme,
        ValueType::Unsigned,
        "identity of the most massive black hole; of several, the largest identity",
    );
    Box::new(BlackHoles {
        number: plan.counts(1),
        sums: plan.sums(2),
        most_massive: plan.top(1, 2),
        efficiency,
    })
}

impl Gauge for BlackHoles {
    fn measure(
        &self,
        _species: Species,
        block: &Block,
        _moment: &Moment,
        _work: &mut Work,
        sample: &mut Sample,
    ) {
        let masses = block.scalar(if block.has(Field::SubgridMass) {
            Field::SubgridMass
        } else {
            Field::Mass
        });
        *sample.count(self.number, 0) += block.len() as u64;
        sample.sum(self.sums, MASS).add_slice(masses);
        sample
            .sum(self.sums, RATE)
            .add_slice(block.scalar(Field::AccretionRate));
        for (index, &mass) in masses.iter().enumerate() {
            let identity = block.identities().get(index).copied().unwrap_or(0);
            sample.offer(self.most_massive, &[order_key(mass), identity]);
        }
    }

    fn enter(&mut self, reading: &Reading, moment: &Moment, entry: &mut Entry) {
        if !reading.is_measured(Species::BlackHole) {
            return;
        }
        let mass = reading.sum(self.sums, MASS) * moment.factors.mass;
        let rate = reading.sum(self.sums, RATE) * moment.factors.accretion_rate;
        if moment.volume.is_none() {
            entry.note(super::NO_VOLUME);
        }
        let per_volume = |value: f64| moment.volume.map(|volume| value / volume);
        let eddington = eddington_rate(mass, self.efficiency);
        entry.put(reading.reduced.count(self.number, 0));
        entry.put(mass / SOLAR_MASS);
        entry.put(per_volume(mass / SOLAR_MASS));
        entry.put(rate * YEAR / SOLAR_MASS);
        entry.put(per_volume(rate * YEAR / SOLAR_MASS));
        entry.put(Some(rate / eddington).filter(|_| eddington > 0.0));
        let largest = reading.reduced.top(self.most_massive).next();
        entry.put(largest.map(|item| from_order_key(item[0]) * moment.factors.mass / SOLAR_MASS));
        let named = largest.filter(|_| reading.has(Species::BlackHole, Field::Id));
        entry.put(named.map_or(Value::Null, |item| Value::Unsigned(item[1])));
    }
}

/// The Eddington accretion rate in g/s of a mass in g.
fn eddington_rate(mass: f64, efficiency: f64) -> f64 {
    4.0 * std::f64::consts::PI * GRAVITATION * mass * PROTON_MASS
        / (efficiency * THOMSON_CROSS_SECTION * SPEED_OF_LIGHT)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 2.21980 Msun/yr for 1e8 Msun at an efficiency of 0.1: computed from 4π G M m_p / (ε σ_T c) with
    /// CODATA constants as astropy 8.0.2 has them.
    #[test]
    fn eddington_rate_agrees_with_codata() {
        let rate = eddington_rate(1e8 * SOLAR_MASS, 0.1) * YEAR / SOLAR_MASS;
        assert!((rate / 2.21980 - 1.0).abs() < 1e-5, "{rate}");
    }
}
