//! What the writer thread and the callers tell each other without waiting.

use super::journal::Gap;
use super::record::Record;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};
use std::sync::{Mutex, MutexGuard, PoisonError};

/// Where the series stands, as the host may ask at any time.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Status {
    /// Rows of all tables that are in the journal: they survive the end of this process.
    pub rows_written: u64,
    /// Records (measured steps) that are in the journal.
    pub records_written: u64,
    /// Records that are on stable storage: they survive a power cut.
    pub records_durable: u64,
    /// Rows that wait in memory for the disk.
    pub rows_waiting: u64,
    /// Records that wait in memory for the disk.
    pub records_waiting: u64,
    /// Records that were refused because too many waited; the journal says so where they are missing.
    pub records_missing: u64,
    /// The last thing that the disk refused, when and what; kept after it recovers.
    pub last_error: Option<String>,
    /// Is the disk refusing right now?
    pub is_failing: bool,
    /// Has the writer thread ended?
    pub is_stopped: bool,
}

/// Shared by the callers and the writer thread.
#[derive(Default)]
pub struct Shared {
    pub records_written: AtomicU64,
    pub rows_written: AtomicU64,
    pub records_durable: AtomicU64,
    pub records_waiting: AtomicU64,
    pub rows_waiting: AtomicU64,
    pub bytes_waiting: AtomicU64,
    pub records_missing: AtomicU64,
    pub next_number: AtomicU64,
    pub is_failing: AtomicBool,
    pub is_stopped: AtomicBool,
    /// Nobody waits any longer: the writer gives up what it cannot write at once.
    pub is_abandoned: AtomicBool,
    last_error: Mutex<Option<String>>,
    gap: Mutex<Option<Gap>>,
}

/// No panic can leave these values half changed, so a poisoned lock is as good as any.
fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}

impl Shared {
    pub fn status(&self) -> Status {
        Status {
            rows_written: self.rows_written.load(Ordering::Relaxed),
            records_written: self.records_written.load(Ordering::Relaxed),
            records_durable: self.records_durable.load(Ordering::Relaxed),
            rows_waiting: self.rows_waiting.load(Ordering::Relaxed),
            records_waiting: self.records_waiting.load(Ordering::Relaxed),
            records_missing: self.records_missing.load(Ordering::Relaxed),
            last_error: self.last_error(),
            is_failing: self.is_failing.load(Ordering::Relaxed),
            is_stopped: self.is_stopped.load(Ordering::Acquire),
        }
    }

    pub fn last_error(&self) -> Option<String> {
        lock(&self.last_error).clone()
    }

    pub fn set_error(&self, text: String) {
        *lock(&self.last_error) = Some(text);
    }

    /// Counts a refused record; one note is kept for all until the writer can put it in the journal.
    pub fn miss(&self, leg: u32, number: u64, record: &Record, reason: &str) {
        self.records_missing.fetch_add(1, Ordering::Relaxed);
        let time = record.time.is_finite().then_some(record.time);
        let rows = record.rows.len() as u64;
        let mut gap = lock(&self.gap);
        match gap.as_mut() {
            Some(gap) => {
                gap.records += 1;
                gap.rows += rows;
                gap.last_number = number;
                gap.last_step = record.step;
                gap.last_time = time;
            }
            None => {
                *gap = Some(Gap {
                    leg,
                    records: 1,
                    rows,
                    first_number: number,
                    last_number: number,
                    first_step: record.step,
                    last_step: record.step,
                    first_time: time,
                    last_time: time,
                    reason: reason.to_string(),
                });
            }
        }
    }

    pub fn take_gap(&self) -> Option<Gap> {
        lock(&self.gap).take()
    }

    /// Gives back a note that could not be written, joined with what was missed meanwhile.
    pub fn return_gap(&self, mut earlier: Gap) {
        let mut gap = lock(&self.gap);
        if let Some(later) = gap.take() {
            earlier.records += later.records;
            earlier.rows += later.rows;
            earlier.last_number = later.last_number;
            earlier.last_step = later.last_step;
            earlier.last_time = later.last_time;
        }
        *gap = Some(earlier);
    }
}
