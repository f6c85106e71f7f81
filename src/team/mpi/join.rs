//! From a host's communicator to one of ours.

use super::{MpiTeam, operation};
use crate::team::library;
use mpi::ffi;
use std::collections::VecDeque;
use std::ffi::{c_char, c_int};
use std::fmt;

/// Longer than the longest text of any MPI library known (MPICH describes itself in up to 8192 bytes).
const TEXT_BYTES: usize = 16 * 1024;

/// Why a communicator cannot be joined.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum JoinError {
    /// `MPI_Init` has not been called.
    NotInitialised,
    /// `MPI_Finalize` has been called.
    Finalised,
    /// The MPI library is not the one built against; the text names both.
    OtherLibrary(String),
    /// Not a communicator that can be reduced over.
    BadCommunicator(String),
    /// MPI was initialised for calls from its main thread only, and this is another.
    WrongThread,
    /// MPI returned an error to this member or another.
    Failed(String),
}

impl fmt::Display for JoinError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            JoinError::NotInitialised => {
                f.write_str("MPI has not been initialised: call MPI_Init before opening a run on a communicator")
            }
            JoinError::Finalised => {
                f.write_str("MPI has been finalised: open a run on a communicator before MPI_Finalize")
            }
            JoinError::WrongThread => f.write_str(
                "MPI was initialised for calls from its main thread only: open the run from the thread that called \
                 MPI_Init, or initialise MPI with MPI_THREAD_SERIALIZED or more",
            ),
            JoinError::OtherLibrary(text) | JoinError::BadCommunicator(text) | JoinError::Failed(text) => {
                f.write_str(text)
            }
        }
    }
}

impl std::error::Error for JoinError {}

/// The MPI library this was built against, as its headers name it, such as `Open MPI 4.1`.
pub fn built_against() -> &'static str {
    env!("LIMNOGRAPH_MPI")
}

/// How the MPI library in this process describes itself. May be called at any time.
pub fn running_library() -> String {
    read_text(|buffer, length| {
        // SAFETY: the buffer is longer than any library's text; the call is allowed at any time.
        unsafe { ffi::MPI_Get_library_version(buffer, length) }
    })
    .unwrap_or_default()
}

/// What MPI says of an error code.
pub(super) fn error_text(code: c_int, call: &str) -> String {
    let text = read_text(|buffer, length| {
        // SAFETY: the buffer is longer than any library's text; the code came from that library.
        unsafe { ffi::MPI_Error_string(code, buffer, length) }
    });
    format!(
        "{call} returned error {code}: {}",
        text.as_deref().unwrap_or("no text is known for it")
    )
}

fn read_text(call: impl FnOnce(*mut c_char, *mut c_int) -> c_int) -> Option<String> {
    let mut buffer = vec![0u8; TEXT_BYTES];
    let mut length: c_int = 0;
    let code = call(buffer.as_mut_ptr().cast(), &raw mut length);
    let text = buffer.split(|&byte| byte == 0).next().unwrap_or_default();
    (code == ffi::MPI_SUCCESS as c_int).then(|| String::from_utf8_lossy(text).trim().to_string())
}

/// Refuses another MPI library, before any handle of it is looked at.
pub(super) fn check_library(host: &str, host_handle: usize) -> Result<(), JoinError> {
    library::check(
        built_against(),
        &running_library(),
        host,
        host_handle,
        size_of::<ffi::MPI_Comm>(),
    )
    .map_err(JoinError::OtherLibrary)
}

/// Is MPI between its start and its end?
pub(super) fn may_communicate() -> bool {
    matches!(state(), Ok(()))
}

fn state() -> Result<(), JoinError> {
    let (mut initialised, mut finalised): (c_int, c_int) = (0, 0);
    // SAFETY: both calls are allowed at any time and write to this frame.
    unsafe {
        ffi::MPI_Initialized(&raw mut initialised);
        ffi::MPI_Finalized(&raw mut finalised);
    }
    match (initialised != 0, finalised != 0) {
        (false, _) => Err(JoinError::NotInitialised),
        (true, true) => Err(JoinError::Finalised),
        (true, false) => Ok(()),
    }
}

/// May this thread call MPI now?
pub(super) fn check_initialised() -> Result<(), JoinError> {
    state()?;
    let (mut provided, mut is_main): (c_int, c_int) = (0, 1);
    // SAFETY: MPI is initialised and not finalised; the calls write to this frame.
    let one_thread_only = unsafe {
        ffi::MPI_Query_thread(&raw mut provided);
        ffi::MPI_Is_thread_main(&raw mut is_main);
        provided < ffi::RSMPI_THREAD_SERIALIZED
    };
    if one_thread_only && is_main == 0 {
        Err(JoinError::WrongThread)
    } else {
        Ok(())
    }
}

pub(super) fn no_request() -> ffi::MPI_Request {
    // SAFETY: a constant of the bindings.
    unsafe { ffi::RSMPI_REQUEST_NULL }
}

