//! Reading the manifests of a directory.

use super::error::{Damage, DamageKind, Obstacle, ReadError};
use crate::series::layout::{FORMAT, FileKind};
use crate::series::manifest::{MANIFEST_LIMIT, Manifest, ManifestFault};
use std::collections::BTreeMap;
use std::fs::File;
use std::io::Read;
use std::path::Path;

/// The manifests by number, and what is wrong with those that cannot be used.
#[derive(Default)]
pub struct Manifests {
    whole: BTreeMap<u32, Manifest>,
    damaged: BTreeMap<u32, Damage>,
}

impl Manifests {
    /// Reads those of the listed ones that are not known to be whole yet.
    ///
    /// # Errors
    /// When a newer version wrote one.
    pub fn read(&mut self, directory: &Path, numbers: &[u32]) -> Result<(), ReadError> {
        for &number in numbers {
            if self.whole.contains_key(&number) {
                continue;
            }
            let path = FileKind::Manifest.path(directory, number);
            let (length, fault) = match read_file(&path) {
                Ok(bytes) => match Manifest::decode(&bytes) {
                    Ok(manifest) => {
                        self.damaged.remove(&number);
                        self.whole.insert(number, manifest);
                        continue;
                    }
                    Err(fault) => (bytes.len() as u64, fault),
                },
                Err(text) => (0, ManifestFault::Damaged(text)),
            };
            let (kind, text) = match fault {
                ManifestFault::Newer(format) => return Err(newer(&path, format)),
                ManifestFault::Torn => {
                    (DamageKind::Torn, "the manifest ends too early".to_string())
                }
                ManifestFault::Damaged(text) => (
                    DamageKind::Corrupted,
                    format!("the manifest cannot be used: {text}"),
                ),
            };
            let file = FileKind::Manifest.name(number);
            self.damaged.insert(
                number,
                Damage {
                    file,
                    from: 0,
                    to: length,
                    kind,
                    text,
                },
            );
        }
        Ok(())
    }

    /// The manifest that opened a leg.
    pub fn of_leg(&self, leg: u32) -> Option<&Manifest> {
        self.whole.values().find(|manifest| manifest.leg == leg)
    }

    /// The latest one.
    pub fn latest(&self) -> Option<&Manifest> {
        self.whole.values().max_by_key(|manifest| manifest.leg)
    }

    /// All that are whole, by number.
    pub fn all(&self) -> impl Iterator<Item = &Manifest> {
        self.whole.values()
    }

    /// What is wrong with the others.
    pub fn damage(&self) -> impl Iterator<Item = &Damage> {
        self.damaged.values()
    }
}

/// The message for a file of a format that is not known here.
pub fn newer(path: &Path, format: u32) -> ReadError {
    ReadError::new(
        Obstacle::Newer,
        format!(
            "{} has format {format}, written by a newer limnograph; this one reads up to format {FORMAT}: \
             use the newer one",
            path.display()
        ),
    )
}

fn read_file(path: &Path) -> Result<Vec<u8>, String> {
    let mut bytes = Vec::new();
    let file = File::open(path).map_err(|error| error.to_string())?;
    file.take(MANIFEST_LIMIT + 1)
        .read_to_end(&mut bytes)
        .map_err(|error| error.to_string())?;
    if bytes.len() as u64 > MANIFEST_LIMIT {
        return Err(format!("it is longer than {MANIFEST_LIMIT} bytes"));
    }
    Ok(bytes)
}
