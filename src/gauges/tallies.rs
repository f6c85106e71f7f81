//! Tallies: what the host says happened, that no array shows, added up by channel.
//!
//! Amounts arrive at any time from any thread and are added exactly; a row takes what came since the last
//! row, steps that were not measured included.

use super::plan::{Counts, Plan, Sums};
use super::{Entry, Gauge, Moment, Reading, Sample};
use crate::config::{CHANNELS, Config, Section};
use crate::exact::Accumulator;
use crate::lend::Species;
use crate::series::schema::{Kind, ValueType};
use crate::sweep::{Block, Work};
use crate::units::constants::SOLAR_MASS;

const CENTIMETRES_IN_KILOMETRE: f64 = 1e5;

/// Amounts of one channel, besides the elements.
const AMOUNTS: usize = 4;
const MASS: usize = 0;
const MOMENTUM: usize = 1;
const ENERGY: usize = 2;
const METALS: usize = 3;

/// What has been tallied on one channel since the last row.
#[derive(Clone)]
pub struct Channel {
    /// Its name.
    pub name: String,
    events: u64,
    amounts: [Accumulator; AMOUNTS],
    elements: Vec<Accumulator>,
}

/// One batch of events, checked: every slice that is given has one number an event.
#[derive(Clone, Copy, Debug, Default)]
pub struct TallyBatch<'a> {
    /// Number of events.
    pub count: usize,
    /// Mass of each, in host units.
    pub mass: Option<&'a [f64]>,
    /// Momentum of each (its magnitude), in host units.
    pub momentum: Option<&'a [f64]>,
    /// Energy of each, in host units.
    pub energy: Option<&'a [f64]>,
    /// Mass in metals of each, in host units.
    pub metals: Option<&'a [f64]>,
    /// Mass in each element named in the config, event after event.
    pub elements: Option<&'a [f64]>,
    /// Three coordinates each, in host units.
    pub position: Option<&'a [f64]>,
}

/// All channels of a run.
#[derive(Clone)]
pub struct TallyBook {
    channels: Vec<Channel>,
    elements: usize,
}

/// Names of all channels: the built-in ones and those of the config.
fn channel_names(config: &Config) -> impl Iterator<Item = &str> {
    CHANNELS
        .into_iter()
        .chain(config.channels.iter().map(String::as_str))
}

impl TallyBook {
    /// An empty book with the channels of a config.
    pub fn new(config: &Config) -> TallyBook {
        let elements = config.elements.len();
        let channel = |name: &str| Channel {
            name: name.to_string(),
            events: 0,
            amounts: Default::default(),
            elements: vec![Accumulator::default(); elements],
        };
        TallyBook {
            channels: channel_names(config).map(channel).collect(),
            elements,
        }
    }

    /// The channels.
    pub fn channels(&self) -> &[Channel] {
        &self.channels
    }

    /// Number of elements an event may name.
    pub fn elements(&self) -> usize {
        self.elements
    }

    /// Adds a batch to a channel, all of it or nothing.
    ///
    /// # Errors
    /// When a number is not finite, with its name and event.
    pub fn add(&mut self, channel: usize, batch: &TallyBatch) -> Result<(), String> {
        let given = [
            ("mass", batch.mass, 1),
            ("momentum", batch.momentum, 1),
            ("energy", batch.energy, 1),
            ("metals", batch.metals, 1),
            ("elements", batch.elements, self.elements),
            ("position", batch.position, 3),
        ];
        for (name, numbers, each) in given {
            if let Some(at) =
                numbers.and_then(|numbers| numbers.iter().position(|number| !number.is_finite()))
            {
                return Err(format!(
                    "the {name} of event {} is not a finite number; nothing was tallied",
                    at / each.max(1)
                ));
            }
        }
        let channel = &mut self.channels[channel];
        channel.events += batch.count as u64;
        for (sum, numbers) in
            channel
                .amounts
                .iter_mut()
                .zip([batch.mass, batch.momentum, batch.energy, batch.metals])
        {
            sum.add_slice(numbers.unwrap_or(&[]));
        }
        for event in batch
            .elements
            .unwrap_or(&[])
            .chunks_exact(self.elements.max(1))
        {
            channel
                .elements
                .iter_mut()
                .zip(event)
                .for_each(|(sum, &mass)| sum.add(mass));
        }
        Ok(())
    }

