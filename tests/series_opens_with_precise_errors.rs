//! Opening a series either works or says what is in the way and what to do about it.

#![allow(clippy::expect_used)]

use limnograph::reader::SeriesReader;
use limnograph::series::record::{Record, Row, Value};
use limnograph::series::schema::{Column, Kind, Schema, Table, ValueType};
use limnograph::series::{Opening, Series, Trouble};
use std::time::Duration;

fn opening() -> Opening {
    let column = |name: &str, value| Column::new("clock", name, "", Kind::Key, value, "for a test");
    let run = Table {
        name: "run".to_string(),
        description: "One row a step.".to_string(),
        columns: vec![
            column("step", ValueType::Unsigned),
            column("time", ValueType::Float),
        ],
    };
    Opening {
        schema: Schema { tables: vec![run] },
        config_text: "[run]\n".to_string(),
        host: serde_json::json!({"name": "a test"}),
        library_version: "0.1.0".to_string(),
        time_column: "time".to_string(),
        ..Opening::default()
    }
}

fn record(step: u64) -> Record {
    let values = vec![Value::Unsigned(step), Value::Float(step as f64)];
    Record {
        step,
        time: step as f64,
        step_length: 1.0,
        rows: vec![Row { table: 0, values }].into(),
        carry: vec![],
    }
}

fn refused(path: &std::path::Path, opening: Opening) -> (Trouble, String) {
    let error = Series::open(path, opening).err().expect("an error");
    (error.trouble, error.to_string())
}

#[test]
fn a_new_series_takes_rows_and_a_second_opening_begins_a_second_leg() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    for leg in 1..=2 {
        let series = Series::open(&path, opening()).expect("opens");
        assert_eq!(series.leg(), leg);
        for step in 0..10 {
            series.enter(record(step)).expect("enters");
        }
        series
            .enter_durably(record(10), Duration::from_secs(20))
            .expect("durable");
        let status = series.status();
        assert_eq!(
            (
                status.records_written,
                status.records_durable,
                status.rows_written
            ),
            (11, 11, 11)
        );
        assert_eq!(
            (
                status.records_waiting,
                status.records_missing,
                status.last_error
            ),
            (0, 0, None)
        );
        series.close(Duration::from_secs(20)).expect("closes");
    }
    for name in [
        "manifest-000001.txt",
        "manifest-000002.txt",
        "journal-000001.frames",
        "journal-000002.frames",
    ] {
        assert!(path.join(name).is_file(), "{name}");
    }
}

#[test]
fn a_path_in_use_for_something_else_is_refused_and_left_alone() {
    let room = tempfile::tempdir().expect("room");
    let file = room.path().join("notes.limno");
    std::fs::write(&file, "mine").expect("write");
    let (trouble, text) = refused(&file, opening());
    assert_eq!(trouble, Trouble::NotASeries);
    assert!(
        text.contains("is not a directory") && text.contains("notes.limno"),
        "{text}"
    );
    assert_eq!(std::fs::read(&file).expect("read"), b"mine");

    let other = room.path().join("other.limno");
    std::fs::create_dir(&other).expect("directory");
    std::fs::write(other.join("thesis.tex"), "mine").expect("write");
    let (trouble, text) = refused(&other, opening());
    assert_eq!(trouble, Trouble::NotASeries);
    assert!(text.contains("other things in it"), "{text}");
    assert_eq!(std::fs::read_dir(&other).expect("list").count(), 1);

    let (trouble, text) = refused(&room.path().join("saltmarsh"), opening());
    assert_eq!(trouble, Trouble::NotASeries);
    assert!(text.contains(".limno"), "{text}");
}

#[test]
fn a_missing_parent_is_named() {
    let room = tempfile::tempdir().expect("room");
    let (trouble, text) = refused(&room.path().join("nowhere/saltmarsh.limno"), opening());
    assert_eq!(trouble, Trouble::ParentMissing);
    assert!(text.contains("create it first"), "{text}");
}

#[test]
fn an_empty_directory_becomes_a_series() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    std::fs::create_dir(&path).expect("directory");
    assert_eq!(Series::open(&path, opening()).expect("opens").leg(), 1);
}

#[test]
fn a_schema_or_record_that_makes_no_sense_is_refused() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let mut twice = opening();
    let copy = twice.schema.tables[0].columns[0].clone();
    twice.schema.tables[0].columns.push(copy);
    let (trouble, text) = refused(&path, twice);
    assert_eq!(trouble, Trouble::Misfit);
    assert!(text.contains("`step`") && text.contains("twice"), "{text}");
    assert!(
        !path.exists(),
        "nothing is created for a schema that is refused"
    );

    let series = Series::open(&path, opening()).expect("opens");
    let mut wrong = record(3);
    wrong.rows.set_in_first(1, Value::Unsigned(3));
    let error = series.enter(wrong).expect_err("misfit");
    assert_eq!(error.trouble, Trouble::Misfit);
    assert!(
        error.to_string().contains("column `time` of table `run`"),
        "{error}"
    );
    series.enter(record(4)).expect("the series goes on");
    series.close(Duration::from_secs(20)).expect("closes");
}

#[test]
fn a_column_that_changes_its_unit_is_refused_unless_it_is_meant() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    drop(Series::open(&path, opening()).expect("opens"));
    let mut changed = opening();
    changed.schema.tables[0].columns[1].unit = "Gyr".to_string();
    let (trouble, text) = refused(&path, changed.clone());
    assert_eq!(trouble, Trouble::Changed);
    assert!(text.contains("`time`") && text.contains("`Gyr`"), "{text}");
    changed.accepts_changes = true;
    assert_eq!(Series::open(&path, changed).expect("meant").leg(), 2);
}

#[test]
fn openers_at_the_same_moment_never_share_a_leg_or_a_file() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let openers: Vec<_> = (0..8)
        .map(|number| {
            let path = path.clone();
            std::thread::spawn(move || {
                let series = Series::open(&path, opening()).expect("opens");
                series
                    .enter_durably(record(number), Duration::from_secs(60))
                    .expect("durable");
                let leg = series.leg();
                series.close(Duration::from_secs(60)).expect("closes");
                leg
            })
        })
        .collect();
    let mut legs: Vec<u32> = openers
        .into_iter()
        .map(|opener| opener.join().expect("opener"))
        .collect();
    legs.sort_unstable();
    legs.dedup();
    assert_eq!(legs.len(), 8);
    let reader = SeriesReader::open(&path).expect("opens");
    assert_eq!((reader.records(), reader.damage()), (8, vec![]));
}
