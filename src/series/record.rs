//! What one measured step enters: a row of the run table and any rows of other tables, as one unit.

/// One value of a row; `Null` means "not measured" and is never the same as NaN.
#[derive(Clone, Debug, PartialEq)]
pub enum Value {
    /// Not measured, not defined, or a gap.
    Null,
    /// A float cell.
    Float(f64),
    /// A signed integer cell.
    Integer(i64),
    /// An unsigned integer cell.
    Unsigned(u64),
    /// A text cell.
    Text(String),
    /// A fixed-length vector of floats.
    Floats(Vec<f64>),
    /// A fixed-length vector of counts.
    Counts(Vec<u64>),
}

/// One row of one table, values in column order.
#[derive(Clone, Debug, PartialEq)]
pub struct Row {
    /// Index into `Schema::tables`.
    pub table: u32,
    /// One value per column.
    pub values: Vec<Value>,
}

/// Everything one step enters. It is written in one frame, so a reader sees all of it or nothing.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Record {
    /// The host's step number.
    pub step: u64,
    /// The declared time coordinate (t, a or ln a as the config says), in the host's units.
    pub time: f64,
    /// Half of this is the tolerance with which two rows count as of equal time; 0 when unknown.
    pub step_length: f64,
    /// The rows, table 0 first.
    pub rows: Vec<Row>,
    /// State that gauges need to go on exactly after a restart; opaque to the series.
    pub carry: Vec<u64>,
}

impl From<Option<f64>> for Value {
    fn from(value: Option<f64>) -> Value {
        value.map_or(Value::Null, Value::Float)
    }
}

impl From<f64> for Value {
    fn from(value: f64) -> Value {
        Value::Float(value)
    }
}

impl From<u64> for Value {
    fn from(value: u64) -> Value {
        Value::Unsigned(value)
    }
}
