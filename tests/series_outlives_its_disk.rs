//! Whatever the disk refuses, the host goes on: rows wait, are tried again, or are counted as missing, and the
//! series tells what happened. The disk here is a real one with a fault in front of it.

#![allow(clippy::expect_used)]

mod common;

use common::{PATIENCE, opening, record};
use limnograph::reader::SeriesReader;
use limnograph::series::disk::{Disk, DiskFile, SystemDisk};
use limnograph::series::{Limits, Opening, Series, Trouble};
use std::collections::HashMap;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, AtomicI32, AtomicU64, Ordering};
use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};

/// What the disk refuses, changed by the test while the series is written.
#[derive(Default)]
struct Faults {
    /// Bytes that may still be written; beyond it a write is cut short, then refused.
    room: AtomicU64,
    /// The error number of a refused write.
    error: AtomicI32,
    truncate_fails: AtomicBool,
    sync_fails: AtomicBool,
    /// Stops every write for as long as it is held.
    stall: Mutex<()>,
    /// How much of each file is on stable storage.
    synced: Mutex<HashMap<PathBuf, u64>>,
}

impl Faults {
    fn none() -> Arc<Faults> {
        let faults = Faults::default();
        faults.room.store(u64::MAX, Ordering::SeqCst);
        faults.error.store(libc::ENOSPC, Ordering::SeqCst);
        Arc::new(faults)
    }

    fn leave_room(&self, bytes: u64) {
        self.room.store(bytes, Ordering::SeqCst);
    }
}

struct FaultyDisk(SystemDisk, Arc<Faults>);
struct FaultyFile {
    file: Box<dyn DiskFile>,
    faults: Arc<Faults>,
    path: PathBuf,
    written: u64,
}

impl DiskFile for FaultyFile {
    fn write_at(&mut self, bytes: &[u8], offset: u64) -> io::Result<usize> {
        drop(self.faults.stall.lock());
        let room = &self.faults.room;
        let left = room.load(Ordering::SeqCst);
        if left == 0 {
            return Err(io::Error::from_raw_os_error(
                self.faults.error.load(Ordering::SeqCst),
            ));
        }
        let count = self
            .file
            .write_at(&bytes[..bytes.len().min(left as usize)], offset)?;
        self.written = offset + count as u64;
        if left != u64::MAX {
            // The test may give room back at any moment; only what was counted is taken.
            let _ = room.compare_exchange(
                left,
                left - count as u64,
                Ordering::SeqCst,
                Ordering::SeqCst,
            );
        }
        Ok(count)
    }

    fn truncate(&mut self, length: u64) -> io::Result<()> {
        if self.faults.truncate_fails.load(Ordering::SeqCst) {
            return Err(io::Error::from_raw_os_error(libc::EIO));
        }
        self.file.truncate(length)
    }

    fn sync(&mut self) -> io::Result<()> {
        if self.faults.sync_fails.load(Ordering::SeqCst) {
            return Err(io::Error::from_raw_os_error(libc::EIO));
        }
        self.file.sync()?;
        self.faults
            .synced
            .lock()
            .expect("lock")
            .insert(self.path.clone(), self.written);
        Ok(())
    }

    fn is_at(&self, path: &Path) -> bool {
        self.file.is_at(path)
    }
}

impl Disk for FaultyDisk {
    fn create_directory(&mut self, path: &Path) -> io::Result<()> {
        self.0.create_directory(path)
    }

    fn create(&mut self, path: &Path) -> io::Result<Box<dyn DiskFile>> {
        Ok(Box::new(FaultyFile {
            file: self.0.create(path)?,
            faults: self.1.clone(),
            path: path.to_path_buf(),
            written: 0,
        }))
    }

    fn sync_directory(&mut self, path: &Path) -> io::Result<()> {
        self.0.sync_directory(path)
    }

    fn remove(&mut self, path: &Path) {
        self.0.remove(path);
    }
}

