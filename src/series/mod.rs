//! The series on disk: a directory of manifests and journals that one thread of ours writes and anybody may
//! read meanwhile. `docs/series.md` describes every byte.
//!
//! The caller's thread never touches the disk after [`Series::open`]: records go through a bounded queue to a
//! writer thread. What does not fit into the queue is refused, counted, and noted in the journal as a gap.

mod chain;
pub mod disk;
pub mod encoding;
mod error;
mod fit;
pub mod frame;
pub mod journal;
pub mod layout;
mod mailbox;
pub mod manifest;
mod opening;
pub mod record;
pub mod schema;
mod status;
mod writer;

pub use error::{SeriesError, Trouble};
pub use fit::check_schema;
pub use status::Status;

use crate::team::thread;
use chain::Chain;
use crossbeam::channel::{self, Receiver, RecvTimeoutError};
use crossbeam::queue::ArrayQueue;
use disk::{Disk, SystemDisk};
use mailbox::{Item, Mailbox};
use record::Record;
use schema::Schema;
use status::Shared;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::Ordering;
use std::time::{Duration, Instant, SystemTime, UNIX_EPOCH};
use writer::{Answer, Writer};

/// What a series is opened with.
#[derive(Clone, Debug, Default)]
pub struct Opening {
    /// All tables that records may have rows for; table 0 is `run`.
    pub schema: Schema,
    /// The config, word for word.
    pub config_text: String,
    /// What the host says of itself: a name, or an object with at least `name`.
    pub host: serde_json::Value,
    /// The version of this library.
    pub library_version: String,
    /// Units, volume and cosmology.
    pub setting: serde_json::Value,
    /// The column of the run table that holds the declared time coordinate, the same as [`Record::time`];
    /// empty when there is none.
    pub time_column: String,
    /// The host means it when a column goes on with another unit, type or kind than in earlier legs.
    pub accepts_changes: bool,
    /// Bounds on memory and time.
    pub limits: Limits,
}

/// Bounds on what the series takes and how long it waits.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Limits {
    /// Most records that wait in memory for the disk.
    pub waiting_records: usize,
    /// Most bytes that they take; a single record beyond it is accepted when nothing else waits.
    pub waiting_bytes: usize,
    /// A written row is on stable storage after this time and one sync at the latest.
    pub sync_interval: Duration,
    /// Bytes kept in memory until they are synced; beyond it the sync comes earlier.
    pub unsynced_bytes: usize,
    /// Length of a journal at which the next one is begun.
    pub journal_bytes: u64,
}

impl Default for Limits {
    fn default() -> Limits {
        Limits {
            waiting_records: 4096,
            waiting_bytes: 8 << 20,
            sync_interval: Duration::from_secs(2),
            unsynced_bytes: 2 << 20,
            journal_bytes: 256 << 20,
        }
    }
}

/// Written records whose memory is kept.
const SPARES: usize = 64;
/// Of these, made when the first row has shown how large they are.
const STOCK: usize = 40;
/// Answers about stable storage that wait for a caller; those beyond are of calls whose patience has ended.
const ANSWERS: usize = 16;

/// One leg of a series, open for writing. Dropping it without [`Series::close`] waits a second at most.
pub struct Series {
    schema: Schema,
    leg: u32,
    limits: Limits,
    path: PathBuf,
    shared: Arc<Shared>,
    spares: Arc<ArrayQueue<Record>>,
    mailbox: Arc<Mailbox>,
    is_closed: bool,
    answers: Receiver<Answer>,
    finished: Receiver<bool>,
}

impl Series {
    /// Creates the series directory `path`, or begins a new leg of the series that is there.
    ///
    /// Waits for the disk. Only one process of a team calls it.
    ///
    /// # Errors
    /// The path is no series, its parent is missing, permission is denied, a newer version wrote it, the schema
    /// does not make sense or does not go on from the legs before, or the disk refuses.
    pub fn open(path: impl AsRef<Path>, opening: Opening) -> Result<Series, SeriesError> {
        Series::open_on(Box::new(SystemDisk), path, opening)
    }

