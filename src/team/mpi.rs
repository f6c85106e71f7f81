//! An MPI communicator.
//!
//! The raw bindings are used directly: a reduction outlives the call that starts it, which no request
//! scope fits. MPI is called only from the thread that calls us, it is neither initialised nor finalised
//! here, and every collective runs on a duplicate whose errors are returned.

mod finalise;
mod join;
mod operation;

pub use finalise::register_finalise_hook;
pub use join::{JoinError, built_against, running_library};

use super::{Team, TeamError, Ticket};
use mpi::ffi;
use std::collections::VecDeque;
use std::ffi::{c_int, c_void};
use std::time::{Duration, Instant};

/// Polls without a pause before the processor is offered to others: a reduction among waiting ranks of
/// one machine ends within these.
const EAGER_POLLS: u32 = 200;
/// Polls with the processor offered to others, before sleeping in between.
const POLITE_POLLS: u32 = 400;
const LONGEST_NAP: Duration = Duration::from_millis(1);
/// Bytes of one broadcast message.
const BROADCAST_CHUNK: usize = 64 * 1024;

/// The members of a duplicated MPI communicator.
#[derive(Debug)]
pub struct MpiTeam {
    comm: ffi::MPI_Comm,
    operation: ffi::MPI_Op,
    /// One element of this type is a whole buffer, so that MPI never splits one; with its cells.
    shape: Option<(usize, ffi::MPI_Datatype)>,
    size: u32,
    rank: u32,
    in_flight: VecDeque<Flight>,
    /// Buffers to receive into, kept so that a warm run allocates nothing.
    spare: Vec<Vec<u64>>,
    /// Ticket of the oldest reduction in flight.
    oldest: u64,
    failure: Option<String>,
    left: bool,
}

/// A started reduction. MPI holds the addresses of both buffers until it is complete.
#[derive(Debug)]
struct Flight {
    request: ffi::MPI_Request,
    sent: Vec<u64>,
    received: Vec<u64>,
    complete: bool,
}

// SAFETY: the handles are plain values that MPI lets any thread use, one at a time, when it was
// initialised for that; `join` refuses a thread that may not call, and the owner moves a team between
// threads only as the host does.
unsafe impl Send for MpiTeam {}

impl MpiTeam {
    /// Joins the members of a communicator held by a C host. Collective over it.
    ///
    /// The communicator is duplicated (the host's attribute copy callbacks run, as for any duplication).
    /// While that happens the host's communicator returns errors instead of using the host's error handler,
    /// which is restored before this returns. `host_library` is the host's compile-time name of its MPI
    /// library (`Open MPI 4.1`), empty when unknown.
    ///
    /// # Safety
    /// `handle` is null or points to `size` readable bytes; if the host's MPI library is the one built
    /// against, they are an `MPI_Comm` that is `MPI_COMM_NULL` or has not been freed.
    ///
    /// # Errors
    /// See [`JoinError`]. Those found before the duplication are known to this member only.
    pub unsafe fn from_handle(
        handle: *const c_void,
        size: usize,
        host_library: &str,
    ) -> Result<MpiTeam, JoinError> {
        join::check_library(host_library, size)?;
        join::check_initialised()?;
        if handle.is_null() {
            return Err(JoinError::BadCommunicator(
                "the address of the communicator is null".into(),
            ));
        }
        // SAFETY: not null, and `check_library` has found `size` to be that of the handle type; the
        // caller promises that so many bytes are readable. They need not be aligned.
        let comm = unsafe { handle.cast::<ffi::MPI_Comm>().read_unaligned() };
        join::join(comm)
    }

    /// Joins the members of a communicator held by a Fortran host, as an `integer` handle. Otherwise as
    /// [`MpiTeam::from_handle`].
    ///
    /// # Errors
    /// See [`JoinError`].
    pub fn from_fortran(handle: i32, host_library: &str) -> Result<MpiTeam, JoinError> {
        join::check_library(host_library, size_of::<ffi::MPI_Comm>())?;
        join::check_initialised()?;
        // SAFETY: MPI is initialised; the conversion checks the range of the handle.
        let comm = unsafe { ffi::RSMPI_Comm_f2c(handle) };
        join::join(comm)
    }

    /// Remembers the first failure: after it nothing further may be sent.
    fn check(&mut self, code: c_int, call: &str) -> Result<(), TeamError> {
        if code == ffi::MPI_SUCCESS as c_int {
            return Ok(());
        }
        let text = join::error_text(code, call);
        self.failure.get_or_insert_with(|| text.clone());
        Err(TeamError::Failed(text))
    }

