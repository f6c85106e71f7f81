//! Why a series cannot be read at all, and what is wrong with one that can.

use std::fmt;
use std::path::Path;

/// Why there is nothing to read.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Obstacle {
    /// Nothing is there.
    NotFound,
    /// Something is there, but not a series.
    NotASeries,
    /// A newer version of this library wrote it.
    Newer,
    /// The system does not let us read it.
    Permission,
    /// The disk refuses.
    Disk,
}

/// A series that cannot be opened for reading.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ReadError {
    /// What is in the way.
    pub obstacle: Obstacle,
    text: String,
}

impl ReadError {
    /// An error of this kind with this text.
    pub fn new(obstacle: Obstacle, text: impl Into<String>) -> ReadError {
        ReadError {
            obstacle,
            text: text.into(),
        }
    }

    /// The system refused to read `path`.
    pub fn system(path: &Path, error: &std::io::Error) -> ReadError {
        let obstacle = match error.kind() {
            std::io::ErrorKind::NotFound => Obstacle::NotFound,
            std::io::ErrorKind::PermissionDenied => Obstacle::Permission,
            _ => Obstacle::Disk,
        };
        ReadError::new(obstacle, format!("cannot read {}: {error}", path.display()))
    }
}

impl fmt::Display for ReadError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str(&self.text)
    }
}

impl std::error::Error for ReadError {}

/// In which way a part of a series is damaged.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum DamageKind {
    /// The file ends within a frame: the writer was killed there, is writing it right now, or the file was cut.
    Torn,
    /// Bytes are not what they were when they were written.
    Corrupted,
    /// The checksum is right, but the content cannot be what this version of the format means.
    Malformed,
    /// A file that should be there is not, or the system cannot read it.
    Unreadable,
    /// Records that were entered are in no file, and no gap says why.
    Missing,
}

/// One damaged stretch. For [`DamageKind::Missing`] `file` names the leg, and `from` and `to` are numbers of
/// records instead of bytes.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Damage {
    /// The file's name in the series directory.
    pub file: String,
    /// The first byte that cannot be used.
    pub from: u64,
    /// The byte after the last one that cannot be used.
    pub to: u64,
    /// In which way.
    pub kind: DamageKind,
    /// In plain words, what is lost and what is not.
    pub text: String,
}

/// How much damage there is, in a few words: `in 2 places; 1 step is lost`. Empty when there is none.
pub fn extent(damage: &[Damage]) -> String {
    let places = damage
        .iter()
        .filter(|damage| damage.kind != DamageKind::Missing)
        .count();
    let lost = damage
        .iter()
        .filter(|damage| damage.kind == DamageKind::Missing);
    let lost = lost.fold(0_u64, |sum, damage| {
        sum.saturating_add(damage.to.saturating_sub(damage.from))
    });
    let mut parts = Vec::new();
    if places > 0 {
        parts.push(format!(
            "in {places} {}",
            if places == 1 { "place" } else { "places" }
        ));
    }
    if lost > 0 {
        parts.push(if lost == 1 {
            "1 step is lost".to_string()
        } else {
            format!("{lost} steps are lost")
        });
    }
    parts.join("; ")
}
