//! From combined sums to rows: the columns that every run has, those of the gauges, and the events.

use super::contribution::{Combined, Condition, CostWords, Words};
use super::history::History;
use super::status::{Fault, Status};
use crate::config::{Config, Coordinate};
use crate::gauges::{Active, Entry, Moment, Need, NeedState, Plan, Presence, Reading};
use crate::lend::{SPECIES, Species};
use crate::series::record::{Record, Rows, Value};
use crate::series::schema::{Column, Kind, Table, ValueType};
use crate::series::{Series, SeriesError, Trouble};
use crate::units::constants::{GIGAYEAR, MEGAYEAR, YEAR};
use std::sync::Arc;
use std::time::{Duration, SystemTime, UNIX_EPOCH};

/// Number of the run table.
const RUN: u32 = 0;
/// Number of the table of events.
const EVENTS: u32 = 1;
/// How long a checkpoint waits for the disk.
const DURABLE_PATIENCE: Duration = Duration::from_secs(5);
/// How long closing waits for the disk.
const CLOSE_PATIENCE: Duration = Duration::from_secs(10);

/// What rank 0 remembers of a step until its reduction is complete.
#[derive(Clone, Debug)]
pub(super) struct Context {
    /// The moment, where this rank accepted the clock.
    pub moment: Option<Moment>,
}

/// The tables of every run, before those of the gauges: the run table's first columns, and the events.
pub(super) fn own_tables(config: &Config) -> Vec<Table> {
    let (time_unit, about_time) = describe_time(config);
    let column = |name: &str, unit: &str, kind, value, description: &str| {
        Column::new("clock", name, unit, kind, value, description)
    };
    let mut run = vec![
        column(
            "step",
            "",
            Kind::Key,
            ValueType::Unsigned,
            "the host's step number",
        ),
        column("time", time_unit, Kind::Key, ValueType::Float, &about_time),
        column(
            "step_length",
            time_unit,
            Kind::Instant,
            ValueType::Float,
            "length of the host's step in the same coordinate; 0 when the host did not say",
        ),
        column(
            "steps",
            "",
            Kind::Increment,
            ValueType::Unsigned,
            "steps of the host since the last row",
        ),
        column(
            "checkpoint",
            "",
            Kind::Instant,
            ValueType::Unsigned,
            "1 where the host was about to write a checkpoint",
        ),
    ];
    if config.expansion.cosmology().is_some() {
        run.push(column(
            "scale_factor",
            "",
            Kind::Instant,
            ValueType::Float,
            "scale factor",
        ));
        run.push(column(
            "redshift",
            "",
            Kind::Instant,
            ValueType::Float,
            "redshift",
        ));
        run.push(column(
            "age",
            "Gyr",
            Kind::Instant,
            ValueType::Float,
            "time since the Big Bang",
        ));
    }
    let event = |name: &str, unit: &str, kind, value, description: &str| {
        Column::new("library", name, unit, kind, value, description)
    };
    let events = vec![
        event(
            "step",
            "",
            Kind::Key,
            ValueType::Unsigned,
            "the step that the event belongs to",
        ),
        event("time", time_unit, Kind::Key, ValueType::Float, &about_time),
        event(
            "source",
            "",
            Kind::Key,
            ValueType::Text,
            "what the event concerns: a gauge, a rank, the library",
        ),
        event("text", "", Kind::Instant, ValueType::Text, "what happened"),
    ];
    vec![
        Table {
            name: "run".to_string(),
            description: "one row per measured step".to_string(),
            columns: run,
        },
        Table {
            name: "events".to_string(),
            description: "what the library had to say besides its numbers".to_string(),
            columns: events,
        },
    ]
}

/// Unit and description of the declared time coordinate. A unit without a name of its own is told in words.
fn describe_time(config: &Config) -> (&'static str, String) {
    match config.clockwork.coordinate {
        Coordinate::ScaleFactor => ("", "the host's time coordinate: scale factor".to_string()),
        Coordinate::LogScaleFactor => (
            "",
            "the host's time coordinate: natural logarithm of the scale factor".to_string(),
        ),
        Coordinate::Redshift => ("", "the host's time coordinate: redshift".to_string()),
        Coordinate::Time => {
            let seconds = config.clockwork.unit_seconds();
            let named = [
                ("s", 1.0),
                ("yr", YEAR),
                ("Myr", MEGAYEAR),
                ("Gyr", GIGAYEAR),
            ];
            match named
                .into_iter()
                .find(|(_, unit)| (seconds / unit - 1.0).abs() < 1e-12)
            {
                Some((name, _)) => (name, "the host's time".to_string()),
                None => ("", format!("the host's time, in units of {seconds:e} s")),
            }
        }
    }
}

