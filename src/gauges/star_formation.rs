//! Star formation: the rate that the gas has now, what the stars say was formed, and the two held together.
//!
//! - instantaneous rate: SFR = Σ over gas of the lent star formation rate; per comoving volume it is the
//!   cosmic star formation rate density (Madau & Dickinson 2014, ARA&A 52, 415, use the same definition);
//! - mass formed since the last row: Σ of birth masses over stars whose birth time falls in the interval.
//!   Stars that formed and vanished again between two rows are not seen;
//! - expected mass: the mean of the instantaneous rates at the two ends of the interval, times its length
//!   (trapezoidal rule). Formed over expected is 1 up to noise and the change of the rate within a step.

use super::plan::{Counts, Plan, Sums};
use super::{Entry, Gauge, Moment, Presence, Reading, Sample};
use crate::config::{Config, Section};
use crate::lend::{Field, Species};
use crate::series::schema::{Kind, ValueType};
use crate::sweep::{Block, Work};
use crate::units::constants::{SOLAR_MASS, YEAR};

struct StarFormation {
    rate: Sums,
    formed: Sums,
    born: Counts,
    /// The rate at the last row [g/s].
    last_rate: Option<f64>,
}

pub(super) fn build(_section: &mut Section, _config: &Config, plan: &mut Plan) -> Box<dyn Gauge> {
    plan.need(Species::Gas, Field::StarFormationRate);
    plan.need(Species::Star, Field::BirthMass);
    plan.need(Species::Star, Field::BirthTime);
    let per_time = "solMass.yr**-1";
    plan.column(
        "star_formation_rate",
        per_time,
        Kind::Instant,
        "instantaneous star formation rate: sum of the rates of all gas elements",
    );
    plan.column(
        "star_formation_rate_density",
        "solMass.yr**-1.Mpc**-3",
        Kind::Instant,
        "instantaneous star formation rate per comoving volume",
    );
    plan.column(
        "stellar_mass_formed",
        "solMass",
        Kind::Increment,
        "sum of the birth masses of stars born since the last row",
    );
    plan.typed_column(
        "stars_formed",
        "",
        Kind::Increment,
        ValueType::Unsigned,
        "number of star particles born since the last row",
    );
    plan.column(
        "star_formation_rate_from_stars",
        per_time,
        Kind::Instant,
        "stellar mass formed since the last row over the time since then",
    );
    plan.column(
        "star_formation_formed_over_expected",
        "",
        Kind::Instant,
        "stellar mass formed since the last row over the mean of the instantaneous rates at its ends times its length",
    );
    Box::new(StarFormation {
        rate: plan.sums(1),
        formed: plan.sums(1),
        born: plan.counts(1),
        last_rate: None,
    })
}

impl Gauge for StarFormation {
    fn measure(
        &self,
        species: Species,
        block: &Block,
        moment: &Moment,
        _work: &mut Work,
        sample: &mut Sample,
    ) {
        match species {
            Species::Gas => sample
                .sum(self.rate, 0)
                .add_slice(block.scalar(Field::StarFormationRate)),
            Species::Star => {
                let Some(interval) = moment.interval else {
                    return;
                };
                let single = block.is_single(Field::BirthTime);
                let births = if single {
                    interval.births.in_single_precision()
                } else {
                    interval.births
                };
                for (&time, &mass) in block
                    .scalar(Field::BirthTime)
                    .iter()
                    .zip(block.scalar(Field::BirthMass))
                {
                    if births.contains(time) {
                        sample.sum(self.formed, 0).add(mass);
                        *sample.count(self.born, 0) += 1;
                    }
                }
            }
            _ => {}
        }
    }

    fn carry(&self, into: &mut Vec<u64>) {
        into.extend(self.last_rate.map(f64::to_bits));
    }

    fn take_up(&mut self, words: &[u64], is_last_row: bool) {
        self.last_rate = words
            .first()
            .filter(|_| is_last_row)
            .map(|&bits| f64::from_bits(bits));
    }

    fn enter(&mut self, reading: &Reading, moment: &Moment, entry: &mut Entry) {
        if moment.volume.is_none() {
            entry.note(super::NO_VOLUME);
        }
        let rate = reading
            .is_measured(Species::Gas)
            .then(|| reading.sum(self.rate, 0) * moment.factors.star_formation_rate);
        let to_yearly = YEAR / SOLAR_MASS;
        entry.put(rate.map(|rate| rate * to_yearly));
        entry.put(
            rate.zip(moment.volume)
                .map(|(rate, volume)| rate * to_yearly / volume),
        );
        let stars = reading.presence(Species::Star) == Presence::Measured;
        if let Some(interval) = moment.interval.filter(|_| stars) {
            let formed = reading.sum(self.formed, 0) * moment.factors.mass;
            let expected = self
                .last_rate
                .zip(rate)
                .map(|(last, now)| 0.5 * (last + now) * interval.seconds)
                .filter(|expected| *expected > 0.0);
            entry.put(formed / SOLAR_MASS);
            entry.put(reading.reduced.count(self.born, 0));
            entry.put(
                Some(formed / interval.seconds * to_yearly).filter(|_| interval.seconds > 0.0),
            );
            entry.put(expected.map(|expected| formed / expected));
        }
        self.last_rate = rate;
    }
}