struct Scene {
    room: tempfile::TempDir,
    path: PathBuf,
    faults: Arc<Faults>,
    series: Series,
}

impl Scene {
    fn new(opening: Opening) -> Scene {
        let room = tempfile::tempdir().expect("room");
        let path = room.path().join("saltmarsh.limno");
        let faults = Faults::none();
        let disk = Box::new(FaultyDisk(SystemDisk, faults.clone()));
        let series = Series::open_on(disk, &path, opening).expect("opens");
        Scene {
            room,
            path,
            faults,
            series,
        }
    }

    fn enter(&self, steps: std::ops::Range<u64>) {
        steps.for_each(|step| self.series.enter(record(step)).expect("enters"));
    }

    fn wait_until(&self, what: &str, mut condition: impl FnMut(&Scene) -> bool) {
        let start = Instant::now();
        while !condition(self) {
            assert!(
                start.elapsed() < PATIENCE,
                "{what}: {:?}",
                self.series.status()
            );
            std::thread::sleep(Duration::from_millis(5));
        }
    }

    fn wait_until_written(&self, records: u64) {
        self.wait_until("written", |scene| {
            scene.series.status().records_written == records
        });
    }

    fn wait_until_failing(&self) {
        self.wait_until("failing", |scene| scene.series.status().is_failing);
    }

    /// Closes, and reads back: all of `steps` are there, in order, and nothing is damaged.
    fn close_and_check(
        self,
        steps: impl Iterator<Item = u64>,
    ) -> (SeriesReader, tempfile::TempDir) {
        self.series.close(PATIENCE).expect("closes");
        let reader = SeriesReader::open(&self.path).expect("opens");
        let run = reader.table("run").expect("run");
        let read: Vec<u64> = (0..run.rows()).filter_map(|row| run.step(row)).collect();
        assert_eq!(read, steps.collect::<Vec<_>>());
        assert_eq!(reader.damage(), []);
        (reader, self.room)
    }
}

#[test]
fn a_full_disk_in_mid_frame_makes_rows_wait_and_loses_none() {
    let scene = Scene::new(opening());
    scene.enter(0..10);
    scene.wait_until_written(10);
    scene.faults.leave_room(700);
    scene.enter(10..30);
    scene.wait_until_failing();
    let status = scene.series.status();
    assert!(status.records_waiting > 0);
    assert!(status.last_error.expect("error").contains("No space left"));
    // Readers meanwhile see whole steps only, and no trace of the attempt.
    let reader = SeriesReader::open(&scene.path).expect("opens");
    assert_eq!(
        (reader.records() as u64, reader.damage()),
        (status.records_written, vec![])
    );
    scene.faults.leave_room(u64::MAX);
    scene.wait_until_written(30);
    assert!(!scene.series.status().is_failing);
    let (reader, _room) = scene.close_and_check(0..30);
    assert_eq!((reader.gaps().len(), reader.journal_files().len()), (0, 1));
}

#[test]
fn what_cannot_be_cut_off_is_written_over() {
    let scene = Scene::new(opening());
    scene.faults.truncate_fails.store(true, Ordering::SeqCst);
    scene.faults.leave_room(1000);
    scene.enter(0..20);
    scene.wait_until_failing();
    let reader = SeriesReader::open(&scene.path).expect("opens");
    assert!(reader.damage().len() == 1, "the torn end shows meanwhile");
    scene.faults.leave_room(u64::MAX);
    scene.wait_until_written(20);
    scene.close_and_check(0..20);
}

#[test]
fn a_file_that_may_not_grow_is_continued_in_another() {
    let scene = Scene::new(opening());
    scene.enter(0..5);
    scene.wait_until_written(5);
    scene.faults.error.store(libc::EFBIG, Ordering::SeqCst);
    scene.faults.leave_room(300);
    scene.enter(5..10);
    scene.wait_until_failing();
    scene.faults.leave_room(u64::MAX);
    scene.wait_until_written(10);
    let (reader, _room) = scene.close_and_check(0..10);
    assert_eq!(reader.journal_files().len(), 2);
    assert!(
        reader.continuations()[0]
            .1
            .reason
            .contains("File too large")
    );
}