/// The columns of the run table that follow those of the gauges.
pub(super) fn closing_columns(words: &Words) -> Vec<Column> {
    let column = |name: String, unit: &str, kind, value, description: String| {
        Column::new("library", name, unit, kind, value, description)
    };
    let mut columns: Vec<Column> = words
        .checked
        .iter()
        .map(|(species, field)| {
            column(
                format!("not_finite_{}_{}", species.name(), field.name()),
                "",
                Kind::Increment,
                ValueType::Unsigned,
                format!(
                    "elements of {} left out because their {} is not finite",
                    species.name(),
                    field.name()
                ),
            )
        })
        .collect();
    let unsigned = |name: &str, description: &str| {
        column(
            name.to_string(),
            "",
            Kind::Increment,
            ValueType::Unsigned,
            description.to_string(),
        )
    };
    let seconds = |name: &str, description: &str| {
        column(
            name.to_string(),
            "s",
            Kind::WallClock,
            ValueType::Float,
            description.to_string(),
        )
    };
    columns.extend([
        unsigned(
            "contributions_overflowed",
            "products of finite numbers left out because they overflowed",
        ),
        unsigned(
            "ranks_in_error",
            "ranks on which something of the step could not be measured",
        ),
        seconds(
            "wall_clock",
            "when the row was completed, in seconds since 1970-01-01 00:00 UTC",
        ),
        seconds(
            "host_seconds",
            "wall-clock time since the last row; of all ranks, the largest",
        ),
        seconds(
            "library_seconds",
            "of it, time inside calls of this library; of all ranks, the largest",
        ),
        seconds(
            "wait_seconds",
            "of that, time waiting for other ranks because two earlier rows were still in flight; of all ranks, the \
             largest",
        ),
    ]);
    columns
}

#[derive(Default)]
struct Scratch {
    needs: Vec<(Need, NeedState)>,
    notes: Vec<&'static str>,
    /// Sources and texts.
    events: Vec<(Value, Value)>,
}

/// All that a row is made of, besides the gauges.
#[derive(Clone, Copy)]
pub(super) struct Made<'a> {
    pub config: &'a Config,
    pub plan: &'a Plan,
    pub words: &'a Words,
    pub context: &'a Context,
    pub combined: &'a Combined,
    /// What all ranks contributed.
    pub buffer: &'a [u64],
}

/// Rank 0's pen: makes rows and hands them to the series.
pub(super) struct Scribe {
    series: Series,
    /// Gaps already told as an event: a bit for each reason, by gauge and species.
    told: Vec<[u64; Species::COUNT]>,
    /// Notes of gauges that are written down.
    noted: Vec<(usize, &'static str)>,
    /// What is used anew for every row, kept so that a row allocates nothing.
    scratch: Scratch,
    /// Rows of earlier legs, until the first row of this one.
    history: Option<Arc<History>>,
    /// Rows and values of the last record.
    room: (usize, usize),
    last_step: u64,
    last_time: f64,
    durable: Result<(), SeriesError>,
    complaint: Option<SeriesError>,
    /// Was the disk refusing when it was last asked?
    is_failing: bool,
}

impl Scribe {
    pub fn new(series: Series, history: Arc<History>) -> Scribe {
        Scribe {
            series,
            told: Vec::new(),
            noted: Vec::new(),
            scratch: Scratch::default(),
            history: Some(history),
            room: (0, 0),
            last_step: 0,
            last_time: 0.0,
            durable: Ok(()),
            complaint: None,
            is_failing: false,
        }
    }

    /// Lets the gauges of the first row of a leg take up what earlier legs left.
    fn take_up(&mut self, history: &History, first: &Moment, gauges: &mut [Active]) {
        let Some(state) = history.last_state_before(first.time, first.step_length) else {
            return;
        };
        let last = history.last_row_before(first.time, first.step_length);
        let is_last_row = last.is_some_and(|row| row.time == state.time);
        for (name, words) in read_carry(&state.words) {
            if let Some(active) = gauges
                .iter_mut()
                .find(|active| name_word(&active.name) == name)
            {
                active.gauge.take_up(words, is_last_row);
            }
        }
    }

