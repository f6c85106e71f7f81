//! The names of the files of a series, and which of them a directory holds.

use std::io;
use std::path::{Path, PathBuf};

/// What the name of a series directory ends in.
pub const EXTENSION: &str = "limno";
/// The newest format of manifests and journals that this version writes and reads.
pub const FORMAT: u32 = 1;

/// The two kinds of numbered files.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum FileKind {
    /// What a leg says of itself: `manifest-000001.txt`.
    Manifest,
    /// The rows in the order in which they were entered: `journal-000001.frames`.
    Journal,
}

impl FileKind {
    fn parts(self) -> (&'static str, &'static str) {
        match self {
            FileKind::Manifest => ("manifest-", ".txt"),
            FileKind::Journal => ("journal-", ".frames"),
        }
    }

    /// The file's name without its directory.
    pub fn name(self, number: u32) -> String {
        let (before, after) = self.parts();
        format!("{before}{number:06}{after}")
    }

    /// The number in a file's name, when it is the name of a file of this kind exactly as we write it.
    pub fn number(self, name: &str) -> Option<u32> {
        let (before, after) = self.parts();
        let digits = name.strip_prefix(before)?.strip_suffix(after)?;
        let number: u32 = digits.parse().ok()?;
        (number > 0 && self.name(number) == name).then_some(number)
    }

    /// The file's path in the series `directory`.
    pub fn path(self, directory: &Path, number: u32) -> PathBuf {
        directory.join(self.name(number))
    }
}

/// What a directory holds, numbers ascending.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Listing {
    /// Numbers of the manifests.
    pub manifests: Vec<u32>,
    /// Numbers of the journals.
    pub journals: Vec<u32>,
    /// Is there nothing at all, other files included?
    pub is_empty: bool,
}

impl Listing {
    /// Reads the directory.
    ///
    /// # Errors
    /// Those of the system.
    pub fn of(directory: &Path) -> io::Result<Listing> {
        let mut listing = Listing {
            is_empty: true,
            ..Listing::default()
        };
        for entry in std::fs::read_dir(directory)? {
            let name = entry?.file_name();
            listing.is_empty = false;
            let Some(name) = name.to_str() else { continue };
            if let Some(number) = FileKind::Manifest.number(name) {
                listing.manifests.push(number);
            } else if let Some(number) = FileKind::Journal.number(name) {
                listing.journals.push(number);
            }
        }
        listing.manifests.sort_unstable();
        listing.journals.sort_unstable();
        Ok(listing)
    }

    /// Is there any file of a series?
    pub fn is_series(&self) -> bool {
        !self.manifests.is_empty() || !self.journals.is_empty()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_file_name_gives_its_number_only_when_it_is_exactly_ours() {
        assert_eq!(FileKind::Manifest.number("manifest-000012.txt"), Some(12));
        assert_eq!(
            FileKind::Journal.number("journal-1000000.frames"),
            Some(1_000_000)
        );
        for name in [
            "manifest-12.txt",
            "manifest-000000.txt",
            "manifest-+00012.txt",
            "manifest-000012.txt~",
            "journal-000012.txt",
            "journal-99999999999.frames",
        ] {
            assert_eq!(FileKind::Manifest.number(name), None, "{name}");
            assert_eq!(FileKind::Journal.number(name), None, "{name}");
        }
    }
}
