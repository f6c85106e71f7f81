//! A record's bytes give back exactly what went in: NaN payloads, nulls, vectors, texts; and no prefix of them is
//! taken for a record.

#![allow(clippy::expect_used)]

use limnograph::series::encoding::{Payload, encode};
use limnograph::series::record::{Record, Row, Value};
use limnograph::series::schema::{Column, Kind, Schema, Table, ValueType};
use proptest::prelude::*;

/// Floats of every kind, most of them with odd bits.
fn float() -> impl Strategy<Value = f64> {
    prop_oneof![
        any::<u64>().prop_map(f64::from_bits),
        (any::<u64>(), any::<bool>()).prop_map(|(payload, is_negative)| {
            f64::from_bits(0x7FF0_0000_0000_0000 | u64::from(is_negative) << 63 | payload >> 12)
        }),
        Just(-0.0),
        Just(5e-324),
    ]
}

fn column() -> impl Strategy<Value = (ValueType, u32)> {
    prop_oneof![
        Just((ValueType::Float, 1)),
        Just((ValueType::Integer, 1)),
        Just((ValueType::Unsigned, 1)),
        Just((ValueType::Text, 1)),
        (2..9_u32).prop_map(|length| (ValueType::Float, length)),
        (2..9_u32).prop_map(|length| (ValueType::Unsigned, length)),
    ]
}

fn value((kind, length): (ValueType, u32)) -> BoxedStrategy<Value> {
    let present = match (kind, length) {
        (ValueType::Float, 1) => float().prop_map(Value::Float).boxed(),
        (ValueType::Integer, _) => any::<i64>().prop_map(Value::Integer).boxed(),
        (ValueType::Unsigned, 1) => any::<u64>().prop_map(Value::Unsigned).boxed(),
        (ValueType::Text, _) => ".{0,20}"
            .prop_map(|text| Value::from(text.as_str()))
            .boxed(),
        (ValueType::Float, _) => prop::collection::vec(float(), length as usize)
            .prop_map(Value::Floats)
            .boxed(),
        (ValueType::Unsigned, _) => prop::collection::vec(any::<u64>(), length as usize)
            .prop_map(Value::Counts)
            .boxed(),
    };
    prop_oneof![1 => Just(Value::Null), 4 => present].boxed()
}

/// Up to three tables of up to twenty columns, and a record that fits them.
fn schema_and_record() -> impl Strategy<Value = (Schema, Record)> {
    prop::collection::vec(prop::collection::vec(column(), 1..20), 1..4)
        .prop_flat_map(|tables| {
            let row = (0..tables.len()).prop_flat_map({
                let tables = tables.clone();
                move |table| {
                    let values: Vec<_> =
                        tables[table].iter().map(|&column| value(column)).collect();
                    values.prop_map(move |values| Row {
                        table: table as u32,
                        values,
                    })
                }
            });
            let head = (
                any::<u64>(),
                float(),
                float(),
                prop::collection::vec(any::<u64>(), 0..5),
            );
            (Just(tables), head, prop::collection::vec(row, 0..6))
        })
        .prop_map(|(tables, (step, time, step_length, carry), rows)| {
            (
                schema(&tables),
                Record {
                    step,
                    time,
                    step_length,
                    rows: rows.into(),
                    carry,
                },
            )
        })
}

fn schema(tables: &[Vec<(ValueType, u32)>]) -> Schema {
    let table = |(number, columns): (usize, &Vec<(ValueType, u32)>)| Table {
        name: format!("table {number}"),
        description: String::new(),
        columns: (columns.iter().enumerate())
            .map(|(number, &(value, length))| Column {
                length,
                ..Column::new(
                    "test",
                    format!("column {number}"),
                    "",
                    Kind::Instant,
                    value,
                    "",
                )
            })
            .collect(),
    };
    Schema {
        tables: tables.iter().enumerate().map(table).collect(),
    }
}

/// Equality of bits: NaN equals the same NaN, and -0 is not 0.
fn bits(record: &Record) -> Vec<Vec<String>> {
    let cell = |value: &Value| match value {
        Value::Float(number) => format!("float {:016x}", number.to_bits()),
        Value::Floats(numbers) => format!(
            "floats {:x?}",
            numbers.iter().map(|n| n.to_bits()).collect::<Vec<_>>()
        ),
        other => format!("{other:?}"),
    };
    let mut all = vec![vec![
        format!("{} {:?}", record.step, record.carry),
        format!(
            "{:016x} {:016x}",
            record.time.to_bits(),
            record.step_length.to_bits()
        ),
    ]];
    all.extend(record.rows.iter().map(|(table, values)| {
        std::iter::once(table.to_string())
            .chain(values.iter().map(cell))
            .collect()
    }));
    all
}

proptest! {
    #[test]
    fn what_goes_in_comes_out(
        (schema, record) in schema_and_record(),
        leg in any::<u32>(),
        number in any::<u64>(),
        entered in any::<u64>(),
    ) {
        let mut bytes = Vec::new();
        encode(&mut bytes, &schema, &record, leg, number, entered);
        let payload = Payload::read(&bytes).expect("a record");
        let preface = payload.preface;
        prop_assert_eq!((preface.leg, preface.number, preface.entered), (leg, number, entered));
        let back = payload.record(&schema).expect("fits");
        prop_assert_eq!(bits(&back), bits(&record));
        for length in 0..bytes.len() {
            let prefix = Payload::read(&bytes[..length]).and_then(|payload| payload.record(&schema));
            prop_assert!(prefix.is_none(), "{} of {} bytes", length, bytes.len());
        }
    }
}
