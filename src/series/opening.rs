//! Opening: a new directory, or one more leg of a series that is there. Done once, before the first step,
//! and the only moment at which a caller waits for the disk without a limit.

use super::disk::{Disk, DiskFile, write_all};
use super::error::{SeriesError, Trouble};
use super::layout::{EXTENSION, FORMAT, FileKind, Listing};
use super::manifest::{LegNote, MANIFEST_LIMIT, Manifest, ManifestFault, sha256};
use super::schema::{Column, Schema};
use super::{Opening, now_milliseconds};
use std::io;
use std::path::Path;

/// A leg that has its manifest on the disk.
pub struct Leg {
    /// What was written.
    pub manifest: Manifest,
    /// The manifest file's bytes, to be written again should the directory be lost.
    pub manifest_bytes: Vec<u8>,
    /// The number to try first for the next journal.
    pub next_journal: u32,
}

/// Creates the directory if need be and writes the manifest of a new leg.
///
/// # Errors
/// Says what is in the way and what to do.
pub fn begin(disk: &mut dyn Disk, directory: &Path, opening: &Opening) -> Result<Leg, SeriesError> {
    let (listing, created) = find_or_create(disk, directory)?;
    let earlier = Earlier::read(directory, &listing)?;
    if let (Some(last), false) = (&earlier.last, opening.accepts_changes) {
        check_continuity(directory, last, opening)?;
    }
    let leg = write_manifest(disk, directory, &listing, &earlier, opening).inspect_err(|_| {
        if created {
            disk.remove(directory);
        }
    })?;
    if created && let Some(parent) = directory.parent() {
        // A parent that cannot be opened for reading can still hold the series.
        let _ = disk.sync_directory(if parent.as_os_str().is_empty() {
            Path::new(".")
        } else {
            parent
        });
    }
    disk.sync_directory(directory)
        .map_err(|error| SeriesError::disk("sync", directory, &error))?;
    Ok(leg)
}

fn find_or_create(disk: &mut dyn Disk, directory: &Path) -> Result<(Listing, bool), SeriesError> {
    let shown = directory.display();
    if directory
        .extension()
        .is_none_or(|extension| extension != EXTENSION)
    {
        return Err(SeriesError::new(
            Trouble::NotASeries,
            format!(
                "the path {shown} does not end in `.{EXTENSION}`; a series is a directory of that kind of name"
            ),
        ));
    }
    match disk.create_directory(directory) {
        Ok(()) => {
            return Ok((
                Listing {
                    is_empty: true,
                    ..Listing::default()
                },
                true,
            ));
        }
        Err(error) if error.kind() == io::ErrorKind::AlreadyExists => {}
        Err(error) if error.kind() == io::ErrorKind::NotFound => {
            return Err(SeriesError::new(
                Trouble::ParentMissing,
                format!(
                    "cannot create {shown}: the directory that should hold it does not exist; create it first"
                ),
            ));
        }
        Err(error) => return Err(SeriesError::disk("create", directory, &error)),
    }
    if !directory.is_dir() {
        return Err(SeriesError::new(
            Trouble::NotASeries,
            format!(
                "{shown} exists and is not a directory; move it away or choose another path for the series"
            ),
        ));
    }
    let listing =
        Listing::of(directory).map_err(|error| SeriesError::disk("list", directory, &error))?;
    if !listing.is_empty && !listing.is_series() {
        return Err(SeriesError::new(
            Trouble::NotASeries,
            format!(
                "{shown} is a directory with other things in it and no manifest or journal of a series; \
                 choose another path or empty it"
            ),
        ));
    }
    Ok((listing, false))
}

/// What the manifests that are there say.
#[derive(Default)]
struct Earlier {
    last: Option<Manifest>,
    legs: Vec<LegNote>,
}

impl Earlier {
    /// Damaged manifests are passed over: they must not keep a run from going on.
    fn read(directory: &Path, listing: &Listing) -> Result<Earlier, SeriesError> {
        let mut earlier = Earlier::default();
        for &number in &listing.manifests {
            let path = FileKind::Manifest.path(directory, number);
            let length = std::fs::metadata(&path).map(|metadata| metadata.len());
            let length = length.map_err(|error| SeriesError::disk("read", &path, &error))?;
            if length > MANIFEST_LIMIT {
                continue;
            }
            let bytes =
                std::fs::read(&path).map_err(|error| SeriesError::disk("read", &path, &error))?;
            match Manifest::decode(&bytes) {
                Ok(manifest) => {
                    for note in &manifest.legs {
                        if !earlier.legs.iter().any(|known| known.leg == note.leg) {
                            earlier.legs.push(note.clone());
                        }
                    }
                    earlier.last = Some(manifest);
                }
                Err(ManifestFault::Newer(format)) => {
                    return Err(SeriesError::new(
                        Trouble::Newer,
                        format!(
                            "{} has format {format}, written by a newer limnograph; this one writes format \
                             {FORMAT}; link the newer one, or choose another path",
                            path.display()
                        ),
                    ));
                }
                Err(_) => {}
            }
        }
        earlier.legs.sort_by_key(|note| note.leg);
        Ok(earlier)
    }
}

