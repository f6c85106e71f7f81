//! Hosts that are killed at any moment or may not write long files, as real processes: each test starts its own
//! binary again and plays the host there.

#![allow(clippy::expect_used)]

mod common;

use common::{PATIENCE, enter, opening, record, time_of};
use limnograph::reader::SeriesReader;
use limnograph::series::Series;
use limnograph::series::record::Value;
use std::io::{BufRead, BufReader, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::time::Duration;

const HOST_PATH: &str = "LIMNOGRAPH_TEST_HOST_PATH";
const HOST_FROM: &str = "LIMNOGRAPH_TEST_HOST_FROM";

/// Where and from which step on this process is to play the host; `None` in the test itself.
fn role() -> Option<(PathBuf, u64)> {
    let from = std::env::var(HOST_FROM).ok()?.parse().ok()?;
    Some((PathBuf::from(std::env::var_os(HOST_PATH)?), from))
}

/// This binary once more, to play the host of `test`.
fn host(test: &str, path: &Path, from: u64) -> Command {
    let mut command = Command::new(std::env::current_exe().expect("own path"));
    command
        .args(["--exact", test, "--nocapture"])
        .env(HOST_PATH, path)
        .env(HOST_FROM, from.to_string());
    command
}

/// The same under a file-size limit in blocks of 512 bytes; beyond it the system sends SIGXFSZ.
fn host_with_limit(test: &str, path: &Path, blocks: u32) -> Command {
    let plain = host(test, path, 0);
    let mut command = Command::new("sh");
    command
        .arg("-c")
        .arg(format!("ulimit -f {blocks}; exec \"$@\""))
        .arg("sh")
        .arg(plain.get_program());
    command
        .args(plain.get_args())
        .env(HOST_PATH, path)
        .env(HOST_FROM, "0");
    command
}

/// Enters step after step and says after each how many are written, until it is killed.
fn write_until_killed(path: &Path, from: u64) -> ! {
    let series = Series::open(path, opening()).expect("opens");
    let mut out = std::io::stdout();
    for step in from.. {
        enter(&series, record(step));
        let written = series.status().records_written;
        writeln!(out, "written {written}")
            .and_then(|()| out.flush())
            .expect("the test listens");
    }
    unreachable!("the test kills this process");
}

fn kill_after(mut child: Child, delay: Duration) -> u64 {
    let out = BufReader::new(child.stdout.take().expect("pipe"));
    let mut numbers = out.lines().map_while(Result::ok).filter_map(|line| {
        line.strip_prefix("written ")
            .and_then(|number| number.parse().ok())
    });
    let first: u64 = numbers.next().expect("the host begins");
    let killer = std::thread::spawn(move || {
        std::thread::sleep(delay);
        child.kill().expect("kill");
        child.wait().expect("wait")
    });
    let last = numbers.last().unwrap_or(first);
    let status = killer.join().expect("killer");
    assert!(
        !status.success(),
        "the host was killed, it did not end by itself"
    );
    last
}

#[test]
fn every_row_that_was_written_outlives_the_process() {
    if let Some((path, from)) = role() {
        write_until_killed(&path, from);
    }
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let (mut next_step, mut standing) = (0, 0);
    let mut state = 20_240_607_u64;
    for round in 1..=25_u32 {
        state = state
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        let delay = Duration::from_micros(state >> 33 & 0x7FFF);
        let test = "every_row_that_was_written_outlives_the_process";
        let child = host(test, &path, next_step)
            .stdout(Stdio::piped())
            .spawn()
            .expect("starts");
        let promised = kill_after(child, delay);

        let reader = SeriesReader::open(&path).expect("opens");
        let legs = reader.legs();
        let leg = legs.last().expect("leg");
        assert_eq!(leg.number, round);
        assert!(
            leg.records as u64 >= promised,
            "{} of {promised} rows",
            leg.records
        );
        if let (Some((first, _)), Some((last, _))) = (leg.first, leg.last) {
            standing = next_step + leg.records as u64;
            assert_eq!((first, last), (next_step, standing - 1));
        }
        // At most the frame that was being written when the process ended may be incomplete.
        assert!(
            reader.damage().len() <= round as usize,
            "{:?}",
            reader.damage()
        );

        // What stands is what a run without interruption would have written.
        let run = reader.table("run").expect("run");
        let shells = reader.table("wind_shells").expect("shells");
        let rates = run.column("star_formation_rate_density").expect("column");
        assert_eq!(run.rows() as u64, standing);
        assert_eq!(shells.rows() as u64, run.rows() as u64 * common::SHELLS);
        for row in 0..run.rows() {
            assert_eq!(
                (run.step(row), run.time(row)),
                (Some(row as u64), Some(time_of(row as u64)))
            );
            assert_eq!(
                rates.value(row),
                record(row as u64).rows.to_vec()[0].values[4]
            );
        }
        // The next host restarts from a checkpoint some steps back.
        next_step = standing.saturating_sub(u64::from(round) % 7 * 3);
    }
}

#[test]
fn a_file_size_limit_neither_kills_the_host_nor_loses_rows() {
    if let Some((path, _)) = role() {
        let series = Series::open(path, opening()).expect("opens");
        (0..200).for_each(|step| enter(&series, record(step)));
        series.close(PATIENCE).expect("closes");
        return;
    }
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let output = host_with_limit(
        "a_file_size_limit_neither_kills_the_host_nor_loses_rows",
        &path,
        64,
    )
    .output()
    .expect("starts");
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
    let reader = SeriesReader::open(&path).expect("opens");
    assert_eq!((reader.damage(), reader.gaps().len()), (vec![], 0));
    let run = reader.table("run").expect("run");
    let steps = run.column("step").expect("column");
    assert_eq!(
        (0..run.rows())
            .map(|row| steps.value(row))
            .collect::<Vec<_>>(),
        (0..200).map(Value::Unsigned).collect::<Vec<_>>()
    );
    let files = reader.journal_files();
    assert!(
        files.len() > 3 && files.iter().all(|(_, bytes)| *bytes <= 64 * 512),
        "{files:?}"
    );
}

#[test]
fn a_limit_too_small_to_open_a_series_is_an_error_and_no_signal() {
    if let Some((path, _)) = role() {
        let error = Series::open(&path, opening())
            .err()
            .expect("no room for a manifest");
        assert!(error.to_string().contains("File too large"), "{error}");
        assert!(!path.exists(), "what was begun is taken back");
        return;
    }
    let room = tempfile::tempdir().expect("room");
    let path = room.path().join("saltmarsh.limno");
    let output = host_with_limit(
        "a_limit_too_small_to_open_a_series_is_an_error_and_no_signal",
        &path,
        1,
    )
    .output()
    .expect("starts");
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
}
