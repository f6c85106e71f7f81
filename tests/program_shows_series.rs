//! The program as a person meets it: what it prints, where, and with which exit code.

// The program is a feature of its own.
#![cfg(feature = "cli")]
#![allow(clippy::expect_used)]

mod common;

use common::{PATIENCE, enter, opening, record, write_leg};
use limnograph::series::Series;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};

fn program() -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_limnograph"));
    for variable in ["COLUMNS", "LINES", "LC_ALL", "LC_CTYPE", "LANG", "NO_COLOR"] {
        command.env_remove(variable);
    }
    command
}

fn run(command: &str, path: &Path, more: &[&str]) -> Output {
    program()
        .arg(command)
        .arg(path)
        .args(more)
        .output()
        .expect("the program starts")
}

fn out(output: &Output) -> String {
    String::from_utf8(output.stdout.clone()).expect("UTF-8")
}

fn err(output: &Output) -> String {
    String::from_utf8(output.stderr.clone()).expect("UTF-8")
}

/// A series of `steps` steps in a room of its own.
fn series(steps: u64) -> (tempfile::TempDir, PathBuf) {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    write_leg(&path, 0..steps);
    (room, path)
}

fn damage(path: &Path) {
    let journal = path.join("journal-000001.frames");
    let mut bytes = std::fs::read(&journal).expect("read");
    let middle = bytes.len() / 2;
    bytes[middle] ^= 4;
    std::fs::write(&journal, bytes).expect("write");
}

#[test]
fn sight_fits_a_screen_and_shows_clock_gauges_units_and_cost() {
    let (_room, path) = series(400);
    let output = run("sight", &path, &[]);
    assert_eq!((output.status.code(), err(&output).as_str()), (Some(0), ""));
    let text = out(&output);
    assert!(text.lines().count() <= 24, "{text}");
    assert!(
        text.lines().all(|line| line.chars().count() <= 80),
        "{text}"
    );
    assert!(!text.contains('\u{1b}'), "no colours without a terminal");
    for part in [
        "Saltmarsh 1.0",
        "step 399   time 13.67 Gyr   redshift 0.001646   age 13.67 Gyr",
        "400 rows",
        "closed by the host",
        "0.90 % of the host's time",
        "0.01183 Msun/yr/Mpc^3",
        "+1.997e10 Msun",
        "wind_shells",
        "▁▂",
    ] {
        assert!(text.contains(part), "{part} in\n{text}");
    }
}

#[test]
fn sight_shows_all_on_request_and_keeps_to_ascii_when_asked() {
    let (_room, path) = series(400);
    let text = out(&run("sight", &path, &["--all", "--ascii"]));
    assert!(text.is_ascii(), "{text}");
    assert!(text.contains("centre") && text.contains("#"), "{text}");
    let columns = common::schema()
        .tables
        .into_iter()
        .flat_map(|table| table.columns);
    for column in columns.filter(|column| !["clock", "library"].contains(&column.gauge.as_str())) {
        assert!(text.contains(&column.name), "{} in\n{text}", column.name);
    }
    assert!(!text.contains("more with --all"), "{text}");
}

#[test]
fn sight_says_what_was_not_measured_and_why() {
    let (_room, path) = series(20);
    let text = out(&run("sight", &path, &[]));
    let words = text.split_whitespace().collect::<Vec<_>>().join(" ");
    let expected = "black_hole_number and 3 more are not measured; the gauge notes: field accretion_rate of \
                    black holes is not lent";
    assert!(words.contains(expected), "{text}");
}

#[test]
fn sight_repeats_what_the_library_said_of_itself_last() {
    let (_room, path) = series(5);
    let series = Series::open(&path, opening()).expect("opens");
    let mut last = record(5);
    last.rows.push(common::event(
        5,
        "library",
        "the run fell asleep: ranks disagree\u{1b}[2J on the step",
    ));
    enter(&series, last);
    series.close(PATIENCE).expect("closes");
    let text = out(&run("sight", &path, &[]));
    assert!(
        text.contains("step 5, library: the run fell asleep: ranks disagree"),
        "{text}"
    );
    assert!(
        !text.contains('\u{1b}'),
        "a text in a series does not steer the terminal"
    );
}