/// A column that goes on must mean the same thing; new columns and columns that end are fine.
fn check_continuity(
    directory: &Path,
    last: &Manifest,
    opening: &Opening,
) -> Result<(), SeriesError> {
    for table in &opening.schema.tables {
        let Some(before) = last
            .schema
            .tables
            .iter()
            .find(|before| before.name == table.name)
        else {
            continue;
        };
        for column in &table.columns {
            let Some(old) = before.columns.iter().find(|old| old.name == column.name) else {
                continue;
            };
            if let Some(what) = difference(old, column) {
                return Err(SeriesError::new(
                    Trouble::Changed,
                    format!(
                        "column `{}` of table `{}` in {} had {what} in the legs before; \
                         undo the change, begin a new series, or say at opening that it is meant",
                        column.name,
                        table.name,
                        directory.display(),
                    ),
                ));
            }
        }
    }
    Ok(())
}

fn difference(old: &Column, new: &Column) -> Option<String> {
    if old.unit != new.unit {
        Some(format!("the unit `{}`, now `{}`,", old.unit, new.unit))
    } else if old.value != new.value || old.length != new.length {
        Some(format!(
            "{} {:?} a cell, now {} {:?},",
            old.length, old.value, new.length, new.value
        ))
    } else if old.kind != new.kind {
        Some(format!("the kind {:?}, now {:?},", old.kind, new.kind))
    } else {
        None
    }
}

fn write_manifest(
    disk: &mut dyn Disk,
    directory: &Path,
    listing: &Listing,
    earlier: &Earlier,
    opening: &Opening,
) -> Result<Leg, SeriesError> {
    let highest_known = earlier.legs.last().map_or(0, |note| note.leg);
    let mut number = listing
        .manifests
        .last()
        .copied()
        .unwrap_or(0)
        .max(highest_known);
    loop {
        number = number.checked_add(1).ok_or_else(|| {
            SeriesError::new(
                Trouble::Disk,
                format!("no manifest number is left in {}", directory.display()),
            )
        })?;
        let path = FileKind::Manifest.path(directory, number);
        // Creating it exclusively is the claim to the leg of that number: two openers never share one.
        let mut file = match disk.create(&path) {
            Ok(file) => file,
            Err(error) if error.kind() == io::ErrorKind::AlreadyExists => continue,
            Err(error) => return Err(SeriesError::disk("create", &path, &error)),
        };
        let manifest = describe(number, earlier, opening);
        let manifest_bytes = manifest.encode().map_err(|error| {
            SeriesError::new(
                Trouble::Misfit,
                format!("the manifest cannot be written as JSON: {error}"),
            )
        })?;
        if let Err(error) = write_whole(file.as_mut(), &manifest_bytes) {
            disk.remove(&path);
            return Err(SeriesError::disk("write", &path, &error));
        }
        let next_journal = listing
            .journals
            .last()
            .map_or(1, |last| last.saturating_add(1));
        return Ok(Leg {
            manifest,
            manifest_bytes,
            next_journal,
        });
    }
}

/// Writes and syncs a file that is complete from the start.
///
/// # Errors
/// Those of the system.
pub fn write_whole(file: &mut dyn DiskFile, bytes: &[u8]) -> io::Result<()> {
    write_all(file, bytes, 0)?;
    file.sync()
}

fn describe(leg: u32, earlier: &Earlier, opening: &Opening) -> Manifest {
    let opened = now_milliseconds();
    let config_sha256 = sha256(&opening.config_text);
    let mut legs = earlier.legs.clone();
    legs.push(LegNote {
        leg,
        opened,
        library_version: opening.library_version.clone(),
        config_sha256: config_sha256.clone(),
    });
    Manifest {
        format: FORMAT,
        leg,
        opened,
        library_version: opening.library_version.clone(),
        host: opening.host.clone(),
        setting: opening.setting.clone(),
        time_column: opening.time_column.clone(),
        config_text: opening.config_text.clone(),
        config_sha256,
        schema: opening.schema.clone(),
        legs,
    }
}

/// The time column must be one that the run table has.
///
/// # Errors
/// [`Trouble::Misfit`].
pub fn check_time_column(schema: &Schema, name: &str) -> Result<(), SeriesError> {
    let known = schema
        .tables
        .first()
        .is_some_and(|run| run.columns.iter().any(|column| column.name == name));
    if name.is_empty() || known {
        return Ok(());
    }
    Err(SeriesError::new(
        Trouble::Misfit,
        format!(
            "the time column `{name}` is not a column of the run table; name one that is, or none"
        ),
    ))
}
