//! Series written by earlier versions stay readable. `tests/golden/format_1` was written by version 0.1.0 and is
//! never changed: steps 0 to 11 of the invented run, then a restart that does steps 8 to 15.

#![allow(clippy::expect_used)]

mod common;

use common::record;
use limnograph::reader::{Selection, SeriesReader};
use limnograph::series::record::Value;

#[test]
fn format_1_reads_as_it_was_written() {
    let path = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/golden/format_1");
    let reader = SeriesReader::open(path).expect("opens");
    assert_eq!(reader.damage(), []);
    let legs: Vec<_> = reader
        .legs()
        .iter()
        .map(|leg| (leg.number, leg.records, leg.superseded))
        .collect();
    assert_eq!(legs, [(1, 12, 4), (2, 8, 0)]);
    assert_eq!(
        reader
            .table_with("run", Selection::Everything)
            .map(|run| run.rows()),
        Some(20)
    );
    for (number, name) in ["run", "wind_shells", "events"].into_iter().enumerate() {
        let table = reader.table(name).expect("table");
        let columns: Vec<_> = (0..table.columns().len())
            .map(|column| table.column_rows(column, 0..table.rows()))
            .collect();
        let expected = (0..16)
            .flat_map(|step| record(step).rows.to_vec())
            .filter(|row| row.table == number as u32);
        for (row, expected) in expected.enumerate() {
            for (column, value) in columns.iter().zip(&expected.values) {
                assert!(
                    is_same(&column.value(row), value),
                    "{name}, row {row}: {value:?}"
                );
            }
        }
    }
    let last = reader
        .last_record(None, 0.0)
        .expect("reads")
        .expect("a record");
    assert_eq!(
        (last.step, last.time, last.carry),
        (15, record(15).time, vec![15, 225])
    );
}

/// Sines and exponentials of another machine's mathematical library may differ in the last digit.
fn is_same(read: &Value, expected: &Value) -> bool {
    match (read, expected) {
        (Value::Float(read), Value::Float(expected)) => {
            (read - expected).abs() <= 1e-13 * expected.abs() + 1e-30
        }
        _ => read == expected,
    }
}
