//! The state of a run and its calls, one at a time.

use super::clock::Clock;
use super::contribution::{Combined, Condition, StepWords, Words};
use super::history::History;
use super::lock;
use super::rows::{Context, Scribe};
use super::status::{Fault, Status};
use crate::config::{Config, Tick};
use crate::gauges::{Active, Factors, Interval, Moment, Plan, TallyBook};
use crate::lend::{ArrayShape, Field, Lent, Lot, SPECIES, Shape, Species, View};
use crate::sweep::Sweep;
use crate::team::{Team, TeamError, Ticket};
use std::collections::VecDeque;
use std::sync::Mutex;
use std::time::{Duration, Instant};

/// Reductions in flight before the oldest is waited for.
const IN_FLIGHT: usize = 2;
/// How long a rank waits for the others within a step before it gives up the run (not the host).
const STEP_PATIENCE: Duration = Duration::from_secs(600);
/// How long `close` waits for the others.
const CLOSE_PATIENCE: Duration = Duration::from_secs(30);
/// How often `close` tries to meet the others before it gives up.
const CLOSE_ROUNDS: usize = 8;

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
enum Stage {
    /// After open or enter.
    Between,
    /// After a mark that was accepted.
    Marked {
        clock: Clock,
        moment: Option<Moment>,
    },
    /// After a mark that was refused; the step number where it could be read.
    MarkedInError { step: Option<u64> },
}

/// A contribution that has been started.
struct Flight {
    ticket: Ticket,
    context: Context,
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
    pub history: History,
}