    /// Adds all that another book of the same channels holds.
    pub fn add_book(&mut self, other: &TallyBook) {
        for (mine, theirs) in self.channels.iter_mut().zip(&other.channels) {
            mine.events += theirs.events;
            let sums = mine.amounts.iter_mut().chain(&mut mine.elements);
            sums.zip(theirs.amounts.iter().chain(&theirs.elements))
                .for_each(|(sum, amount)| sum.merge(amount));
        }
    }

    /// Forgets everything.
    pub fn clear(&mut self) {
        for channel in self
            .channels
            .iter_mut()
            .filter(|channel| channel.events > 0)
        {
            channel.events = 0;
            channel
                .amounts
                .iter_mut()
                .chain(&mut channel.elements)
                .for_each(Accumulator::clear);
        }
    }
}

struct Tallies {
    channels: Vec<(Counts, Sums)>,
    elements: usize,
}

pub(super) fn build(_section: &mut Section, config: &Config, plan: &mut Plan) -> Box<dyn Gauge> {
    let elements = config.elements.len();
    let mut channels = Vec::new();
    for name in channel_names(config) {
        let said = |what: &str| format!("{what} tallied on channel {name} since the last row");
        plan.typed_column(
            format!("tally_{name}_events"),
            "",
            Kind::Increment,
            ValueType::Unsigned,
            said("number of events"),
        );
        let amounts = [
            ("mass", "solMass", "mass"),
            ("momentum", "solMass.km.s**-1", "momentum"),
            ("energy", "erg", "energy"),
            ("metal_mass", "solMass", "mass in metals"),
        ];
        for (suffix, unit, what) in amounts {
            plan.column(
                format!("tally_{name}_{suffix}"),
                unit,
                Kind::Increment,
                said(what),
            );
        }
        for element in &config.elements {
            let what = format!("mass in {element}");
            plan.column(
                format!("tally_{name}_mass_{element}"),
                "solMass",
                Kind::Increment,
                said(&what),
            );
        }
        channels.push((plan.counts(1), plan.sums(AMOUNTS + elements)));
    }
    Box::new(Tallies { channels, elements })
}

impl Gauge for Tallies {
    fn measure(
        &self,
        _species: Species,
        _block: &Block,
        _moment: &Moment,
        _work: &mut Work,
        _sample: &mut Sample,
    ) {
    }

    fn take_tallies(&self, book: &TallyBook, sample: &mut Sample) {
        let channels = book.channels.iter().zip(&self.channels);
        for (channel, &(events, sums)) in channels.filter(|(channel, _)| channel.events > 0) {
            *sample.count(events, 0) += channel.events;
            for (index, amount) in channel.amounts.iter().chain(&channel.elements).enumerate() {
                sample.sum(sums, index).merge(amount);
            }
        }
    }

    fn enter(&mut self, reading: &Reading, moment: &Moment, entry: &mut Entry) {
        let factors = &moment.factors;
        let units = [
            (MASS, factors.mass / SOLAR_MASS),
            (
                MOMENTUM,
                factors.momentum / (SOLAR_MASS * CENTIMETRES_IN_KILOMETRE),
            ),
            (ENERGY, factors.energy),
            (METALS, factors.mass / SOLAR_MASS),
        ];
        for &(events, sums) in &self.channels {
            entry.put(reading.reduced.count(events, 0));
            for (index, unit) in units {
                entry.put(reading.sum(sums, index) * unit);
            }
            for element in 0..self.elements {
                entry.put(reading.sum(sums, AMOUNTS + element) * factors.mass / SOLAR_MASS);
            }
        }
    }
}
