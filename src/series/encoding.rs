//! The payload of a record frame: everything one step entered, in the fewest plain bytes.
//!
//! Little-endian throughout. Null cells take one bit and nothing else; floats keep all their bits, so a
//! NaN comes back with its payload and is never confused with null.

use super::record::{Record, Rows, Value};
use super::schema::{Column, Schema, ValueType};

/// What stands before a record's rows.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Preface {
    /// The leg it was entered in.
    pub leg: u32,
    /// The record's number in its leg, from 0. A record that had to be written twice keeps its number.
    pub number: u64,
    /// The host's step number.
    pub step: u64,
    /// The declared time coordinate.
    pub time: f64,
    /// The host's step length in the same units.
    pub step_length: f64,
    /// When the host entered it: milliseconds since 1970-01-01 UTC.
    pub entered: u64,
}

/// Bytes of a [`Preface`] and of the counts behind it.
const PREFACE_BYTES: usize = 4 + 8 + 8 + 8 + 8 + 8 + 4 + 4;

/// Appends the payload of a record; `record` must fit `schema` (see [`super::fit`]).
pub fn encode(
    into: &mut Vec<u8>,
    schema: &Schema,
    record: &Record,
    leg: u32,
    number: u64,
    entered: u64,
) {
    into.extend_from_slice(&leg.to_le_bytes());
    into.extend_from_slice(&number.to_le_bytes());
    into.extend_from_slice(&record.step.to_le_bytes());
    into.extend_from_slice(&record.time.to_bits().to_le_bytes());
    into.extend_from_slice(&record.step_length.to_bits().to_le_bytes());
    into.extend_from_slice(&entered.to_le_bytes());
    into.extend_from_slice(&(record.carry.len() as u32).to_le_bytes());
    into.extend_from_slice(&(record.rows.len() as u32).to_le_bytes());
    for word in &record.carry {
        into.extend_from_slice(&word.to_le_bytes());
    }
    for (table, values) in record.rows.iter() {
        let width = schema
            .tables
            .get(table as usize)
            .map_or(0, |table| table.columns.len());
        encode_row(into, width, table, values);
    }
}

fn encode_row(into: &mut Vec<u8>, width: usize, table: u32, values: &[Value]) {
    into.extend_from_slice(&table.to_le_bytes());
    let length_at = into.len();
    into.extend_from_slice(&[0; 4]);
    let start = into.len();
    into.resize(start + width.div_ceil(8), 0);
    for (index, value) in values.iter().enumerate().take(width) {
        match value {
            Value::Null => {
                into[start + index / 8] |= 1 << (index % 8);
                continue;
            }
            Value::Float(number) => into.extend_from_slice(&number.to_bits().to_le_bytes()),
            Value::Integer(number) => into.extend_from_slice(&number.to_le_bytes()),
            Value::Unsigned(number) => into.extend_from_slice(&number.to_le_bytes()),
            Value::Text(text) => {
                into.extend_from_slice(&(text.len() as u32).to_le_bytes());
                into.extend_from_slice(text.as_bytes());
            }
            Value::Floats(numbers) => {
                for number in numbers {
                    into.extend_from_slice(&number.to_bits().to_le_bytes());
                }
            }
            Value::Counts(numbers) => {
                for number in numbers {
                    into.extend_from_slice(&number.to_le_bytes());
                }
            }
        }
    }
    let length = (into.len() - start) as u32;
    into[length_at..length_at + 4].copy_from_slice(&length.to_le_bytes());
}

/// A cell as it stands in the bytes; vectors are not yet taken apart.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Cell<'a> {
    /// Not measured.
    Null,
    /// A plain number's eight bytes, to be read as the column's type says.
    Word(u64),
    /// UTF-8.
    Text(&'a str),
    /// `length` words of eight bytes.
    Words(&'a [u8]),
}

/// Walks over bytes that a file may have garbled: every step can fail, none can panic.
struct Walk<'a> {
    rest: &'a [u8],
}

impl<'a> Walk<'a> {
    fn take(&mut self, count: usize) -> Option<&'a [u8]> {
        let (taken, rest) = self.rest.split_at_checked(count)?;
        self.rest = rest;
        Some(taken)
    }

    fn four(&mut self) -> Option<u32> {
        Some(u32::from_le_bytes(self.take(4)?.try_into().ok()?))
    }

    fn eight(&mut self) -> Option<u64> {
        Some(u64::from_le_bytes(self.take(8)?.try_into().ok()?))
    }
}

