//! The journals of one leg, one after another. Usually there is one; a file that can no longer be written or
//! trusted is left as it is and the leg goes on in the next.

use super::disk::Disk;
use super::journal::{Continues, Head, Journal};
use super::layout::{FORMAT, FileKind};
use super::opening::{Leg, write_whole};
use super::{Limits, now_milliseconds};
use std::io;
use std::path::PathBuf;
use std::time::{Duration, Instant};

const SHORTEST_PAUSE: Duration = Duration::from_millis(20);
const LONGEST_PAUSE: Duration = Duration::from_secs(60);
/// Failures in one file after which another one is tried.
const FAILURES_UNTIL_NEXT: u32 = 8;

/// Where a leg's frames go.
pub struct Chain {
    disk: Box<dyn Disk>,
    directory: PathBuf,
    leg: Leg,
    limits: Limits,
    journal: Option<Journal>,
    continues: Option<Continues>,
    /// In the present journal, but not known to be on stable storage.
    unsynced: Backlog,
    /// To be written once more, because the file it was in is lost or in doubt.
    again: Backlog,
    first_unsynced: Option<Instant>,
    directory_unsynced: bool,
    not_before: Option<Instant>,
    pause: Duration,
    scratch: Vec<u8>,
}

impl Chain {
    /// A chain without a journal; the first append or sync begins one.
    pub fn new(disk: Box<dyn Disk>, directory: PathBuf, leg: Leg, limits: Limits) -> Chain {
        Chain {
            disk,
            directory,
            leg,
            limits,
            journal: None,
            continues: None,
            unsynced: Backlog::default(),
            again: Backlog::default(),
            first_unsynced: None,
            directory_unsynced: false,
            not_before: None,
            pause: SHORTEST_PAUSE,
            scratch: Vec::new(),
        }
    }

    /// The leg that is written.
    pub fn leg(&self) -> &Leg {
        &self.leg
    }

    /// The file that is written, or the directory while there is none; for messages.
    pub fn place(&self) -> PathBuf {
        self.journal
            .as_ref()
            .map_or_else(|| self.directory.clone(), |journal| journal.path.clone())
    }

    /// How long until the next sync in the background; `None` when there is nothing to sync.
    pub fn sync_due_in(&self) -> Option<Duration> {
        if self.unsynced.len() > self.limits.unsynced_bytes {
            return Some(Duration::ZERO);
        }
        Some(
            self.limits
                .sync_interval
                .saturating_sub(self.first_unsynced?.elapsed()),
        )
    }

    /// Appends a frame; when this returns it survives the end of this process.
    ///
    /// # Errors
    /// Those of the system. Nothing was appended; may be tried again.
    pub fn append(&mut self, kind: u32, payload: &[u8]) -> io::Result<()> {
        self.make_ready()?;
        self.write(kind, payload)?;
        if self
            .journal
            .as_ref()
            .is_some_and(|journal| journal.good_bytes() > self.limits.journal_bytes)
        {
            self.sync()?;
            self.retire("it had reached the length at which a new one is begun");
        }
        Ok(())
    }

    /// Returns when everything appended so far is on stable storage; `false` when this file system has no
    /// way of making sure.
    ///
    /// # Errors
    /// Those of the system; may be tried again.
    pub fn sync(&mut self) -> io::Result<bool> {
        self.make_ready()?;
        if self.directory_unsynced {
            self.disk.sync_directory(&self.directory)?;
            self.directory_unsynced = false;
        }
        self.sync_journal()
    }

    fn sync_journal(&mut self) -> io::Result<bool> {
        let Some(journal) = self.journal.as_mut() else {
            return Ok(false);
        };
        if !journal.is_in_place() {
            self.retire_for_failure("it was removed or replaced while it was written");
            return Err(io::Error::new(
                io::ErrorKind::NotFound,
                "the journal was removed or replaced",
            ));
        }
        match journal.sync() {
            Ok(()) => {
                self.unsynced.clear();
                self.first_unsynced = None;
                self.pause = SHORTEST_PAUSE;
                self.not_before = None;
                Ok(true)
            }
            Err(error) if cannot_sync(&error) => {
                self.unsynced.clear();
                self.first_unsynced = None;
                Ok(false)
            }
            Err(error) => {
                // A later success would say nothing about what this failure was about, so all of it is
                // written again elsewhere.
                self.retire_for_failure(&format!("it could not be synced: {error}"));
                Err(error)
            }
        }
    }