/// The state of a run.
pub(super) struct Core {
    team: Box<dyn Team>,
    config: Config,
    plan: Plan,
    gauges: Vec<Active>,
    sweep: Sweep,
    words: Words,
    scribe: Option<Scribe>,
    stage: Stage,
    lots: [Lot; Species::COUNT],
    layouts: Vec<(Species, Field, ArrayShape)>,
    /// Rows of earlier legs, until the first row of this one.
    history: Option<History>,
    /// The last clock that was accepted.
    last_clock: Option<Clock>,
    /// The clock of the last row of this leg, with ln a; none also after a step in error.
    last_row: Option<(Clock, f64)>,
    flights: VecDeque<Flight>,
    spare: Vec<Vec<u64>>,
    /// What went wrong on this rank since its last contribution.
    trouble: Option<Fault>,
    /// A fault on this rank that the others do not know of yet.
    asleep_alone: Option<String>,
    /// Why every rank sleeps.
    asleep: Option<String>,
    closed: bool,
    steps_since_row: u64,
    rows: u64,
    /// Time in the library since the last contribution, and when that was.
    spent: u64,
    since: Instant,
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
        } = parts;
        Core {
            team,
            config,
            plan,
            gauges,
            sweep,
            words,
            scribe,
            stage: Stage::Between,
            lots: Default::default(),
            layouts: Vec::new(),
            history: Some(history),
            last_clock: None,
            last_row: None,
            flights: VecDeque::with_capacity(IN_FLIGHT + 1),
            spare: Vec::new(),
            trouble: None,
            asleep_alone: None,
            asleep: None,
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
            written,
            lost,
        )
    }

    /// Keeps the first trouble since the last contribution for the row's event.
    fn keep(&mut self, fault: Fault) -> Fault {
        if self.trouble.is_none() {
            self.trouble = Some(fault.clone());
        }
        fault
    }

    // ---- the clock ----------------------------------------------------------------------------------

    fn moment(&self, clock: &Clock) -> Result<(Moment, f64), Fault> {
        clock.check(self.last_clock.as_ref())?;
        let clockwork = &self.config.clockwork;
        let mut moment =
            moment_without_history(&self.config, clock.step, clock.time).map_err(|text| {
                Fault::new(
                    Status::BadClock,
                    format!("clock of step {}: {text}", clock.step),
                )
            })?;
        moment.step_length = clock.step_length;
        moment.interval = self.last_row.and_then(|(last, _)| {
            Some(Interval {
                seconds: clockwork.elapsed_seconds(last.time, clock.time).ok()?,
                births: clockwork.birth_window(Some(last.time), clock.time).ok()?,
            })
        });
        Ok((moment, moment.scale_factor.ln()))
    }

    fn due(&self, clock: &Clock, ln_a: f64) -> bool {
        let last = self.last_row.as_ref().map(|(last, ln_a)| Tick {
            step: last.step,
            time: last.time,
            ln_a: *ln_a,
        });
        let now = Tick {
            step: clock.step,
            time: clock.time,
            ln_a,
        };
        clock.checkpoint || self.config.cadence.is_due(last, now, clock.synchronised)
    }

    pub fn is_due(&mut self, clock: &Clock) -> Result<bool, Fault> {
        let (_, ln_a) = self.moment(clock)?;
        Ok(self.due(clock, ln_a))
    }

    pub fn mark(&mut self, clock: Result<Clock, Fault>) -> Result<(), Fault> {
        self.poll();
        self.awake_together()?;
        if self.asleep_alone.is_some() {
            // The fault may have struck between mark and enter.
            self.stage = Stage::Between;
        }
        if let Stage::Marked { clock: marked, .. } = &self.stage {
            let text = format!(
                "step {} was marked and not yet entered; call limno_enter before the next limno_mark. The step stays \
                 marked",
                marked.step
            );
            return Fault::err(Status::BadOrder, text);
        }
        self.steps_since_row += 1;
        if let (Some(history), Ok(clock)) = (&self.history, &clock) {
            self.last_row = history
                .last_row_before(clock.time, clock.step_length)
                .and_then(|row| {
                    let clock = Clock {
                        step: row.step,
                        time: row.time,
                        step_length: row.step_length,
                        synchronised: true,
                        checkpoint: false,
                    };
                    let instant = self.config.clockwork.moment(row.time).ok()?;
                    Some((clock, instant.ln_a))
                });
        }
        let step = clock.as_ref().ok().map(|clock| clock.step);
        match clock.and_then(|clock| Ok((clock, self.moment(&clock)?))) {
            Ok((clock, (moment, ln_a))) => {
                let due = self.due(&clock, ln_a);
                self.last_clock = Some(clock);
                self.stage = Stage::Marked {
                    clock,
                    moment: due.then_some(moment),
                };
                self.awake()
            }
            Err(fault) => {
                self.stage = Stage::MarkedInError { step };
                Err(self.keep(fault))
            }
        }
    }

    /// Is the marked step measured? Without a mark that is an error.
    pub fn is_measuring(&mut self) -> Result<bool, Fault> {
        match &self.stage {
            Stage::Marked { moment, .. } => Ok(moment.is_some()),
            Stage::MarkedInError { .. } => Fault::err(
                Status::BadOrder,
                "the clock of this step was refused, so nothing of it can be measured; limno_enter must be called all the \
                 same",
            ),
            Stage::Between => Fault::err(
                Status::BadOrder,
                "no step is marked; call limno_mark with its clock first".to_string(),
            ),
        }
    }

    // ---- lending and sounding -----------------------------------------------------------------------

    /// Notes that something of a species could not be lent, so that nothing is measured of half of it.
    pub fn refuse(&mut self, species: Option<Species>, fault: Fault) -> Fault {
        if matches!(
            self.stage,
            Stage::Marked {
                moment: Some(_),
                ..
            }
        ) {
            // Of an unknown species whatever was meant is missing, and only the host knows what it was.
            if let Some(species) = species {
                self.lots[species as usize].refuse();
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
        let bad = |text: String| Fault::new(Status::BadArgument, text);
        self.check_shape(species, field, shape)?;
        let view = View::new(shape, count, lent)
            .map_err(|error| bad(format!("{} {}: {error}", species.name(), field.name())))?;
        self.lots[species as usize]
            .put(species, field, view)
            .map_err(bad)
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
        self.layouts.push((species, field, shape));
        Ok(number)
    }

    pub fn layout(&self, number: i32) -> Result<(Species, Field, ArrayShape), Fault> {
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
                .sound(species, lot, &self.gauges, &self.plan, moment);
        }
        lot.let_go();
        Ok(())
    }

    // ---- entering -----------------------------------------------------------------------------------

    pub fn enter(&mut self, tallies: &Mutex<TallyBook>) -> Result<(), Fault> {
        match std::mem::replace(&mut self.stage, Stage::Between) {
            Stage::Marked {
                clock,
                moment: None,
            } => {
                self.last_clock = Some(clock);
                self.poll();
                self.awake()
            }
            Stage::Marked {
                clock,
                moment: Some(moment),
            } => {
                self.stage = Stage::Marked {
                    clock,
                    moment: Some(moment),
                };
                for (species, _) in SPECIES {
                    self.sound(species)?;
                }
                self.stage = Stage::Between;
                self.enter_measured(clock, moment, tallies)
            }
            Stage::MarkedInError { step } => {
                self.lots.iter_mut().for_each(Lot::let_go);
                self.enter_in_error(step)
            }
            Stage::Between => {
                let text = "no step is marked; every limno_enter follows a limno_mark".to_string();
                let fault = self.keep(Fault::new(Status::BadOrder, text));
                if self.team.size() > 1 {
                    // The others may be entering a step: they must not wait for this rank.
                    self.enter_in_error(None)?;
                }
                Err(fault)
            }
        }
    }

    fn enter_measured(
        &mut self,
        clock: Clock,
        moment: Moment,
        tallies: &Mutex<TallyBook>,
    ) -> Result<(), Fault> {
        let left_out = self.left_out();
        if let Some(fault) = &left_out {
            self.keep(fault.clone());
        }
        {
            let mut book = lock(tallies);
            for active in &self.gauges {
                active.gauge.take_tallies(&book, self.sweep.own_sample());
            }
            book.clear();
        }
        if let (Some(history), Some(scribe)) = (self.history.take(), &mut self.scribe) {
            scribe.take_up(&history, &clock, &mut self.gauges);
        }
        let has_interval = self.last_row.is_some();
        let words = StepWords {
            step: clock.step,
            time: Some(clock.time),
            has_interval,
        };
        let context = Context {
            clock: Some(clock),
            moment: Some(moment),
            steps: self.steps_since_row,
        };
        self.last_row = Some((clock, moment.scale_factor.ln()));
        self.steps_since_row = 0;
        let condition = match &self.trouble {
            Some(fault) if fault.status != Status::LeftOut => Condition::InError,
            _ => Condition::Well,
        };
        self.contribute(condition, Some(words), context)?;
        if clock.checkpoint {
            self.flush(STEP_PATIENCE)?;
            if let Some(scribe) = &mut self.scribe {
                scribe.make_durable()?;
            }
        } else {
            self.poll();
        }
        self.awake()?;
        match left_out {
            Some(fault) => Err(fault),
            None => self.scribe.as_mut().map_or(Ok(()), Scribe::complain_once),
        }
    }

    /// Numbers that were not finite on this rank, named.
    fn left_out(&self) -> Option<Fault> {
        let mut named = Vec::new();
        for (species, field) in &self.words.checked {
            let index = crate::sweep::not_finite_index(*species, *field);
            let count: u64 = self
                .sweep
                .workers()
                .iter()
                .map(|worker| worker.not_finite[index])
                .sum();
            if count > 0 {
                named.push(format!("{count} of {} {}", species.name(), field.name()));
            }
        }
        let overflowed: u64 = self
            .sweep
            .workers()
            .iter()
            .map(|worker| worker.sample.left_out())
            .sum();
        if overflowed > 0 {
            named.push(format!("{overflowed} contributions that overflowed"));
        }
        (!named.is_empty()).then(|| {
            Fault::new(
                Status::LeftOut,
                format!("not finite and left out of the row: {}", named.join(", ")),
            )
        })
    }

    /// A step whose clock this rank could not accept: it still takes part, so that the others do not wait.
    fn enter_in_error(&mut self, step: Option<u64>) -> Result<(), Fault> {
        self.sweep.clear();
        for state in self.sweep.needs.iter_mut().flatten() {
            state.soundings = 1;
            state.without = 1;
        }
        self.last_row = None;
        let words = step.map(|step| StepWords {
            step,
            time: None,
            has_interval: false,
        });
        let context = Context {
            clock: None,
            moment: None,
            steps: std::mem::take(&mut self.steps_since_row),
        };
        self.contribute(Condition::InError, words, context)?;
        self.poll();
        self.awake()
    }

    /// Starts this rank's contribution to a reduction.
    fn contribute(
        &mut self,
        condition: Condition,
        step: Option<StepWords>,
        context: Context,
    ) -> Result<(), Fault> {
        while self.flights.len() >= IN_FLIGHT {
            self.absorb_oldest(STEP_PATIENCE)?;
        }
        let condition = if self.asleep_alone.is_some() {
            Condition::Asleep
        } else {
            condition
        };
        let mut buffer = self.spare.pop().unwrap_or_default();
        self.words.layout.clear(&mut buffer);
        let left_out = self
            .sweep
            .workers()
            .iter()
            .map(|worker| worker.sample.left_out())
            .sum();
        self.words.put_condition(&mut buffer, condition, left_out);
        if let Some(words) = step {
            self.words.put_step(&mut buffer, words);
        }
        let host = self.since.elapsed().as_nanos() as u64;
        self.words.put_cost(&mut buffer, self.spent.min(host), host);
        self.spent = 0;
        self.since = Instant::now();
        self.words.put_needs(&mut buffer, &self.sweep.needs);
        for worker in self.sweep.workers() {
            self.words.add_not_finite(&mut buffer, &worker.not_finite);
            self.words
                .packing
                .add(&self.words.layout, &worker.sample, &mut buffer);
        }
        let rank = self.team.rank();
        if let Some(why) = &self.asleep_alone {
            self.words
                .put_text(&mut buffer, true, rank, Status::Internal, why);
        } else if let Some(fault) = self.trouble.take() {
            self.words
                .put_text(&mut buffer, false, rank, fault.status, &fault.text);
        }
        self.sweep.clear();
        match self.team.start(buffer) {
            Ok(ticket) => {
                self.flights.push_back(Flight { ticket, context });
                Ok(())
            }
            Err(error) => Err(self.lose_team(&error)),
        }
    }

    /// Takes in what has completed, without waiting.
    fn poll(&mut self) {
        while let Some(flight) = self.flights.front() {
            match self.team.is_complete(flight.ticket) {
                Ok(true) if self.asleep.is_none() => {
                    if self.absorb_oldest(STEP_PATIENCE).is_err() {
                        return;
                    }
                }
                Ok(_) => return,
                Err(error) => {
                    self.lose_team(&error);
                    return;
                }
            }
        }
    }

    fn flush(&mut self, patience: Duration) -> Result<(), Fault> {
        while !self.flights.is_empty() {
            self.absorb_oldest(patience)?;
        }
        Ok(())
    }

    /// Waits for the oldest reduction and draws the conclusions, which are the same on every rank.
    fn absorb_oldest(&mut self, patience: Duration) -> Result<(), Fault> {
        let Some(combined) = self.receive_oldest(patience)? else {
            return Ok(());
        };
        let (combined, context, buffer) = combined;
        if let Some(why) = combined.reason_to_sleep() {
            return Err(self.fall_asleep(why));
        }
        if combined.timed > 0 {
            self.rows += 1;
        }
        if let Some(scribe) = &mut self.scribe {
            let reduced = self.words.packing.reduced(&self.words.layout, &buffer);
            scribe.write(
                &self.config,
                &self.plan,
                &mut self.gauges,
                &context,
                &combined,
                reduced,
            );
        }
        self.spare.push(buffer);
        Ok(())
    }

    /// Waits for the oldest reduction.
    fn receive_oldest(
        &mut self,
        patience: Duration,
    ) -> Result<Option<(Combined, Context, Vec<u64>)>, Fault> {
        let Some(flight) = self.flights.front() else {
            return Ok(None);
        };
        let buffer = match self.team.finish(flight.ticket, patience) {
            Ok(buffer) => buffer,
            Err(error) => return Err(self.lose_team(&error)),
        };
        let Some(flight) = self.flights.pop_front() else {
            return Ok(None);
        };
        if !self.words.layout.agrees(&buffer) {
            let why =
                "the ranks' buffers differ in shape; do all run the same library?".to_string();
            return Err(self.fall_asleep(why));
        }
        Ok(Some((self.words.read(&buffer), flight.context, buffer)))
    }

    // ---- sleeping and closing -----------------------------------------------------------------------

    /// A fault of this rank alone: the others hear of it with the next contribution.
    pub fn fall_asleep_alone(&mut self, why: &str) -> Fault {
        self.asleep_alone.get_or_insert_with(|| why.to_string());
        self.lots.iter_mut().for_each(Lot::let_go);
        if self.team.size() == 1 {
            return self.fall_asleep(why.to_string());
        }
        Fault::new(Status::Internal, format!("the run falls asleep: {why}"))
    }

    /// Every rank knows, and sleeps.
    fn fall_asleep(&mut self, why: String) -> Fault {
        let fault = Fault::new(Status::Asleep, format!("the run sleeps: {why}"));
        if let Some(scribe) = &mut self.scribe {
            scribe.note_sleep(&why);
        }
        self.lots.iter_mut().for_each(Lot::let_go);
        self.asleep.get_or_insert(why);
        fault
    }

    /// Nothing further can be sent or received.
    fn lose_team(&mut self, error: &TeamError) -> Fault {
        let why = match error {
            TeamError::Failed(text) => format!("the reduction failed: {text}"),
            TeamError::Overdue => format!(
                "the other ranks did not take part in a reduction for {} s; does every rank call limno_enter for the same \
                 steps?",
                STEP_PATIENCE.as_secs()
            ),
        };
        self.fall_asleep(why)
    }

    /// Completes what is in flight and meets the other ranks once more, so that none is left waiting: each rank
    /// keeps contributing that it closes until a reduction in which all say so.
    pub fn close(&mut self) -> Result<(), Fault> {
        if self.closed {
            return Fault::err(Status::Closed, "the run is closed");
        }
        self.closed = true;
        let mut result = Ok(());
        if self.team.is_usable() {
            result = self.meet_to_close();
        } else if self.asleep.is_none() {
            result = Fault::err(
                Status::BadMpi,
                "MPI can no longer be called; rows in flight are lost",
            );
        }
        if self.asleep.is_some() && result.is_ok() {
            result = self.awake();
        }
        if let Some(scribe) = self.scribe.take() {
            let closed = scribe.close();
            if result.is_ok() {
                result = closed;
            }
        }
        self.team.leave();
        result
    }

    fn meet_to_close(&mut self) -> Result<(), Fault> {
        if self.team.size() == 1 {
            return self.flush(CLOSE_PATIENCE);
        }
        for _ in 0..CLOSE_ROUNDS {
            self.sweep.clear();
            let mut buffer = self.spare.pop().unwrap_or_default();
            self.words.layout.clear(&mut buffer);
            self.words.put_condition(&mut buffer, Condition::Closing, 0);
            let context = Context {
                clock: None,
                moment: None,
                steps: 0,
            };
            match self.team.start(buffer) {
                Ok(ticket) => self.flights.push_back(Flight { ticket, context }),
                Err(error) => return Err(self.lose_team(&error)),
            }
            while self.flights.len() > 1 {
                self.absorb_while_closing()?;
            }
            if self.absorb_while_closing()? {
                return Ok(());
            }
        }
        Fault::err(Status::Asleep, "the ranks did not close the run together")
    }

    /// As `absorb_oldest`, but goes on when asleep, and tells whether everyone was closing.
    fn absorb_while_closing(&mut self) -> Result<bool, Fault> {
        let Some((combined, context, buffer)) = self.receive_oldest(CLOSE_PATIENCE)? else {
            return Ok(false);
        };
        if combined.ranks(Condition::Closing) == u64::from(self.team.size()) {
            return Ok(true);
        }
        if let Some(why) = combined.reason_to_sleep() {
            self.fall_asleep(why);
        } else if self.asleep.is_none() {
            if combined.timed > 0 {
                self.rows += 1;
            }
            if let Some(scribe) = &mut self.scribe {
                let reduced = self.words.packing.reduced(&self.words.layout, &buffer);
                scribe.write(
                    &self.config,
                    &self.plan,
                    &mut self.gauges,
                    &context,
                    &combined,
                    reduced,
                );
            }
        }
        self.spare.push(buffer);
        Ok(false)
    }
}
