//! A last call before MPI is finalised.
//!
//! MPI deletes the attributes of `MPI_COMM_SELF` at the very start of `MPI_Finalize`, while all
//! communication is still allowed; that is when runs left open can still be closed.

use super::join;
use crate::team::TeamError;
use crate::team::float::under_default_control;
use mpi::ffi;
use std::ffi::{c_int, c_void};
use std::panic::catch_unwind;
use std::sync::{Mutex, PoisonError};

static STATE: Mutex<State> = Mutex::new(State {
    hook: None,
    attached: false,
});

struct State {
    hook: Option<fn()>,
    /// Is the attribute set in the present life of MPI?
    attached: bool,
}

/// Has `hook` called once, in the thread that calls `MPI_Finalize`, at the start of that call. A second
/// registration replaces the hook. Not collective.
///
/// # Errors
/// When MPI is not initialised, or refuses the attribute.
pub fn register_finalise_hook(hook: fn()) -> Result<(), TeamError> {
    join::check_initialised().map_err(|error| TeamError::Failed(error.to_string()))?;
    let mut state = STATE.lock().unwrap_or_else(PoisonError::into_inner);
    state.hook = Some(hook);
    if !state.attached {
        attach()?;
        state.attached = true;
    }
    Ok(())
}

fn attach() -> Result<(), TeamError> {
    let mut key: c_int = 0;
    // SAFETY: the callbacks have the signatures that MPI states and live as long as the program. The key
    // is marked for deletion once used, and stays alive for as long as the attribute does.
    unsafe {
        check(
            ffi::MPI_Comm_create_keyval(
                Some(do_not_copy),
                Some(at_finalise),
                &raw mut key,
                std::ptr::null_mut(),
            ),
            "MPI_Comm_create_keyval",
        )?;
        let set = check(
            ffi::MPI_Comm_set_attr(ffi::RSMPI_COMM_SELF, key, std::ptr::null_mut()),
            "MPI_Comm_set_attr",
        );
        ffi::MPI_Comm_free_keyval(&raw mut key);
        set
    }
}

fn check(code: c_int, call: &str) -> Result<(), TeamError> {
    if code == ffi::MPI_SUCCESS as c_int {
        Ok(())
    } else {
        Err(TeamError::Failed(join::error_text(code, call)))
    }
}

/// A duplicate of `MPI_COMM_SELF` does not inherit the attribute.
unsafe extern "C" fn do_not_copy(
    _comm: ffi::MPI_Comm,
    _key: c_int,
    _extra: *mut c_void,
    _value: *mut c_void,
    _copy: *mut c_void,
    wanted: *mut c_int,
) -> c_int {
    // SAFETY: MPI passes the address of a flag for us to set.
    unsafe { *wanted = 0 };
    ffi::MPI_SUCCESS as c_int
}

/// Called by MPI as the attribute is deleted. Whatever happens, MPI is told that all is well: anything
/// else would abort the job.
unsafe extern "C" fn at_finalise(
    _: ffi::MPI_Comm,
    _: c_int,
    _: *mut c_void,
    _: *mut c_void,
) -> c_int {
    let hook = {
        let mut state = STATE.lock().unwrap_or_else(PoisonError::into_inner);
        state.attached = false;
        state.hook
    };
    if let Some(hook) = hook {
        let _ = under_default_control(|| catch_unwind(hook));
    }
    ffi::MPI_SUCCESS as c_int
}
