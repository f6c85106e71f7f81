//! Another library written in Rust that a host may carry: its own copy of the runtime, with threads, thread
//! locals and panics that it catches.

use std::cell::Cell;

thread_local! {
    static CALLS: Cell<u64> = const { Cell::new(0) };
}

/// Number of calls in this thread, after a panic caught and a thread waited for; 0 when either went wrong.
#[unsafe(no_mangle)]
pub extern "C" fn other_calls() -> u64 {
    std::panic::set_hook(Box::new(|_| ()));
    CALLS.set(CALLS.get() + 1);
    let caught = std::panic::catch_unwind(|| panic!("caught")).is_err();
    let elsewhere = std::thread::spawn(|| CALLS.get()).join();
    if caught && elsewhere.is_ok_and(|calls| calls == 0) { CALLS.get() } else { 0 }
}
