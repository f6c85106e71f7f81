//! Files cut at every length and every single bit flipped: what is whole is read, nothing is invented, and the
//! damage is reported where it is.

#![allow(clippy::expect_used)]

use limnograph::reader::{DamageKind, Obstacle, Selection, SeriesReader};
use limnograph::series::frame::{HEADER_BYTES, Header, MAGIC, kind};
use limnograph::series::layout::FORMAT;
use limnograph::series::record::{Record, Row, Value};
use limnograph::series::schema::{Column, Kind, Schema, Table, ValueType};
use limnograph::series::{Opening, Series};
use proptest::prelude::*;
use std::os::unix::fs::FileExt;
use std::path::{Path, PathBuf};
use std::sync::OnceLock;
use std::time::Duration;

const RECORDS: u64 = 4;

fn opening() -> Opening {
    let column = |name: &str, value| Column::new("clock", name, "", Kind::Key, value, "");
    let table = |name: &str, columns| Table {
        name: name.to_string(),
        description: String::new(),
        columns,
    };
    Opening {
        schema: Schema {
            tables: vec![
                table(
                    "run",
                    vec![
                        column("step", ValueType::Unsigned),
                        column("x", ValueType::Float),
                    ],
                ),
                table("events", vec![column("note", ValueType::Text)]),
            ],
        },
        library_version: "0".to_string(),
        ..Opening::default()
    }
}

fn record(step: u64) -> Record {
    let x = if step == 2 {
        Value::Null
    } else {
        Value::Float(f64::from_bits(0x7FF8_0000_0000_0000 | step))
    };
    let rows = vec![
        Row {
            table: 0,
            values: vec![Value::Unsigned(step), x],
        },
        Row {
            table: 1,
            values: vec![Value::from(format!("step {step}").as_str())],
        },
    ];
    Record {
        step,
        time: step as f64,
        step_length: 1.0,
        rows: rows.into(),
        carry: vec![step],
    }
}

/// A small closed series; written once, copied for every test.
fn small_series(room: &Path) -> PathBuf {
    static FILES: OnceLock<[(&str, Vec<u8>); 2]> = OnceLock::new();
    let files = FILES.get_or_init(|| {
        let room = tempfile::tempdir().expect("room");
        let path = room.path().join("small.limno");
        let series = Series::open(&path, opening()).expect("opens");
        (0..RECORDS).for_each(|step| series.enter(record(step)).expect("enters"));
        series.close(Duration::from_secs(60)).expect("closes");
        ["journal-000001.frames", "manifest-000001.txt"]
            .map(|name| (name, std::fs::read(path.join(name)).expect("read")))
    });
    let path = room.join("small.limno");
    std::fs::create_dir(&path).expect("directory");
    for (name, bytes) in files {
        std::fs::write(path.join(name), bytes).expect("write");
    }
    path
}

/// Makes one byte of a file that of `bytes`.
fn patch(file: &Path, bytes: &[u8], at: usize) {
    let file = std::fs::OpenOptions::new()
        .write(true)
        .open(file)
        .expect("open");
    file.write_all_at(&bytes[at..=at], at as u64)
        .expect("write");
}

/// First byte, byte after the last, and kind of every frame of a whole journal.
fn frames(bytes: &[u8]) -> Vec<(usize, usize, u32)> {
    let mut frames = Vec::new();
    let mut at = MAGIC.len();
    while at < bytes.len() {
        let header = Header::decode(&bytes[at..], at as u64).expect("a whole journal");
        frames.push((at, at + HEADER_BYTES + header.length as usize, header.kind));
        at += HEADER_BYTES + header.length as usize;
    }
    frames
}

/// The steps that are read, each checked to be what was entered, to the bit.
fn steps_read(reader: &SeriesReader) -> Vec<u64> {
    let (Some(run), Some(events)) = (reader.table("run"), reader.table("events")) else {
        return vec![];
    };
    let (steps, x) = (
        run.column("step").expect("step"),
        run.column("x").expect("x"),
    );
    let notes = events.column("note").expect("note");
    assert_eq!(
        run.rows(),
        events.rows(),
        "a step is read whole or not at all"
    );
    (0..run.rows())
        .map(|row| {
            let step = run.step(row).expect("step");
            let bits = |value: Value| match value {
                Value::Float(x) => Some(x.to_bits()),
                _ => None,
            };
            let Row { values, .. } = record(step).rows.to_vec().swap_remove(0);
            assert_eq!(steps.value(row), values[0]);
            assert_eq!(bits(x.value(row)), bits(values[1].clone()));
            assert_eq!(
                notes.value(row),
                Value::from(format!("step {step}").as_str())
            );
            step
        })
        .collect()
}

