//! Threads of our own: all signals blocked (a host's handlers must never run on a stack it does not know),
//! default floating-point control (a new thread inherits its creator's), and a name that debuggers show.

use super::float::FloatGuard;
use std::cell::Cell;
use std::io;
use std::thread::JoinHandle;

thread_local! {
    static OURS: Cell<bool> = const { Cell::new(false) };
}

/// Is the present thread one of ours? A panic in it is then not for the host's terminal.
pub fn is_ours() -> bool {
    OURS.try_with(Cell::get).unwrap_or(false)
}

/// Starts a thread that runs `body` with every signal blocked and default floating-point control.
///
/// # Errors
/// When the system refuses another thread.
pub fn spawn<T: Send + 'static>(
    name: &str,
    body: impl FnOnce() -> T + Send + 'static,
) -> io::Result<JoinHandle<T>> {
    let blocked = SignalsBlocked::now();
    let handle = std::thread::Builder::new()
        .name(name.to_string())
        .spawn(move || {
            let _control = FloatGuard::enter();
            OURS.set(true);
            body()
        });
    drop(blocked);
    handle
}

/// Blocks all signals in this thread until dropped; a thread started meanwhile inherits the full mask, so
/// there is no moment at which it could take a signal.
pub struct SignalsBlocked {
    before: libc::sigset_t,
}

impl SignalsBlocked {
    /// Blocks them from now on.
    pub fn now() -> SignalsBlocked {
        // SAFETY: both sets are plain data owned by this frame; the calls only read and write them and
        // change this thread's own mask.
        unsafe {
            let mut all: libc::sigset_t = std::mem::zeroed();
            let mut before: libc::sigset_t = std::mem::zeroed();
            libc::sigfillset(&raw mut all);
            libc::pthread_sigmask(libc::SIG_SETMASK, &raw const all, &raw mut before);
            SignalsBlocked { before }
        }
    }
}

impl Drop for SignalsBlocked {
    fn drop(&mut self) {
        // SAFETY: `before` was filled by the call in `now`.
        unsafe {
            libc::pthread_sigmask(
                libc::SIG_SETMASK,
                &raw const self.before,
                std::ptr::null_mut(),
            );
        }
    }
}
