//! One opened instance: the order of calls, the steps in flight, and what happens when something is wrong.
//!
//! The room between the C boundary and everything that measures. Its rules: what a call got wrong concerns
//! that call; what could not be measured is null, never wrong; a decision that all ranks must take alike is
//! taken from combined words only, so that no rank ever waits for one that has decided otherwise.

mod clock;
mod contribution;
mod core;
mod history;
mod opening;
mod rows;
mod status;

pub use clock::Clock;
pub use opening::{ConfigSource, Request, open};
pub use status::{Fault, Status};

use self::core::Core;
use crate::gauges::{TallyBatch, TallyBook};
use crate::lend::{ArrayShape, Field, Lent, SPECIES, Species, nearest};
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Mutex, MutexGuard, PoisonError};
use std::time::Instant;

/// A run. Shared between the threads of a host; all but tallies is one call at a time.
pub struct Run {
    core: Mutex<Core>,
    tallies: Mutex<TallyBook>,
    elements: usize,
    last_error: Mutex<String>,
    /// Time this rank has spent in calls, in ns.
    spent: AtomicU64,
}

fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    // A panic inside a call puts the run to sleep; the data is then only read to say why.
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}

impl Run {
    fn new(core: Core, tallies: TallyBook) -> Run {
        Run {
            elements: tallies.elements(),
            core: Mutex::new(core),
            tallies: Mutex::new(tallies),
            last_error: Mutex::new(String::new()),
            spent: AtomicU64::new(0),
        }
    }

    /// Runs a call that concerns this rank alone, and keeps its time and its error.
    fn call<T>(&self, body: impl FnOnce(&mut Core) -> Result<T, Fault>) -> Result<T, Fault> {
        self.call_together(|core| core.awake().and_then(|()| body(core)))
    }

    /// Runs a call that leads to a reduction.
    fn call_together<T>(
        &self,
        body: impl FnOnce(&mut Core) -> Result<T, Fault>,
    ) -> Result<T, Fault> {
        let start = Instant::now();
        let mut core = lock(&self.core);
        let result = core.awake_together().and_then(|()| body(&mut core));
        self.spent
            .fetch_add(core.end_call(start), Ordering::Relaxed);
        drop(core);
        self.note(result)
    }

    /// Keeps the text of an error for `limno_last_error`.
    pub fn note<T>(&self, result: Result<T, Fault>) -> Result<T, Fault> {
        if let Err(fault) = &result {
            lock(&self.last_error).clone_from(&fault.text);
        }
        result
    }

    /// The text of the last error.
    pub fn last_error(&self) -> String {
        lock(&self.last_error).clone()
    }

    /// Number of chemical elements the config names.
    pub fn elements(&self) -> usize {
        self.elements
    }

    /// Would a step with this clock be measured?
    ///
    /// # Errors
    /// A clock that cannot be right.
    pub fn is_due(&self, clock: &Clock) -> Result<bool, Fault> {
        self.call(|core| core.is_due(clock))
    }

    /// A step begins. A clock that could not even be read still begins a step, in error, so that the other
    /// ranks are not left waiting.
    ///
    /// # Errors
    /// A clock that cannot be right, or a step marked before and not yet entered.
    pub fn mark(&self, clock: Result<Clock, Fault>) -> Result<(), Fault> {
        self.call_together(|core| core.mark(clock))
    }

    /// Lends an array.
    ///
    /// # Errors
    /// An unknown name, a description that cannot be right, a count that disagrees, a step not marked.
    pub fn lend(
        &self,
        species: &str,
        field: &str,
        count: usize,
        array: Result<(ArrayShape, Lent), Fault>,
    ) -> Result<(), Fault> {
        self.call(|core| {
            let name = species;
            let species = find_species(name);
            if !core.is_measuring()? {
                return Ok(());
            }
            let found = species
                .clone()
                .and_then(|species| Ok((species, find_field(field)?)));
            let lent = found.and_then(|(species, field)| {
                let (shape, lent) = array?;
                core.lend(species, field, count, shape, lent)
            });
            // A mistyped species most likely meant the one with the nearest name: nothing is measured of half of it.
            let meant = species.ok().or_else(|| nearest_species(name));
            lent.map_err(|fault| core.refuse(meant, fault))
        })
    }

    /// Describes a layout for later.
    ///
    /// # Errors
    /// An unknown name or a description that cannot be right.
    pub fn describe(
        &self,
        species: &str,
        field: &str,
        shape: ArrayShape,
        separate: bool,
    ) -> Result<i32, Fault> {
        self.call(|core| core.describe(find_species(species)?, find_field(field)?, shape, separate))
    }