    /// Turns a completed reduction into rows and hands them over.
    pub fn write(&mut self, made: Made, gauges: &mut [Active]) {
        let combined = made.combined;
        let Some(moment) = moment_of(made.config, made.context, combined) else {
            return;
        };
        (self.last_step, self.last_time) = (moment.step, moment.time);
        let is_first = self.history.is_some();
        if let Some(history) = self.history.take() {
            self.take_up(&history, &moment, gauges);
        }
        let mut record = self.series.spare();
        record.carry.clear();
        record.step = moment.step;
        record.time = moment.time;
        record.step_length = moment.step_length;
        // A new record gets the memory that the last one needed at once.
        record.rows.reserve(self.room.0, self.room.1);
        self.put_rows(&mut record.rows, made, &moment, gauges);
        self.room = (record.rows.len(), record.rows.value_count());
        if is_first {
            self.series.stock(self.room.0, self.room.1);
        }
        if combined.host.checkpoint || is_first {
            write_carry(gauges, &mut record.carry);
        }
        if combined.host.checkpoint {
            self.durable = self.series.enter_durably(record, DURABLE_PATIENCE);
        } else if let Err(error) = self.series.enter(record) {
            self.complaint = Some(error);
        }
    }

    fn put_rows(&mut self, rows: &mut Rows, made: Made, moment: &Moment, gauges: &mut [Active]) {
        let Made {
            plan,
            words,
            combined,
            buffer,
            ..
        } = made;
        self.told.resize(gauges.len(), Default::default());
        let mut scratch = std::mem::take(&mut self.scratch);
        rows.clear();
        begin_run_row(rows, made, moment);
        let reduced = words.packing.reduced(&words.layout, buffer);
        let mut states = words.needs(buffer);
        for (index, active) in gauges.iter_mut().enumerate() {
            scratch.needs.clear();
            let needs = plan.needs[index].iter().copied();
            scratch.needs.extend(needs.zip(states.by_ref()));
            let reading = Reading {
                reduced,
                needs: &scratch.needs,
            };
            let (first, number) = plan.columns[index];
            let mut entry = Entry::new(rows, first..first + number, &mut scratch.notes);
            active.gauge.enter(&reading, moment, &mut entry);
            self.tell_gaps(index, &active.name, &reading, &mut scratch.events);
            for note in scratch.notes.drain(..) {
                if !self.noted.contains(&(index, note)) {
                    self.noted.push((index, note));
                    let event = (active.name.as_str().into(), note.into());
                    scratch.events.push(event);
                }
            }
        }
        if let Some(said) = &combined.said {
            let source = format!("rank {}", said.rank);
            let event = (source.as_str().into(), said.text.as_str().into());
            scratch.events.push(event);
        }
        for (source, text) in scratch.events.drain(..) {
            put_event(rows, moment.step, moment.time, source, text);
        }
        self.scratch = scratch;
    }

    /// Says once which fields a gauge does without.
    fn tell_gaps(
        &mut self,
        index: usize,
        name: &str,
        reading: &Reading,
        events: &mut Vec<(Value, Value)>,
    ) {
        for (species, species_name) in SPECIES {
            let is_needed = |(need, _): &(Need, NeedState)| need.species == species;
            if !reading.needs.iter().any(is_needed) {
                continue;
            }
            let presence = reading.presence(species);
            let reason = match presence {
                Presence::Measured => continue,
                Presence::NotLent => 1,
                Presence::Lacking(field) => 2 << field as u64,
            };
            let told = &mut self.told[index][species as usize];
            if *told & reason != 0 {
                continue;
            }
            *told |= reason;
            let text = match presence {
                Presence::Lacking(field) => format!(
                    "{species_name} {} was not lent, or {species_name} could not be lent, on a rank that has any; \
                     what is measured of it is null",
                    field.name()
                ),
                _ => format!("{species_name} is not lent; what is measured of it is null"),
            };
            events.push((name.into(), text.as_str().into()));
        }
    }

    /// Notes in the series why the run fell asleep.
    pub fn note_sleep(&mut self, why: &str) {
        let (step, time) = (self.last_step, self.last_time);
        let text = format!("the run fell asleep: {why}");
        let mut rows = Rows::default();
        let (source, text) = ("library".into(), text.as_str().into());
        put_event(&mut rows, step, time, source, text);
        let record = Record {
            step,
            time,
            rows,
            ..Record::default()
        };
        if let Err(error) = self.series.enter(record) {
            self.complaint = Some(error);
        }
    }

    /// Is the last checkpoint's row safe on disk?
    pub fn make_durable(&mut self) -> Result<(), Fault> {
        std::mem::replace(&mut self.durable, Ok(())).map_err(|error| fault(&error))
    }