#[test]
fn rows_in_doubt_after_a_failed_sync_are_written_again_and_counted_once() {
    let scene = Scene::new(opening());
    scene.enter(0..5);
    scene.faults.sync_fails.store(true, Ordering::SeqCst);
    let error = scene
        .series
        .enter_durably(record(5), Duration::from_millis(200))
        .expect_err("not durable");
    assert_eq!(error.trouble, Trouble::NotDurable);
    assert!(
        error.to_string().contains("step 5") && error.to_string().contains("error"),
        "{error}"
    );
    scene.faults.sync_fails.store(false, Ordering::SeqCst);
    scene
        .series
        .enter_durably(record(6), PATIENCE)
        .expect("durable");
    assert_eq!(scene.series.status().records_durable, 7);
    let path = scene.path.clone();
    let (reader, _room) = scene.close_and_check(0..7);
    assert!(reader.journal_files().len() >= 2);
    // The first file could be lost altogether: everything in doubt stands in the later ones.
    std::fs::write(path.join("journal-000001.frames"), b"").expect("write");
    assert_eq!(SeriesReader::open(&path).expect("opens").records(), 7);
}

#[test]
fn more_rows_than_may_wait_are_refused_counted_and_noted() {
    let limits = Limits {
        waiting_records: 8,
        ..Limits::default()
    };
    let scene = Scene::new(Opening {
        limits,
        ..opening()
    });
    scene.faults.leave_room(0);
    scene.series.enter(record(0)).expect("enters");
    scene.wait_until_failing();
    let mut refused = Vec::new();
    for step in 1..20 {
        if let Err(error) = scene.series.enter(record(step)) {
            assert_eq!(error.trouble, Trouble::Full);
            assert!(
                error
                    .to_string()
                    .contains(&format!("the row of step {step}")),
                "{error}"
            );
            assert!(error.to_string().contains("No space left"), "{error}");
            refused.push(step);
        }
    }
    assert_eq!(refused, (9..20).collect::<Vec<_>>());
    assert_eq!(scene.series.status().records_missing, 11);
    scene.faults.leave_room(u64::MAX);
    scene.wait_until_written(9);
    scene.enter(20..25);
    let (reader, _room) = scene.close_and_check((0..9).chain(20..25));
    let gap = &reader.gaps()[0];
    assert_eq!(
        (
            reader.gaps().len(),
            gap.records,
            gap.first_step,
            gap.last_step
        ),
        (1, 11, 9, 19)
    );
    assert!(gap.reason.contains("No space left"), "{}", gap.reason);
}

#[test]
fn waiting_rows_are_bounded_in_bytes_too() {
    let limits = Limits {
        waiting_bytes: 20_000,
        ..Limits::default()
    };
    let scene = Scene::new(Opening {
        limits,
        ..opening()
    });
    scene.faults.leave_room(0);
    let accepted = (0..100)
        .filter(|&step| scene.series.enter(record(step)).is_ok())
        .count();
    assert!((2..40).contains(&accepted), "{accepted}");
    scene.faults.leave_room(u64::MAX);
    scene.close_and_check(0..accepted as u64);
}

#[test]
fn a_stalled_disk_delays_neither_enter_nor_status_nor_close_beyond_its_patience() {
    let scene = Scene::new(opening());
    scene.enter(0..3);
    scene.wait_until_written(3);
    let stall = scene.faults.stall.lock().expect("lock");
    // All of this returns while no write can; that is the promise, however long it takes on a busy machine.
    scene.enter(3..50);
    assert_eq!(scene.series.status().records_written, 3);
    let error = scene
        .series
        .enter_durably(record(50), Duration::from_millis(50))
        .expect_err("stalled");
    assert_eq!(error.trouble, Trouble::NotDurable);
    let error = scene
        .series
        .close(Duration::from_millis(50))
        .expect_err("stalled");
    assert_eq!(error.trouble, Trouble::NotDurable);
    assert!(error.to_string().contains("are not in it"), "{error}");
    drop(stall);
}

