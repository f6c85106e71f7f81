//! Threads of our own: all signals blocked (a host's handlers must never run on a stack it does not know),
//! default floating-point control (a new thread inherits its creator's), and a name that debuggers show.

use super::float::FloatGuard;
use std::cell::Cell;
use std::io;
use std::marker::PhantomData;
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
    /// A mask belongs to a thread, and so does what is held here.
    stays: PhantomData<*const ()>,
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
            SignalsBlocked {
                stays: PhantomData,
                before,
            }
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

#[cfg(test)]
mod tests {
    use super::*;
    use std::hint::black_box;

    /// Which signals are blocked in this thread.
    fn blocked() -> Vec<i32> {
        // SAFETY: the set is plain data of this frame, filled by the first call; nothing is changed.
        unsafe {
            let mut mask: libc::sigset_t = std::mem::zeroed();
            libc::pthread_sigmask(libc::SIG_BLOCK, std::ptr::null(), &raw mut mask);
            (1..libc::SIGRTMAX())
                .filter(|&signal| libc::sigismember(&raw const mask, signal) == 1)
                .collect()
        }
    }

    #[test]
    fn our_threads_block_every_signal_and_their_creator_is_unchanged() {
        let before = blocked();
        let inside = spawn("limno-test", blocked).unwrap().join().unwrap();
        assert_eq!(blocked(), before);
        for signal in 1..libc::SIGRTMAX() {
            // Two that cannot be blocked, and those that the C library keeps to itself.
            let exempt = [libc::SIGKILL, libc::SIGSTOP].contains(&signal)
                || (32..libc::SIGRTMIN()).contains(&signal);
            assert!(exempt || inside.contains(&signal), "signal {signal}");
        }
        assert!(before.len() < inside.len());
    }

    #[test]
    fn our_threads_have_a_name_and_give_back_a_value() {
        let name = spawn("limno-test", || {
            std::thread::current().name().map(str::to_string)
        });
        assert_eq!(name.unwrap().join().unwrap().as_deref(), Some("limno-test"));
    }

    #[test]
    fn a_panic_in_our_thread_is_a_value() {
        let result = spawn("limno-test", || std::panic::resume_unwind(Box::new("gone")))
            .unwrap()
            .join();
        assert!(result.is_err_and(|why| why.downcast_ref() == Some(&"gone")));
    }

    #[cfg(target_arch = "x86_64")]
    #[test]
    fn our_threads_do_not_inherit_the_creators_floating_point_control() {
        let product = || (black_box(f64::MIN_POSITIVE) / black_box(8.0)).to_bits();
        let (here, there) = {
            let _own = FloatGuard::enter();
            let flush: u32 = 0x1F80 | 0x8040;
            // SAFETY: sets the control that `_own` gives back at the end of this block.
            unsafe { std::arch::asm!("ldmxcsr [{}]", in(reg) &raw const flush, options(nostack)) };
            (
                product(),
                spawn("limno-test", product).map(JoinHandle::join),
            )
        };
        assert_eq!(here, 0);
        assert_eq!(there.unwrap().unwrap(), (f64::MIN_POSITIVE / 8.0).to_bits());
    }
}
