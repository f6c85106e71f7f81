//! The runs that are open in this process, by handle.
//!
//! A handle is a number that looks like a pointer: the place of the run in a list and how often that place was
//! used before. It is looked up, never followed, so that a closed, null or made-up one is recognised. The list
//! is the only thing the process shares between runs; it exists also so that runs left open can be closed
//! when MPI is finalised.

use super::types::LimnoRun;
use crate::run::{self, Fault, Request, Run, Status};
use crate::team::alone::Alone;
use std::ffi::c_void;
use std::sync::atomic::{AtomicU64, Ordering};
use std::sync::{Arc, PoisonError, RwLock};

struct Place {
    generation: u32,
    /// How many runs were opened before; places are used again, so their order says nothing.
    opened: u64,
    run: Option<Arc<Run>>,
}

static RUNS: RwLock<Vec<Place>> = RwLock::new(Vec::new());
static OPENED: AtomicU64 = AtomicU64::new(0);

/// Marks a number as a handle of ours: no user-space address has these upper bits.
const MARK: u64 = 0x4c49_0000_0000_0000;
const PLACES: usize = 1 << 16;

fn handle_of(place: usize, generation: u32) -> *mut LimnoRun {
    let number = MARK | u64::from(generation) << 16 | place as u64;
    std::ptr::without_provenance_mut(number as usize)
}

fn place_of(handle: *const LimnoRun) -> Option<(usize, u32)> {
    let number = handle.addr() as u64;
    (number & 0xffff_0000_0000_0000 == MARK)
        .then_some(((number & 0xffff) as usize, (number >> 16) as u32))
}

fn insert(run: Run) -> Result<*mut LimnoRun, Fault> {
    let mut runs = RUNS.write().unwrap_or_else(PoisonError::into_inner);
    let free = runs.iter().position(|place| place.run.is_none());
    let index = free.unwrap_or(runs.len());
    if index >= PLACES {
        return Fault::err(
            Status::NoMemory,
            "more than 65536 runs are open; close those that are done",
        );
    }
    if free.is_none() {
        runs.push(Place {
            generation: 0,
            opened: 0,
            run: None,
        });
    }
    let place = &mut runs[index];
    place.generation = place.generation.wrapping_add(1);
    place.opened = OPENED.fetch_add(1, Ordering::Relaxed);
    place.run = Some(Arc::new(run));
    Ok(handle_of(index, place.generation))
}

/// The open run of a handle, if there is one.
pub(super) fn peek(handle: *const LimnoRun) -> Option<Arc<Run>> {
    let (index, generation) = place_of(handle)?;
    let runs = RUNS.read().unwrap_or_else(PoisonError::into_inner);
    runs.get(index)
        .filter(|place| place.generation == generation)?
        .run
        .clone()
}

/// The open run of a handle.
///
/// # Errors
/// A handle that is null, closed, or none.
pub(super) fn find(handle: *const LimnoRun) -> Result<Arc<Run>, Fault> {
    peek(handle).ok_or_else(|| {
        let text = if handle.is_null() {
            "the run is null; did limno_open fail?"
        } else if place_of(handle).is_some() {
            "the run is closed"
        } else {
            "the run is not a handle that limno_open gave"
        };
        Fault::new(Status::Closed, text)
    })
}

/// Ends a run and forgets it.
///
/// # Errors
/// A handle that is no open run, or what went wrong while closing; the run is closed all the same.
pub(super) fn close(handle: *mut LimnoRun) -> Result<(), Fault> {
    let run = find(handle)?;
    let result = run.close();
    forget(handle);
    result
}

fn forget(handle: *mut LimnoRun) {
    let Some((index, generation)) = place_of(handle) else {
        return;
    };
    let taken = {
        let mut runs = RUNS.write().unwrap_or_else(PoisonError::into_inner);
        runs.get_mut(index)
            .filter(|place| place.generation == generation)
            .and_then(|place| place.run.take())
    };
    drop(taken);
}

/// Closes every run, in the order in which they were opened; the same on every rank.
#[cfg_attr(not(feature = "mpi"), allow(dead_code))]
fn close_all() {
    let mut handles: Vec<(u64, *mut LimnoRun)> = {
        let runs = RUNS.read().unwrap_or_else(PoisonError::into_inner);
        let open = |(index, place): (usize, &Place)| {
            let handle = handle_of(index, place.generation);
            place.run.is_some().then_some((place.opened, handle))
        };
        runs.iter().enumerate().filter_map(open).collect()
    };
    handles.sort_unstable();
    for (_, handle) in handles {
        // There is nobody to tell: the host has left the run open and ends MPI.
        let _ = super::boundary::plain(|| close(handle));
    }
}

pub(super) fn open_alone(request: Request) -> Result<*mut LimnoRun, Fault> {
    insert(run::open(Box::new(Alone::new()), request)?)
}

#[cfg(feature = "mpi")]
pub(super) fn open_communicator(
    request: Request,
    communicator: *const c_void,
    bytes: usize,
    mpi: &str,
) -> Result<*mut LimnoRun, Fault> {
    use crate::team::mpi::MpiTeam;
    // SAFETY: that the address leads to so many bytes of a communicator is the host's duty, stated in the header.
    let team = unsafe { MpiTeam::from_handle(communicator, bytes, mpi) };
    open_team(team, request)
}

#[cfg(feature = "mpi")]
pub(super) fn open_fortran(request: Request, communicator: i32) -> Result<*mut LimnoRun, Fault> {
    open_team(
        crate::team::mpi::MpiTeam::from_fortran(communicator, ""),
        request,
    )
}

#[cfg(feature = "mpi")]
fn open_team(
    team: Result<crate::team::mpi::MpiTeam, crate::team::mpi::JoinError>,
    request: Request,
) -> Result<*mut LimnoRun, Fault> {
    let team = team.map_err(|error| Fault::new(Status::BadMpi, error.to_string()))?;
    let run = run::open(Box::new(team), request)?;
    // Without the hook a run left open would only lose its last rows, so a refusal is no reason to fail.
    let _ = crate::team::mpi::register_finalise_hook(close_all);
    insert(run)
}

#[cfg(not(feature = "mpi"))]
const WITHOUT_MPI: &str =
    "this library is built without MPI; link liblimnograph_mpi instead of liblimnograph";

#[cfg(not(feature = "mpi"))]
pub(super) fn open_communicator(
    _: Request,
    _: *const c_void,
    _: usize,
    _: &str,
) -> Result<*mut LimnoRun, Fault> {
    Fault::err(Status::BadMpi, WITHOUT_MPI)
}

#[cfg(not(feature = "mpi"))]
pub(super) fn open_fortran(_: Request, _: i32) -> Result<*mut LimnoRun, Fault> {
    Fault::err(Status::BadMpi, WITHOUT_MPI)
}
