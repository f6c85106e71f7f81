//! What one measured step enters: a row of the run table and any rows of other tables, as one unit.

use std::sync::Arc;

/// One value of a row; `Null` means "not measured" and is never the same as NaN.
#[derive(Clone, Debug, Default, PartialEq)]
pub enum Value {
    /// Not measured, not defined, or a gap.
    #[default]
    Null,
    /// A float cell.
    Float(f64),
    /// A signed integer cell.
    Integer(i64),
    /// An unsigned integer cell.
    Unsigned(u64),
    /// A text cell. Shared, so that a name in every row of a step costs no copy.
    Text(Arc<str>),
    /// A fixed-length vector of floats.
    Floats(Vec<f64>),
    /// A fixed-length vector of counts.
    Counts(Vec<u64>),
}

/// One row of one table on its own, values in column order.
#[derive(Clone, Debug, PartialEq)]
pub struct Row {
    /// Index into `Schema::tables`.
    pub table: u32,
    /// One value per column.
    pub values: Vec<Value>,
}

/// Where the values of one of many rows end.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Mark {
    table: u32,
    end: usize,
}

/// Many rows with all their values in one list, which keeps its memory from step to step.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Rows {
    values: Vec<Value>,
    marks: Vec<Mark>,
}

impl Rows {
    /// Begins a row; what is put from now on belongs to it.
    pub fn begin(&mut self, table: u32) {
        let end = self.values.len();
        self.marks.push(Mark { table, end });
    }

    /// The next value of the row that was begun last; without one it is dropped.
    #[inline]
    pub fn put(&mut self, value: impl Into<Value>) {
        if let Some(mark) = self.marks.last_mut() {
            self.values.push(value.into());
            mark.end += 1;
        }
    }

    /// So many nulls.
    pub fn put_nulls(&mut self, count: usize) {
        if let Some(mark) = self.marks.last_mut() {
            let nulls = std::iter::repeat_with(|| Value::Null);
            self.values.extend(nulls.take(count));
            mark.end += count;
        }
    }

    /// Replaces a value of the first row, which is whole before the others begin; beyond its end nothing happens.
    pub fn set_in_first(&mut self, column: usize, value: Value) {
        let width = self.marks.first().map_or(0, |mark| mark.end);
        if column < width {
            self.values[column] = value;
        }
    }

    /// Adds a whole row.
    pub fn push(&mut self, row: Row) {
        self.begin(row.table);
        row.values.into_iter().for_each(|value| self.put(value));
    }

    /// The table and the values of every row.
    pub fn iter(&self) -> impl Iterator<Item = (u32, &[Value])> {
        let mut start = 0;
        self.marks.iter().map(move |mark| {
            let values = &self.values[start..mark.end];
            start = mark.end;
            (mark.table, values)
        })
    }

    /// Every row on its own.
    pub fn to_vec(&self) -> Vec<Row> {
        self.iter()
            .map(|(table, values)| Row {
                table,
                values: values.to_vec(),
            })
            .collect()
    }

    /// How many rows.
    pub fn len(&self) -> usize {
        self.marks.len()
    }

    /// Is there none?
    pub fn is_empty(&self) -> bool {
        self.marks.is_empty()
    }

    /// Forgets all rows, keeping the memory.
    pub fn clear(&mut self) {
        self.values.clear();
        self.marks.clear();
    }

    /// Makes room for so many rows and values, so that filling a new one allocates no more than that.
    pub fn reserve(&mut self, rows: usize, values: usize) {
        self.marks
            .reserve_exact(rows.saturating_sub(self.marks.len()));
        self.values
            .reserve_exact(values.saturating_sub(self.values.len()));
    }

    /// Values of all rows together.
    pub fn value_count(&self) -> usize {
        self.values.len()
    }

    /// Bytes of memory held, texts and vectors apart.
    pub fn bytes_held(&self) -> usize {
        self.values.capacity() * size_of::<Value>() + self.marks.capacity() * size_of::<Mark>()
    }
}

impl From<Vec<Row>> for Rows {
    fn from(rows: Vec<Row>) -> Rows {
        let mut all = Rows::default();
        rows.into_iter().for_each(|row| all.push(row));
        all
    }
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
    pub rows: Rows,
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

impl From<&Arc<str>> for Value {
    fn from(text: &Arc<str>) -> Value {
        Value::Text(text.clone())
    }
}

impl From<&str> for Value {
    fn from(text: &str) -> Value {
        Value::Text(text.into())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rows_come_out_as_they_were_put_and_memory_is_kept() {
        let mut rows = Rows::default();
        rows.put(1.0); // belongs to no row
        rows.begin(0);
        rows.put_nulls(2);
        rows.begin(3);
        rows.put(7_u64);
        rows.put("centre");
        rows.set_in_first(1, Value::Float(0.5));
        rows.set_in_first(2, Value::Float(9.0)); // beyond the first row
        let expected = vec![
            Row {
                table: 0,
                values: vec![Value::Null, Value::Float(0.5)],
            },
            Row {
                table: 3,
                values: vec![Value::Unsigned(7), Value::from("centre")],
            },
        ];
        assert_eq!(rows.to_vec(), expected);
        assert_eq!(Rows::from(expected), rows);
        let held = rows.bytes_held();
        rows.clear();
        assert!(rows.is_empty() && rows.bytes_held() == held);
    }
}