    /// Like [`Series::open`], on a file system of the caller's; for tests that make one fail.
    ///
    /// # Errors
    /// As [`Series::open`].
    pub fn open_on(
        mut disk: Box<dyn Disk>,
        path: impl AsRef<Path>,
        opening: Opening,
    ) -> Result<Series, SeriesError> {
        fit::check_schema(&opening.schema)?;
        opening::check_time_column(&opening.schema, &opening.time_column)?;
        let path = path.as_ref().to_path_buf();
        let limits = opening.limits;
        let schema = opening.schema.clone();
        let shared = Arc::new(Shared::default());
        let spares = Arc::new(ArrayQueue::new(SPARES));
        let mailbox = Arc::new(Mailbox::new(limits.waiting_records));
        let (answer, answers) = channel::bounded(ANSWERS);
        let (opened, is_open) = channel::bounded(1);
        let (finish, finished) = channel::bounded(1);
        let (shared_there, spares_there, path_there) =
            (shared.clone(), spares.clone(), path.clone());
        let mailbox_there = mailbox.clone();
        // Even opening is done in the thread of ours: a file-size limit sends a signal, and only there it is
        // blocked and dies with the thread.
        thread::spawn("limno series", move || {
            let end = MarkEnd {
                shared: shared_there.clone(),
            };
            let begun = opening::begin(disk.as_mut(), &path_there, &opening).and_then(|leg| {
                let number = leg.manifest.leg;
                let mut chain = Chain::new(disk, path_there.clone(), leg, limits);
                match chain.sync() {
                    Ok(_) => Ok((chain, number)),
                    Err(error) => Err(SeriesError::disk("begin a journal in", &path_there, &error)),
                }
            });
            match begun {
                Ok((chain, number)) => {
                    let writer = Writer::new(chain, shared_there, spares_there, answer);
                    if opened.send(Ok(number)).is_ok() {
                        let is_whole = writer.run(&mailbox_there);
                        drop(end);
                        let _ = finish.try_send(is_whole);
                    }
                }
                Err(error) => {
                    let _ = opened.send(Err(error));
                }
            }
        })
        .map_err(|error| {
            SeriesError::new(
                Trouble::Stopped,
                format!("cannot start the thread that writes the series: {error}"),
            )
        })?;
        let leg = is_open.recv().unwrap_or_else(|_| {
            Err(SeriesError::new(
                Trouble::Stopped,
                "the thread that writes the series ended while it opened it",
            ))
        })?;
        Ok(Series {
            schema,
            leg,
            limits,
            path,
            shared,
            spares,
            mailbox,
            is_closed: false,
            answers,
            finished,
        })
    }

    /// The number of the leg that is written.
    pub fn leg(&self) -> u32 {
        self.leg
    }

    /// The series directory.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// A record that was written before, to be filled again without allocating; its content is stale. A new
    /// one when there is none.
    pub fn spare(&self) -> Record {
        self.spares.pop().unwrap_or_default()
    }

    /// Makes ready for records of so many rows and values, as many as wait for the writer in an ordinary run, so
    /// that it allocates nothing later.
    pub fn stock(&self, rows: usize, values: usize) {
        while self.spares.len() < STOCK {
            let mut record = Record::default();
            record.rows.reserve(rows, values);
            let is_small = record.rows.bytes_held() <= writer::SMALL_BYTES;
            if !is_small || self.spares.push(record).is_err() {
                return;
            }
        }
    }

    /// Hands a record to the writer thread. Never waits and never touches the disk.
    ///
    /// # Errors
    /// [`Trouble::Misfit`] when the record does not fit the schema, [`Trouble::Full`] when too many wait for
    /// the disk (the record is dropped and counted as missing), [`Trouble::Stopped`] when the thread has ended.
    pub fn enter(&self, record: Record) -> Result<(), SeriesError> {
        self.submit(record, None).map(drop)
    }

    /// Hands over a record and returns when it is on stable storage, with all before it.
    ///
    /// # Errors
    /// Those of [`Series::enter`], and [`Trouble::NotDurable`] when that is not so within `patience`: the
    /// record then still waits and is written as soon as the disk allows.
    pub fn enter_durably(&self, record: Record, patience: Duration) -> Result<(), SeriesError> {
        let until = Instant::now() + patience;
        let step = record.step;
        // Answers that came after their caller's patience had ended.
        while self.answers.try_recv().is_ok() {}
        let number = self.submit(record, Some(until))?;
        let answer = loop {
            let left = until.saturating_duration_since(Instant::now());
            match self.answers.recv_timeout(left) {
                Ok((answered, _)) if answered != number => {}
                other => break other,
            }
        };
        match answer {
            Ok((_, true)) => Ok(()),
            Ok((_, false)) => Err(SeriesError::new(
                Trouble::NotDurable,
                format!(
                    "the row of step {step} is written, but the file system of {} cannot say when it is \
                     on stable storage",
                    self.path.display()
                ),
            )),
            Err(RecvTimeoutError::Timeout) => Err(SeriesError::new(
                Trouble::NotDurable,
                format!(
                    "the row of step {step} is not known to be on stable storage after {:.1} s{}; it is \
                     written as soon as the disk allows",
                    patience.as_secs_f64(),
                    self.because()
                ),
            )),
            Err(RecvTimeoutError::Disconnected) => Err(self.stopped()),
        }
    }

