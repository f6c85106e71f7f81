//! The few things the writer asks of a file system. The tests put a failing one in its place.

use std::fs::{File, OpenOptions};
use std::io;
use std::os::unix::fs::{FileExt, MetadataExt};
use std::path::Path;

/// A file that was created by us and is written by us alone.
pub trait DiskFile: Send {
    /// Writes some of `bytes` at `offset`; returns how many.
    ///
    /// # Errors
    /// Those of the system.
    fn write_at(&mut self, bytes: &[u8], offset: u64) -> io::Result<usize>;
    /// Cuts the file.
    ///
    /// # Errors
    /// Those of the system.
    fn truncate(&mut self, length: u64) -> io::Result<()>;
    /// Returns when the bytes are on stable storage.
    ///
    /// # Errors
    /// Those of the system; afterwards nothing is known of what was written since the last success.
    fn sync(&mut self) -> io::Result<()>;
    /// Does `path` still lead to this file? `false` when somebody removed or replaced it.
    fn is_at(&self, path: &Path) -> bool;
}

/// A file system.
pub trait Disk: Send {
    /// Creates a directory whose parent exists.
    ///
    /// # Errors
    /// Those of the system.
    fn create_directory(&mut self, path: &Path) -> io::Result<()>;
    /// Creates a file that did not exist.
    ///
    /// # Errors
    /// Those of the system; `AlreadyExists` when there is anything of that name.
    fn create(&mut self, path: &Path) -> io::Result<Box<dyn DiskFile>>;
    /// Returns when the entries of the directory are on stable storage.
    ///
    /// # Errors
    /// Those of the system.
    fn sync_directory(&mut self, path: &Path) -> io::Result<()>;
    /// Removes a file that was just created by us and could not be filled, or an empty directory.
    /// Nothing is said when it cannot.
    fn remove(&mut self, path: &Path);
}

/// The system's own.
#[derive(Clone, Copy, Debug, Default)]
pub struct SystemDisk;

struct SystemFile(File);

impl DiskFile for SystemFile {
    fn write_at(&mut self, bytes: &[u8], offset: u64) -> io::Result<usize> {
        self.0.write_at(bytes, offset)
    }

    fn truncate(&mut self, length: u64) -> io::Result<()> {
        self.0.set_len(length)
    }

    fn sync(&mut self) -> io::Result<()> {
        self.0.sync_data()
    }

    fn is_at(&self, path: &Path) -> bool {
        let (Ok(ours), Ok(there)) = (self.0.metadata(), std::fs::metadata(path)) else {
            return false;
        };
        (ours.dev(), ours.ino()) == (there.dev(), there.ino())
    }
}

impl Disk for SystemDisk {
    fn create_directory(&mut self, path: &Path) -> io::Result<()> {
        std::fs::create_dir(path)
    }

    fn create(&mut self, path: &Path) -> io::Result<Box<dyn DiskFile>> {
        let file = OpenOptions::new().write(true).create_new(true).open(path)?;
        Ok(Box::new(SystemFile(file)))
    }

    fn sync_directory(&mut self, path: &Path) -> io::Result<()> {
        match File::open(path)?.sync_all() {
            // Some network file systems keep no directory in a cache and say so in this way.
            Err(error) if error.kind() == io::ErrorKind::InvalidInput => Ok(()),
            other => other,
        }
    }

    fn remove(&mut self, path: &Path) {
        if std::fs::remove_file(path).is_err() {
            let _ = std::fs::remove_dir(path);
        }
    }
}

/// Writes all of `bytes` at `offset`.
///
/// # Errors
/// Those of the system; any part of the bytes may then be on the disk.
pub fn write_all(file: &mut dyn DiskFile, mut bytes: &[u8], mut offset: u64) -> io::Result<()> {
    while !bytes.is_empty() {
        match file.write_at(bytes, offset) {
            Ok(0) => return Err(io::ErrorKind::WriteZero.into()),
            Ok(count) => {
                bytes = bytes.get(count..).unwrap_or_default();
                offset += count as u64;
            }
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(())
}