    /// Lends with a layout described before.
    ///
    /// # Errors
    /// As [`Run::lend`], and a layout that was never described.
    pub fn lend_again(&self, layout: i32, count: usize, lent: Lent) -> Result<(), Fault> {
        self.call(|core| {
            let (species, field, shape) = core.layout(layout)?;
            if !core.is_measuring()? {
                return Ok(());
            }
            core.lend(species, field, count, shape, lent)
                .map_err(|fault| core.refuse(Some(species), fault))
        })
    }

    /// Notes that a lend with a layout came without what it needs.
    ///
    /// # Errors
    /// Always: the fault that describes it.
    pub fn lend_refused(&self, layout: i32, why: String) -> Result<(), Fault> {
        self.call(|core| {
            let (species, field, _) = core.layout(layout)?;
            let text = format!("{} {}: {why}", species.name(), field.name());
            Err(core.refuse(Some(species), Fault::new(Status::BadArgument, text)))
        })
    }

    /// Number of components of a layout described before.
    ///
    /// # Errors
    /// A layout that was never described.
    pub fn components_of(&self, layout: i32) -> Result<usize, Fault> {
        self.call(|core| Ok(core.layout(layout)?.2.components))
    }

    /// Posts a batch of events; from any thread.
    ///
    /// # Errors
    /// An unknown channel, a number that is not finite, a run that sleeps.
    pub fn tally(&self, channel: &str, batch: &TallyBatch) -> Result<(), Fault> {
        let start = Instant::now();
        let mut book = lock(&self.tallies);
        let index = book
            .channels()
            .iter()
            .position(|known| known.name == channel);
        let result = match index {
            Some(index) => book.add(index, batch).map_err(|text| {
                Fault::new(
                    Status::BadArgument,
                    format!("tally on channel {channel}: {text}"),
                )
            }),
            None => {
                let names = book.channels().iter().map(|channel| channel.name.as_str());
                Err(unknown(
                    "channel",
                    channel,
                    names,
                    "; channels of your own are listed in the config under [channels]",
                ))
            }
        };
        drop(book);
        self.spent
            .fetch_add(start.elapsed().as_nanos() as u64, Ordering::Relaxed);
        self.note(result)
    }

    /// Measures what is lent of a species and lets go of it.
    ///
    /// # Errors
    /// An unknown name or a step not marked.
    pub fn sound(&self, species: &str) -> Result<(), Fault> {
        self.call(|core| {
            let species = find_species(species)?;
            if core.is_measuring()? {
                core.sound(species)
            } else {
                Ok(())
            }
        })
    }

    /// The step is over.
    ///
    /// # Errors
    /// See the header; the row is entered unless the run sleeps.
    pub fn enter(&self) -> Result<(), Fault> {
        self.call_together(|core| core.enter(&self.tallies))
    }

    /// Completes all rows and ends the run.
    ///
    /// # Errors
    /// When rows could not be completed or written; the run is closed all the same.
    pub fn close(&self) -> Result<(), Fault> {
        let start = Instant::now();
        let mut core = lock(&self.core);
        let result = core.close();
        self.spent
            .fetch_add(core.end_call(start), Ordering::Relaxed);
        drop(core);
        self.note(result)
    }

    /// Puts the run to sleep after a fault inside the library.
    pub fn fall_asleep(&self, why: &str) -> Fault {
        let fault = lock(&self.core).fall_asleep_alone(why);
        let _ = self.note::<()>(Err(fault.clone()));
        fault
    }

    /// Asleep, rows, rows written, rows lost, seconds spent in the library.
    pub fn standing(&self) -> (bool, u64, u64, u64, f64) {
        let core = lock(&self.core);
        let (asleep, rows, written, lost) = core.standing();
        (
            asleep,
            rows,
            written,
            lost,
            self.spent.load(Ordering::Relaxed) as f64 * 1e-9,
        )
    }
}

fn unknown<'a>(
    what: &str,
    given: &str,
    known: impl Iterator<Item = &'a str> + Clone,
    note: &str,
) -> Fault {
    let hint = match nearest(given, known.clone()) {
        Some(name) => format!("did you mean {name:?}?"),
        None => format!("known: {}", known.collect::<Vec<_>>().join(", ")),
    };
    Fault::new(
        Status::UnknownName,
        format!("there is no {what} {given:?}; {hint}{note}"),
    )
}

fn find_species(name: &str) -> Result<Species, Fault> {
    Species::find(name)
        .ok_or_else(|| unknown("species", name, SPECIES.iter().map(|(_, name)| *name), ""))
}

fn nearest_species(name: &str) -> Option<Species> {
    nearest(name, SPECIES.iter().map(|(_, name)| *name)).and_then(Species::find)
}

fn find_field(name: &str) -> Result<Field, Fault> {
    Field::find(name).ok_or_else(|| {
        unknown(
            "field",
            name,
            crate::lend::FIELDS.iter().map(|info| info.name),
            "",
        )
    })
}
