//! The end of a step: this rank's contribution, and taking in what all have contributed.
//!
//! Every rank takes part in every reduction, also when it is in error. One that does not know which step the
//! others are at, because its host entered without a mark or gave a clock that could not be read, contributes in
//! doubt: its part stands for whichever step the others contribute to. Before its next part it waits to learn
//! which step that was: the others come to that step without waiting for this rank. If one of them does not,
//! because its own host has gone astray, the wait is given up after a while and the next part is in doubt too.

use super::clock::Clock;
use super::contribution::{Combined, Condition, HostWords, StepWords};
use super::core::{Core, Stage};
use super::lock;
use super::marking::Refused;
use super::rows::{Context, Scribe};
use super::status::{Fault, Status};
use crate::config::Tick;
use crate::gauges::{Moment, TallyBook};
use crate::team::{TeamError, Ticket};
use std::time::{Duration, Instant};

/// Reductions in flight before the oldest is waited for.
pub(super) const IN_FLIGHT: usize = 2;
/// Contributions of a rank in error in flight before it leaves out further ones.
const IN_DOUBT: usize = 64;
/// How long a rank waits for the others within a step before it gives up the run (not the host).
const STEP_PATIENCE: Duration = Duration::from_secs(600);
/// How long a rank in doubt waits to learn at which step the others are.
const DOUBT_PATIENCE: Duration = Duration::from_secs(20);

/// A contribution that has been started.
pub(super) struct Flight {
    pub ticket: Ticket,
    pub context: Context,
    /// Set when this rank was in error: what it handed over, to be taken back if no row comes of it.
    pub doubt: Option<Doubt>,
}

/// What a rank in error has handed over with its contribution.
pub(super) struct Doubt {
    pub steps: u64,
    pub tallies: TallyBook,
}

/// A reduction that is complete.
pub(super) struct Received {
    pub combined: Combined,
    pub flight: Flight,
    pub buffer: Vec<u64>,
}

/// What it means that the others have not taken part in time.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Overdue {
    IsAFault,
    IsNoFault,
}

/// What a rank contributes besides its sums.
struct Contribution {
    condition: Condition,
    step: Option<StepWords>,
    host: HostWords,
    moment: Option<Moment>,
}

impl Core {
    pub fn enter(&mut self) -> Result<(), Fault> {
        match std::mem::replace(&mut self.stage, Stage::Between) {
            Stage::Marked {
                clock,
                moment: None,
            } => {
                self.let_go();
                self.poll();
                self.awake()?;
                self.tell_stood_in(&clock)
            }
            Stage::Marked {
                clock,
                moment: Some(moment),
            } => {
                self.stage = Stage::Marked {
                    clock,
                    moment: Some(moment),
                };
                self.sound_all()?;
                self.stage = Stage::Between;
                self.let_go();
                self.enter_measured(clock, moment)
            }
            Stage::MarkedInError(refused) => {
                self.let_go();
                self.enter_in_error(refused)
            }
            Stage::Between => {
                let text = "no step is marked; every limno_enter follows a limno_mark";
                let fault = self.keep(Fault::new(Status::BadOrder, text));
                if self.team.size() > 1 {
                    // The others may be entering a step: they must not wait for this rank.
                    self.contribute_in_error(Condition::InDoubt, &Refused::default())?;
                }
                Err(fault)
            }
        }
    }

