//! The shape that every exported function has: floating-point control set aside, panics stopped, the handle
//! looked up, the answer turned into a status and a text.

use super::registry;
use super::types::LimnoRun;
use crate::run::{Fault, Run, Status};
use crate::team::float::FloatGuard;
use std::cell::{Cell, RefCell};
use std::ffi::{CStr, CString, c_char};
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::{Arc, Once};

thread_local! {
    /// The last error on this thread, and the copy that `limno_last_error` hands out.
    static LAST_ERROR: RefCell<String> = const { RefCell::new(String::new()) };
    static HANDED_OUT: RefCell<CString> = RefCell::new(CString::default());
    /// Is this thread inside a call of ours?
    static INSIDE: Cell<bool> = const { Cell::new(false) };
}

/// Keeps panics of ours from being printed; those of a Rust host go where they went before.
fn quiet_panics() {
    static ONCE: Once = Once::new();
    ONCE.call_once(|| {
        let others = std::panic::take_hook();
        std::panic::set_hook(Box::new(move |info| {
            let ours =
                INSIDE.try_with(Cell::get).unwrap_or(false) || crate::team::thread::is_ours();
            if !ours {
                others(info);
            }
        }));
    });
}

/// Runs `body` as every call runs.
#[inline(never)]
fn guarded<T>(body: impl FnOnce() -> Result<T, Fault>) -> Result<T, Fault> {
    quiet_panics();
    let _control = FloatGuard::enter();
    let before = INSIDE
        .try_with(|inside| inside.replace(true))
        .unwrap_or(true);
    let result = catch_unwind(AssertUnwindSafe(body)).unwrap_or_else(|panic| {
        let what = panic
            .downcast_ref::<&str>()
            .map(ToString::to_string)
            .or_else(|| panic.downcast_ref::<String>().cloned())
            .unwrap_or_else(|| "unknown".to_string());
        // The payload of a panic may itself panic when dropped.
        std::mem::forget(panic);
        Fault::err(
            Status::Internal,
            format!("a fault inside the library ({what}); please report it"),
        )
    });
    let _ = INSIDE.try_with(|inside| inside.set(before));
    if let Err(fault) = &result {
        let _ = LAST_ERROR.try_with(|last| last.borrow_mut().clone_from(&fault.text));
    }
    result
}

fn status_of(result: Result<(), Fault>) -> Status {
    result.map_or_else(|fault| fault.status, |()| Status::Ok)
}

/// A call that needs no open run.
pub(super) fn plain(body: impl FnOnce() -> Result<(), Fault>) -> Status {
    status_of(guarded(body))
}

/// A call that opens a run and hands out its handle.
pub(super) fn opening(
    handle: *mut *mut LimnoRun,
    body: impl FnOnce() -> Result<*mut LimnoRun, Fault>,
) -> Status {
    if !handle.is_null() && handle.is_aligned() {
        // SAFETY: not null and aligned; that it is valid is the host's duty. Set first, so that a host that
        // ignores the status holds a handle that every call answers.
        unsafe { handle.write(std::ptr::null_mut()) };
    }
    status_of(guarded(|| {
        let opened = body()?;
        if handle.is_null() || !handle.is_aligned() {
            let _ = registry::close(opened);
            return Fault::err(Status::BadArgument, super::arguments::NO_PLACE);
        }
        // SAFETY: as above.
        unsafe { handle.write(opened) };
        Ok(())
    }))
}

fn with_run(handle: *const LimnoRun, body: impl FnOnce(&Run) -> Result<(), Fault>) -> Status {
    let mut found: Option<Arc<Run>> = None;
    let result = guarded(|| {
        let run = registry::find(handle)?;
        found = Some(run.clone());
        body(&run)
    });
    if let (Some(run), Err(fault)) = (&found, &result) {
        let asleep = guarded(|| {
            if fault.status == Status::Internal {
                run.fall_asleep(&fault.text);
            }
            run.note(Err::<(), Fault>(fault.clone()))
        });
        // Noting an error answers with that error; a second fault while noting it changes nothing for the host.
        drop(asleep);
    }
    // Dropping the last reference may end threads: inside the guard as well.
    if let Some(last) = found.and_then(Arc::into_inner) {
        let _ = guarded(|| {
            drop(last);
            Ok(())
        });
    }
    status_of(result)
}

/// A call on an open run.
pub(super) fn enter_run(
    handle: *const LimnoRun,
    body: impl FnOnce(&Run) -> Result<(), Fault>,
) -> Status {
    with_run(handle, body)
}

/// A call that also answers for a run that sleeps.
pub(super) fn any_run(
    handle: *const LimnoRun,
    body: impl FnOnce(&Run) -> Result<(), Fault>,
) -> Status {
    with_run(handle, body)
}

/// The text of the last error, in a buffer of this thread.
pub(super) fn last_error(handle: *const LimnoRun) -> *const c_char {
    let text = guarded(|| {
        Ok(match registry::peek(handle) {
            Some(run) => run.last_error(),
            None => LAST_ERROR
                .try_with(|last| last.borrow().clone())
                .unwrap_or_default(),
        })
    })
    .unwrap_or_default();
    let text = CString::new(text.replace('\0', "?")).unwrap_or_default();
    HANDED_OUT
        .try_with(|out| {
            let mut out = out.borrow_mut();
            *out = text;
            out.as_ptr()
        })
        .unwrap_or(c"".as_ptr())
}

/// The C name of a status.
pub(super) fn status_name(status: i32) -> &'static CStr {
    match Status::from_number(status) {
        Some(Status::Ok) => c"LIMNO_OK",
        Some(Status::BadArgument) => c"LIMNO_BAD_ARGUMENT",
        Some(Status::BadOrder) => c"LIMNO_BAD_ORDER",
        Some(Status::BadClock) => c"LIMNO_BAD_CLOCK",
        Some(Status::UnknownName) => c"LIMNO_UNKNOWN_NAME",
        Some(Status::BadConfig) => c"LIMNO_BAD_CONFIG",
        Some(Status::BadVersion) => c"LIMNO_BAD_VERSION",
        Some(Status::BadMpi) => c"LIMNO_BAD_MPI",
        Some(Status::Disk) => c"LIMNO_DISK",
        Some(Status::NotDurable) => c"LIMNO_NOT_DURABLE",
        Some(Status::LeftOut) => c"LIMNO_LEFT_OUT",
        Some(Status::Asleep) => c"LIMNO_ASLEEP",
        Some(Status::Closed) => c"LIMNO_CLOSED",
        Some(Status::NoMemory) => c"LIMNO_NO_MEMORY",
        Some(Status::Internal) => c"LIMNO_INTERNAL",
        None => c"no status of limnograph",
    }
}