    fn check_usable(&self) -> Result<(), TeamError> {
        let reason = match &self.failure {
            Some(text) => text.clone(),
            None if self.left => "this team has already left its communicator".into(),
            None if !join::may_communicate() => {
                "MPI has been finalised, so the ranks can no longer reduce".into()
            }
            None => return Ok(()),
        };
        Err(TeamError::Failed(reason))
    }

    /// The data type of a buffer of `cells` cells.
    fn shape(&mut self, cells: usize) -> Result<ffi::MPI_Datatype, TeamError> {
        if let Some((_, shape)) = self.shape.filter(|&(held, _)| held == cells) {
            return Ok(shape);
        }
        self.free_shape();
        let count = c_int::try_from(cells * size_of::<u64>())
            .ok()
            .filter(|&bytes| bytes > 0)
            .ok_or_else(|| {
                TeamError::Failed(format!(
                    "a buffer of {cells} cells cannot be reduced: expected 1 to {}",
                    c_int::MAX / 8
                ))
            })?
            / 8;
        // SAFETY: the element type is predefined and the new handle is written to this frame.
        let (code, mut shape) = unsafe {
            let mut shape = ffi::RSMPI_DATATYPE_NULL;
            (
                ffi::MPI_Type_contiguous(count, ffi::RSMPI_UINT64_T, &raw mut shape),
                shape,
            )
        };
        self.check(code, "MPI_Type_contiguous")?;
        // SAFETY: `shape` was made just above.
        let code = unsafe { ffi::MPI_Type_commit(&raw mut shape) };
        self.check(code, "MPI_Type_commit")?;
        self.shape = Some((cells, shape));
        Ok(shape)
    }

    fn free_shape(&mut self) {
        if let Some((_, mut shape)) = self.shape.take() {
            // SAFETY: made by `shape` and not freed since. Reductions in flight keep it alive inside MPI.
            // Failing to free it loses a few bytes and nothing else.
            unsafe { ffi::MPI_Type_free(&raw mut shape) };
        }
    }

    /// Lets MPI make progress on one reduction and says whether it is complete.
    fn poll(&mut self, index: usize) -> Result<bool, TeamError> {
        let flight = &mut self.in_flight[index];
        if flight.complete {
            return Ok(true);
        }
        let mut complete: c_int = 0;
        // SAFETY: the request is live (never tested again once complete) and its buffers are owned by
        // `flight`, which neither moves nor changes them.
        let code = unsafe {
            ffi::MPI_Test(
                &raw mut flight.request,
                &raw mut complete,
                ffi::RSMPI_STATUS_IGNORE,
            )
        };
        flight.complete = complete != 0;
        let complete = flight.complete;
        self.check(code, "MPI_Test")?;
        Ok(complete)
    }

    /// Sends one piece from the root, or receives it.
    fn broadcast_piece(&mut self, root: u32, piece: &mut [u8]) -> Result<(), TeamError> {
        // SAFETY: the piece is at most `BROADCAST_CHUNK` bytes of ours, alive during this blocking call.
        let code = unsafe {
            ffi::MPI_Bcast(
                piece.as_mut_ptr().cast(),
                piece.len() as c_int,
                ffi::RSMPI_UINT8_T,
                root as c_int,
                self.comm,
            )
        };
        self.check(code, "MPI_Bcast")
    }
}

impl Team for MpiTeam {
    fn size(&self) -> u32 {
        self.size
    }

    fn rank(&self) -> u32 {
        self.rank
    }

    fn broadcast(&mut self, root: u32, bytes: &mut Vec<u8>) -> Result<(), TeamError> {
        if root >= self.size {
            return Err(TeamError::no_such_member(root, self.size));
        }
        self.check_usable()?;
        let mut length = (bytes.len() as u64).to_le_bytes();
        self.broadcast_piece(root, &mut length)?;
        let length = u64::from_le_bytes(length);
        if self.rank != root {
            bytes.clear();
            let room = usize::try_from(length)
                .ok()
                .and_then(|wanted| bytes.try_reserve_exact(wanted).ok());
            if room.is_none() {
                // The root is already sending: receive all of it, into nothing.
                let mut scratch = vec![0; BROADCAST_CHUNK];
                let mut left = length;
                while left > 0 {
                    let piece = left.min(BROADCAST_CHUNK as u64) as usize;
                    self.broadcast_piece(root, &mut scratch[..piece])?;
                    left -= piece as u64;
                }
                return Err(TeamError::Failed(format!(
                    "no memory for the {length} bytes that rank {root} sent"
                )));
            }
            bytes.resize(length as usize, 0);
        }
        bytes
            .chunks_mut(BROADCAST_CHUNK)
            .try_for_each(|piece| self.broadcast_piece(root, piece))
    }

