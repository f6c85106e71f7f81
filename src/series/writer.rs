//! The thread that alone touches the disk. It takes records from the queue, writes each as one frame with
//! plain writes, and goes on trying for as long as anybody waits.

use super::chain::Chain;
use super::encoding;
use super::frame::kind;
use super::journal::End;
use super::mailbox::{Found, Item, Mailbox, Receiver};
use super::now_milliseconds;
use super::record::Record;
use super::status::Shared;
use crossbeam::channel::Sender;
use crossbeam::queue::ArrayQueue;
use std::io;
use std::sync::Arc;
use std::sync::atomic::Ordering;
use std::time::{Duration, Instant};

const SHORTEST_PAUSE: Duration = Duration::from_millis(20);
const LONGEST_PAUSE: Duration = Duration::from_secs(2);
/// Records of any size that are kept to be filled again.
const LARGE_SPARES: usize = 4;
/// Size up to which more of them are kept.
pub const SMALL_BYTES: usize = 16 << 10;
const NOTHING_TO_DO: Duration = Duration::from_secs(3600);

/// Everything the thread owns.
pub struct Writer {
    chain: Chain,
    shared: Arc<Shared>,
    spares: Arc<ArrayQueue<Record>>,
    answers: Sender<Answer>,
    payload: Vec<u8>,
}

/// Which record is on stable storage, and whether the file system could say so.
pub type Answer = (u64, bool);

impl Writer {
    /// A writer into `chain`; written records are handed back through `spares`, and `answers` tells of those
    /// that somebody waits for.
    pub fn new(
        chain: Chain,
        shared: Arc<Shared>,
        spares: Arc<ArrayQueue<Record>>,
        answers: Sender<Answer>,
    ) -> Writer {
        Writer {
            chain,
            shared,
            spares,
            answers,
            payload: Vec::new(),
        }
    }

    /// Writes what comes until the other side closes the mailbox, then ends the leg. Returns whether all that
    /// was entered is on stable storage.
    pub fn run(mut self, mailbox: &Mailbox) -> bool {
        let mut receiver = Receiver::new(mailbox);
        let mut all_written = true;
        loop {
            match receiver.next(self.chain.sync_due_in().unwrap_or(NOTHING_TO_DO)) {
                Found::Item(item) => all_written &= self.enter(item),
                Found::Nothing => {}
                Found::Closed => break,
            }
            if self.chain.sync_due_in() == Some(Duration::ZERO) {
                self.attempt(|writer| writer.sync().map(drop));
            }
        }
        all_written && self.insist(Writer::end) && self.insist(|writer| writer.sync().map(drop))
    }

    fn enter(&mut self, item: Item) -> bool {
        let rows = item.record.rows.len() as u64;
        let is_written = self.insist(|writer| writer.put(&item));
        if is_written {
            self.shared.records_written.fetch_add(1, Ordering::Relaxed);
            self.shared.rows_written.fetch_add(rows, Ordering::Relaxed);
        }
        self.shared.records_waiting.fetch_sub(1, Ordering::Relaxed);
        self.shared.rows_waiting.fetch_sub(rows, Ordering::Relaxed);
        self.shared
            .bytes_waiting
            .fetch_sub(item.weight, Ordering::Relaxed);
        self.hand_back(item.record);
        if is_written && item.is_durable {
            let mut is_sure = false;
            if self.insist(|writer| writer.sync().map(|sure| is_sure = sure)) {
                // Nobody listens when the caller's patience ended before.
                let _ = self.answers.try_send((item.number, is_sure));
            }
        }
        is_written
    }

    /// Keeps a written record's memory for one to come: of small ones as many as a short rest of the disk lets
    /// wait, of large ones a few.
    fn hand_back(&self, record: Record) {
        if self.spares.len() < LARGE_SPARES || record.rows.bytes_held() <= SMALL_BYTES {
            let _ = self.spares.push(record);
        }
    }

    /// Tries until it works (true) or nobody waits any longer (false).
    fn insist(&mut self, mut step: impl FnMut(&mut Writer) -> io::Result<()>) -> bool {
        let mut pause = SHORTEST_PAUSE;
        while !self.attempt(&mut step) {
            let until = Instant::now() + pause;
            while Instant::now() < until {
                if self.shared.is_abandoned.load(Ordering::Acquire) {
                    return false;
                }
                std::thread::sleep(SHORTEST_PAUSE);
            }
            pause = (pause * 2).min(LONGEST_PAUSE);
        }
        true
    }

    fn attempt(&mut self, step: impl FnOnce(&mut Writer) -> io::Result<()>) -> bool {
        let result = step(self);
        self.shared
            .is_failing
            .store(result.is_err(), Ordering::Relaxed);
        if let Err(error) = &result {
            let place = self.chain.place();
            self.shared
                .set_error(format!("writing {}: {error}", place.display()));
        }
        result.is_ok()
    }

    fn put(&mut self, item: &Item) -> io::Result<()> {
        self.put_gap()?;
        self.payload.clear();
        let manifest = &self.chain.leg().manifest;
        let (schema, leg) = (&manifest.schema, manifest.leg);
        encoding::encode(
            &mut self.payload,
            schema,
            &item.record,
            leg,
            item.number,
            item.entered,
        );
        self.chain.append(kind::RECORD, &self.payload)
    }

    fn put_gap(&mut self) -> io::Result<()> {
        let Some(gap) = self.shared.take_gap() else {
            return Ok(());
        };
        let result = serde_json::to_vec(&gap)
            .map_err(io::Error::other)
            .and_then(|payload| self.chain.append(kind::GAP, &payload));
        if result.is_err() {
            self.shared.return_gap(gap);
        }
        result
    }

    fn sync(&mut self) -> io::Result<bool> {
        self.put_gap()?;
        let is_sure = self.chain.sync()?;
        if is_sure {
            let written = self.shared.records_written.load(Ordering::Relaxed);
            self.shared
                .records_durable
                .store(written, Ordering::Relaxed);
        }
        Ok(is_sure)
    }

    fn end(&mut self) -> io::Result<()> {
        self.put_gap()?;
        let end = End {
            leg: self.chain.leg().manifest.leg,
            records: self.shared.next_number.load(Ordering::Relaxed),
            closed: now_milliseconds(),
        };
        let payload = serde_json::to_vec(&end).map_err(io::Error::other)?;
        self.chain.append(kind::END, &payload)
    }
}