    fn write(&mut self, kind: u32, payload: &[u8]) -> io::Result<()> {
        let Some(journal) = self.journal.as_mut() else {
            return Err(io::Error::other("there is no journal to write"));
        };
        let Err(error) = journal.append(&mut self.scratch, kind, payload) else {
            self.unsynced
                .push(kind, payload, self.limits.unsynced_bytes);
            self.first_unsynced.get_or_insert_with(Instant::now);
            return Ok(());
        };
        let reason = format!("it could not be written: {error}");
        let (failures, records) = (journal.failures, journal.records);
        if !journal.is_in_place() {
            self.retire_for_failure(&reason);
        } else if records > 0 {
            match error.raw_os_error() {
                // What is in the file stays there if it can be made sure of: written again it would fill the
                // next file just as far.
                Some(libc::EFBIG) => {
                    let is_safe = self.sync_journal().is_ok();
                    if is_safe {
                        self.retire(&reason);
                    }
                }
                // Another file on a full disk is no better than this one.
                Some(libc::ENOSPC | libc::EDQUOT) => {}
                _ if failures >= FAILURES_UNTIL_NEXT => self.retire_for_failure(&reason),
                _ => {}
            }
        }
        Err(error)
    }

    /// There is a journal with a head, and what has to be written again is in it.
    fn make_ready(&mut self) -> io::Result<()> {
        if self
            .journal
            .as_ref()
            .is_none_or(|journal| !journal.has_head())
        {
            self.begin_journal()?;
        }
        while let Some((kind, payload)) = self.again.first() {
            let payload = payload.to_vec();
            self.write(kind, &payload)?;
            self.again.skip_first();
        }
        Ok(())
    }

    fn begin_journal(&mut self) -> io::Result<()> {
        if self
            .not_before
            .is_some_and(|moment| Instant::now() < moment)
        {
            let reason = self
                .continues
                .as_ref()
                .map_or("", |continues| &continues.reason);
            return Err(io::Error::other(format!(
                "the journal before was given up because {reason}"
            )));
        }
        let mut journal = match self.journal.take().filter(Journal::is_in_place) {
            Some(begun) => begun,
            None => self.create_journal()?,
        };
        let manifest = &self.leg.manifest;
        let head = Head {
            format: FORMAT,
            leg: manifest.leg,
            journal: journal.number,
            leg_opened: manifest.opened,
            begun: now_milliseconds(),
            library_version: manifest.library_version.clone(),
            config_sha256: manifest.config_sha256.clone(),
            host: manifest.host.clone(),
            time_column: manifest.time_column.clone(),
            continues: self.continues.clone(),
            schema: manifest.schema.clone(),
        };
        let result = journal.write_head(&mut self.scratch, &head);
        // Kept when the head could not be written: the next attempt fills the same file.
        self.journal = Some(journal);
        result
    }

    fn create_journal(&mut self) -> io::Result<Journal> {
        loop {
            let number = self.leg.next_journal;
            let path = FileKind::Journal.path(&self.directory, number);
            let result = self.disk.create(&path);
            match result {
                Ok(file) => {
                    self.leg.next_journal = number.saturating_add(1);
                    self.directory_unsynced = true;
                    self.renew_manifest()?;
                    return Ok(Journal::new(number, &path, file));
                }
                Err(error) if error.kind() == io::ErrorKind::AlreadyExists && number < u32::MAX => {
                    self.leg.next_journal = number + 1;
                }
                Err(error) => return Err(error),
            }
        }
    }

