//! The state of a run, and the calls that concern one rank alone.

use super::clock::Clock;
use super::contribution::Words;
use super::entering::Flight;
use super::history::History;
use super::marking::Refused;
use super::rows::Scribe;
use super::status::{Fault, Status};
use crate::config::{Config, Tick};
use crate::gauges::{Active, Factors, Moment, Plan, TallyBook};
use crate::lend::{ArrayShape, Field, Lent, Lot, SPECIES, Shape, Species, View};
use crate::sweep::Sweep;
use crate::team::Team;
use std::collections::VecDeque;
use std::sync::{Arc, Mutex, OnceLock};
use std::time::Instant;

/// The moment of a step, as far as its own clock tells it.
///
/// # Errors
/// A time that the config's coordinate or cosmology does not reach, in words.
pub(super) fn moment_without_history(
    config: &Config,
    step: u64,
    time: f64,
) -> Result<Moment, String> {
    let instant = config
        .clockwork
        .moment(time)
        .map_err(|error| error.to_string())?;
    Ok(Moment {
        step,
        time,
        step_length: 0.0,
        scale_factor: instant.scale_factor,
        redshift: config.expansion.cosmology().map(|_| instant.redshift),
        age: instant.age_seconds,
        hubble: config.expansion.hubble_rate(instant.scale_factor),
        factors: Factors::at(config, instant.scale_factor),
        volume: config.comoving_volume_mpc3(),
        interval: None,
    })
}

/// Where a run stands between its calls.
pub(super) enum Stage {
    /// After open or enter.
    Between,
    /// After a mark that was accepted; with the moment when the step is measured.
    Marked {
        clock: Clock,
        moment: Option<Moment>,
    },
    /// After a mark that was refused.
    MarkedInError(Refused),
}

/// What something that could not be lent was meant for.
#[derive(Clone, Copy, Debug)]
pub(super) enum Missed {
    /// A field, for a reason of its own.
    Field(Species, Field),
    /// A field whose count disagrees with that of others.
    Count(Species, Field),
    /// A field with a name that does not exist, of this species or, without one, of any.
    Name(Option<Species>),
}

/// A layout described once.
#[derive(Clone, Copy, Debug)]
pub(super) struct Layout {
    pub species: Species,
    pub field: Field,
    pub shape: ArrayShape,
    /// Are the components arrays of their own?
    pub separate: bool,
}

/// What a run is made of.
pub(super) struct Parts {
    pub team: Box<dyn Team>,
    pub config: Config,
    pub plan: Plan,
    pub gauges: Vec<Active>,
    pub sweep: Sweep,
    pub words: Words,
    /// On rank 0: turns combined sums into rows and hands them to the series.
    pub scribe: Option<Scribe>,
    pub history: Arc<History>,
    pub tallies: Arc<Mutex<TallyBook>>,
    /// Why the run sleeps, for calls that do not wait for the others.
    pub sleeps: Arc<OnceLock<String>>,
}

/// The state of a run.
pub(super) struct Core {
    pub(super) team: Box<dyn Team>,
    pub(super) config: Config,
    pub(super) plan: Plan,
    pub(super) gauges: Vec<Active>,
    pub(super) sweep: Sweep,
    pub(super) words: Words,
    pub(super) scribe: Option<Scribe>,
    pub(super) tallies: Arc<Mutex<TallyBook>>,
    pub(super) stage: Stage,
    pub(super) lots: [Lot; Species::COUNT],
    /// Species sounded in this step.
    sounded: [bool; Species::COUNT],
    /// Was something lent in this step under a species that nobody can guess?
    misnamed: bool,
    layouts: Vec<Layout>,
    /// Rows of earlier legs, until the first row of this one.
    pub(super) history: Option<Arc<History>>,
    /// The last clock that was accepted.
    pub(super) last_clock: Option<Clock>,
    /// When the last row was; none before the first row of a leg, and after a step in error.
    pub(super) last_row: Option<f64>,
    /// The last step that was measured, as far as this rank knows: cadences count from it.
    pub(super) last_tick: Option<Tick>,
    /// Contributions that have been started and not yet taken in.
    pub(super) flights: VecDeque<Flight>,
    /// Steps to which contributions in doubt turned out to belong.
    pub(super) stood_in: Vec<u64>,
    pub(super) spare: Vec<Vec<u64>>,
    /// What went wrong on this rank since its last contribution.
    pub(super) trouble: Option<Fault>,
    /// A fault on this rank that the others do not know of yet.
    pub(super) asleep_alone: Option<String>,
    /// Why every rank sleeps.
    pub(super) asleep: Option<String>,
    pub(super) sleeps: Arc<OnceLock<String>>,
    pub(super) closed: bool,
    pub(super) steps_since_row: u64,
    pub(super) rows: u64,
    /// Time in the library since the last contribution, and when that was.
    pub(super) spent: u64,
    pub(super) since: Instant,
}

