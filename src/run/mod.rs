//! One opened instance: the order of calls, the steps in flight, and what happens when something is wrong.
//!
//! The room between the C boundary and everything that measures. Its rules: what a call got wrong concerns
//! that call; what could not be measured is null, never wrong; a decision that all ranks must take alike is
//! taken from combined words only, so that no rank ever waits for one that has decided otherwise.

mod clock;
mod closing;
mod contribution;
mod core;
mod entering;
mod history;
mod marking;
mod opening;
mod rows;
mod status;

pub use clock::{Clock, Refusal};
pub use opening::{ConfigSource, Request, open};
pub use status::{Fault, Status};

use self::core::{Core, Missed};
use crate::gauges::{TallyBatch, TallyBook};
use crate::lend::{ArrayShape, Field, Lent, SPECIES, Species};
use crate::units::nearest::{either, nearest};
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Arc, Mutex, MutexGuard, OnceLock, PoisonError};
use std::time::Instant;

/// A run. Shared between the threads of a host; all but tallies is one call at a time.
pub struct Run {
    core: Mutex<Core>,
    tallies: Arc<Mutex<TallyBook>>,
    /// Why the run sleeps, for calls that do not wait for others to end.
    sleeps: Arc<OnceLock<String>>,
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
    fn new(core: Core, tallies: Arc<Mutex<TallyBook>>, sleeps: Arc<OnceLock<String>>) -> Run {
        let elements = lock(&tallies).elements();
        Run {
            elements,
            core: Mutex::new(core),
            tallies,
            sleeps,
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
    pub fn mark(&self, clock: Result<Clock, Refusal>) -> Result<(), Fault> {
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
            if !core.is_measuring()? {
                return Ok(());
            }
            let name = species;
            let species = find_species(name).map_err(|fault| {
                // A mistyped species most likely meant the one with the nearest name.
                core.miss(Missed::Name(nearest_species(name)), fault)
            })?;
            let field =
                find_field(field).map_err(|fault| core.miss(Missed::Name(Some(species)), fault))?;
            let (shape, lent) =
                array.map_err(|fault| core.miss(Missed::Field(species, field), fault))?;
            core.lend(species, field, count, shape, lent)
        })
    }

    /// Notes that something was lent under a name that could not be read; `species`, where that could.
    ///
    /// # Errors
    /// Always: the fault that describes it, or a step not marked.
    pub fn lend_unnamed(&self, species: Option<&str>, fault: Fault) -> Result<(), Fault> {
        self.call(|core| {
            if !core.is_measuring()? {
                return Ok(());
            }
            let meant =
                species.and_then(|name| Species::find(name).or_else(|| nearest_species(name)));
            Err(core.miss(Missed::Name(meant), fault))
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
    /// As [`Run::lend`], and a layout that was never described or is of another kind.
    pub fn lend_again(&self, layout: i32, count: usize, lent: Lent) -> Result<(), Fault> {
        self.call(|core| {
            core.layout(layout)?;
            if !core.is_measuring()? {
                return Ok(());
            }
            core.lend_again(layout, count, lent)
        })
    }

    /// Notes that a lend with a layout came without what it needs.
    ///
    /// # Errors
    /// Always: the fault that describes it.
    pub fn lend_refused(&self, layout: i32, why: String) -> Result<(), Fault> {
        self.call(|core| {
            let layout = core.layout(layout)?;
            if !core.is_measuring()? {
                return Ok(());
            }
            let (species, field) = (layout.species, layout.field);
            let text = format!("{} {}: {why}", species.name(), field.name());
            let fault = Fault::new(Status::BadArgument, text);
            Err(core.miss(Missed::Field(species, field), fault))
        })
    }

    /// Number of arrays that a layout described before has; none when its components are in one.
    ///
    /// # Errors
    /// A layout that was never described.
    pub fn arrays_of(&self, layout: i32) -> Result<Option<usize>, Fault> {
        self.call(|core| {
            let layout = core.layout(layout)?;
            Ok(layout.separate.then_some(layout.shape.components))
        })
    }

    /// Numbers that an element of a field has; none for a field that does not exist.
    pub fn components_of(&self, field: &str) -> Option<usize> {
        Field::find(field).map(|field| field.components(self.elements))
    }

    /// Posts a batch of events; from any thread.
    ///
    /// # Errors
    /// An unknown channel, a number that is not finite, a run that sleeps.
    pub fn tally(&self, channel: &str, batch: &TallyBatch) -> Result<(), Fault> {
        let start = Instant::now();
        if let Some(why) = self.sleeps.get() {
            return self.note(Fault::err(Status::Asleep, format!("the run sleeps: {why}")));
        }
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
        self.call_together(Core::enter)
    }

    /// Completes all rows that have been entered and hands them to the writer.
    ///
    /// # Errors
    /// A run that sleeps, or falls asleep by what these rows tell; a disk that begins to refuse rows.
    pub fn flush(&self) -> Result<(), Fault> {
        self.call_together(Core::flush_what_is_sure)
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
    // A text that does not seem to end is none that a person wants to read in full.
    let end = given.floor_char_boundary(64);
    let near: Vec<String> = nearest(&given[..end], known.clone())
        .into_iter()
        .map(|name| format!("{name:?}"))
        .collect();
    let hint = if near.is_empty() {
        format!("known: {}", known.collect::<Vec<_>>().join(", "))
    } else {
        format!("did you mean {}?", either(&near))
    };
    let more = if end < given.len() { " and so on" } else { "" };
    let given = &given[..end];
    Fault::new(
        Status::UnknownName,
        format!("there is no {what} {given:?}{more}; {hint}{note}"),
    )
}

fn find_species(name: &str) -> Result<Species, Fault> {
    Species::find(name)
        .ok_or_else(|| unknown("species", name, SPECIES.iter().map(|(_, name)| *name), ""))
}

fn nearest_species(name: &str) -> Option<Species> {
    let name = &name[..name.floor_char_boundary(64)];
    match nearest(name, SPECIES.iter().map(|(_, name)| *name))[..] {
        [only] => Species::find(only),
        _ => None,
    }
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
