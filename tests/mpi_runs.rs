//! Reductions under MPI on 1 to 4 ranks, oversubscribed.
//!
//! This program starts itself under `mpirun`, once for each promise and rank count; on the ranks it keeps
//! the promise or ends with an error. Arguments filter the runs by name.

#![allow(clippy::expect_used, clippy::unwrap_used)] // A rank that finds a promise broken ends the run.

#[path = "mpi/allocations.rs"]
mod allocations;
#[path = "mpi/contributions.rs"]
mod contributions;
#[path = "mpi/promises.rs"]
mod promises;

use promises::{PROMISES, Promise};
use std::process::{Command, ExitCode};
use std::time::Instant;

/// A run that takes longer hangs.
const LIMIT_SECONDS: &str = "60";
/// Argument that makes this program one rank of a run.
const AS_RANK: &str = "--as-rank";

#[global_allocator]
static COUNTED: allocations::Counted = allocations::Counted;

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    match arguments.as_slice() {
        [first, name, place] if first == AS_RANK => keep(name, place),
        _ => drive(&arguments),
    }
}

/// One rank of a run.
fn keep(name: &str, place: &str) -> ExitCode {
    let Some(promise) = PROMISES.iter().find(|promise| promise.name == name) else {
        eprintln!("no promise is called {name}");
        return ExitCode::FAILURE;
    };
    // A panic must end the whole run, or the other ranks would wait for this one until the time limit.
    match std::panic::catch_unwind(|| (promise.keep)(place.as_ref())) {
        Ok(()) => ExitCode::SUCCESS,
        Err(_) => std::process::exit(1),
    }
}

fn drive(arguments: &[String]) -> ExitCode {
    let filters: Vec<&String> = arguments
        .iter()
        .filter(|argument| !argument.starts_with('-'))
        .collect();
    let wanted = |name: &str| {
        filters.is_empty() || filters.iter().any(|filter| name.contains(filter.as_str()))
    };
    let (mut passed, mut failed, mut left_out) = (0, 0, 0);
    for promise in PROMISES {
        for &ranks in promise.ranks {
            let name = format!("{}_on_{ranks}", promise.name);
            if !wanted(&name) {
                left_out += 1;
                continue;
            }
            let begin = Instant::now();
            match run(promise, ranks) {
                Ok(()) => {
                    passed += 1;
                    println!(
                        "test {name} ... ok ({:.1} s)",
                        begin.elapsed().as_secs_f64()
                    );
                }
                Err(why) => {
                    failed += 1;
                    println!("test {name} ... FAILED\n{why}");
                }
            }
        }
    }
    let verdict = if failed == 0 { "ok" } else { "FAILED" };
    println!(
        "\ntest result: {verdict}. {passed} passed; {failed} failed; 0 ignored; 0 measured; {left_out} filtered out"
    );
    if failed == 0 {
        ExitCode::SUCCESS
    } else {
        ExitCode::FAILURE
    }
}

fn run(promise: &Promise, ranks: u32) -> Result<(), String> {
    let place = tempfile::tempdir().map_err(|error| error.to_string())?;
    let program = std::env::current_exe().map_err(|error| error.to_string())?;
    let output = Command::new("timeout")
        .args(["--kill-after=5", LIMIT_SECONDS])
        .arg(concat!(env!("CARGO_MANIFEST_DIR"), "/scripts/mpirun.sh"))
        .arg(ranks.to_string())
        .arg(program)
        .args([AS_RANK, promise.name])
        .arg(place.path())
        .output()
        .map_err(|error| format!("cannot start mpirun: {error}"))?;
    let text = format!(
        "{}, after\n{}{}",
        output.status,
        String::from_utf8_lossy(&output.stdout),
        String::from_utf8_lossy(&output.stderr)
    );
    if !output.status.success() {
        return Err(text);
    }
    // Every rank says so itself: a run whose ranks never got to the end must not pass.
    for rank in 0..ranks {
        let kept = place.path().join(format!("kept.{rank}"));
        if !kept.exists() {
            return Err(format!("rank {rank} did not get to the end: {text}"));
        }
    }
    Ok(())
}
