//! One journal file and the notes in it. A failed append never leaves the file worse than before: what is
//! good is remembered by its length, and the next attempt writes over what a failed one left.

use super::disk::{DiskFile, write_all};
use super::frame::{self, MAGIC, kind};
use super::schema::Schema;
use serde::{Deserialize, Serialize};
use std::io;
use std::path::{Path, PathBuf};

/// The first frame of a journal: all that is needed to read it when every other file is lost.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Head {
    /// The format of this file.
    pub format: u32,
    /// The leg that its records belong to.
    pub leg: u32,
    /// The number in the file's name.
    pub journal: u32,
    /// When the leg was opened, in milliseconds since 1970-01-01 UTC.
    pub leg_opened: u64,
    /// When this file was begun, likewise.
    pub begun: u64,
    /// The version of this library.
    pub library_version: String,
    /// SHA-256 of the leg's config, in hexadecimal digits.
    pub config_sha256: String,
    /// What the host says of itself.
    pub host: serde_json::Value,
    /// The column of the run table that holds the declared time coordinate; empty when none does.
    pub time_column: String,
    /// The journal that this one goes on from, within the same leg.
    pub continues: Option<Continues>,
    /// All tables and their columns.
    pub schema: Schema,
}

/// Why a leg goes on in another file, and how much of the one before is good.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Continues {
    /// The number of the journal before.
    pub journal: u32,
    /// What stands beyond these bytes was given up and is written again in later files.
    pub good_bytes: u64,
    /// In plain words.
    pub reason: String,
}

/// Rows that a host entered and that were refused because too many waited for the disk.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Gap {
    /// The leg.
    pub leg: u32,
    /// How many records are missing.
    pub records: u64,
    /// How many rows they held.
    pub rows: u64,
    /// The number of the first missing record in its leg.
    pub first_number: u64,
    /// The number of the last missing one; some between may be there.
    pub last_number: u64,
    /// The step of the first.
    pub first_step: u64,
    /// The step of the last.
    pub last_step: u64,
    /// The time of the first; null when it is not a finite number.
    pub first_time: Option<f64>,
    /// The time of the last; null when it is not a finite number.
    pub last_time: Option<f64>,
    /// In plain words.
    pub reason: String,
}

/// The last frame of a leg that was closed.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct End {
    /// The leg.
    pub leg: u32,
    /// How many records the host entered in it, those of gaps included.
    pub records: u64,
    /// When it was closed, in milliseconds since 1970-01-01 UTC.
    pub closed: u64,
}

/// A journal that is being written.
pub struct Journal {
    /// The number in the file's name.
    pub number: u32,
    /// Where it is.
    pub path: PathBuf,
    /// Records in it.
    pub records: u64,
    /// Failed attempts since the last success.
    pub failures: u32,
    file: Box<dyn DiskFile>,
    good: u64,
    frames: u32,
}

impl Journal {
    /// A journal in a file that was just created and has no byte in it yet.
    pub fn new(number: u32, path: &Path, file: Box<dyn DiskFile>) -> Journal {
        Journal {
            number,
            path: path.to_path_buf(),
            records: 0,
            failures: 0,
            file,
            good: 0,
            frames: 0,
        }
    }

    /// Bytes that are known to be whole frames.
    pub fn good_bytes(&self) -> u64 {
        self.good
    }

    /// Has the head been written?
    pub fn has_head(&self) -> bool {
        self.frames > 0
    }

    /// Writes the magic and the head frame.
    ///
    /// # Errors
    /// Those of the system; may be tried again.
    pub fn write_head(&mut self, scratch: &mut Vec<u8>, head: &Head) -> io::Result<()> {
        let payload = serde_json::to_vec(head).map_err(io::Error::other)?;
        frame::build(scratch, MAGIC.len() as u64, 0, kind::HEAD, &payload);
        scratch.splice(0..0, MAGIC);
        self.write(scratch)
    }

    /// Appends a frame.
    ///
    /// # Errors
    /// Those of the system; may be tried again.
    pub fn append(&mut self, scratch: &mut Vec<u8>, kind: u32, payload: &[u8]) -> io::Result<()> {
        frame::build(scratch, self.good, self.frames, kind, payload);
        self.write(scratch)?;
        self.records += u64::from(kind == frame::kind::RECORD);
        Ok(())
    }

    fn write(&mut self, bytes: &[u8]) -> io::Result<()> {
        match write_all(self.file.as_mut(), bytes, self.good) {
            Ok(()) => {
                self.good += bytes.len() as u64;
                self.frames = self.frames.wrapping_add(1);
                self.failures = 0;
                Ok(())
            }
            Err(error) => {
                self.failures = self.failures.saturating_add(1);
                // Only tidiness: if this fails as well, readers see an incomplete frame at the end, and the
                // next attempt starts at the same place anyway.
                let _ = self.file.truncate(self.good);
                Err(error)
            }
        }
    }

    /// Returns when all that was appended is on stable storage.
    ///
    /// # Errors
    /// Those of the system.
    pub fn sync(&mut self) -> io::Result<()> {
        self.file.sync()
    }

    /// Is the file still where readers look for it?
    pub fn is_in_place(&self) -> bool {
        self.file.is_at(&self.path)
    }
}