    /// Puts a record into the mailbox and returns its number. One that must be durable waits for room until
    /// then.
    fn submit(&self, record: Record, durable_until: Option<Instant>) -> Result<u64, SeriesError> {
        let weight = fit::check_record(&self.schema, &record)? as u64;
        if weight > frame::PAYLOAD_LIMIT as u64 {
            return Err(SeriesError::new(
                Trouble::Misfit,
                format!(
                    "step {}: a record of {weight} bytes; at most {} fit into one frame",
                    record.step,
                    frame::PAYLOAD_LIMIT
                ),
            ));
        }
        if self.is_closed || self.is_stopped() {
            return Err(self.stopped());
        }
        let rows = record.rows.len() as u64;
        let number = self.shared.next_number.fetch_add(1, Ordering::Relaxed);
        let item = Item {
            record,
            number,
            entered: now_milliseconds(),
            weight,
            is_durable: durable_until.is_some(),
        };
        // Counted before the item is in the mailbox, so that the writer never subtracts what is not there yet.
        self.shared.records_waiting.fetch_add(1, Ordering::Relaxed);
        self.shared.rows_waiting.fetch_add(rows, Ordering::Relaxed);
        let before = self
            .shared
            .bytes_waiting
            .fetch_add(weight, Ordering::Relaxed);
        let is_over = before > 0 && before + weight > self.limits.waiting_bytes as u64;
        let refused = match durable_until {
            None if is_over => Some(item),
            None => self.mailbox.put(item),
            Some(until) => self.put_until(item, until),
        };
        let Some(refused) = refused else {
            return Ok(number);
        };
        self.shared.records_waiting.fetch_sub(1, Ordering::Relaxed);
        self.shared.rows_waiting.fetch_sub(rows, Ordering::Relaxed);
        self.shared
            .bytes_waiting
            .fetch_sub(weight, Ordering::Relaxed);
        if self.is_stopped() {
            return Err(self.stopped());
        }
        let reason = format!("too many rows waited for the disk{}", self.because());
        let step = refused.record.step;
        self.shared.miss(self.leg, number, &refused.record, &reason);
        Err(SeriesError::new(
            Trouble::Full,
            format!("the row of step {step} is left out of the series: {reason}"),
        ))
    }

    fn put_until(&self, mut item: Item, until: Instant) -> Option<Item> {
        loop {
            item = self.mailbox.put(item)?;
            if Instant::now() >= until || self.is_stopped() {
                return Some(item);
            }
            std::thread::sleep(Duration::from_millis(1));
        }
    }

    fn is_stopped(&self) -> bool {
        self.shared.is_stopped.load(Ordering::Acquire)
    }

    /// Is the disk refusing right now?
    pub fn is_failing(&self) -> bool {
        self.shared.is_failing.load(Ordering::Relaxed)
    }

    /// Where the series stands. Never waits.
    pub fn status(&self) -> Status {
        self.shared.status()
    }

    /// Ends the leg: writes what waits, says in the journal that the host closed it, and syncs.
    ///
    /// # Errors
    /// [`Trouble::NotDurable`] when that is not done within `patience`: what still waits is lost, and the
    /// text says how much.
    pub fn close(mut self, patience: Duration) -> Result<(), SeriesError> {
        self.finish(patience)
    }

    fn finish(&mut self, patience: Duration) -> Result<(), SeriesError> {
        if std::mem::replace(&mut self.is_closed, true) {
            return Ok(());
        }
        self.mailbox.close();
        let outcome = self.finished.recv_timeout(patience);
        self.shared.is_abandoned.store(true, Ordering::Release);
        match outcome {
            Ok(true) => Ok(()),
            Ok(false) | Err(RecvTimeoutError::Timeout) => {
                let status = self.status();
                Err(SeriesError::new(
                    Trouble::NotDurable,
                    format!(
                        "{} could not be closed within {:.1} s{}: {} of the rows entered are not in it",
                        self.path.display(),
                        patience.as_secs_f64(),
                        self.because(),
                        status.rows_waiting
                    ),
                ))
            }
            Err(RecvTimeoutError::Disconnected) => Err(self.stopped()),
        }
    }

    fn because(&self) -> String {
        match self.shared.last_error() {
            Some(text) if self.shared.is_failing.load(Ordering::Relaxed) => format!(" ({text})"),
            _ => String::new(),
        }
    }

    fn stopped(&self) -> SeriesError {
        let reason = self
            .shared
            .last_error()
            .map_or(String::new(), |text| format!("; last: {text}"));
        SeriesError::new(
            Trouble::Stopped,
            format!(
                "the thread that writes {} has ended{reason}",
                self.path.display()
            ),
        )
    }
}

impl Drop for Series {
    fn drop(&mut self) {
        let _ = self.finish(Duration::from_secs(1));
    }
}

/// Says that the thread has ended, however it ends.
struct MarkEnd {
    shared: Arc<Shared>,
}

impl Drop for MarkEnd {
    fn drop(&mut self) {
        self.shared.is_stopped.store(true, Ordering::Release);
    }
}

/// Milliseconds since 1970-01-01 UTC; 0 when the machine's clock is before that.
pub fn now_milliseconds() -> u64 {
    SystemTime::now()
        .duration_since(UNIX_EPOCH)
        .map_or(0, |since| since.as_millis() as u64)
}
