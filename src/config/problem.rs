//! What is wrong with a config, and where.

use std::fmt;
use std::sync::Arc;

/// One thing that is wrong with a config.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Problem {
    /// The file as the user named it.
    pub file: Arc<str>,
    /// Line, counted from 1.
    pub line: usize,
    /// Character within the line, counted from 1.
    pub column: usize,
    /// Which key, what was found, what was expected and, where it helps, what to write instead.
    pub message: String,
}

/// `limnograph.toml:12: [units] mass: found 5 kpc, a length (cm); expected a mass (g)`
impl fmt::Display for Problem {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(formatter, "{}:{}: {}", self.file, self.line, self.message)
    }
}

impl std::error::Error for Problem {}

/// A place in a file: line and column, both from 1.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Place {
    /// Line, counted from 1.
    pub line: usize,
    /// Character within the line, counted from 1.
    pub column: usize,
}

/// Turns byte offsets into places.
pub(super) struct Lines<'a> {
    text: &'a str,
    starts: Vec<usize>,
}

impl<'a> Lines<'a> {
    pub(super) fn new(text: &'a str) -> Lines<'a> {
        let starts = std::iter::once(0)
            .chain(text.match_indices('\n').map(|(at, _)| at + 1))
            .collect();
        Lines { text, starts }
    }

    pub(super) fn place(&self, offset: usize) -> Place {
        let line = self.starts.partition_point(|start| *start <= offset).max(1);
        let before = self.text.get(self.starts[line - 1]..offset).unwrap_or("");
        Place {
            line,
            column: before.chars().count() + 1,
        }
    }
}

/// A user's text as a message shows it: quoted, control characters escaped, and not without end.
pub(super) fn quoted(text: &str) -> String {
    const LONGEST: usize = 60;
    if text.chars().count() <= LONGEST {
        return format!("{text:?}");
    }
    let start: String = text.chars().take(LONGEST).collect();
    format!("{start:?}...")
}

/// A number as a person would write it.
pub(super) fn plain(number: f64) -> String {
    if number == 0.0 || (1e-4..1e7).contains(&number.abs()) {
        number.to_string()
    } else {
        format!("{number:e}")
    }
}

/// A number to seven digits, without the zeros that say nothing.
pub(super) fn brief(number: f64) -> String {
    plain(format!("{number:.6e}").parse().unwrap_or(number))
}
