//! A run that is stopped and opened again goes on as if nothing had happened.

use limnograph::lend::{ArrayShape, Lent, Scalar};
use limnograph::reader::SeriesReader;
use limnograph::run::{self, Clock, ConfigSource, Request, Run};
use limnograph::team::alone::Alone;
use std::path::Path;

const CONFIG: &str = r#"
[units]
length = "kpc"
mass = "Msun"
velocity = "km/s"
star_formation_rate = "Msun/yr"
[cosmology]
expanding = false
[time]
coordinate = "t"
unit = "Gyr"
[volume]
none = true
[gauges]
star_formation = true
mass_budget = true
"#;

fn open(series: &Path) -> Run {
    let request = Request {
        config: ConfigSource {
            path: "limnograph.toml".to_string(),
            text: Some(CONFIG.to_string()),
        },
        series: series.display().to_string(),
        host_name: "marsh".to_string(),
        host_version: String::new(),
        description: String::new(),
        threads: 0,
        fault: None,
        is_complete: true,
    };
    run::open(Box::new(Alone::new()), request).expect("the run opens")
}

fn lend(run: &Run, species: &str, field: &str, numbers: &[f64]) {
    let shape = ArrayShape {
        scalar: Scalar::F64,
        components: 1,
        stride: 8,
        component_stride: 8,
    };
    run.lend(
        species,
        field,
        numbers.len(),
        Ok((shape, Lent::Interleaved(numbers.as_ptr() as usize))),
    )
    .expect("the array is lent");
}

/// Gas of 0.1 each turns into stars, one a step: sums that no double holds exactly.
fn step(run: &Run, step: u64, checkpoint: bool) {
    let stars = step as usize;
    let gas = vec![0.1; 40 - stars];
    let rates = vec![0.25 * (step % 3) as f64; gas.len()];
    let births: Vec<f64> = (1..=step).map(|step| step as f64 * 0.1).collect();
    let masses = vec![0.1; stars];
    let clock = Clock {
        step,
        time: step as f64 * 0.1,
        step_length: 0.1,
        synchronised: true,
        checkpoint,
    };
    run.mark(Ok(clock)).expect("the step is marked");
    lend(run, "gas", "mass", &gas);
    lend(run, "gas", "star_formation_rate", &rates);
    lend(run, "star", "mass", &masses);
    lend(run, "star", "birth_mass", &masses);
    lend(run, "star", "birth_time", &births);
    run.enter().expect("the step is entered");
}

fn columns(series: &Path) -> Vec<Vec<Option<u64>>> {
    let reader = SeriesReader::open(series).expect("the series is readable");
    let run = reader.table("run").expect("there is a run table");
    let names = [
        "step",
        "stars_formed",
        "stellar_mass_formed",
        "star_formation_formed_over_expected",
        "baryon_mass_drift",
    ];
    names
        .iter()
        .map(|name| {
            let column = run.column(name).unwrap_or_else(|| panic!("column {name}"));
            (0..run.rows())
                .map(|row| column.number(row).map(f64::to_bits))
                .collect()
        })
        .collect()
}

#[test]
fn a_restart_from_a_checkpoint_continues_every_account_to_the_bit() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let (whole, broken) = (
        folder.path().join("whole.limno"),
        folder.path().join("broken.limno"),
    );

    let run = open(&whole);
    (1..=20).for_each(|number| step(&run, number, number == 10));
    run.close().expect("closed");

    // Killed at step 14, again at 12, each time going on from the checkpoint of step 10.
    for (from, to) in [(1, 14), (11, 12), (11, 20)] {
        let run = open(&broken);
        (from..=to).for_each(|number| step(&run, number, number == 10));
        run.close().expect("closed");
    }

    assert_eq!(columns(&whole), columns(&broken));
    let drift = &columns(&whole)[4];
    assert!(
        drift.iter().all(|drift| *drift == Some(0)),
        "whole particles moved between species: the drift is zero"
    );
}

#[test]
fn a_leg_without_a_past_begins_its_accounts_anew() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let series = folder.path().join("anew.limno");
    for _ in 0..2 {
        let run = open(&series);
        (1..=3).for_each(|number| step(&run, number, false));
        run.close().expect("closed");
    }
    let columns = columns(&series);
    assert_eq!(
        columns[0].len(),
        3,
        "the first leg is done over from its first row on"
    );
    assert_eq!(
        columns[1][0], None,
        "nobody knows what was born before the first row"
    );
    assert_eq!(columns[1][1], Some(1.0f64.to_bits()));
}
