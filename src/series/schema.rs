//! What a series can hold: tables of columns, each with its unit, its kind and a sentence about it.

use serde::{Deserialize, Serialize};

/// How a column's values behave from row to row; later thinning and plotting follow from it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Kind {
    /// Identifies the row: step number, time, station, shell.
    Key,
    /// The state at the row's moment.
    Instant,
    /// What happened since the last row; adds up.
    Increment,
    /// What happened since the series began; keeps its last value.
    Cumulative,
    /// A largest or smallest value.
    Extreme,
    /// Measured with the machine's clock: outside the promise of equal bits.
    WallClock,
}

/// What a cell of a column is made of.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum ValueType {
    /// IEEE 754 binary64.
    Float,
    /// Signed 64-bit integer.
    Integer,
    /// Unsigned 64-bit integer (counts and ids).
    Unsigned,
    /// UTF-8 text.
    Text,
}

/// One column of a table.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Column {
    /// Unique in its table; lower-case words joined by underscores.
    pub name: String,
    /// A unit string that astropy reads (VOUnits); empty for a pure number.
    pub unit: String,
    /// How the values behave from row to row.
    pub kind: Kind,
    /// What one value is.
    pub value: ValueType,
    /// Number of values in a cell: 1 for a plain column, more for a fixed-length vector.
    pub length: u32,
    /// One sentence: what is measured, from what, with which sign.
    pub description: String,
    /// The gauge that owns the column; `clock` and `library` for the library's own.
    pub gauge: String,
}

/// One table of a series. Table 0 is always `run`: one row per measured step.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Table {
    /// Unique in the series.
    pub name: String,
    /// One sentence.
    pub description: String,
    /// In the order in which row values are stored.
    pub columns: Vec<Column>,
}

/// All tables of a series.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Schema {
    /// Table 0 is `run`.
    pub tables: Vec<Table>,
}

impl Column {
    /// A plain (length 1) column.
    pub fn new(
        gauge: &str,
        name: impl Into<String>,
        unit: &str,
        kind: Kind,
        value: ValueType,
        description: impl Into<String>,
    ) -> Column {
        Column {
            name: name.into(),
            unit: unit.to_string(),
            kind,
            value,
            length: 1,
            description: description.into(),
            gauge: gauge.to_string(),
        }
    }
}