impl Core {
    pub fn new(parts: Parts) -> Core {
        let Parts {
            team,
            config,
            plan,
            gauges,
            sweep,
            words,
            scribe,
            history,
            tallies,
            sleeps,
        } = parts;
        Core {
            team,
            config,
            plan,
            gauges,
            sweep,
            words,
            scribe,
            tallies,
            stage: Stage::Between,
            lots: Default::default(),
            sounded: Default::default(),
            misnamed: false,
            layouts: Vec::new(),
            history: Some(history),
            last_clock: None,
            last_row: None,
            last_tick: None,
            flights: VecDeque::new(),
            stood_in: Vec::new(),
            spare: Vec::new(),
            trouble: None,
            asleep_alone: None,
            asleep: None,
            sleeps,
            closed: false,
            steps_since_row: 0,
            rows: 0,
            spent: 0,
            since: Instant::now(),
        }
    }

    /// Calls that concern this rank alone begin here: is it awake?
    pub fn awake(&self) -> Result<(), Fault> {
        match self.asleep.as_ref().or(self.asleep_alone.as_ref()) {
            Some(why) => Fault::err(Status::Asleep, format!("the run sleeps: {why}")),
            None => Ok(()),
        }
    }

    /// Calls that lead to a reduction begin here: a rank that sleeps alone still takes part, until the others
    /// know of it.
    pub fn awake_together(&self) -> Result<(), Fault> {
        if self.asleep.is_some() {
            self.awake()
        } else {
            Ok(())
        }
    }

    /// Every call ends here; returns its ns.
    pub fn end_call(&mut self, start: Instant) -> u64 {
        let spent = start.elapsed().as_nanos() as u64;
        self.spent += spent;
        spent
    }

    pub fn standing(&self) -> (bool, u64, u64, u64) {
        let (written, lost) = self
            .scribe
            .as_ref()
            .map_or((0, 0), Scribe::written_and_lost);
        (
            self.asleep.is_some() || self.asleep_alone.is_some(),
            self.rows,
            // What the library itself had to say is also written, but is no row of the host's.
            written.min(self.rows),
            lost,
        )
    }

    /// Keeps the first trouble since the last contribution for the row's event.
    pub(super) fn keep(&mut self, fault: Fault) -> Fault {
        if self.trouble.is_none() {
            self.trouble = Some(fault.clone());
        }
        fault
    }

    // ---- lending and sounding -----------------------------------------------------------------------

    /// Notes that something could not be lent, so that nothing is measured of half a species.
    pub fn miss(&mut self, missed: Missed, fault: Fault) -> Fault {
        let is_measured = matches!(
            self.stage,
            Stage::Marked {
                moment: Some(_),
                ..
            }
        );
        if is_measured {
            match missed {
                Missed::Field(species, field) => self.lots[species as usize].miss(field),
                Missed::Count(species, field) => self.lots[species as usize].disagree(field),
                Missed::Name(Some(species)) => self.lots[species as usize].misname(),
                Missed::Name(None) => self.misnamed = true,
            }
        }
        self.keep(fault)
    }

    fn check_shape(&self, species: Species, field: Field, shape: ArrayShape) -> Result<(), Fault> {
        let name = format!("{} {}", species.name(), field.name());
        let components = field.components(self.config.elements.len());
        if components == 0 {
            let text =
                format!("{name}: the config names no elements; list them under [elements] names");
            return Fault::err(Status::BadArgument, text);
        }
        if shape.components != components {
            let text = format!(
                "{name}: lent with {} numbers an element, expected {components}",
                shape.components
            );
            return Fault::err(Status::BadArgument, text);
        }
        if field.info().shape == Shape::Identity && !shape.scalar.is_integer() {
            let text = format!(
                "{name}: identities must be integers (LIMNO_I32, LIMNO_U32, LIMNO_I64 or LIMNO_U64)"
            );
            return Fault::err(Status::BadArgument, text);
        }
        Ok(())
    }

