//! The clock of a step: what the host says, checked against what it said before.

use super::status::{Fault, Status};

/// What the host says about a step.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Clock {
    /// Step number; grows from one mark to the next.
    pub step: u64,
    /// The declared time coordinate.
    pub time: f64,
    /// Length of the step that ends at `time`, in the same coordinate; 0 when not known.
    pub step_length: f64,
    /// Are all particles at `time`?
    pub synchronised: bool,
    /// Is the host about to write a checkpoint?
    pub checkpoint: bool,
}

/// A clock that was refused, and what could be read of it all the same.
#[derive(Clone, Debug)]
pub struct Refusal {
    /// Why.
    pub fault: Fault,
    /// The step number.
    pub step: Option<u64>,
    /// Are all particles at the time?
    pub synchronised: Option<bool>,
    /// Is the host about to write a checkpoint?
    pub checkpoint: Option<bool>,
}

impl From<Fault> for Refusal {
    /// A clock of which nothing could be read.
    fn from(fault: Fault) -> Refusal {
        Refusal {
            fault,
            step: None,
            synchronised: None,
            checkpoint: None,
        }
    }
}

impl Refusal {
    /// A clock that could be read and is wrong.
    pub fn of(clock: &Clock, fault: Fault) -> Refusal {
        Refusal {
            fault,
            step: Some(clock.step),
            synchronised: Some(clock.synchronised),
            checkpoint: Some(clock.checkpoint),
        }
    }
}

impl Clock {
    /// The largest step number; the one beyond is what -1 becomes on its way here.
    pub const LARGEST_STEP: u64 = u64::MAX - 1;

    /// Checks the numbers in themselves and against the clock of the step before.
    ///
    /// # Errors
    /// What is wrong, and what was expected.
    pub fn check(&self, before: Option<&Clock>) -> Result<(), Fault> {
        let wrong = |text: String| {
            Fault::err(
                Status::BadClock,
                format!("clock of step {}: {text}", self.step),
            )
        };
        if self.step > Clock::LARGEST_STEP {
            return wrong(format!(
                "the step number is the largest there is, as if -1 were given; expected at most {}",
                Clock::LARGEST_STEP
            ));
        }
        if !self.time.is_finite() {
            return wrong(format!("the time is {}, not a finite number", self.time));
        }
        if !self.step_length.is_finite() || self.step_length < 0.0 {
            return wrong(format!(
                "the step length is {}; expected a finite number, not negative (0 when not known)",
                self.step_length
            ));
        }
        let Some(before) = before else { return Ok(()) };
        if self.step <= before.step {
            return wrong(format!(
                "the step number does not grow; step {} was marked before",
                before.step
            ));
        }
        if self.time < before.time {
            return wrong(format!(
                "the time goes back from {:?} (step {}) to {:?}; a restart from an earlier moment must open the series \
                 anew",
                before.time, before.step, self.time
            ));
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn clocks_that_cannot_be_right_are_refused() {
        let clock = Clock {
            step: 5,
            time: 0.5,
            step_length: 0.01,
            synchronised: true,
            checkpoint: false,
        };
        assert!(clock.check(None).is_ok());
        assert!(
            clock
                .check(Some(&Clock {
                    step: 4,
                    time: 0.5,
                    ..clock
                }))
                .is_ok()
        );
        for wrong in [
            Clock {
                time: f64::NAN,
                ..clock
            },
            Clock {
                time: f64::INFINITY,
                ..clock
            },
            Clock {
                step_length: -1.0,
                ..clock
            },
            Clock {
                step_length: f64::NAN,
                ..clock
            },
        ] {
            assert_eq!(wrong.check(None).unwrap_err().status, Status::BadClock);
        }
        assert!(
            clock
                .check(Some(&Clock { step: 5, ..clock }))
                .unwrap_err()
                .text
                .contains("does not grow")
        );
        assert!(
            clock
                .check(Some(&Clock {
                    step: 4,
                    time: 0.6,
                    ..clock
                }))
                .unwrap_err()
                .text
                .contains("goes back")
        );
    }
}