/// A record's payload, split into its parts.
#[derive(Clone, Debug)]
pub struct Payload<'a> {
    /// What stands before the rows.
    pub preface: Preface,
    carry: &'a [u8],
    row_count: u32,
    rows: &'a [u8],
}

impl<'a> Payload<'a> {
    /// Reads all but the rows; `None` when the bytes are no record.
    pub fn read(bytes: &'a [u8]) -> Option<Payload<'a>> {
        if bytes.len() < PREFACE_BYTES {
            return None;
        }
        let mut walk = Walk { rest: bytes };
        let preface = Preface {
            leg: walk.four()?,
            number: walk.eight()?,
            step: walk.eight()?,
            time: f64::from_bits(walk.eight()?),
            step_length: f64::from_bits(walk.eight()?),
            entered: walk.eight()?,
        };
        let carry_count = walk.four()? as usize;
        let row_count = walk.four()?;
        let carry = walk.take(carry_count.checked_mul(8)?)?;
        Some(Payload {
            preface,
            carry,
            row_count,
            rows: walk.rest,
        })
    }

    /// The state that gauges left with the record.
    pub fn carry(&self) -> impl Iterator<Item = u64> + 'a {
        self.carry
            .chunks_exact(8)
            .map(|word| u64::from_le_bytes(word.try_into().unwrap_or_default()))
    }

    /// Calls `visit(table, cells)` for every row; `None` when the rows do not fit the schema. Whoever keeps
    /// what it is shown must throw it away then.
    pub fn rows(&self, schema: &Schema, mut visit: impl FnMut(usize, &[Cell<'a>])) -> Option<()> {
        let mut walk = Walk { rest: self.rows };
        let mut cells = Vec::new();
        for _ in 0..self.row_count {
            let table = walk.four()? as usize;
            let length = walk.four()? as usize;
            let columns = &schema.tables.get(table)?.columns;
            let mut row = Walk {
                rest: walk.take(length)?,
            };
            let nulls = row.take(columns.len().div_ceil(8))?;
            cells.clear();
            for (index, column) in columns.iter().enumerate() {
                let is_null = nulls[index / 8] >> (index % 8) & 1 == 1;
                cells.push(if is_null {
                    Cell::Null
                } else {
                    read_cell(&mut row, column)?
                });
            }
            if !row.rest.is_empty() {
                return None;
            }
            visit(table, &cells);
        }
        walk.rest.is_empty().then_some(())
    }

    /// The record as it was entered; `None` when its rows do not fit the schema.
    pub fn record(&self, schema: &Schema) -> Option<Record> {
        let mut rows = Rows::default();
        self.rows(schema, |table, cells| {
            rows.begin(table as u32);
            for (cell, column) in cells.iter().zip(&schema.tables[table].columns) {
                rows.put(value(cell, column));
            }
        })?;
        Some(Record {
            step: self.preface.step,
            time: self.preface.time,
            step_length: self.preface.step_length,
            rows,
            carry: self.carry().collect(),
        })
    }
}

fn read_cell<'a>(row: &mut Walk<'a>, column: &Column) -> Option<Cell<'a>> {
    if column.value == ValueType::Text {
        let length = row.four()? as usize;
        return Some(Cell::Text(std::str::from_utf8(row.take(length)?).ok()?));
    }
    if column.length == 1 {
        return Some(Cell::Word(row.eight()?));
    }
    Some(Cell::Words(
        row.take((column.length as usize).checked_mul(8)?)?,
    ))
}

/// The eight-byte words of a vector cell.
pub fn words(bytes: &[u8]) -> impl Iterator<Item = u64> + '_ {
    bytes
        .chunks_exact(8)
        .map(|word| u64::from_le_bytes(word.try_into().unwrap_or_default()))
}

fn value(cell: &Cell<'_>, column: &Column) -> Value {
    match (cell, column.value) {
        (Cell::Null, _) => Value::Null,
        (Cell::Word(word), ValueType::Float) => Value::Float(f64::from_bits(*word)),
        (Cell::Word(word), ValueType::Integer) => Value::Integer(*word as i64),
        (Cell::Word(word), _) => Value::Unsigned(*word),
        (Cell::Text(text), _) => Value::from(*text),
        (Cell::Words(bytes), ValueType::Float) => {
            Value::Floats(words(bytes).map(f64::from_bits).collect())
        }
        (Cell::Words(bytes), _) => Value::Counts(words(bytes).collect()),
    }
}
