//! Opening a series for a person, and what is said when that fails.

use limnograph::reader::{Obstacle, ReadError, SeriesReader};
use limnograph::series::layout::EXTENSION;
use std::fmt;
use std::io;
use std::path::{Path, PathBuf};
use std::time::Duration;

/// Why a command has nothing to show.
pub enum Failure {
    /// Standard output does not take any more.
    Output(io::Error),
    /// In words.
    Told(String),
}

impl fmt::Display for Failure {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Failure::Output(error) => write!(out, "cannot write to standard output: {error}"),
            Failure::Told(text) => out.write_str(text),
        }
    }
}

impl From<io::Error> for Failure {
    fn from(error: io::Error) -> Failure {
        Failure::Output(error)
    }
}

/// Says what was probably meant when there is no series at `path`.
fn explain(path: &Path, error: &ReadError) -> Failure {
    let shown = path.display();
    let mut text = match error.obstacle {
        Obstacle::NotFound => {
            format!("there is no {shown}; give the path of a series, a directory NAME.limno")
        }
        Obstacle::NotASeries => error.to_string(),
        _ => return Failure::Told(error.to_string()),
    };
    if let Some(found) = nearby(path) {
        text.push_str(&format!("\n  there is a series {}", found.display()));
    }
    Failure::Told(text)
}

/// A series of the same name with the ending that was left out, or one in the directory that was given.
fn nearby(path: &Path) -> Option<PathBuf> {
    let longer = PathBuf::from(format!(
        "{}.{EXTENSION}",
        path.to_string_lossy().trim_end_matches('/')
    ));
    if longer.is_dir() {
        return Some(longer);
    }
    let entries = std::fs::read_dir(path)
        .ok()?
        .filter_map(Result::ok)
        .map(|entry| entry.path());
    entries
        .filter(|path| path.extension().is_some_and(|ending| ending == EXTENSION) && path.is_dir())
        .min()
}

impl From<ReadError> for Failure {
    fn from(error: ReadError) -> Failure {
        Failure::Told(error.to_string())
    }
}

/// How often a series with an incomplete end is looked at again, and how long apart.
const LOOKS: u32 = 5;
const PAUSE: Duration = Duration::from_millis(40);

/// Opens a series. While a host writes, the end of its journal may be incomplete for a moment; a second look
/// tells that from damage.
pub fn settled(path: &Path) -> Result<SeriesReader, Failure> {
    let mut reader = SeriesReader::open(path).map_err(|error| explain(path, &error))?;
    for _ in 0..LOOKS {
        let may_be_running = reader.legs().last().is_some_and(|leg| leg.end.is_none());
        if !may_be_running || reader.damage().is_empty() {
            break;
        }
        std::thread::sleep(PAUSE);
        reader.refresh()?;
    }
    Ok(reader)
}