#[test]
fn sight_follows_a_run_that_is_still_written() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let series = Series::open(&path, opening()).expect("opens");
    let text = out(&run("sight", &path, &[]));
    assert!(text.contains("no row has been entered yet"), "{text}");
    for step in 0..3 {
        enter(&series, record(step));
    }
    series.enter_durably(record(3), PATIENCE).expect("durable");
    let text = out(&run("sight", &path, &[]));
    assert!(
        text.contains("step 3 ") && text.contains("the host seems to be running"),
        "{text}"
    );
}

fn sight_at(width: usize, path: &Path, more: &[&str]) -> String {
    let output = program()
        .env("COLUMNS", width.to_string())
        .arg("sight")
        .arg(path)
        .args(more)
        .output()
        .expect("the program starts");
    out(&output)
}

/// Shells with a second radius between the first and the fluxes.
fn series_with_two_radii(steps: u64) -> (tempfile::TempDir, PathBuf) {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let mut opening = opening();
    let columns = &mut opening.schema.tables[1].columns;
    let place = columns
        .iter()
        .position(|column| column.name == "radius")
        .expect("radius");
    let mut second = columns[place].clone();
    second.name = "radius_outside".to_string();
    columns.insert(place + 1, second);
    let series = Series::open(&path, opening).expect("opens");
    for step in 0..steps {
        let mut entered = record(step);
        let mut rows = entered.rows.to_vec();
        for row in rows.iter_mut().filter(|row| row.table == 1) {
            row.values.insert(place + 1, row.values[place].clone());
        }
        entered.rows = rows.into();
        enter(&series, entered);
    }
    series.close(PATIENCE).expect("closes");
    (room, path)
}

#[test]
fn sight_keeps_the_main_column_of_a_table_when_the_screen_is_narrow() {
    let (_room, path) = series_with_two_radii(100);
    let text = sight_at(60, &path, &[]);
    let lines: Vec<&str> = text.lines().collect();
    let header = lines
        .iter()
        .position(|line| line.trim_start().starts_with("station  shell"))
        .expect("a header of the shells");
    assert!(
        lines[header].ends_with("radius  outflow_rate"),
        "the second radius makes room for the flux\n{text}"
    );
    assert!(text.contains("2 more columns with --all"), "{text}");
    let row = lines[header + 2];
    let curve = row
        .chars()
        .position(|mark| ('▁'..='█').contains(&mark))
        .expect("a curve");
    assert_eq!(
        curve,
        lines[header].chars().count() + 1,
        "the curve stands behind the flux\n{text}"
    );
    let text = sight_at(60, &path, &["--all"]);
    for name in ["radius ", "radius_outside", " outflow_rate", "inflow_rate"] {
        assert!(text.contains(name), "{name} in\n{text}");
    }
    assert!(
        text.lines().all(|line| line.chars().count() <= 60),
        "{text}"
    );
}

#[test]
fn sight_breaks_long_notes_over_lines_and_loses_no_word() {
    let (_room, path) = series(5);
    let series = Series::open(&path, opening()).expect("opens");
    let mut last = record(5);
    let note = "rank 3 could not lend its stars because the mask that was given is longer than the arrays; \
                the row was entered without them and all ranks went on";
    last.rows.push(common::event(5, "library", note));
    enter(&series, last);
    series.close(PATIENCE).expect("closes");
    for more in [&[][..], &["--all"][..]] {
        let text = sight_at(60, &path, more);
        let joined = text.split_whitespace().collect::<Vec<_>>().join(" ");
        assert!(joined.contains(note), "{text}");
        assert!(
            text.lines().all(|line| line.chars().count() <= 60),
            "{text}"
        );
    }
}

