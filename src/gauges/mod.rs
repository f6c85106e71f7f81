//! The diagnostics, one file each.
//!
//! A gauge declares what it needs and owns in a [`Plan`], adds the contributions of blocks of elements to a
//! [`Sample`] (on any thread, in any order), and turns the reduced sums into its columns. To add one, write
//! its file and add one line to [`REGISTRY`]; nothing else changes.
//!
//! The rule that makes rows equal to the bit: a contribution is computed in doubles by the operations
//! written in the gauge, in host units, from one element alone; it is summed exactly; units are applied
//! after the sum.

mod black_holes;
mod mass_budget;
mod moment;
mod plan;
mod sample;
mod star_formation;
mod tallies;
mod wind_shells;

pub use moment::{Factors, Interval, Moment};
pub use plan::{BinSums, Counts, Need, Plan, Sums, TableHandle, Top};
pub use sample::{Packing, Reduced, Sample};
pub use tallies::{Channel, TallyBatch, TallyBook};

use crate::config::{Config, Problem, Section};
use crate::lend::{Field, Species};
use crate::series::record::{Row, Value};
use crate::sweep::{Block, Work};

/// One diagnostic.
pub trait Gauge: Send + Sync {
    /// Learns the moment before blocks of it are measured; called at least once a measured step when there are any.
    fn prepare(&mut self, _moment: &Moment) {}

    /// Adds the contributions of a block of elements, all of whose needed fields are lent and finite.
    fn measure(
        &self,
        species: Species,
        block: &Block,
        moment: &Moment,
        work: &mut Work,
        sample: &mut Sample,
    );

    /// Adds what this rank has tallied since the last row; most gauges have no use for tallies.
    fn take_tallies(&self, _book: &TallyBook, _sample: &mut Sample) {}

    /// What the gauge must remember to go on exactly after a restart; stored at checkpoints.
    fn carry(&self) -> Vec<u64> {
        Vec::new()
    }

    /// Takes up what `carry` left in an earlier leg; `is_last_row` when that was the very row before the one
    /// that comes now. Words that make no sense are ignored.
    fn take_up(&mut self, _words: &[u64], _is_last_row: bool) {}

    /// Turns the sums of all ranks into one value for each of the gauge's columns, in the order in which
    /// they were declared, and any rows of its own tables.
    fn enter(&mut self, reading: &Reading, moment: &Moment, entry: &mut Entry);
}

/// Builds a gauge from its section of the config.
type Build = fn(&mut Section, &Config, &mut Plan) -> Box<dyn Gauge>;

/// Every gauge: its name in the config and how to build it.
const REGISTRY: &[(&str, Build)] = &[
    ("star_formation", star_formation::build),
    ("wind_shells", wind_shells::build),
    ("black_holes", black_holes::build),
    ("mass_budget", mass_budget::build),
    ("tallies", tallies::build),
];

/// The names of all gauges.
pub fn names() -> impl Iterator<Item = &'static str> {
    REGISTRY.iter().map(|(name, _)| *name)
}

/// A gauge that is switched on.
pub struct Active {
    /// Its name in the config.
    pub name: String,
    /// The gauge itself.
    pub gauge: Box<dyn Gauge>,
}

/// Builds the gauges that the config switches on, in the order of the registry.
///
/// # Errors
/// Every problem in their sections, and every name that is no gauge.
pub fn build(config: &Config, plan: &mut Plan) -> Result<Vec<Active>, Vec<Problem>> {
    let mut sections = config.gauges.clone();
    let mut problems = Vec::new();
    let mut active = Vec::new();
    for (name, build) in REGISTRY {
        if let Some(place) = sections.iter().position(|(given, _)| given == name) {
            let (_, mut section) = sections.remove(place);
            plan.begin(name);
            let gauge = build(&mut section, config, plan);
            problems.extend(section.finish().err().unwrap_or_default());
            active.push(Active {
                name: name.to_string(),
                gauge,
            });
        }
    }
    // What is left is no gauge.
    let known: Vec<&str> = names().collect();
    problems.extend(
        sections
            .into_iter()
            .map(|(_, section)| section.misnamed("gauge", &known)),
    );
    if problems.is_empty() {
        Ok(active)
    } else {
        Err(problems)
    }
}

/// What is known of a species in a row.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Presence {
    /// No rank lent it.
    NotLent,
    /// Some rank lent it without a field that the gauge needs, or could not lend it.
    Lacking(Field),
    /// Every rank that has any lent all that is needed.
    Measured,
}

/// The reduced step, as one gauge sees it.
pub struct Reading<'a> {
    /// Sums, counts and lists of all ranks.
    pub reduced: Reduced<'a>,
    /// Needs of this gauge with what became of them, in the order declared.
    pub needs: &'a [(Need, NeedState)],
}

/// What became of a need, over all ranks.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct NeedState {
    /// Soundings, with elements or without, of the species.
    pub soundings: u64,
    /// Soundings with elements and the field.
    pub with: u64,
    /// Soundings with elements but without the field, and refused lots.
    pub without: u64,
}

impl Reading<'_> {
    /// What is known of a species.
    pub fn presence(&self, species: Species) -> Presence {
        let mut sounded = false;
        for (need, state) in self
            .needs
            .iter()
            .filter(|(need, _)| need.species == species)
        {
            let on_some_only = need.optional && state.with > 0 && state.without > 0;
            if on_some_only || (!need.optional && state.without > 0) {
                return Presence::Lacking(need.field);
            }
            sounded |= state.soundings > 0;
        }
        if sounded {
            Presence::Measured
        } else {
            Presence::NotLent
        }
    }

    /// Was a species measured in full?
    pub fn is_measured(&self, species: Species) -> bool {
        self.presence(species) == Presence::Measured
    }

    /// Was an optional field lent by all that have elements?
    pub fn has(&self, species: Species, field: Field) -> bool {
        self.needs.iter().any(|(need, state)| {
            need.species == species && need.field == field && state.with > 0 && state.without == 0
        })
    }

    /// One exact sum, rounded, in host units.
    pub fn sum(&self, sums: Sums, index: usize) -> f64 {
        self.reduced.sum(sums, index).to_f64()
    }
}

/// Where a gauge puts what it has to say about a row.
#[derive(Debug, Default)]
pub struct Entry {
    /// One value per column of the run table that the gauge owns.
    pub run: Vec<Value>,
    /// Rows of the gauge's own tables.
    pub rows: Vec<Row>,
    /// Why something is null that was lent; each text is written down as an event once.
    pub notes: Vec<&'static str>,
}

/// The note of every gauge that has densities, where there is no volume.
pub(crate) const NO_VOLUME: &str = "the config states no volume, so densities are null";

impl Entry {
    /// The next of the gauge's columns.
    pub fn put(&mut self, value: impl Into<Value>) {
        self.run.push(value.into());
    }
}
