//! Where records wait for the writer thread, and how it rests when none do.
//!
//! Waking a thread costs whoever wakes it several microseconds, as much as everything else in a small step. So
//! while rows come in quick succession the writer naps for [`NAP`] and looks again, and nobody wakes it; only
//! when they come further apart, or not at all, does it sleep until it is woken. What must be on stable storage
//! wakes it at once.

use super::record::Record;
use crossbeam::queue::ArrayQueue;
use std::sync::OnceLock;
use std::sync::atomic::{AtomicBool, AtomicU8, Ordering, fence};
use std::thread::Thread;
use std::time::{Duration, Instant};

/// How long a row waits at most before the writer looks.
const NAP: Duration = Duration::from_millis(2);
/// Rows that come closer than this come in quick succession.
const QUICK: Duration = Duration::from_millis(3);

/// So many records end a nap.
const CROWD: usize = 32;

const AWAKE: u8 = 0;
const NAPPING: u8 = 1;
const ASLEEP: u8 = 2;

/// A record on its way to the disk.
pub struct Item {
    /// What is entered.
    pub record: Record,
    /// Its number in the leg.
    pub number: u64,
    /// When it was entered, in milliseconds since 1970-01-01 UTC.
    pub entered: u64,
    /// What it counts for in the bound on waiting memory.
    pub weight: u64,
    /// Does somebody wait until it is on stable storage?
    pub is_durable: bool,
}

/// The bounded queue between the callers and the writer.
pub struct Mailbox {
    items: ArrayQueue<Item>,
    rest: AtomicU8,
    is_closed: AtomicBool,
    writer: OnceLock<Thread>,
}

/// What the writer finds.
pub enum Found {
    /// A record.
    Item(Item),
    /// None, after a rest.
    Nothing,
    /// None, and none will come.
    Closed,
}

impl Mailbox {
    /// Room for so many records.
    pub fn new(capacity: usize) -> Mailbox {
        Mailbox {
            items: ArrayQueue::new(capacity.max(1)),
            rest: AtomicU8::new(AWAKE),
            is_closed: AtomicBool::new(false),
            writer: OnceLock::new(),
        }
    }

    /// Puts a record in; gives it back when there is no room.
    #[must_use]
    pub fn put(&self, item: Item) -> Option<Item> {
        let is_urgent = item.is_durable;
        if let Err(refused) = self.items.push(item) {
            return Some(refused);
        }
        // Either this sees the writer at rest, or the writer sees the record before it rests: both put their
        // own word before they look at the other's.
        fence(Ordering::SeqCst);
        let rest = self.rest.load(Ordering::Relaxed);
        let is_urgent = is_urgent || self.items.len() >= CROWD;
        if rest == ASLEEP || (is_urgent && rest == NAPPING) {
            self.wake();
        }
        None
    }

    /// No more records will come.
    pub fn close(&self) {
        self.is_closed.store(true, Ordering::SeqCst);
        self.wake();
    }

    fn wake(&self) {
        self.rest.store(AWAKE, Ordering::Relaxed);
        if let Some(writer) = self.writer.get() {
            writer.unpark();
        }
    }
}

/// The writer's side of a mailbox.
pub struct Receiver<'a> {
    mailbox: &'a Mailbox,
    last: Option<Instant>,
    /// Do rows come in quick succession?
    is_quick: bool,
}

impl Receiver<'_> {
    /// The calling thread becomes the one that is woken.
    pub fn new(mailbox: &Mailbox) -> Receiver<'_> {
        let _ = mailbox.writer.set(std::thread::current());
        Receiver {
            mailbox,
            last: None,
            is_quick: false,
        }
    }

    /// The next record; rests for at most `patience` when there is none.
    pub fn next(&mut self, patience: Duration) -> Found {
        // Read before the queue is: what was put in before it was closed is still found.
        let is_closed = self.mailbox.is_closed.load(Ordering::SeqCst);
        if let Some(item) = self.take() {
            return Found::Item(item);
        }
        if is_closed {
            return Found::Closed;
        }
        let was_quick = self.is_quick;
        let (rest, time) = if was_quick {
            (NAPPING, NAP.min(patience))
        } else {
            (ASLEEP, patience)
        };
        self.mailbox.rest.store(rest, Ordering::Relaxed);
        fence(Ordering::SeqCst);
        let may_rest =
            self.mailbox.items.is_empty() && !self.mailbox.is_closed.load(Ordering::SeqCst);
        if may_rest {
            std::thread::park_timeout(time);
        }
        self.mailbox.rest.store(AWAKE, Ordering::Relaxed);
        match self.take() {
            Some(item) => Found::Item(item),
            None => {
                self.is_quick = false;
                Found::Nothing
            }
        }
    }

    fn take(&mut self) -> Option<Item> {
        let item = self.mailbox.items.pop()?;
        let now = Instant::now();
        let before = self.last.replace(now);
        self.is_quick = before.is_some_and(|before| now - before < QUICK);
        Some(item)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::Arc;

    fn item(number: u64, is_durable: bool) -> Item {
        Item {
            record: Record::default(),
            number,
            entered: 0,
            weight: 0,
            is_durable,
        }
    }

    /// Every record arrives, in order, whatever the pauses between them: no wake-up is ever lost.
    #[test]
    fn records_arrive_in_order_at_any_pace() {
        let mailbox = Arc::new(Mailbox::new(8));
        let there = mailbox.clone();
        let writer = crate::team::thread::spawn("limno-test", move || {
            let mut receiver = Receiver::new(&there);
            let mut numbers = Vec::new();
            loop {
                match receiver.next(Duration::from_secs(3600)) {
                    Found::Item(item) => numbers.push(item.number),
                    Found::Nothing => {}
                    Found::Closed => return numbers,
                }
            }
        })
        .unwrap();
        for number in 0..400 {
            let mut waiting = Some(item(number, number % 7 == 0));
            while let Some(item) = waiting {
                waiting = mailbox.put(item);
                std::thread::yield_now();
            }
            match number % 40 {
                0 => std::thread::sleep(Duration::from_millis(5)),
                1..20 => std::thread::sleep(Duration::from_micros(100)),
                _ => {}
            }
        }
        mailbox.close();
        assert_eq!(writer.join().unwrap(), (0..400).collect::<Vec<_>>());
    }
}
