//! What a reader gets of a column: typed values and which of them are there.

use super::store::Store;
use crate::series::record::Value;
use crate::series::schema::{Column, ValueType};

/// Values of one type, one a row; null is apart from every value, NaN included.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Values<T> {
    /// One a row; where it is null, the type's default.
    pub values: Vec<T>,
    /// Is there a value in this row?
    pub is_present: Vec<bool>,
}

impl<T: Clone + Default> Values<T> {
    fn with_capacity(rows: usize) -> Values<T> {
        Values {
            values: Vec::with_capacity(rows),
            is_present: Vec::with_capacity(rows),
        }
    }

    fn push(&mut self, value: Option<T>) {
        self.is_present.push(value.is_some());
        self.values.push(value.unwrap_or_default());
    }

    /// The value of a row; `None` when it is null or there is no such row.
    pub fn get(&self, row: usize) -> Option<&T> {
        self.values.get(row).filter(|_| self.is_present[row])
    }

    /// Row by row.
    pub fn iter(&self) -> impl Iterator<Item = Option<&T>> {
        self.values
            .iter()
            .zip(&self.is_present)
            .map(|(value, present)| present.then_some(value))
    }
}

/// A whole column of a table.
#[derive(Clone, Debug, PartialEq)]
pub enum ColumnValues {
    /// Plain floats.
    Float(Values<f64>),
    /// Plain signed integers.
    Integer(Values<i64>),
    /// Plain unsigned integers.
    Unsigned(Values<u64>),
    /// Texts.
    Text(Values<String>),
    /// Vectors of floats, all of the column's length.
    Floats(Values<Vec<f64>>),
    /// Vectors of counts, all of the column's length.
    Counts(Values<Vec<u64>>),
}

impl ColumnValues {
    /// Room for a column's values.
    pub(super) fn for_column(column: &Column, rows: usize) -> ColumnValues {
        match (column.value, column.length) {
            (ValueType::Text, _) => ColumnValues::Text(Values::with_capacity(rows)),
            (ValueType::Float, 1) => ColumnValues::Float(Values::with_capacity(rows)),
            (ValueType::Float, _) => ColumnValues::Floats(Values::with_capacity(rows)),
            (ValueType::Integer, _) => ColumnValues::Integer(Values::with_capacity(rows)),
            (ValueType::Unsigned, 1) => ColumnValues::Unsigned(Values::with_capacity(rows)),
            (ValueType::Unsigned, _) => ColumnValues::Counts(Values::with_capacity(rows)),
        }
    }

    /// Adds a row: that of a leg's store, or null when the leg does not have the column.
    pub(super) fn push_from(&mut self, store: Option<&Store>, row: usize) {
        let words = || store.and_then(|store| store.words(row));
        let word = || words().and_then(|words| words.first().copied());
        match self {
            ColumnValues::Float(values) => values.push(word().map(f64::from_bits)),
            ColumnValues::Integer(values) => values.push(word().map(|word| word as i64)),
            ColumnValues::Unsigned(values) => values.push(word()),
            ColumnValues::Text(values) => {
                values.push(store.and_then(|store| store.text(row)).map(str::to_string));
            }
            ColumnValues::Floats(values) => {
                values
                    .push(words().map(|words| words.iter().copied().map(f64::from_bits).collect()));
            }
            ColumnValues::Counts(values) => values.push(words().map(<[u64]>::to_vec)),
        }
    }

    /// Number of rows.
    pub fn len(&self) -> usize {
        match self {
            ColumnValues::Float(values) => values.values.len(),
            ColumnValues::Integer(values) => values.values.len(),
            ColumnValues::Unsigned(values) => values.values.len(),
            ColumnValues::Text(values) => values.values.len(),
            ColumnValues::Floats(values) => values.values.len(),
            ColumnValues::Counts(values) => values.values.len(),
        }
    }

    /// Is there no row at all?
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// One cell, as it was entered; null beyond the end.
    pub fn value(&self, row: usize) -> Value {
        let value = match self {
            ColumnValues::Float(values) => values.get(row).copied().map(Value::Float),
            ColumnValues::Integer(values) => values.get(row).copied().map(Value::Integer),
            ColumnValues::Unsigned(values) => values.get(row).copied().map(Value::Unsigned),
            ColumnValues::Text(values) => values.get(row).map(|text| Value::from(text.as_str())),
            ColumnValues::Floats(values) => values.get(row).cloned().map(Value::Floats),
            ColumnValues::Counts(values) => values.get(row).cloned().map(Value::Counts),
        };
        value.unwrap_or(Value::Null)
    }

    /// A plain number as a float (counts beyond 2^53 are rounded); `None` for null, text and vectors.
    pub fn number(&self, row: usize) -> Option<f64> {
        match self {
            ColumnValues::Float(values) => values.get(row).copied(),
            ColumnValues::Integer(values) => values.get(row).map(|&value| value as f64),
            ColumnValues::Unsigned(values) => values.get(row).map(|&value| value as f64),
            _ => None,
        }
    }

    /// Is the cell null?
    pub fn is_null(&self, row: usize) -> bool {
        let present = match self {
            ColumnValues::Float(values) => &values.is_present,
            ColumnValues::Integer(values) => &values.is_present,
            ColumnValues::Unsigned(values) => &values.is_present,
            ColumnValues::Text(values) => &values.is_present,
            ColumnValues::Floats(values) => &values.is_present,
            ColumnValues::Counts(values) => &values.is_present,
        };
        !present.get(row).copied().unwrap_or(false)
    }
}
