//! Opening a series for a person, and what is said when that fails.

use limnograph::reader::{ReadError, SeriesReader};
use std::fmt;
use std::io;
use std::path::Path;
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
    let mut reader = SeriesReader::open(path)?;
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
