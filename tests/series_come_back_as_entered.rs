//! What a host enters is what a reader gets: every bit of it, over all legs, while it is written and after.

#![allow(clippy::expect_used)]

mod common;

use common::{PATIENCE, enter, opening, record, time_of, write_leg};
use limnograph::reader::{ColumnValues, Selection, SeriesReader};
use limnograph::series::Series;
use limnograph::series::record::Value;

/// All cells of a table, row by row.
fn cells(reader: &SeriesReader, table: &str, selection: Selection) -> Vec<Vec<Value>> {
    let view = reader.table_with(table, selection).expect("table");
    let columns: Vec<ColumnValues> = view
        .columns()
        .iter()
        .map(|merged| view.column(&merged.column.name).expect("column"))
        .collect();
    (0..view.rows())
        .map(|row| columns.iter().map(|column| column.value(row)).collect())
        .collect()
}

fn expected(table: u32, steps: std::ops::Range<u64>) -> Vec<Vec<Value>> {
    steps
        .flat_map(|step| record(step).rows.to_vec())
        .filter(|row| row.table == table)
        .map(|row| row.values)
        .collect()
}

#[test]
fn all_tables_come_back_with_their_nulls_vectors_and_texts() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    write_leg(&path, 0..100);
    let reader = SeriesReader::open(&path).expect("opens");
    assert_eq!(reader.damage(), []);
    assert_eq!(reader.tables(), ["run", "wind_shells", "events"]);
    for (number, table) in ["run", "wind_shells", "events"].into_iter().enumerate() {
        assert_eq!(
            cells(&reader, table, Selection::Standing),
            expected(number as u32, 0..100),
            "{table}"
        );
    }
    let run = reader.table("run").expect("run");
    let holes = run.column("black_hole_mass").expect("column");
    assert!(holes.is_null(59) && !holes.is_null(60));
    assert_eq!(
        (run.step(7), run.time(7), run.leg(7)),
        (Some(7), Some(time_of(7)), Some(1))
    );
    assert_eq!(
        reader.last_record(None, 0.0).expect("reads"),
        Some(record(99))
    );
    assert_eq!(
        reader.last_record(Some(time_of(31)), 0.001).expect("reads"),
        Some(record(31))
    );
    let manifest = reader.manifest().expect("manifest");
    assert_eq!(
        (&manifest.schema, &manifest.host),
        (&opening().schema, &opening().host)
    );
    assert_eq!(manifest.config_text, opening().config_text);
}

#[test]
fn a_restart_supersedes_what_it_does_over_again() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    write_leg(&path, 0..50);
    write_leg(&path, 30..60);
    write_leg(&path, 30..40);
    let reader = SeriesReader::open(&path).expect("opens");
    assert_eq!(reader.damage(), []);
    assert_eq!(
        cells(&reader, "run", Selection::Standing),
        expected(0, 0..40)
    );
    assert_eq!(
        cells(&reader, "wind_shells", Selection::Standing),
        expected(1, 0..40)
    );
    let everything: Vec<_> = [0..50, 30..60, 30..40]
        .into_iter()
        .flat_map(|steps| expected(0, steps))
        .collect();
    assert_eq!(cells(&reader, "run", Selection::Everything), everything);
    let view = reader
        .table_with("run", Selection::Everything)
        .expect("run");
    assert_eq!(
        (
            view.is_superseded(29),
            view.is_superseded(30),
            view.is_superseded(50)
        ),
        (false, true, true)
    );
    let legs = reader.legs();
    let counts: Vec<_> = legs
        .iter()
        .map(|leg| (leg.number, leg.records, leg.superseded))
        .collect();
    assert_eq!(counts, [(1, 50, 20), (2, 30, 30), (3, 10, 0)]);
    assert_eq!(
        reader.last_record(Some(time_of(35)), 0.001).expect("reads"),
        Some(record(35))
    );
}

#[test]
fn times_within_half_a_step_count_as_equal() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    write_leg(&path, 0..50);
    let series = Series::open(&path, opening()).expect("opens");
    // The restart's clock is off by a rounding: later than the row that it does over again.
    let mut again = record(40);
    again.time += 1e-9;
    enter(&series, again);
    series.close(PATIENCE).expect("closes");
    let reader = SeriesReader::open(&path).expect("opens");
    let run = reader.table("run").expect("run");
    assert_eq!(
        (run.rows(), run.step(39), run.step(40)),
        (41, Some(39), Some(40))
    );
}