    fn start(&mut self, cells: Vec<u64>) -> Result<Ticket, TeamError> {
        self.check_usable()?;
        let shape = self.shape(cells.len())?;
        let mut received = self.spare.pop().unwrap_or_default();
        received.resize(cells.len(), 0);
        let mut flight = Flight {
            sent: cells,
            received,
            complete: false,
            request: join::no_request(),
        };
        // SAFETY: both buffers hold exactly one element of `shape`, do not overlap, and stay where they
        // are on the heap until the request is complete: `in_flight` owns them, and `drop` leaks them.
        let code = unsafe {
            ffi::MPI_Iallreduce(
                flight.sent.as_ptr().cast(),
                flight.received.as_mut_ptr().cast(),
                1,
                shape,
                self.operation,
                self.comm,
                &raw mut flight.request,
            )
        };
        if let Err(error) = self.check(code, "MPI_Iallreduce") {
            // Whether MPI still looks at the buffers is not known.
            flight.leak();
            return Err(error);
        }
        self.in_flight.push_back(flight);
        Ok(Ticket(self.oldest + self.in_flight.len() as u64 - 1))
    }

    fn is_complete(&mut self, ticket: Ticket) -> Result<bool, TeamError> {
        self.check_usable()?;
        let started = self.oldest..self.oldest + self.in_flight.len() as u64;
        if !started.contains(&ticket.0) {
            return Err(TeamError::not_in_flight(ticket));
        }
        self.poll((ticket.0 - self.oldest) as usize)
    }

    fn finish(&mut self, ticket: Ticket, patience: Duration) -> Result<Vec<u64>, TeamError> {
        self.check_usable()?;
        if ticket.0 != self.oldest || self.in_flight.is_empty() {
            return Err(TeamError::not_in_flight(ticket));
        }
        let begin = Instant::now();
        let mut polls = 0u32;
        while !self.poll(0)? {
            let waited = begin.elapsed();
            if waited >= patience {
                return Err(TeamError::Overdue);
            }
            polls = polls.saturating_add(1);
            pause(polls, waited, patience - waited);
        }
        let Some(flight) = self.in_flight.pop_front() else {
            return Err(TeamError::not_in_flight(ticket));
        };
        self.oldest += 1;
        self.spare.push(flight.sent);
        Ok(flight.received)
    }

    fn is_usable(&self) -> bool {
        self.check_usable().is_ok()
    }

    fn leave(&mut self) {
        let idle = self.in_flight.iter().all(|flight| flight.complete);
        // With a reduction in flight, or after a failure, freeing could wait for a rank that never comes.
        if idle && self.check_usable().is_ok() {
            self.free_shape();
            // SAFETY: both were made by `join` and not freed since; the call is collective as `leave` is.
            // There is nobody to tell of a failure, and nothing to do about it.
            unsafe {
                ffi::MPI_Op_free(&raw mut self.operation);
                ffi::MPI_Comm_free(&raw mut self.comm);
            }
        }
        self.left = true;
        self.let_go();
    }
}

impl MpiTeam {
    fn let_go(&mut self) {
        self.oldest += self.in_flight.len() as u64;
        self.in_flight
            .drain(..)
            .filter(|flight| !flight.complete)
            .for_each(Flight::leak);
        self.spare.clear();
    }
}

impl Drop for MpiTeam {
    /// Not collective, so MPI is not called: handles that were not given back by `leave` are lost.
    fn drop(&mut self) {
        self.let_go();
    }
}

impl Flight {
    /// Leaves the buffers to MPI, which may still read and write them.
    fn leak(self) {
        std::mem::forget(self.sent);
        std::mem::forget(self.received);
    }
}

/// Waits between two polls: not at all at first, then by offering the processor to others (ranks may well
/// share it), then asleep for a small part of the time waited so far.
fn pause(polls: u32, waited: Duration, left: Duration) {
    if polls < EAGER_POLLS {
        std::hint::spin_loop();
    } else if polls < POLITE_POLLS {
        std::thread::yield_now();
    } else {
        std::thread::sleep((waited / 16).min(LONGEST_NAP).min(left));
    }
}