    pub fn lend(
        &mut self,
        species: Species,
        field: Field,
        count: usize,
        shape: ArrayShape,
        lent: Lent,
    ) -> Result<(), Fault> {
        let name = || format!("{} {}", species.name(), field.name());
        let view = self.check_shape(species, field, shape).and_then(|()| {
            View::new(shape, count, lent)
                .map_err(|error| Fault::new(Status::BadArgument, format!("{}: {error}", name())))
        });
        let put = match view {
            Ok(view) => self.lots[species as usize].put(species, field, view),
            Err(fault) => return Err(self.miss(Missed::Field(species, field), fault)),
        };
        put.map_err(|text| {
            let fault = Fault::new(Status::BadArgument, text);
            self.miss(Missed::Count(species, field), fault)
        })
    }

    pub fn describe(
        &mut self,
        species: Species,
        field: Field,
        shape: ArrayShape,
        separate: bool,
    ) -> Result<i32, Fault> {
        self.check_shape(species, field, shape)?;
        shape.check(separate).map_err(|error| {
            Fault::new(
                Status::BadArgument,
                format!("{} {}: {error}", species.name(), field.name()),
            )
        })?;
        let number = i32::try_from(self.layouts.len()).map_err(|_| {
            Fault::new(
                Status::BadArgument,
                "too many layouts; describe each once, not each step",
            )
        })?;
        self.layouts.push(Layout {
            species,
            field,
            shape,
            separate,
        });
        Ok(number)
    }

    pub fn layout(&self, number: i32) -> Result<Layout, Fault> {
        usize::try_from(number)
            .ok()
            .and_then(|index| self.layouts.get(index).copied())
            .ok_or_else(|| {
                let known = self.layouts.len();
                Fault::new(
                    Status::BadArgument,
                    format!("layout {number} was never described; {known} layouts are known"),
                )
            })
    }

    /// Lends with a layout described before.
    pub fn lend_again(&mut self, number: i32, count: usize, lent: Lent) -> Result<(), Fault> {
        let Layout {
            species,
            field,
            shape,
            separate,
        } = self.layout(number)?;
        if separate != matches!(lent, Lent::Arrays(_)) {
            let text = format!(
                "{} {}: layout {number} was described with {}; call {}",
                species.name(),
                field.name(),
                if separate { "`arrays`" } else { "`data`" },
                if separate {
                    "limno_lend_again_arrays"
                } else {
                    "limno_lend_again"
                }
            );
            let fault = Fault::new(Status::BadArgument, text);
            return Err(self.miss(Missed::Field(species, field), fault));
        }
        self.lend(species, field, count, shape, lent)
    }

    pub fn sound(&mut self, species: Species) -> Result<(), Fault> {
        let Stage::Marked {
            moment: Some(moment),
            ..
        } = &self.stage
        else {
            return Ok(());
        };
        let lot = &mut self.lots[species as usize];
        if lot.is_touched() && self.asleep_alone.is_none() {
            self.sweep
                .sound(species, lot, &mut self.gauges, &self.plan, moment);
            self.sounded[species as usize] = true;
        }
        lot.let_go();
        Ok(())
    }

    /// Sounds what is still lent at the end of a step.
    pub(super) fn sound_all(&mut self) -> Result<(), Fault> {
        for (species, _) in SPECIES {
            let lot = &mut self.lots[species as usize];
            // Whatever was lent under a name that nobody can guess is missing from a species that was not lent.
            if self.misnamed && !lot.is_touched() && !self.sounded[species as usize] {
                lot.misname();
            }
            self.sound(species)?;
        }
        Ok(())
    }

    /// Lets go of every array: nothing lent outlives its step.
    pub(super) fn let_go(&mut self) {
        self.lots.iter_mut().for_each(Lot::let_go);
        self.sounded = Default::default();
        self.misnamed = false;
    }
}