#[test]
fn audit_counts_no_step_for_a_record_that_only_tells_of_an_event() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let series = Series::open(&path, opening()).expect("opens");
    let mut note = record(1);
    enter(&series, record(1));
    note.rows = vec![common::event(1, "library", "the run fell asleep")].into();
    enter(&series, note);
    series.close(PATIENCE).expect("closes");
    let text = out(&run("audit", &path, &[]));
    let rows = record(1).rows.len() + 1;
    let expected = format!("1 step with {rows} rows in all tables: step 1 at time");
    assert!(text.contains(&expected), "{expected} in\n{text}");
}

#[test]
fn sight_points_at_damage() {
    let (_room, path) = series(50);
    damage(&path);
    let output = run("sight", &path, &[]);
    assert_eq!(output.status.code(), Some(0));
    assert!(
        out(&output).contains("damaged in 1 place; 1 step is lost: limnograph audit"),
        "{}",
        out(&output)
    );
}

#[test]
fn export_writes_names_with_units_and_cells_that_read_back() {
    let (_room, path) = series(70);
    let text = out(&run("export", &path, &["--to", "csv"]));
    let mut lines = text.split("\n");
    let header: Vec<&str> = lines.next().expect("header").split(',').collect();
    assert_eq!(header[..3], ["step", "time [Gyr]", "redshift"]);
    let place = |name: &str| {
        header
            .iter()
            .position(|&other| other == name)
            .expect("column")
    };
    let (rate, holes) = (
        place("star_formation_rate_density [solMass.yr**-1.Mpc**-3]"),
        place("black_hole_mass [solMass]"),
    );
    let bin = place("gas_by_density.5");
    let rows: Vec<Vec<&str>> = lines
        .filter(|line| !line.is_empty())
        .map(|line| line.split(',').collect())
        .collect();
    assert_eq!(rows.len(), 70);
    for (step, row) in rows.iter().enumerate() {
        let values = &record(step as u64).rows.to_vec()[0].values;
        assert_eq!(row.len(), header.len());
        let read: f64 = row[rate].parse().expect("number");
        assert_eq!(limnograph::series::record::Value::Float(read), values[4]);
        assert_eq!(row[holes].is_empty(), step < 60, "null is an empty cell");
        assert!(row[bin].parse::<u64>().is_ok());
    }
}

#[test]
fn export_takes_other_tables_files_and_rows_done_over_again() {
    let (room, path) = series(50);
    write_leg(&path, 40..60);
    let file = room.path().join("shells.csv");
    let output = run(
        "export",
        &path,
        &[
            "--to",
            "csv",
            "--table",
            "wind_shells",
            "-o",
            &file.to_string_lossy(),
        ],
    );
    assert_eq!((output.status.code(), out(&output).as_str()), (Some(0), ""));
    assert_eq!(
        std::fs::read_to_string(&file)
            .expect("read")
            .lines()
            .count(),
        1 + 60 * 4
    );
    let text = out(&run("export", &path, &["--to", "csv", "--all-legs"]));
    assert!(text.starts_with("leg,superseded,step,"), "{text}");
    assert_eq!(text.lines().count(), 1 + 50 + 20);
    assert_eq!(
        text.lines().filter(|line| line.starts_with("1,1,")).count(),
        10
    );
    let output = run("export", &path, &["--to", "csv", "--table", "moons"]);
    assert_eq!(output.status.code(), Some(2));
    assert!(
        err(&output).contains("no table `moons`; it has: run, wind_shells, events"),
        "{}",
        err(&output)
    );
}

#[test]
fn a_reader_that_has_seen_enough_is_no_error() {
    let (_room, path) = series(2000);
    let mut child = program()
        .arg("export")
        .arg(&path)
        .args(["--to", "csv"])
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("starts");
    drop(child.stdout.take());
    let output = child.wait_with_output().expect("ends");
    assert_eq!((output.status.code(), err(&output).as_str()), (Some(0), ""));
}

