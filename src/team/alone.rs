//! One process alone: every reduction is its own result.

use super::{Team, TeamError, Ticket};
use std::collections::VecDeque;
use std::time::Duration;

/// A team of one.
#[derive(Debug, Default)]
pub struct Alone {
    /// Results not yet fetched, oldest first.
    waiting: VecDeque<Vec<u64>>,
    /// Ticket of the oldest of them.
    oldest: u64,
}

impl Alone {
    /// A team of this process and no other.
    pub fn new() -> Alone {
        Alone::default()
    }
}

impl Team for Alone {
    fn size(&self) -> u32 {
        1
    }

    fn rank(&self) -> u32 {
        0
    }

    fn broadcast(&mut self, root: u32, _bytes: &mut Vec<u8>) -> Result<(), TeamError> {
        if root == 0 {
            Ok(())
        } else {
            Err(TeamError::no_such_member(root, 1))
        }
    }

    fn start(&mut self, cells: Vec<u64>) -> Result<Ticket, TeamError> {
        self.waiting.push_back(cells);
        Ok(Ticket(self.oldest + self.waiting.len() as u64 - 1))
    }

    fn is_complete(&mut self, ticket: Ticket) -> Result<bool, TeamError> {
        let started = self.oldest..self.oldest + self.waiting.len() as u64;
        if started.contains(&ticket.0) {
            Ok(true)
        } else {
            Err(TeamError::not_in_flight(ticket))
        }
    }

    fn finish(&mut self, ticket: Ticket, _patience: Duration) -> Result<Vec<u64>, TeamError> {
        if ticket.0 != self.oldest {
            return Err(TeamError::not_in_flight(ticket));
        }
        let cells = self
            .waiting
            .pop_front()
            .ok_or_else(|| TeamError::not_in_flight(ticket))?;
        self.oldest += 1;
        Ok(cells)
    }

    fn is_usable(&self) -> bool {
        true
    }

    fn leave(&mut self) {
        self.oldest += self.waiting.len() as u64;
        self.waiting.clear();
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const NOW: Duration = Duration::ZERO;

    #[test]
    fn a_reduction_is_its_own_result() {
        let mut team = Alone::new();
        let first = team.start(vec![1, 2]).unwrap();
        let second = team.start(vec![3]).unwrap();
        assert_eq!(team.is_complete(first), Ok(true));
        assert_eq!(team.finish(first, NOW), Ok(vec![1, 2]));
        assert_eq!(team.finish(second, NOW), Ok(vec![3]));
    }

    #[test]
    fn tickets_finish_once_and_in_order() {
        let mut team = Alone::new();
        let first = team.start(vec![1]).unwrap();
        let second = team.start(vec![2]).unwrap();
        assert!(team.finish(second, NOW).is_err());
        assert!(team.finish(first, NOW).is_ok());
        assert!(team.finish(first, NOW).is_err());
        assert!(team.is_complete(first).is_err());
        assert!(team.finish(second, NOW).is_ok());
        assert!(team.finish(second, NOW).is_err());
    }

    #[test]
    fn leaving_forgets_what_was_not_fetched() {
        let mut team = Alone::new();
        let ticket = team.start(vec![1]).unwrap();
        team.leave();
        assert!(team.finish(ticket, NOW).is_err());
        let next = team.start(vec![2]).unwrap();
        assert_eq!(team.finish(next, NOW), Ok(vec![2]));
    }

    #[test]
    fn a_broadcast_keeps_the_bytes_and_knows_no_other_root() {
        let mut team = Alone::new();
        let mut bytes = b"text".to_vec();
        assert_eq!(team.broadcast(0, &mut bytes), Ok(()));
        assert_eq!(bytes, b"text");
        assert!(team.broadcast(1, &mut bytes).is_err());
    }
}