    fn enter_measured(&mut self, clock: Clock, moment: Moment) -> Result<(), Fault> {
        let ln_a = moment.scale_factor.ln();
        let is_open = |core: &Core| core.due(&clock, ln_a) && !core.stood_in.contains(&clock.step);
        if !self.settle_doubts(is_open)? {
            return self.enter_in_doubt(&clock);
        }
        if self.stood_in.contains(&clock.step) {
            self.sweep.clear();
            self.poll();
            return self.tell_stood_in(&clock);
        }
        if !self.due(&clock, ln_a) {
            // Only after a doubt: the step before was measured after all, so this one is not.
            self.sweep.clear();
            return self.awake();
        }
        let left_out = self.left_out();
        if let Some(fault) = &left_out {
            self.keep(fault.clone());
        }
        let condition = match &self.trouble {
            Some(fault) if fault.status != Status::LeftOut => Condition::InError,
            _ => Condition::Well,
        };
        let contribution = Contribution {
            condition,
            step: Some(StepWords {
                step: clock.step,
                time: Some(clock.time),
                has_interval: moment.interval.is_some(),
            }),
            host: HostWords {
                steps: std::mem::take(&mut self.steps_since_row),
                checkpoint: clock.checkpoint,
                step_length: clock.step_length,
            },
            moment: Some(moment),
        };
        self.history = None;
        self.last_row = Some(clock.time);
        self.last_tick = Some(Tick {
            step: clock.step,
            time: clock.time,
            ln_a,
        });
        self.contribute(contribution)?;
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

    /// A step that this rank has measured, and cannot tell whether its part of it was given before.
    fn enter_in_doubt(&mut self, clock: &Clock) -> Result<(), Fault> {
        let text = format!(
            "after an error in a step before, this rank waited {} s in vain to learn at which step the others are; what \
             it lent for step {} is not in its row",
            DOUBT_PATIENCE.as_secs(),
            clock.step
        );
        let fault = self.keep(Fault::new(Status::BadOrder, text));
        let refused = Refused {
            step: Some(clock.step),
            synchronised: Some(clock.synchronised),
            checkpoint: Some(clock.checkpoint),
        };
        self.contribute_in_error(Condition::InDoubt, &refused)?;
        Err(fault)
    }

    /// An error when this rank's part of the step was given before, by a contribution in doubt.
    fn tell_stood_in(&mut self, clock: &Clock) -> Result<(), Fault> {
        if !self.stood_in.contains(&clock.step) {
            return Ok(());
        }
        self.last_row = Some(clock.time);
        self.steps_since_row = 0;
        let text = format!(
            "the row of step {} was made without what this rank lent: a limno_enter before it, without a clock that \
             could be used, took its place; what is incomplete is null",
            clock.step
        );
        Fault::err(Status::BadOrder, text)
    }

    /// Numbers that were not finite on this rank, named.
    fn left_out(&mut self) -> Option<Fault> {
        let overflowed = self.overflowed();
        let mut total = overflowed;
        self.sweep
            .each_worker(|worker| total += worker.not_finite.iter().sum::<u64>());
        if total == 0 {
            return None;
        }
        let mut named = Vec::new();
        for (species, field) in &self.words.checked {
            let index = crate::sweep::not_finite_index(*species, *field);
            let mut count = 0;
            self.sweep
                .each_worker(|worker| count += worker.not_finite[index]);
            if count > 0 {
                named.push(format!("{count} of {} {}", species.name(), field.name()));
            }
        }
        if overflowed > 0 {
            named.push(format!("{overflowed} contributions that overflowed"));
        }
        Some(Fault::new(
            Status::LeftOut,
            format!("not finite and left out of the row: {}", named.join(", ")),
        ))
    }

    fn overflowed(&mut self) -> u64 {
        let mut overflowed = 0;
        self.sweep
            .each_worker(|worker| overflowed += worker.sample.left_out());
        overflowed
    }

    /// A step whose clock this rank could not accept: it still takes part, so that the others do not wait.
    pub(super) fn enter_in_error(&mut self, refused: Refused) -> Result<(), Fault> {
        if self.team.size() == 1 {
            // There is no row to take part in; what was tallied waits for the next.
            return self.awake();
        }
        // Without a step number there is no telling when a wait has told enough.
        let step = refused.step;
        let stood_in = |core: &Core| step.is_some_and(|step| core.stood_in.contains(&step));
        self.settle_doubts(|core: &Core| {
            step.is_some() && core.due_in_error(&refused) == Some(true) && !stood_in(core)
        })?;
        let condition = match self.due_in_error(&refused) {
            Some(false) => return self.awake(),
            Some(true) if stood_in(self) => return self.awake(),
            Some(true) if !self.is_in_doubt() => Condition::InError,
            _ => Condition::InDoubt,
        };
        self.contribute_in_error(condition, &refused)?;
        if condition == Condition::InError
            && refused.checkpoint == Some(true)
            && self.scribe.is_some()
        {
            self.flush(STEP_PATIENCE)?;
            if let Some(scribe) = &mut self.scribe {
                scribe.make_durable()?;
            }
        }
        self.awake()
    }

    fn contribute_in_error(
        &mut self,
        condition: Condition,
        refused: &Refused,
    ) -> Result<(), Fault> {
        self.sweep.clear();
        if self.flights.len() >= IN_DOUBT {
            // So far ahead of the others that they will not miss this part for a long time.
            return self.awake();
        }
        for state in self.sweep.needs.iter_mut().flatten() {
            state.soundings = 1;
            state.without = 1;
            // An optional field is missed only where another rank has it; here it is.
            state.with = 1;
        }
        self.history = None;
        self.last_row = None;
        let step = refused
            .step
            .filter(|_| condition == Condition::InError)
            .map(|step| StepWords {
                step,
                time: None,
                has_interval: false,
            });
        let host = HostWords {
            steps: std::mem::take(&mut self.steps_since_row),
            checkpoint: refused.checkpoint.unwrap_or(false),
            step_length: 0.0,
        };
        self.contribute(Contribution {
            condition,
            step,
            host,
            moment: None,
        })?;
        self.poll();
        self.awake()
    }

    /// Starts this rank's part of a reduction.
    fn contribute(&mut self, contribution: Contribution) -> Result<(), Fault> {
        let Contribution {
            condition,
            step,
            host,
            moment,
        } = contribution;
        let is_in_error = moment.is_none();
        // A rank in error waits for nobody: the step that it would wait for may never come.
        while !is_in_error && self.flights.len() >= IN_FLIGHT {
            self.absorb_oldest(STEP_PATIENCE)?;
        }
        let condition = if self.asleep_alone.is_some() {
            Condition::Asleep
        } else {
            condition
        };
        let doubt = {
            let mut book = lock(&self.tallies);
            for active in &self.gauges {
                active.gauge.take_tallies(&book, self.sweep.own_sample());
            }
            let doubt = is_in_error.then(|| Doubt {
                steps: host.steps,
                tallies: book.clone(),
            });
            book.clear();
            doubt
        };
        let mut buffer = self.spare.pop().unwrap_or_default();
        let overflowed = self.overflowed();
        let words = &self.words;
        words.layout.clear(&mut buffer);
        words.put_condition(&mut buffer, condition, overflowed);
        if let Some(step) = step {
            words.put_step(&mut buffer, step);
        }
        words.put_host(&mut buffer, host);
        let since = self.since.elapsed().as_nanos() as u64;
        words.put_cost(&mut buffer, self.spent.min(since), since);
        self.spent = 0;
        self.since = Instant::now();
        words.put_needs(&mut buffer, &self.sweep.needs);
        self.sweep.each_worker(|worker| {
            words.add_not_finite(&mut buffer, &worker.not_finite);
            words
                .packing
                .add(&words.layout, &mut worker.sample, &mut buffer);
        });
        let rank = self.team.rank();
        if let Some(why) = &self.asleep_alone {
            words.put_text(&mut buffer, true, rank, Status::Internal, why);
        } else if let Some(fault) = self.trouble.take() {
            words.put_text(&mut buffer, false, rank, fault.status, &fault.text);
        }
        self.sweep.clear();
        match self.team.start(buffer) {
            Ok(ticket) => {
                self.flights.push_back(Flight {
                    ticket,
                    context: Context { moment },
                    doubt,
                });
                Ok(())
            }
            Err(error) => Err(self.lose_team(&error, STEP_PATIENCE)),
        }
    }

    // ---- taking in what has been combined -----------------------------------------------------------

    /// Has this rank contributed to a step of which it does not know all?
    fn is_in_doubt(&self) -> bool {
        self.flights.iter().any(|flight| flight.doubt.is_some())
    }

    /// Waits to learn to which steps contributions in doubt belong, for as long as it matters. Not for ever: a
    /// rank whose host leaves out a step in error contributes only when it marks the next. `false` when the wait
    /// was in vain.
    fn settle_doubts(&mut self, it_matters: impl Fn(&Core) -> bool) -> Result<bool, Fault> {
        let until = Instant::now() + DOUBT_PATIENCE;
        while self.is_in_doubt() && it_matters(self) {
            let left = until.saturating_duration_since(Instant::now());
            match self.receive_oldest(left, Overdue::IsNoFault)? {
                Some(received) => self.conclude(received)?,
                None => return Ok(false),
            }
        }
        Ok(true)
    }

    /// Takes in what has completed, without waiting.
    pub(super) fn poll(&mut self) {
        while let Some(flight) = self.flights.front() {
            match self.team.is_complete(flight.ticket) {
                Ok(true) if self.asleep.is_none() => {
                    if self.absorb_oldest(STEP_PATIENCE).is_err() {
                        return;
                    }
                }
                Ok(_) => return,
                Err(error) => {
                    self.lose_team(&error, STEP_PATIENCE);
                    return;
                }
            }
        }
    }

    pub(super) fn flush(&mut self, patience: Duration) -> Result<(), Fault> {
        while !self.flights.is_empty() {
            self.absorb_oldest(patience)?;
        }
        Ok(())
    }

    /// Waits for the oldest reduction and draws the conclusions, which are the same on every rank.
    fn absorb_oldest(&mut self, patience: Duration) -> Result<(), Fault> {
        match self.receive_oldest(patience, Overdue::IsAFault)? {
            Some(received) => self.conclude(received),
            None => Ok(()),
        }
    }

    fn conclude(&mut self, received: Received) -> Result<(), Fault> {
        let Received {
            combined,
            flight,
            buffer,
        } = received;
        match combined.reason_to_sleep() {
            Some(why) => Err(self.fall_asleep(why)),
            None => {
                self.take_in(&combined, flight, &buffer);
                self.spare.push(buffer);
                Ok(())
            }
        }
    }

    /// Waits for the oldest reduction; none when there is none, or not in time.
    pub(super) fn receive_oldest(
        &mut self,
        patience: Duration,
        overdue: Overdue,
    ) -> Result<Option<Received>, Fault> {
        let Some(flight) = self.flights.front() else {
            return Ok(None);
        };
        let buffer = match self.team.finish(flight.ticket, patience) {
            Ok(buffer) => buffer,
            Err(TeamError::Overdue) if overdue == Overdue::IsNoFault => return Ok(None),
            Err(error) => return Err(self.lose_team(&error, patience)),
        };
        let Some(flight) = self.flights.pop_front() else {
            return Ok(None);
        };
        if !self.words.layout.agrees(&buffer) {
            let why =
                "the ranks' buffers differ in shape; do all run the same library?".to_string();
            return Err(self.fall_asleep(why));
        }
        Ok(Some(Received {
            combined: self.words.read(&buffer),
            flight,
            buffer,
        }))
    }

    /// Makes a row of what all have contributed, and learns from it.
    pub(super) fn take_in(&mut self, combined: &Combined, flight: Flight, buffer: &[u64]) {
        let is_row = combined.timed > 0;
        if is_row {
            self.rows += 1;
        }
        if let Some(doubt) = flight.doubt {
            if !is_row {
                self.steps_since_row += doubt.steps;
                lock(&self.tallies).add_book(&doubt.tallies);
            }
            self.learn(combined);
        }
        if let Some(scribe) = &mut self.scribe {
            let reduced = self.words.packing.reduced(&self.words.layout, buffer);
            scribe.write(
                &self.config,
                &self.plan,
                &mut self.gauges,
                &flight.context,
                combined,
                reduced,
            );
        }
    }

    /// Learns to which step a contribution belonged that this rank made in error.
    fn learn(&mut self, combined: &Combined) {
        let Some((step, _)) = combined.steps else {
            return;
        };
        self.stood_in.push(step);
        if let Some((time, _)) = combined.times {
            let ln_a = self
                .config
                .clockwork
                .moment(time)
                .map_or(0.0, |moment| moment.ln_a);
            self.last_tick = Some(Tick { step, time, ln_a });
        }
    }
}