    /// What the disk refused since this was last asked; while it goes on refusing, that is told once.
    pub fn complain_once(&mut self) -> Result<(), Fault> {
        if let Some(error) = self.complaint.take() {
            return Err(fault(&error));
        }
        let was_failing = std::mem::replace(&mut self.is_failing, self.series.is_failing());
        if was_failing || !self.is_failing {
            return Ok(());
        }
        let status = self.series.status();
        let text = format!(
            "the disk refuses rows ({}); {} wait in memory and are written as soon as it allows",
            status.last_error.as_deref().unwrap_or("unknown"),
            status.rows_waiting
        );
        Fault::err(Status::Disk, text)
    }

    pub fn written_and_lost(&self) -> (u64, u64) {
        let status = self.series.status();
        (status.records_written, status.records_missing)
    }

    pub fn close(self) -> Result<(), Fault> {
        self.series
            .close(CLOSE_PATIENCE)
            .map_err(|error| fault(&error))
    }
}

/// A gauge's name as one word, by which it finds its state again.
fn name_word(name: &str) -> u64 {
    u64::from(crc32c::crc32c(name.as_bytes()))
}

/// Appends what every gauge must remember: its name, the number of its words, the words.
fn write_carry(gauges: &[Active], into: &mut Vec<u64>) {
    for active in gauges {
        let start = into.len();
        into.extend([name_word(&active.name), 0]);
        active.gauge.carry(into);
        match into.len() - start - 2 {
            0 => into.truncate(start),
            words => into[start + 1] = words as u64,
        }
    }
}

/// Splits carried words into gauges; stops where they make no sense.
fn read_carry(mut words: &[u64]) -> Vec<(u64, &[u64])> {
    let mut parts = Vec::new();
    while let [name, length, rest @ ..] = words {
        let Some((own, rest)) = usize::try_from(*length)
            .ok()
            .and_then(|length| rest.split_at_checked(length))
        else {
            break;
        };
        parts.push((*name, own));
        words = rest;
    }
    parts
}

/// The status and text that a host gets for an error of the series.
pub(super) fn fault(error: &SeriesError) -> Fault {
    let status = match error.trouble {
        Trouble::NotDurable => Status::NotDurable,
        Trouble::Misfit => Status::Internal,
        _ => Status::Disk,
    };
    Fault::new(status, error.to_string())
}

/// The moment of a row: this rank's own, or what the others' clocks say where this rank refused its own.
fn moment_of(config: &Config, context: &Context, combined: &Combined) -> Option<Moment> {
    let (step, _) = combined.steps?;
    let mut moment = match context.moment {
        Some(moment) => moment,
        None => {
            let (time, _) = combined.times?;
            super::core::moment_without_history(config, step, time).ok()?
        }
    };
    moment.step_length = combined.host.step_length;
    let in_doubt = combined.ranks(Condition::InDoubt);
    if combined.without_interval + in_doubt > 0 {
        // Some rank could not tell what was born since the last row.
        moment.interval = None;
    }
    Some(moment)
}

/// The run table's row, with nulls where the gauges' columns are.
fn begin_run_row(rows: &mut Rows, made: Made, moment: &Moment) {
    let (combined, config) = (made.combined, made.config);
    rows.begin(RUN);
    rows.put(moment.step);
    rows.put(moment.time);
    rows.put(moment.step_length);
    rows.put(combined.host.steps);
    rows.put(u64::from(combined.host.checkpoint));
    if config.expansion.cosmology().is_some() {
        rows.put(moment.scale_factor);
        rows.put(moment.redshift);
        rows.put(moment.age / GIGAYEAR);
    }
    rows.put_nulls(made.plan.columns.iter().map(|(_, number)| number).sum());
    for &count in made.words.not_finite(made.buffer) {
        rows.put(count);
    }
    rows.put(combined.left_out);
    rows.put(combined.ranks(Condition::InError) + combined.ranks(Condition::InDoubt));
    let since = SystemTime::now().duration_since(UNIX_EPOCH);
    rows.put(since.map_or(0.0, |since| since.as_secs_f64()));
    let CostWords {
        host,
        library,
        waiting,
    } = combined.cost;
    for nanoseconds in [host, library, waiting] {
        rows.put(nanoseconds as f64 * 1e-9);
    }
}

fn put_event(rows: &mut Rows, step: u64, time: f64, source: Value, text: Value) {
    rows.begin(EVENTS);
    rows.put(step);
    rows.put(time);
    rows.put(source);
    rows.put(text);
}
