//! How a run ends: asleep after a fault, or closed.

use super::contribution::Condition;
use super::core::Core;
use super::entering::{Flight, IN_FLIGHT, Overdue, Received};
use super::rows::Context;
use super::status::{Fault, Status};
use crate::team::TeamError;
use std::time::Duration;

/// How long `close` waits for the others.
const CLOSE_PATIENCE: Duration = Duration::from_secs(30);
/// How long it waits when all are known to sleep: there is nothing to save but memory.
const SLEEPERS_PATIENCE: Duration = Duration::from_secs(2);
/// How often `close` tries to meet the others before it gives up; each round takes up one contribution that
/// another rank has made too many.
const CLOSE_ROUNDS: usize = 100;

impl Core {
    /// A fault of this rank alone: the others hear of it with the next contribution.
    pub fn fall_asleep_alone(&mut self, why: &str) -> Fault {
        self.asleep_alone.get_or_insert_with(|| why.to_string());
        let _ = self.sleeps.set(why.to_string());
        self.let_go();
        if self.team.size() == 1 {
            return self.fall_asleep(why.to_string());
        }
        Fault::new(Status::Internal, format!("the run falls asleep: {why}"))
    }

    /// Every rank knows, and sleeps.
    pub(super) fn fall_asleep(&mut self, why: String) -> Fault {
        let fault = Fault::new(Status::Asleep, format!("the run sleeps: {why}"));
        if self.asleep.is_some() {
            return fault;
        }
        if let Some(scribe) = &mut self.scribe {
            scribe.note_sleep(&why);
        }
        let _ = self.sleeps.set(why.clone());
        self.let_go();
        self.asleep = Some(why);
        fault
    }

    /// Nothing further can be sent or received.
    pub(super) fn lose_team(&mut self, error: &TeamError, patience: Duration) -> Fault {
        let why = match error {
            TeamError::Failed(text) => format!("the reduction failed: {text}"),
            TeamError::Overdue => format!(
                "the other ranks did not take part in a reduction for {} s; does every rank call limno_enter for the same \
                 steps?",
                patience.as_secs()
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
        if self.asleep.is_some() {
            // The first reason, not what came of it.
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
            while self.flights.len() >= IN_FLIGHT {
                self.absorb_while_closing()?;
            }
            self.sweep.clear();
            let mut buffer = self.spare.pop().unwrap_or_default();
            self.words.layout.clear(&mut buffer);
            self.words.put_condition(&mut buffer, Condition::Closing, 0);
            match self.team.start(buffer) {
                Ok(ticket) => self.flights.push_back(Flight {
                    ticket,
                    context: Context { moment: None },
                    doubt: None,
                }),
                Err(error) => return Err(self.lose_team(&error, CLOSE_PATIENCE)),
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
        let patience = if self.asleep.is_some() {
            SLEEPERS_PATIENCE
        } else {
            CLOSE_PATIENCE
        };
        let Some(received) = self.receive_oldest(patience, Overdue::IsAFault)? else {
            return Ok(false);
        };
        let Received {
            combined,
            flight,
            buffer,
        } = received;
        if combined.ranks(Condition::Closing) == u64::from(self.team.size()) {
            return Ok(true);
        }
        if let Some(why) = combined.reason_to_sleep() {
            self.fall_asleep(why);
        } else if self.asleep.is_none() {
            self.take_in(&combined, flight, &buffer);
        }
        self.spare.push(buffer);
        Ok(false)
    }
}