    /// A directory that was removed and made again has lost its manifest; it gets the leg's once more.
    fn renew_manifest(&mut self) -> io::Result<()> {
        let path = FileKind::Manifest.path(&self.directory, self.leg.manifest.leg);
        match self.disk.create(&path) {
            Ok(mut file) => write_whole(file.as_mut(), &self.leg.manifest_bytes)
                .inspect_err(|_| self.disk.remove(&path)),
            Err(error) if error.kind() == io::ErrorKind::AlreadyExists => Ok(()),
            Err(error) => Err(error),
        }
    }

    /// Leaves the present journal; what is not known to be safe in it goes into the next one as well.
    fn retire(&mut self, reason: &str) {
        let Some(journal) = self.journal.take() else {
            return;
        };
        self.continues = Some(Continues {
            journal: journal.number,
            good_bytes: journal.good_bytes(),
            reason: reason.to_string(),
        });
        let mut pending = std::mem::take(&mut self.unsynced);
        pending.append(&mut self.again);
        self.again = pending;
    }

    fn retire_for_failure(&mut self, reason: &str) {
        self.retire(reason);
        self.not_before = Some(Instant::now() + self.pause);
        self.pause = (self.pause * 2).min(LONGEST_PAUSE);
    }
}

/// Some file systems cannot sync at all; that is no doubt about what was written.
fn cannot_sync(error: &io::Error) -> bool {
    matches!(
        error.raw_os_error(),
        Some(libc::EINVAL | libc::ENOSYS | libc::EOPNOTSUPP)
    )
}

/// Payloads in the order they were appended, in one buffer that keeps its memory.
#[derive(Default)]
struct Backlog {
    bytes: Vec<u8>,
    start: usize,
}

impl Backlog {
    /// Adds a payload; the oldest make room when all together exceed `limit` bytes.
    fn push(&mut self, kind: u32, payload: &[u8], limit: usize) {
        while self.len() > 0 && self.len() + payload.len() > limit.saturating_mul(2) {
            self.skip_first();
        }
        self.bytes.extend_from_slice(&kind.to_le_bytes());
        self.bytes
            .extend_from_slice(&(payload.len() as u32).to_le_bytes());
        self.bytes.extend_from_slice(payload);
    }

    fn len(&self) -> usize {
        self.bytes.len() - self.start
    }

    fn first(&self) -> Option<(u32, &[u8])> {
        let rest = &self.bytes[self.start..];
        let kind = u32::from_le_bytes(rest.get(0..4)?.try_into().ok()?);
        let length = u32::from_le_bytes(rest.get(4..8)?.try_into().ok()?) as usize;
        Some((kind, rest.get(8..8 + length)?))
    }

    fn skip_first(&mut self) {
        self.start += self
            .first()
            .map_or(self.len(), |(_, payload)| 8 + payload.len());
        // Moving the rest forward only when half is spent keeps the cost of a skip constant on average.
        if self.start * 2 >= self.bytes.len() {
            self.bytes.drain(..self.start);
            self.start = 0;
        }
    }

    fn clear(&mut self) {
        self.bytes.clear();
        self.start = 0;
    }

    /// Moves all of `other` behind what is here.
    fn append(&mut self, other: &mut Backlog) {
        self.bytes.extend_from_slice(&other.bytes[other.start..]);
        other.clear();
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_backlog_gives_back_what_it_took_in_order() {
        let mut backlog = Backlog::default();
        for number in 0..100_u8 {
            backlog.push(2, &vec![number; usize::from(number)], 1 << 20);
        }
        let mut later = Backlog::default();
        later.push(3, b"later", 1 << 20);
        backlog.append(&mut later);
        for number in 0..100_u8 {
            assert_eq!(
                backlog.first(),
                Some((2, &*vec![number; usize::from(number)]))
            );
            backlog.skip_first();
        }
        assert_eq!(backlog.first(), Some((3, &b"later"[..])));
        backlog.skip_first();
        assert_eq!((backlog.len(), backlog.first()), (0, None));
    }

    #[test]
    fn a_backlog_stays_within_twice_its_limit() {
        let mut backlog = Backlog::default();
        for _ in 0..1000 {
            backlog.push(2, &[0; 100], 1000);
            assert!(backlog.len() <= 2108);
        }
    }
}
