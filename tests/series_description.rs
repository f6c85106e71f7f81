//! `docs/series.md` is enough to read a series: this reader is written from that page and shares no code with the
//! library, not even its checksum.

#![allow(clippy::expect_used)]

mod common;

use common::{record, write_leg};
use limnograph::series::record::{Record, Row, Value};
use serde_json::Value as Json;
use std::path::Path;

/// CRC-32C one bit at a time.
fn crc(bytes: &[u8]) -> u32 {
    let step = |sum: u32, _| {
        if sum & 1 == 1 {
            sum >> 1 ^ 0x82F6_3B78
        } else {
            sum >> 1
        }
    };
    !bytes
        .iter()
        .fold(!0, |sum, &byte| (0..8).fold(sum ^ u32::from(byte), step))
}

struct Bytes<'a>(&'a [u8]);

impl Bytes<'_> {
    fn take(&mut self, count: usize) -> &[u8] {
        let (taken, rest) = self.0.split_at(count);
        self.0 = rest;
        taken
    }

    fn four(&mut self) -> usize {
        u32::from_le_bytes(self.take(4).try_into().expect("four")) as usize
    }

    fn eight(&mut self) -> u64 {
        u64::from_le_bytes(self.take(8).try_into().expect("eight"))
    }
}

/// Kind and payload of every frame.
fn frames(journal: &[u8]) -> Vec<(usize, &[u8])> {
    assert_eq!(&journal[..16], b"limnograph-jrnl\n");
    let mut frames = Vec::new();
    let mut offset = 16;
    while offset < journal.len() {
        let header = &journal[offset..offset + 24];
        let mut fields = Bytes(header);
        assert_eq!(fields.take(4), [0xF7, 0x6C, 0x6F, 0x67]);
        assert_eq!(fields.four(), frames.len());
        let (kind, length, sum) = (fields.four(), fields.four(), fields.four());
        let covered = [&header[..20], &(offset as u64).to_le_bytes()].concat();
        assert_eq!(fields.four(), crc(&covered) as usize);
        let payload = &journal[offset + 24..offset + 24 + length];
        assert_eq!(crc(payload) as usize, sum);
        frames.push((kind, payload));
        offset += 24 + length;
    }
    frames
}

fn read_record(payload: &[u8], schema: &Json) -> (usize, u64, Record) {
    let mut bytes = Bytes(payload);
    let (leg, number, step) = (bytes.four(), bytes.eight(), bytes.eight());
    let (time, step_length) = (f64::from_bits(bytes.eight()), f64::from_bits(bytes.eight()));
    let entered = bytes.eight();
    assert!(entered > 1_700_000_000_000, "milliseconds since 1970");
    let (words, rows) = (bytes.four(), bytes.four());
    let carry = (0..words).map(|_| bytes.eight()).collect();
    let rows: Vec<_> = (0..rows)
        .map(|_| {
            let (table, length) = (bytes.four(), bytes.four());
            let values = read_row(bytes.take(length), &schema["tables"][table]["columns"]);
            Row {
                table: table as u32,
                values,
            }
        })
        .collect();
    assert!(bytes.0.is_empty());
    (
        leg,
        number,
        Record {
            step,
            time,
            step_length,
            rows: rows.into(),
            carry,
        },
    )
}

fn read_row(row: &[u8], columns: &Json) -> Vec<Value> {
    let columns = columns.as_array().expect("columns");
    let mut bytes = Bytes(row);
    let nulls = bytes.take(columns.len().div_ceil(8)).to_vec();
    let values = columns.iter().enumerate().map(|(i, column)| {
        if nulls[i / 8] >> (i % 8) & 1 == 1 {
            return Value::Null;
        }
        let length = column["length"].as_u64().expect("length");
        match (column["value"].as_str().expect("value"), length) {
            ("float", 1) => Value::Float(f64::from_bits(bytes.eight())),
            ("float", _) => {
                Value::Floats((0..length).map(|_| f64::from_bits(bytes.eight())).collect())
            }
            ("integer", _) => Value::Integer(bytes.eight() as i64),
            ("unsigned", 1) => Value::Unsigned(bytes.eight()),
            ("unsigned", _) => Value::Counts((0..length).map(|_| bytes.eight()).collect()),
            ("text", _) => {
                let length = bytes.four();
                Value::from(std::str::from_utf8(bytes.take(length)).expect("UTF-8"))
            }
            other => panic!("a value type that the page does not know: {other:?}"),
        }
    });
    let values = values.collect();
    assert!(bytes.0.is_empty());
    values
}

fn check_manifest(path: &Path, leg: u64) -> Json {
    let bytes = std::fs::read(path).expect("manifest");
    let end = bytes
        .iter()
        .position(|&byte| byte == b'\n')
        .expect("first line")
        + 1;
    let (line, rest) = bytes.split_at(end);
    let sum = crc(&[&1_u32.to_le_bytes(), rest].concat());
    let expected = format!(
        "limnograph manifest, format 1, {} bytes follow, CRC-32C {sum:08x}\n",
        rest.len()
    );
    assert_eq!(String::from_utf8_lossy(line), expected);
    let manifest: Json = serde_json::from_slice(rest).expect("JSON");
    assert_eq!(
        (manifest["format"].as_u64(), manifest["leg"].as_u64()),
        (Some(1), Some(leg))
    );
    assert_eq!(
        manifest["legs"].as_array().map(Vec::len),
        Some(leg as usize)
    );
    assert_eq!(manifest["host"]["name"], "Saltmarsh");
    assert_eq!(manifest["time_column"], "time");
    manifest
}

#[test]
fn the_page_describes_what_is_on_the_disk() {
    assert_eq!(crc(b"123456789"), 0xE306_9283);
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let legs = [0..30_u64, 20..70];
    for (leg, steps) in (1..).zip(&legs) {
        write_leg(&path, steps.clone());
        let manifest = check_manifest(&path.join(format!("manifest-{leg:06}.txt")), leg);
        let journal =
            std::fs::read(path.join(format!("journal-{leg:06}.frames"))).expect("journal");
        let frames = frames(&journal);
        assert_eq!(frames[0].0, 1);
        let head: Json = serde_json::from_slice(frames[0].1).expect("JSON");
        assert_eq!(
            (head["leg"].as_u64(), head["journal"].as_u64()),
            (Some(leg), Some(leg))
        );
        assert_eq!(
            (&head["schema"], &head["continues"]),
            (&manifest["schema"], &Json::Null)
        );
        let (&(kind, last), records) = frames[1..].split_last().expect("frames");
        assert_eq!(kind, 4);
        let end: Json = serde_json::from_slice(last).expect("JSON");
        assert_eq!(end["records"].as_u64(), Some(records.len() as u64));
        assert_eq!(records.len() as u64, steps.end - steps.start);
        for (place, (step, &(kind, payload))) in steps.clone().zip(records).enumerate() {
            assert_eq!(kind, 2);
            let read = read_record(payload, &head["schema"]);
            assert_eq!(read, (leg as usize, place as u64, record(step)));
        }
    }
}
