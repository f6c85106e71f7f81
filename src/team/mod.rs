//! The processes that reduce together, and the threads that are ours.
//!
//! Everything collective goes through [`Team`]: one process alone, an MPI communicator, and later the
//! host's own callbacks. The rules of the room: communication happens only in the thread that calls us,
//! only on a communicator of our own, and every failure is a value, never an abort.

pub mod alone;
pub mod cells;
pub mod crew;
pub mod float;
pub mod library;
pub mod memory;
#[cfg(feature = "mpi")]
pub mod mpi;
pub mod thread;

/// A reduction that has been started and not yet been finished; tickets finish in the order they started.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Ticket(pub u64);

/// Why a reduction has no result.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum TeamError {
    /// The message passing library returned an error; nothing further may be sent.
    Failed(String),
    /// The other ranks did not take part within the patience given.
    Overdue,
}

impl TeamError {
    fn no_such_member(rank: u32, size: u32) -> TeamError {
        TeamError::Failed(format!(
            "member {rank} was named in a team of {size} (members are numbered from 0)"
        ))
    }

    fn not_in_flight(ticket: Ticket) -> TeamError {
        TeamError::Failed(format!(
            "reduction {} is not the oldest unfinished one; reductions are finished once, in the order they started",
            ticket.0
        ))
    }
}

impl std::fmt::Display for TeamError {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            TeamError::Failed(text) => f.write_str(text),
            TeamError::Overdue => f.write_str("the other ranks did not take part in time"),
        }
    }
}

impl std::error::Error for TeamError {}

/// Processes that reduce together. One implementation a way of communicating.
///
/// All methods are collective unless they say otherwise, and are called by every member in the same order.
pub trait Team: Send {
    /// Number of members, at least 1. Not collective.
    fn size(&self) -> u32;
    /// This member's number, from 0. Not collective.
    fn rank(&self) -> u32;
    /// Sends `bytes` of member `root` to all; on the others the previous content is replaced. Blocking;
    /// used only while a run is opened.
    fn broadcast(&mut self, root: u32, bytes: &mut Vec<u8>) -> Result<(), TeamError>;
    /// Starts combining `cells` (laid out by [`cells::Layout`]) over all members, without waiting.
    /// The result reaches every member.
    fn start(&mut self, cells: Vec<u64>) -> Result<Ticket, TeamError>;
    /// Is the oldest unfinished reduction complete? Never waits. Not collective.
    fn is_complete(&mut self, ticket: Ticket) -> Result<bool, TeamError>;
    /// Waits for the oldest unfinished reduction, at most `patience`, and returns the combined cells.
    /// On `Overdue` the ticket stays valid. Not collective in itself.
    fn finish(
        &mut self,
        ticket: Ticket,
        patience: std::time::Duration,
    ) -> Result<Vec<u64>, TeamError>;
    /// May communication still happen (MPI not finalised, no earlier failure)? Not collective.
    fn is_usable(&self) -> bool;
    /// Lets go of the communicator. With reductions unfinished their buffers are leaked on purpose
    /// rather than freed under the library's hands.
    fn leave(&mut self);
}