#[test]
fn audit_tells_whole_from_damaged_by_its_exit_code() {
    let (_room, path) = series(50);
    write_leg(&path, 40..60);
    let output = run("audit", &path, &[]);
    let text = out(&output);
    assert_eq!(output.status.code(), Some(0), "{text}");
    for part in [
        "is whole",
        "10 of its steps superseded",
        "gaps: none",
        "damage: none",
        "run          60 rows",
    ] {
        assert!(text.contains(part), "{part} in\n{text}");
    }
    damage(&path);
    let output = run("audit", &path, &[]);
    let text = out(&output);
    assert_eq!(output.status.code(), Some(1), "{text}");
    for part in [
        "is DAMAGED in 1 place; 1 step is lost",
        "journal-000001.frames, bytes ",
        "the checksum of a record does not match",
        "are good",
    ] {
        assert!(text.contains(part), "{part} in\n{text}");
    }
}

#[test]
fn audit_reports_a_torn_end() {
    let (_room, path) = series(50);
    let journal = path.join("journal-000001.frames");
    let length = std::fs::metadata(&journal).expect("length").len();
    std::fs::OpenOptions::new()
        .write(true)
        .open(&journal)
        .and_then(|file| file.set_len(length - 700))
        .expect("cut");
    let output = run("audit", &path, &[]);
    assert_eq!(output.status.code(), Some(1));
    assert!(
        out(&output).contains("the file ends within a frame"),
        "{}",
        out(&output)
    );
}

#[test]
fn what_is_no_series_is_refused_with_a_hint() {
    let (room, path) = series(1);
    for command in [vec!["sight"], vec!["audit"], vec!["export", "--to", "csv"]] {
        for (wrong, hint) in [
            (room.path().join("saltmarsh"), "there is a series"),
            (room.path().to_path_buf(), "there is a series"),
            (path.join("manifest-000001.txt"), "is a file"),
        ] {
            let output = run(command[0], &wrong, &command[1..]);
            assert_eq!((output.status.code(), out(&output).as_str()), (Some(2), ""));
            assert!(err(&output).contains(hint), "{}", err(&output));
        }
    }
}

#[test]
fn wrong_usage_has_exit_code_2_and_help_has_an_example() {
    for wrong in [
        vec![],
        vec!["gaze"],
        vec!["sight"],
        vec!["export", "x.limno"],
        vec!["export", "x.limno", "--to", "xml"],
    ] {
        assert_eq!(
            program()
                .args(&wrong)
                .output()
                .expect("starts")
                .status
                .code(),
            Some(2),
            "{wrong:?}"
        );
    }
    for command in ["sight", "export", "audit", "lint"] {
        let output = program()
            .args([command, "--help"])
            .output()
            .expect("starts");
        assert_eq!(output.status.code(), Some(0));
        assert!(
            out(&output).contains(&format!("Example:\n  limnograph {command} ")),
            "{}",
            out(&output)
        );
    }
}

#[test]
fn lint_says_what_a_config_comes_to_or_what_is_wrong_with_it() {
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("limnograph.toml");
    let config = "[units]\nlength = \"kpc\"\nmass = \"Msun\"\nvelocity = \"km/s\"\n[cosmology]\nexpanding = false\n\
                  [time]\ncoordinate = \"t\"\nunit = \"Gyr\"\n[volume]\nnone = true\n[gauges]\nmass_budget = true\n";
    std::fs::write(&path, config).expect("write");
    let output = run("lint", &path, &[]);
    assert_eq!(output.status.code(), Some(0), "{}", out(&output));
    assert!(
        out(&output).contains("is right") && out(&output).contains("mass_budget"),
        "{}",
        out(&output)
    );

    std::fs::write(&path, config.replace("kpc", "kps")).expect("write");
    let output = run("lint", &path, &[]);
    assert_eq!(output.status.code(), Some(1));
    assert!(
        out(&output).contains("limnograph.toml:2: "),
        "{}",
        out(&output)
    );

    let output = run("lint", &room.path().join("missing.toml"), &[]);
    assert_eq!(output.status.code(), Some(2));
}
