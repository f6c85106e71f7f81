//! The mass budget: how much of every species there is, and whether the baryons are all still there.
//!
//! Particle masses are summed exactly, also across species: a host that moves whole particles between
//! species has a drift of exactly zero. A species that was lent in the first row and is not lent now leaves
//! the baryon total unknown rather than smaller.

use super::plan::{Plan, Sums};
use super::{Entry, Gauge, Moment, Presence, Reading, Sample};
use crate::config::{Config, Section};
use crate::exact::Total;
use crate::lend::{Field, SPECIES, Species};
use crate::series::schema::Kind;
use crate::sweep::{Block, Work};
use crate::units::constants::SOLAR_MASS;

struct MassBudget {
    masses: Sums,
    first: Option<First>,
}

/// The first row's baryons, in host units, exactly.
struct First {
    total: Total,
    /// Those of which it is made, one bit each.
    species: u64,
}

fn bit(species: Species) -> u64 {
    1 << species as u64
}

fn is_baryonic(species: Species) -> bool {
    species != Species::DarkMatter
}

pub(super) fn build(_section: &mut Section, _config: &Config, plan: &mut Plan) -> Box<dyn Gauge> {
    for (species, name) in SPECIES {
        plan.need(species, Field::Mass);
        plan.column(
            format!("mass_{name}"),
            "solMass",
            Kind::Instant,
            format!("total particle mass of {}", name.replace('_', " ")),
        );
    }
    plan.column(
        "baryon_mass",
        "solMass",
        Kind::Instant,
        "total particle mass of gas, wind, stars and black holes, as far as they are lent",
    );
    plan.column(
        "baryon_mass_drift",
        "",
        Kind::Instant,
        "baryon mass now minus baryon mass in the first row, over the latter; the difference is exact",
    );
    Box::new(MassBudget {
        masses: plan.sums(SPECIES.len()),
        first: None,
    })
}

impl Gauge for MassBudget {
    fn measure(
        &self,
        species: Species,
        block: &Block,
        _moment: &Moment,
        _work: &mut Work,
        sample: &mut Sample,
    ) {
        sample
            .sum(self.masses, species as usize)
            .add_slice(block.scalar(Field::Mass));
    }

    fn carry(&self, into: &mut Vec<u64>) {
        if let Some(first) = &self.first {
            into.push(first.species);
            into.extend_from_slice(first.total.cells());
        }
    }

    fn take_up(&mut self, words: &[u64], _is_last_row: bool) {
        if let Some((&species, cells)) = words.split_first() {
            self.first = Some(First {
                total: Total::from_cells(cells),
                species,
            });
        }
    }

    fn enter(&mut self, reading: &Reading, moment: &Moment, entry: &mut Entry) {
        let to_solar = moment.factors.mass / SOLAR_MASS;
        let mut total = Total::default();
        let mut present = 0;
        let mut known = true;
        for (species, _) in SPECIES {
            let presence = reading.presence(species);
            let measured = presence == Presence::Measured;
            entry.put(measured.then(|| reading.sum(self.masses, species as usize) * to_solar));
            if is_baryonic(species) {
                known &= measured || presence == Presence::NotLent;
                if measured {
                    total += &reading.reduced.sum(self.masses, species as usize);
                    present |= bit(species);
                }
            }
        }
        known &= present != 0;
        if let Some(first) = &self.first {
            known &= first.species & !present == 0;
        }
        entry.put(known.then(|| total.to_f64() * to_solar));
        if known && self.first.is_none() {
            self.first = Some(First {
                total: total.clone(),
                species: present,
            });
        }
        let drift = self.first.as_ref().filter(|_| known).and_then(|first| {
            let start = first.total.to_f64();
            total -= &first.total;
            (start != 0.0).then(|| total.to_f64() / start)
        });
        entry.put(drift);
    }
}