#[test]
fn a_journal_cut_anywhere_gives_every_step_before_the_cut() {
    let room = tempfile::tempdir().expect("room");
    let path = small_series(room.path());
    let journal = path.join("journal-000001.frames");
    let whole = std::fs::read(&journal).expect("read");
    let frames = frames(&whole);
    let file = std::fs::OpenOptions::new()
        .write(true)
        .open(&journal)
        .expect("open");
    for cut in (0..whole.len()).rev() {
        file.set_len(cut as u64).expect("cut");
        let reader = SeriesReader::open(&path).expect("opens");
        let complete = frames
            .iter()
            .filter(|&&(_, end, kind)| kind == kind::RECORD && end <= cut)
            .count();
        assert_eq!(
            steps_read(&reader),
            (0..complete as u64).collect::<Vec<_>>(),
            "cut at {cut}"
        );
        assert!(
            reader.legs().iter().all(|leg| leg.end.is_none()),
            "cut at {cut}"
        );
        let is_between_frames = cut == MAGIC.len() || frames.iter().any(|&(_, end, _)| end == cut);
        let damage = reader.damage();
        if is_between_frames {
            assert_eq!(damage, [], "cut at {cut}");
        } else {
            assert_eq!(damage.len(), 1, "cut at {cut}: {damage:?}");
            assert_eq!(
                (damage[0].kind, damage[0].to),
                (DamageKind::Torn, cut as u64),
                "cut at {cut}"
            );
            let last_good = frames
                .iter()
                .map(|frame| frame.1)
                .filter(|&end| end <= cut)
                .max();
            let begin = last_good.unwrap_or(if cut < MAGIC.len() { 0 } else { MAGIC.len() });
            assert_eq!(damage[0].from, begin as u64, "cut at {cut}");
        }
    }
}

#[test]
fn every_flipped_bit_of_a_journal_is_found_and_costs_one_step_at_most() {
    let room = tempfile::tempdir().expect("room");
    let path = small_series(room.path());
    let journal = path.join("journal-000001.frames");
    let whole = std::fs::read(&journal).expect("read");
    let frames = frames(&whole);
    for bit in 0..whole.len() * 8 {
        let byte = bit / 8;
        let mut flipped = whole.clone();
        flipped[byte] ^= 1 << (bit % 8);
        patch(&journal, &flipped, byte);
        let reader = SeriesReader::open(&path).expect("opens");
        let hit = frames
            .iter()
            .position(|&(start, end, _)| start <= byte && byte < end);
        let lost = hit
            .filter(|&hit| frames[hit].2 == kind::RECORD)
            .map(|hit| hit as u64 - 1);
        let expected: Vec<u64> = (0..RECORDS).filter(|&step| Some(step) != lost).collect();
        assert_eq!(steps_read(&reader), expected, "bit {bit}");
        let damage = reader.damage();
        patch(&journal, &whole, byte);
        let (from, to) = hit.map_or((0, MAGIC.len()), |hit| (frames[hit].0, frames[hit].1));
        let located = damage
            .iter()
            .find(|damage| damage.file == "journal-000001.frames")
            .expect("found");
        assert_eq!(
            (located.from, located.to),
            (from as u64, to as u64),
            "bit {bit}: {damage:?}"
        );
        let missing = damage
            .iter()
            .filter(|damage| damage.kind == DamageKind::Missing)
            .count();
        assert_eq!(
            missing,
            usize::from(lost.is_some()),
            "bit {bit}: {damage:?}"
        );
    }
}

#[test]
fn every_flipped_bit_of_a_manifest_is_found_and_costs_no_row() {
    let room = tempfile::tempdir().expect("room");
    let path = small_series(room.path());
    let manifest = path.join("manifest-000001.txt");
    let whole = std::fs::read(&manifest).expect("read");
    for bit in 0..whole.len() * 8 {
        let mut flipped = whole.clone();
        flipped[bit / 8] ^= 1 << (bit % 8);
        patch(&manifest, &flipped, bit / 8);
        let reader = SeriesReader::open(&path).expect("opens");
        assert_eq!(
            steps_read(&reader),
            (0..RECORDS).collect::<Vec<_>>(),
            "bit {bit}"
        );
        assert!(
            reader
                .damage()
                .iter()
                .any(|damage| damage.file == "manifest-000001.txt"),
            "bit {bit}"
        );
    }
}