#[test]
fn a_leg_that_measured_nothing_supersedes_nothing() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    write_leg(&path, 0..50);
    let series = Series::open(&path, opening()).expect("opens");
    // Only a note, from a host that failed before its first step.
    let mut note = record(0);
    let mut rows = note.rows.to_vec();
    rows.retain(|row| row.table == 2);
    note.rows = rows.into();
    assert_eq!(note.rows.len(), 1);
    enter(&series, note);
    series.close(PATIENCE).expect("closes");
    let reader = SeriesReader::open(&path).expect("opens");
    assert_eq!(reader.table("run").map(|run| run.rows()), Some(50));
    assert_eq!(reader.table("events").map(|events| events.rows()), Some(2));
}

#[test]
fn columns_of_other_legs_are_null_where_they_were_not_measured() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    write_leg(&path, 0..10);
    let mut fewer = opening();
    let columns = &mut fewer.schema.tables[0].columns;
    let at = columns
        .iter()
        .position(|column| column.name == "gas_mass")
        .expect("column");
    let mut fresh = columns.remove(at);
    fresh.name = "cold_gas_mass".to_string();
    columns.push(fresh);
    let series = Series::open(&path, fewer).expect("opens");
    for step in 10..20 {
        let mut changed = record(step);
        let mut rows = changed.rows.to_vec();
        let value = rows[0].values.remove(at);
        rows[0].values.push(value);
        changed.rows = rows.into();
        enter(&series, changed);
    }
    series.close(PATIENCE).expect("closes");
    let reader = SeriesReader::open(&path).expect("opens");
    let run = reader.table("run").expect("run");
    let (gas, cold) = (
        run.column("gas_mass").expect("old"),
        run.column("cold_gas_mass").expect("new"),
    );
    for row in 0..20 {
        assert_eq!(
            (gas.is_null(row), cold.is_null(row)),
            (row >= 10, row < 10),
            "row {row}"
        );
    }
    let names: Vec<_> = run
        .columns()
        .iter()
        .map(|merged| merged.column.name.as_str())
        .collect();
    assert_eq!(
        names.last(),
        Some(&"gas_mass"),
        "columns that ended stand last"
    );
}

#[test]
fn a_column_that_changed_its_unit_on_purpose_stands_twice() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    write_leg(&path, 0..3);
    let mut changed = opening();
    let columns = &mut changed.schema.tables[0].columns;
    columns
        .iter_mut()
        .find(|column| column.name == "gas_mass")
        .expect("column")
        .unit = "kg".to_string();
    changed.accepts_changes = true;
    let series = Series::open(&path, changed).expect("meant");
    (3..6).for_each(|step| enter(&series, record(step)));
    series.close(PATIENCE).expect("closes");
    let reader = SeriesReader::open(&path).expect("opens");
    let run = reader.table("run").expect("run");
    let (old, new) = (
        run.column("gas_mass (until leg 1)").expect("old"),
        run.column("gas_mass").expect("new"),
    );
    for row in 0..6 {
        assert_eq!(
            (old.is_null(row), new.is_null(row)),
            (row >= 3, row < 3),
            "row {row}"
        );
    }
}

#[test]
fn a_reader_follows_a_writer_and_never_sees_half_a_step() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let series = Series::open(&path, opening()).expect("opens");
    let there = path.clone();
    let follower = std::thread::spawn(move || {
        let mut reader = SeriesReader::open(&there).expect("opens");
        let mut looks = 0;
        loop {
            let rows = reader.table("run").map_or(0, |run| run.rows());
            let shells = reader
                .table("wind_shells")
                .map_or(0, |shells| shells.rows());
            assert_eq!(shells as u64, rows as u64 * common::SHELLS);
            assert_eq!(
                cells(&reader, "run", Selection::Standing),
                expected(0, 0..rows as u64)
            );
            looks += 1;
            if reader.legs().iter().all(|leg| leg.end.is_some()) {
                return (rows, looks, reader.damage());
            }
            reader.refresh().expect("refreshes");
        }
    });
    for step in 0..2000 {
        enter(&series, record(step));
    }
    series.close(PATIENCE).expect("closes");
    let (rows, looks, damage) = follower.join().expect("follower");
    assert_eq!((rows, damage), (2000, vec![]));
    assert!(looks > 1);
}