/// Duplicates a communicator and agrees with its members that all have succeeded. Collective.
pub(super) fn join(host: ffi::MPI_Comm) -> Result<MpiTeam, JoinError> {
    // SAFETY: a constant of the bindings.
    let null = unsafe { ffi::RSMPI_COMM_NULL };
    if host == null || !looks_like_a_communicator(host) {
        return Err(JoinError::BadCommunicator(
            "the communicator is MPI_COMM_NULL, or no communicator at all: pass one that this rank is a member of"
                .into(),
        ));
    }
    let handler = HostHandler::replace(host)?;
    let comm = duplicate(host);
    drop(handler);
    let comm = comm?;

    let (made, operation) = make_operation();
    let mut everywhere: c_int = 0;
    let mine = c_int::from(made.is_ok());
    let (mut size, mut rank): (c_int, c_int) = (0, 0);
    // SAFETY: `comm` was duplicated just above; the calls read and write this frame.
    let code = unsafe {
        ffi::MPI_Comm_size(comm, &raw mut size);
        ffi::MPI_Comm_rank(comm, &raw mut rank);
        ffi::MPI_Allreduce(
            (&raw const mine).cast(),
            (&raw mut everywhere).cast(),
            1,
            ffi::RSMPI_INT32_T,
            ffi::RSMPI_MIN,
            comm,
        )
    };
    let agreed = check(code, "MPI_Allreduce")
        .and(made)
        .and_then(|()| match everywhere {
            1 => Ok(()),
            _ => Err(JoinError::Failed(
                "another rank could not create the operation that ranks reduce with".into(),
            )),
        });
    let mut team = MpiTeam {
        comm,
        operation,
        shape: None,
        size: size as u32,
        rank: rank as u32,
        in_flight: VecDeque::with_capacity(4),
        spare: Vec::with_capacity(4),
        oldest: 0,
        failure: None,
        left: false,
    };
    match agreed {
        Ok(()) => Ok(team),
        Err(error) => {
            team.failure = Some(error.to_string());
            Err(error)
        }
    }
}

/// MPI would end the job over a handle that is none, whatever the error handlers.
fn looks_like_a_communicator(handle: ffi::MPI_Comm) -> bool {
    // SAFETY: a constant of the bindings.
    let known = unsafe { ffi::RSMPI_COMM_SELF };
    if size_of_val(&handle) == size_of::<c_int>() {
        // MPICH and its descendants number their handles; these bits say of what kind one is.
        let kind = |handle: ffi::MPI_Comm| handle.0 as usize as u32 & 0x3C00_0000;
        kind(handle) == kind(known)
    } else {
        // Where handles are addresses, one that is out of range comes back from its Fortran form as zero.
        handle.0 as usize != 0
    }
}

fn check(code: c_int, call: &str) -> Result<(), JoinError> {
    if code == ffi::MPI_SUCCESS as c_int {
        Ok(())
    } else {
        Err(JoinError::Failed(error_text(code, call)))
    }
}

fn duplicate(host: ffi::MPI_Comm) -> Result<ffi::MPI_Comm, JoinError> {
    let mut between_groups: c_int = 0;
    // SAFETY: `host` is a live communicator whose errors are returned for now.
    let code = unsafe { ffi::MPI_Comm_test_inter(host, &raw mut between_groups) };
    check(code, "MPI_Comm_test_inter")
        .map_err(|error| JoinError::BadCommunicator(error.to_string()))?;
    if between_groups != 0 {
        return Err(JoinError::BadCommunicator(
            "the communicator joins two groups: pass one of a single group (an intra-communicator)"
                .into(),
        ));
    }
    // SAFETY: as above; the handler is set on the duplicate, which is ours, before anything else is called.
    unsafe {
        let mut comm = ffi::RSMPI_COMM_NULL;
        check(ffi::MPI_Comm_dup(host, &raw mut comm), "MPI_Comm_dup")?;
        check(
            ffi::MPI_Comm_set_errhandler(comm, ffi::RSMPI_ERRORS_RETURN),
            "MPI_Comm_set_errhandler",
        )?;
        Ok(comm)
    }
}

fn make_operation() -> (Result<(), JoinError>, ffi::MPI_Op) {
    // SAFETY: the callback has the signature that MPI states and lives as long as the program; the
    // operation is written only on success.
    let (code, operation) = unsafe {
        let mut operation = std::mem::zeroed();
        (
            ffi::MPI_Op_create(Some(operation::reduce), 1, &raw mut operation),
            operation,
        )
    };
    (check(code, "MPI_Op_create"), operation)
}

/// Makes errors on a communicator of the host return, until dropped.
struct HostHandler {
    comm: ffi::MPI_Comm,
    before: ffi::MPI_Errhandler,
}

impl HostHandler {
    fn replace(comm: ffi::MPI_Comm) -> Result<HostHandler, JoinError> {
        // SAFETY: `comm` is a live communicator; the handler in use before is kept by the reference
        // taken here, and put back by `drop`.
        unsafe {
            let mut before = std::mem::zeroed();
            check(
                ffi::MPI_Comm_get_errhandler(comm, &raw mut before),
                "MPI_Comm_get_errhandler",
            )
            .map_err(|error| JoinError::BadCommunicator(error.to_string()))?;
            let guard = HostHandler { comm, before };
            check(
                ffi::MPI_Comm_set_errhandler(comm, ffi::RSMPI_ERRORS_RETURN),
                "MPI_Comm_set_errhandler",
            )?;
            Ok(guard)
        }
    }
}

impl Drop for HostHandler {
    fn drop(&mut self) {
        // SAFETY: restores what `replace` found, and gives its reference back.
        unsafe {
            ffi::MPI_Comm_set_errhandler(self.comm, self.before);
            ffi::MPI_Errhandler_free(&raw mut self.before);
        }
    }
}