#[test]
fn a_manifest_cut_anywhere_is_found_and_costs_no_row() {
    let room = tempfile::tempdir().expect("room");
    let path = small_series(room.path());
    let manifest = path.join("manifest-000001.txt");
    let whole = std::fs::read(&manifest).expect("read");
    let file = std::fs::OpenOptions::new()
        .write(true)
        .open(&manifest)
        .expect("open");
    for cut in (0..whole.len()).rev() {
        file.set_len(cut as u64).expect("cut");
        let reader = SeriesReader::open(&path).expect("opens");
        assert_eq!(
            steps_read(&reader),
            (0..RECORDS).collect::<Vec<_>>(),
            "cut at {cut}"
        );
        let torn = |damage: &limnograph::reader::Damage| damage.kind == DamageKind::Torn;
        assert!(reader.damage().iter().any(torn), "cut at {cut}");
    }
    std::fs::remove_file(&manifest).expect("remove");
    let reader = SeriesReader::open(&path).expect("opens");
    assert_eq!(steps_read(&reader), (0..RECORDS).collect::<Vec<_>>());
    assert!(
        reader
            .damage()
            .iter()
            .any(|damage| damage.kind == DamageKind::Unreadable)
    );
}

#[test]
fn a_frame_copied_to_another_place_is_not_taken_for_a_row() {
    let room = tempfile::tempdir().expect("room");
    let path = small_series(room.path());
    let journal = path.join("journal-000001.frames");
    let mut bytes = std::fs::read(&journal).expect("read");
    let (start, end, _) = frames(&bytes)[1];
    let copy = bytes[start..end].to_vec();
    bytes.extend(copy);
    std::fs::write(&journal, &bytes).expect("write");
    let reader = SeriesReader::open(&path).expect("opens");
    assert_eq!(steps_read(&reader), (0..RECORDS).collect::<Vec<_>>());
    assert_eq!(reader.damage()[0].kind, DamageKind::Corrupted);
}

#[test]
fn a_journal_of_a_newer_version_is_refused_by_name() {
    let room = tempfile::tempdir().expect("room");
    let path = small_series(room.path());
    let journal = path.join("journal-000002.frames");
    let payload = format!("{{\"format\": {}, \"anything\": true}}", FORMAT + 1);
    let header = Header::new(0, kind::HEAD, payload.as_bytes());
    let mut bytes = MAGIC.to_vec();
    bytes.extend(header.encode(MAGIC.len() as u64));
    bytes.extend(payload.as_bytes());
    std::fs::write(&journal, bytes).expect("write");
    let error = SeriesReader::open(&path).err().expect("refused");
    assert_eq!(error.obstacle, Obstacle::Newer);
    assert!(
        error
            .to_string()
            .contains("journal-000002.frames has format 2"),
        "{error}"
    );
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 400, ..ProptestConfig::default() })]

    #[test]
    fn files_garbled_in_many_places_neither_panic_nor_invent_rows(
        edits in prop::collection::vec((any::<prop::sample::Index>(), any::<u8>()), 1..40),
        cut in any::<prop::sample::Index>(),
        which in 0..2_usize,
    ) {
        let room = tempfile::tempdir().expect("room");
        let path = small_series(room.path());
        let file = path.join(["journal-000001.frames", "manifest-000001.txt"][which]);
        let mut bytes = std::fs::read(&file).expect("read");
        for (place, byte) in edits {
            let place = place.index(bytes.len());
            bytes[place] = byte;
        }
        bytes.truncate(cut.index(bytes.len() + 1).max(bytes.len() / 2));
        std::fs::write(&file, &bytes).expect("write");
        if let Ok(reader) = SeriesReader::open(&path) {
            steps_read(&reader);
            reader.damage();
            reader.legs();
        }
    }

    #[test]
    fn records_with_right_checksums_and_hostile_content_are_refused_whole(
        edits in prop::collection::vec(
            (any::<prop::sample::Index>(), prop_oneof![Just(0_u8), Just(1), Just(255), any::<u8>()]),
            1..12,
        ),
        surplus in prop::collection::vec(any::<u8>(), 0..40),
        kind in prop_oneof![3 => Just(kind::RECORD), 1 => 0_u32..6],
    ) {
        let room = tempfile::tempdir().expect("room");
        let path = small_series(room.path());
        let journal = path.join("journal-000001.frames");
        let mut bytes = std::fs::read(&journal).expect("read");
        let (start, end, _) = frames(&bytes)[1];
        let mut hostile = bytes[start + HEADER_BYTES..end].to_vec();
        hostile[4] = 77; // another record number, so that it is not passed over as known
        hostile.extend(surplus);
        for (place, byte) in edits {
            let place = place.index(hostile.len());
            hostile[place] = byte;
        }
        let header = Header::new(RECORDS as u32 + 2, kind, &hostile);
        bytes.extend(header.encode(bytes.len() as u64));
        bytes.extend(hostile);
        std::fs::write(&journal, &bytes).expect("write");
        if let Ok(reader) = SeriesReader::open(&path) {
            let view = reader.table_with("run", Selection::Everything).expect("run");
            prop_assert!(view.rows() as u64 >= RECORDS);
            for merged in view.columns() {
                prop_assert_eq!(view.column(&merged.column.name).map(|column| column.len()), Some(view.rows()));
            }
            reader.damage();
            reader.legs();
        }
    }
}
