//! The clock of a run: what `mark` accepts, and which steps are measured.

use super::clock::{Clock, Refusal};
use super::core::{Core, Stage, moment_without_history};
use super::status::{Fault, Status};
use crate::config::Tick;
use crate::gauges::{Interval, Moment};

/// What could be read of a clock that was refused.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Refused {
    /// The step number, where it counts on.
    pub step: Option<u64>,
    pub synchronised: Option<bool>,
    pub checkpoint: Option<bool>,
}

impl Core {
    /// When the last row was, and the tick that cadences count from, as a step with this clock has to see it.
    fn before(&self, clock: &Clock) -> (Option<f64>, Option<Tick>) {
        let Some(history) = &self.history else {
            return (self.last_row, self.last_tick);
        };
        // The first row of this leg decides which rows of earlier legs still stand.
        let row = history.last_row_before(clock.time, clock.step_length);
        let tick = row.and_then(|row| {
            let ln_a = self.config.clockwork.moment(row.time).ok()?.ln_a;
            Some(Tick {
                step: row.step,
                time: row.time,
                ln_a,
            })
        });
        (tick.map(|tick| tick.time), tick)
    }

    /// The moment of a step, and whether it is measured.
    fn moment(&self, clock: &Clock) -> Result<(Moment, bool), Fault> {
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
        let (last_row, _) = self.before(clock);
        moment.interval = last_row.and_then(|last| {
            Some(Interval {
                seconds: clockwork.elapsed_seconds(last, clock.time).ok()?,
                births: clockwork.birth_window(Some(last), clock.time).ok()?,
            })
        });
        Ok((moment, self.due(clock, moment.scale_factor.ln())))
    }

    /// Is a step measured, as far as this rank knows?
    pub(super) fn due(&self, clock: &Clock, ln_a: f64) -> bool {
        let (_, last) = self.before(clock);
        let now = Tick {
            step: clock.step,
            time: clock.time,
            ln_a,
        };
        clock.checkpoint || self.config.cadence.is_due(last, now, clock.synchronised)
    }

    /// Is a step measured whose clock this rank refused? None when that depends on what is not known.
    pub(super) fn due_in_error(&self, refused: &Refused) -> Option<bool> {
        let last = self.last_tick;
        // Cadences are monotonic: what holds at the two ends of what is possible holds between.
        let at_least = Tick {
            step: refused.step.or(last.map(|last| last.step)).unwrap_or(0),
            time: last.map_or(f64::NEG_INFINITY, |last| last.time),
            ln_a: last.map_or(f64::NEG_INFINITY, |last| last.ln_a),
        };
        let at_most = Tick {
            step: refused.step.unwrap_or(u64::MAX),
            time: f64::INFINITY,
            ln_a: f64::INFINITY,
        };
        let cadence = &self.config.cadence;
        let surely = refused.checkpoint.unwrap_or(false)
            || cadence.is_due(last, at_least, refused.synchronised.unwrap_or(false));
        let perhaps = refused.checkpoint.unwrap_or(true)
            || cadence.is_due(last, at_most, refused.synchronised.unwrap_or(true));
        (surely == perhaps).then_some(surely)
    }

    pub fn is_due(&mut self, clock: &Clock) -> Result<bool, Fault> {
        Ok(self.moment(clock)?.1)
    }

    pub fn mark(&mut self, clock: Result<Clock, Refusal>) -> Result<(), Fault> {
        self.poll();
        self.awake_together()?;
        if self.asleep_alone.is_some() {
            // The fault may have struck between mark and enter.
            self.stage = Stage::Between;
        }
        match self.stage {
            Stage::Marked { clock: marked, .. } => {
                let text = format!(
                    "step {} was marked and not yet entered; call limno_enter before the next limno_mark. The step \
                     stays marked",
                    marked.step
                );
                return Fault::err(Status::BadOrder, text);
            }
            Stage::MarkedInError(refused) => {
                let step = clock.as_ref().ok().map(|clock| clock.step);
                if refused.step.is_some() && step > refused.step {
                    // A host that leaves out the rest of a step whose clock was refused: the others have entered it.
                    self.stage = Stage::Between;
                    let _ = self.enter_in_error(refused);
                    self.awake_together()?;
                    self.steps_since_row += 1;
                }
                // Otherwise the host corrects itself: still the same step.
            }
            Stage::Between => self.steps_since_row += 1,
        }
        self.let_go();
        let accepted = clock.and_then(|clock| {
            let (moment, due) = self
                .moment(&clock)
                .map_err(|fault| Refusal::of(&clock, fault))?;
            Ok((clock, due.then_some(moment)))
        });
        match accepted {
            Ok((clock, moment)) => {
                self.stood_in.retain(|&step| step >= clock.step);
                self.last_clock = Some(clock);
                self.stage = Stage::Marked { clock, moment };
                self.awake()
            }
            Err(refusal) => {
                let last = self.last_clock.map(|clock| clock.step);
                self.stage = Stage::MarkedInError(Refused {
                    step: refusal
                        .step
                        .filter(|&step| Some(step) > last && step <= Clock::LARGEST_STEP),
                    synchronised: refusal.synchronised,
                    checkpoint: refusal.checkpoint,
                });
                Err(self.keep(refusal.fault))
            }
        }
    }

    /// Is the marked step measured? Without a mark that is an error.
    pub fn is_measuring(&mut self) -> Result<bool, Fault> {
        match &self.stage {
            Stage::Marked { moment, .. } => Ok(moment.is_some()),
            Stage::MarkedInError(_) => Fault::err(
                Status::BadOrder,
                "the clock of this step was refused, so nothing of it can be measured; call limno_mark with a right one, \
                 or limno_enter to end the step",
            ),
            Stage::Between => Fault::err(
                Status::BadOrder,
                "no step is marked; call limno_mark with its clock first",
            ),
        }
    }
}
