//! A few threads of our own that work on one thing together with the calling thread.
//!
//! Made once when a run is opened, and only when more than one thread was asked for. Handing out work allocates
//! nothing, and a thread without work sleeps.

use super::thread;
use std::io;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::thread::JoinHandle;

/// What is worked on: called once on every thread, with the thread's number.
type Work<'a> = dyn Fn(usize) + Sync + 'a;

/// A reference to the work of the present round.
#[derive(Clone, Copy)]
struct Job(*const Work<'static>);

// SAFETY: it points to something that is `Sync`, and `Crew::run` keeps that alive until every thread is done.
unsafe impl Send for Job {}

#[derive(Default)]
struct State {
    round: u64,
    job: Option<Job>,
    busy: usize,
    panicked: bool,
    over: bool,
}

#[derive(Default)]
struct Shared {
    state: Mutex<State>,
    begin: Condvar,
    done: Condvar,
}

impl Shared {
    /// A panic is noted in the state, so a poisoned lock says nothing further.
    fn state(&self) -> MutexGuard<'_, State> {
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

/// Threads that work together with the one that calls them.
pub struct Crew {
    shared: Arc<Shared>,
    threads: Vec<JoinHandle<()>>,
}

impl Crew {
    /// A crew of `size` threads, of which the caller's is one.
    ///
    /// # Errors
    /// When the system refuses a thread.
    pub fn new(size: usize) -> io::Result<Crew> {
        let mut crew = Crew {
            shared: Arc::default(),
            threads: Vec::new(),
        };
        for number in 1..size {
            let shared = crew.shared.clone();
            crew.threads.push(thread::spawn("limno sweep", move || {
                serve(&shared, number)
            })?);
        }
        Ok(crew)
    }

    /// How many threads there are, the caller's included.
    pub fn size(&self) -> usize {
        self.threads.len() + 1
    }

    /// Calls `work` on every thread, on the caller's with number 0, and returns when all are done.
    ///
    /// # Panics
    /// When `work` panics on any thread.
    pub fn run(&mut self, work: &Work) {
        if self.threads.is_empty() {
            return work(0);
        }
        let job: *const Work<'_> = work;
        // SAFETY: only the lifetime changes. The pointer is followed by threads that are counted in `busy`, and
        // this function does not return, not even by a panic, before `busy` is 0 and `job` is none.
        let job = Job(unsafe { std::mem::transmute::<*const Work<'_>, *const Work<'static>>(job) });
        {
            let mut state = self.shared.state();
            state.job = Some(job);
            state.busy = self.threads.len();
            state.panicked = false;
            state.round += 1;
        }
        self.shared.begin.notify_all();
        let own = catch_unwind(AssertUnwindSafe(|| work(0)));
        let mut state = self.shared.state();
        while state.busy > 0 {
            state = self
                .shared
                .done
                .wait(state)
                .unwrap_or_else(PoisonError::into_inner);
        }
        state.job = None;
        let panicked = state.panicked;
        drop(state);
        if let Err(panic) = own {
            std::panic::resume_unwind(panic);
        }
        assert!(!panicked, "a thread of the sweep panicked");
    }
}

/// What a thread does all its life.
fn serve(shared: &Shared, number: usize) {
    let mut seen = 0;
    loop {
        let job = {
            let mut state = shared.state();
            while state.round == seen && !state.over {
                state = shared
                    .begin
                    .wait(state)
                    .unwrap_or_else(PoisonError::into_inner);
            }
            if state.over {
                return;
            }
            seen = state.round;
            state.job
        };
        let Some(Job(work)) = job else { continue };
        // SAFETY: the round is not over before this thread has counted itself out below, and until then
        // `Crew::run` keeps alive what the pointer points to.
        let result = catch_unwind(AssertUnwindSafe(|| unsafe { (*work)(number) }));
        let mut state = shared.state();
        state.panicked |= result.is_err();
        state.busy -= 1;
        let is_last = state.busy == 0;
        drop(state);
        // The payload of a panic may itself panic when dropped.
        std::mem::forget(result);
        if is_last {
            shared.done.notify_one();
        }
    }
}

impl Drop for Crew {
    fn drop(&mut self) {
        self.shared.state().over = true;
        self.shared.begin.notify_all();
        for thread in self.threads.drain(..) {
            let _ = thread.join();
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::atomic::{AtomicUsize, Ordering};

    #[test]
    fn every_thread_works_once_a_round_and_all_are_awaited() {
        for size in 1..=4 {
            let mut crew = Crew::new(size).unwrap();
            assert_eq!(crew.size(), size);
            for _ in 0..200 {
                let calls: Vec<AtomicUsize> = (0..size).map(|_| AtomicUsize::new(0)).collect();
                crew.run(&|number| {
                    calls[number].fetch_add(1, Ordering::Relaxed);
                });
                assert!(calls.iter().all(|calls| calls.load(Ordering::Relaxed) == 1));
            }
        }
    }

    #[test]
    fn a_panic_on_any_thread_is_a_panic_of_the_round_and_the_crew_goes_on() {
        let mut crew = Crew::new(3).unwrap();
        for culprit in 0..3 {
            let result = catch_unwind(AssertUnwindSafe(|| {
                crew.run(&|number| {
                    if number == culprit {
                        std::panic::resume_unwind(Box::new("gone"));
                    }
                });
            }));
            assert!(result.is_err());
            let calls = AtomicUsize::new(0);
            crew.run(&|_| {
                calls.fetch_add(1, Ordering::Relaxed);
            });
            assert_eq!(calls.into_inner(), 3);
        }
    }
}
