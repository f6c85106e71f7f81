//! Does a schema make sense, and does a record fit it? Checked before anything is queued, in the thread
//! that enters, so that a slip is reported where it was made and the journal never holds a row that cannot
//! be read.

use super::error::{SeriesError, Trouble};
use super::record::{Record, Value};
use super::schema::{Column, Schema, ValueType};
use std::collections::HashSet;

/// Most columns a table may have.
pub const COLUMN_LIMIT: usize = 1 << 16;
/// Most values a vector cell may have.
pub const LENGTH_LIMIT: u32 = 1 << 20;
/// Most tables a series may have.
pub const TABLE_LIMIT: usize = 1 << 12;

fn misfit(text: String) -> SeriesError {
    SeriesError::new(Trouble::Misfit, text)
}

/// Checks a schema before a series is opened with it.
///
/// # Errors
/// [`Trouble::Misfit`] with the first thing that is wrong.
pub fn check_schema(schema: &Schema) -> Result<(), SeriesError> {
    match schema.tables.first() {
        Some(first) if first.name == "run" => {}
        Some(first) => {
            return Err(misfit(format!(
                "the first table of a schema must be `run`, but it is `{}`",
                first.name
            )));
        }
        None => {
            return Err(misfit(
                "the schema has no table; the first one must be `run`".to_string(),
            ));
        }
    }
    if schema.tables.len() > TABLE_LIMIT {
        return Err(misfit(format!(
            "a schema of {} tables; at most {TABLE_LIMIT}",
            schema.tables.len()
        )));
    }
    let mut tables = HashSet::new();
    for table in &schema.tables {
        if table.name.is_empty() || !tables.insert(table.name.as_str()) {
            return Err(misfit(format!(
                "the table name `{}` is empty or stands twice in the schema",
                table.name
            )));
        }
        if table.columns.is_empty() || table.columns.len() > COLUMN_LIMIT {
            return Err(misfit(format!(
                "table `{}` has {} columns; a table has from 1 to {COLUMN_LIMIT}",
                table.name,
                table.columns.len()
            )));
        }
        let mut columns = HashSet::new();
        for column in &table.columns {
            if column.name.is_empty() || !columns.insert(column.name.as_str()) {
                return Err(misfit(format!(
                    "column name `{}` is empty or stands twice in table `{}`",
                    column.name, table.name
                )));
            }
            check_column(&table.name, column)?;
        }
    }
    Ok(())
}

fn check_column(table: &str, column: &Column) -> Result<(), SeriesError> {
    if column.length == 0 || column.length > LENGTH_LIMIT {
        return Err(misfit(format!(
            "column `{}` of table `{table}` has {} values a cell; from 1 to {LENGTH_LIMIT} are possible",
            column.name, column.length
        )));
    }
    if column.length > 1 && !matches!(column.value, ValueType::Float | ValueType::Unsigned) {
        return Err(misfit(format!(
            "column `{}` of table `{table}` is a vector of {:?}; vectors hold floats or unsigned counts",
            column.name, column.value
        )));
    }
    Ok(())
}

/// Checks a record against the schema that the series was opened with, and returns what it takes in memory while
/// it waits for the disk; its frame is never longer.
///
/// # Errors
/// [`Trouble::Misfit`] with the table, column and value that do not fit.
pub fn check_record(schema: &Schema, record: &Record) -> Result<usize, SeriesError> {
    let mut bytes = size_of::<Record>() + record.rows.bytes_held() + record.carry.capacity() * 8;
    for (number, values) in record.rows.iter() {
        let Some(table) = schema.tables.get(number as usize) else {
            return Err(misfit(format!(
                "step {}: a row for table number {number}, but the schema has {}",
                record.step,
                schema.tables.len()
            )));
        };
        if values.len() != table.columns.len() {
            return Err(misfit(format!(
                "step {}: a row of {} values for table `{}`, which has {} columns",
                record.step,
                values.len(),
                table.name,
                table.columns.len()
            )));
        }
        for (value, column) in values.iter().zip(&table.columns) {
            if !fits(value, column) {
                return Err(misfit(format!(
                    "step {}: {} does not fit column `{}` of table `{}`, which holds {} {:?} a cell",
                    record.step,
                    kind_of(value),
                    column.name,
                    table.name,
                    column.length,
                    column.value
                )));
            }
            bytes += match value {
                Value::Text(text) => text.len(),
                Value::Floats(values) => values.len() * 8,
                Value::Counts(values) => values.len() * 8,
                _ => 0,
            };
        }
    }
    Ok(bytes)
}

#[inline]
fn fits(value: &Value, column: &Column) -> bool {
    let plain = column.length == 1;
    match value {
        Value::Null => true,
        Value::Float(_) => plain && column.value == ValueType::Float,
        Value::Integer(_) => plain && column.value == ValueType::Integer,
        Value::Unsigned(_) => plain && column.value == ValueType::Unsigned,
        Value::Text(text) => column.value == ValueType::Text && text.len() <= u32::MAX as usize,
        Value::Floats(values) => {
            !plain && column.value == ValueType::Float && values.len() == column.length as usize
        }
        Value::Counts(values) => {
            !plain && column.value == ValueType::Unsigned && values.len() == column.length as usize
        }
    }
}

fn kind_of(value: &Value) -> String {
    match value {
        Value::Null => "null".to_string(),
        Value::Float(_) => "a float".to_string(),
        Value::Integer(_) => "a signed integer".to_string(),
        Value::Unsigned(_) => "an unsigned integer".to_string(),
        Value::Text(_) => "a text".to_string(),
        Value::Floats(values) => format!("a vector of {} floats", values.len()),
        Value::Counts(values) => format!("a vector of {} counts", values.len()),
    }
}
