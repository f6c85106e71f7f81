//! What can go wrong between a host and its series, each with a sentence that says what, where and what to do.

use std::fmt;
use std::path::Path;

/// The kinds of trouble, for callers that act on them.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Trouble {
    /// The path is something else than a series, or does not end in `.limno`.
    NotASeries,
    /// The directory that should hold the series does not exist.
    ParentMissing,
    /// The system does not let us read or write there.
    Permission,
    /// The series was written by a newer version of this library.
    Newer,
    /// The schema, or a record held against it, is not one a series can hold.
    Misfit,
    /// A column goes on with another unit or type than in earlier legs.
    Changed,
    /// Rows wait for the disk up to the stated bound; this one was refused and is counted as a gap.
    Full,
    /// The record is not known to be on the disk yet.
    NotDurable,
    /// The disk refused something.
    Disk,
    /// No more threads, or the writer thread has ended.
    Stopped,
}

/// An error of the series.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct SeriesError {
    /// What kind of trouble it is.
    pub trouble: Trouble,
    text: String,
}

impl SeriesError {
    /// An error of this kind with this text.
    pub fn new(trouble: Trouble, text: impl Into<String>) -> SeriesError {
        SeriesError {
            trouble,
            text: text.into(),
        }
    }

    /// The disk refused `what` at `path`.
    pub fn disk(what: &str, path: &Path, error: &std::io::Error) -> SeriesError {
        let trouble = match error.kind() {
            std::io::ErrorKind::PermissionDenied => Trouble::Permission,
            _ => Trouble::Disk,
        };
        SeriesError::new(
            trouble,
            format!("cannot {what} {}: {error}", path.display()),
        )
    }
}

impl fmt::Display for SeriesError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str(&self.text)
    }
}

impl std::error::Error for SeriesError {}