#[test]
fn a_directory_that_vanishes_and_returns_gets_its_manifest_and_rows_again() {
    let scene = Scene::new(Opening {
        limits: Limits {
            sync_interval: Duration::from_millis(20),
            ..Limits::default()
        },
        ..opening()
    });
    scene
        .series
        .enter_durably(record(0), PATIENCE)
        .expect("durable");
    std::fs::remove_dir_all(&scene.path).expect("remove");
    scene.enter(1..5);
    scene.wait_until_failing();
    scene.enter(5..8);
    std::fs::create_dir(&scene.path).expect("create");
    scene
        .series
        .enter_durably(record(8), PATIENCE)
        .expect("durable again");
    scene.series.close(PATIENCE).expect("closes");
    let reader = SeriesReader::open(&scene.path).expect("opens");
    let run = reader.table("run").expect("run");
    let read: Vec<u64> = (0..run.rows()).filter_map(|row| run.step(row)).collect();
    // What was synced before went with the directory; nothing after it did.
    assert_eq!(read, (1..9).collect::<Vec<_>>());
    assert!(reader.manifest().is_some());
}

#[test]
fn a_long_journal_is_continued_in_the_next() {
    let limits = Limits {
        journal_bytes: 20_000,
        ..Limits::default()
    };
    let scene = Scene::new(Opening {
        limits,
        ..opening()
    });
    scene.enter(0..100);
    let (reader, _room) = scene.close_and_check(0..100);
    assert!(reader.journal_files().len() > 3);
    assert!(
        reader
            .journal_files()
            .iter()
            .all(|(_, bytes)| *bytes < 30_000)
    );
}

/// Leaves of every file what was on stable storage, as a power cut at this moment might.
fn cut_power(faults: &Faults) {
    for (path, &length) in faults.synced.lock().expect("lock").iter() {
        let file = std::fs::OpenOptions::new()
            .write(true)
            .open(path)
            .expect("open");
        file.set_len(length).expect("cut");
    }
}

#[test]
fn a_durable_row_survives_a_power_cut_at_once_and_others_after_the_sync_interval() {
    let limits = Limits {
        sync_interval: Duration::from_secs(3600),
        ..Limits::default()
    };
    let scene = Scene::new(Opening {
        limits,
        ..opening()
    });
    scene.enter(0..20);
    scene
        .series
        .enter_durably(record(20), PATIENCE)
        .expect("durable");
    scene.enter(21..30);
    scene.wait_until_written(30);
    assert_eq!(scene.series.status().records_durable, 21);
    cut_power(&scene.faults);
    assert_eq!(
        SeriesReader::open(&scene.path).expect("opens").records(),
        21
    );

    let limits = Limits {
        sync_interval: Duration::from_millis(30),
        ..Limits::default()
    };
    let scene = Scene::new(Opening {
        limits,
        ..opening()
    });
    scene.enter(0..20);
    scene.wait_until("synced", |scene| {
        scene.series.status().records_durable == 20
    });
    cut_power(&scene.faults);
    assert_eq!(
        SeriesReader::open(&scene.path).expect("opens").records(),
        20
    );
}

#[test]
fn memory_for_rows_not_yet_synced_is_bounded_by_earlier_syncs() {
    let limits = Limits {
        sync_interval: Duration::from_secs(3600),
        unsynced_bytes: 4096,
        ..Limits::default()
    };
    let scene = Scene::new(Opening {
        limits,
        ..opening()
    });
    scene.enter(0..100);
    scene.wait_until_written(100);
    assert!(
        scene.series.status().records_durable >= 90,
        "{:?}",
        scene.series.status()
    );
    scene.close_and_check(0..100);
}
