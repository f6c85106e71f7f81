//! An invented universe for the tests of the series: a periodic box in which stars form, winds blow and black
//! holes grow along smooth curves. Nothing here is measured; it only has to look like a run.

// Every test file takes what it needs of this; what fails here is a failure of the test.
#![allow(dead_code, clippy::expect_used, clippy::unwrap_used)]

use limnograph::series::record::{Record, Row, Value};
use limnograph::series::schema::{Column, Kind, Schema, Table, ValueType};
use limnograph::series::{Opening, Series};
use std::path::Path;
use std::time::Duration;

/// How long a test waits for a disk before it fails.
pub const PATIENCE: Duration = Duration::from_secs(60);
/// Step at which the first black hole is seeded; before it the black hole columns are null.
pub const FIRST_BLACK_HOLE: u64 = 60;
/// Shells of the one station.
pub const SHELLS: u64 = 4;

const RATE: &str = "solMass.yr**-1";

fn float(gauge: &str, name: &str, unit: &str, kind: Kind, description: &str) -> Column {
    Column::new(gauge, name, unit, kind, ValueType::Float, description)
}

fn count(gauge: &str, name: &str, kind: Kind, description: &str) -> Column {
    Column::new(gauge, name, "", kind, ValueType::Unsigned, description)
}

fn text(gauge: &str, name: &str, description: &str) -> Column {
    Column::new(gauge, name, "", Kind::Key, ValueType::Text, description)
}

fn step_and_time() -> Vec<Column> {
    vec![
        count("clock", "step", Kind::Key, "The host's step number."),
        float(
            "clock",
            "time",
            "Gyr",
            Kind::Key,
            "Time since the beginning.",
        ),
    ]
}

fn run_table() -> Table {
    let mut columns = step_and_time();
    columns.push(float(
        "clock",
        "redshift",
        "",
        Kind::Key,
        "Cosmological redshift.",
    ));
    columns.push(float(
        "clock",
        "age",
        "Gyr",
        Kind::Key,
        "Age of the universe.",
    ));
    columns.extend([
        float(
            "star_formation",
            "star_formation_rate_density",
            "solMass.yr**-1.Mpc**-3",
            Kind::Instant,
            "Star formation rate of all gas per comoving volume.",
        ),
        float(
            "star_formation",
            "stellar_mass_formed",
            "solMass",
            Kind::Increment,
            "Born since the last row.",
        ),
        count(
            "black_holes",
            "black_hole_number",
            Kind::Instant,
            "Black holes in the box.",
        ),
        float(
            "black_holes",
            "black_hole_mass",
            "solMass",
            Kind::Instant,
            "Mass of all black holes.",
        ),
        float(
            "black_holes",
            "black_hole_accretion_rate",
            RATE,
            Kind::Instant,
            "Accretion of all black holes.",
        ),
        float(
            "black_holes",
            "most_massive_black_hole",
            "solMass",
            Kind::Extreme,
            "The most massive one.",
        ),
        float(
            "mass_budget",
            "gas_mass",
            "solMass",
            Kind::Instant,
            "Particle mass of the gas.",
        ),
        float(
            "mass_budget",
            "stellar_mass",
            "solMass",
            Kind::Instant,
            "Particle mass of the stars.",
        ),
        float(
            "mass_budget",
            "baryon_drift",
            "",
            Kind::Cumulative,
            "Change of all baryons since the first row.",
        ),
    ]);
    let mut histogram = count(
        "star_formation",
        "gas_by_density",
        Kind::Instant,
        "Gas elements in bins of density.",
    );
    histogram.length = 6;
    columns.push(histogram);
    columns.extend([
        float(
            "library",
            "library_seconds",
            "s",
            Kind::WallClock,
            "Time in the library's calls this step.",
        ),
        float(
            "library",
            "host_seconds",
            "s",
            Kind::WallClock,
            "Time since the last row.",
        ),
    ]);
    Table {
        name: "run".into(),
        description: "One row a measured step.".into(),
        columns,
    }
}

fn shell_table() -> Table {
    let mut columns = step_and_time();
    columns.extend([
        text("wind_shells", "station", "The station's name."),
        count(
            "wind_shells",
            "shell",
            Kind::Key,
            "The shell's number from the inside.",
        ),
        float(
            "wind_shells",
            "radius",
            "kpc",
            Kind::Instant,
            "Outer radius of the shell.",
        ),
        float(
            "wind_shells",
            "outflow_rate",
            RATE,
            Kind::Instant,
            "Mass outwards through the shell.",
        ),
        float(
            "wind_shells",
            "inflow_rate",
            RATE,
            Kind::Instant,
            "Mass inwards through the shell, positive.",
        ),
    ]);
    Table {
        name: "wind_shells".into(),
        description: "One row a station and shell.".into(),
        columns,
    }
}

fn event_table() -> Table {
    let mut columns = step_and_time();
    columns.push(text("library", "source", "What it is about."));
    columns.push(text("library", "text", "What happened."));
    Table {
        name: "events".into(),
        description: "Notes of the library.".into(),
        columns,
    }
}

/// The schema of the invented run.
pub fn schema() -> Schema {
    Schema {
        tables: vec![run_table(), shell_table(), event_table()],
    }
}

/// What the invented run opens its series with.
pub fn opening() -> Opening {
    Opening {
        schema: schema(),
        config_text: "# Saltmarsh, invented\n[run]\nname = \"saltmarsh\"\n".to_string(),
        host: serde_json::json!({"name": "Saltmarsh", "version": "1.0", "ranks": 2}),
        library_version: "0.1.0".to_string(),
        setting: serde_json::json!({
            "time": {"coordinate": "t"},
            "cosmology": {"hubble": 0.68, "omega_matter": 0.31, "omega_lambda": 0.69},
            "volume": {"box": 25.0, "unit": "Mpc/h"},
        }),
        time_column: "time".to_string(),
        ..Opening::default()
    }
}

/// The time of a step: 400 steps from 0.2 Gyr to 13.7 Gyr.
pub fn time_of(step: u64) -> f64 {
    0.2 + step as f64 * 0.03375
}

/// Everything that one step of the invented run enters.
pub fn record(step: u64) -> Record {
    let time = time_of(step);
    // A matter-only relation is close enough for something invented.
    let redshift = ((13.7 / time).powf(2.0 / 3.0) - 1.0).max(0.0);
    let wobble = 1.0 + 0.08 * (step as f64 * 0.7).sin() + 0.05 * (step as f64 * 0.23).cos();
    let density =
        0.012 * (1.0 + redshift).powf(2.6) / (1.0 + ((1.0 + redshift) / 2.9).powf(5.6)) * wobble;
    let formed = density * 0.03375e9 * 5.0e4;
    let stars = 1.9e13 * (1.0 - (-time / 4.0).exp());
    let holes = if step < FIRST_BLACK_HOLE {
        None
    } else {
        Some(((step - FIRST_BLACK_HOLE) / 12 + 1).min(23))
    };
    let hole_mass = holes.map(|number| 1.3e5 * number as f64 * (time * 0.55).exp());
    let mut run = vec![
        Value::Unsigned(step),
        Value::Float(time),
        Value::Float(redshift),
        Value::Float(time),
        Value::Float(density),
        Value::Float(formed),
        holes.map_or(Value::Null, Value::Unsigned),
        Value::from(hole_mass),
        Value::from(hole_mass.map(|mass| mass * 2.1e-8 * wobble.powi(6) / (1.0 + time))),
        Value::from(hole_mass.map(|mass| mass * 0.31)),
        Value::Float(2.4e14 - stars),
        Value::Float(stars),
        Value::Float(1.0e-16 * (step as f64).sin()),
        Value::Counts(
            (0..6)
                .map(|bin| (step + 1) * (bin + 3) * 977 % 4000)
                .collect(),
        ),
    ];
    run.push(Value::Float(0.0011 + 0.0002 * wobble));
    run.push(Value::Float(0.145 * wobble));
    let mut rows = vec![Row {
        table: 0,
        values: run,
    }];
    for shell in 0..SHELLS {
        let outflow = density * 410.0 / (1.0 + shell as f64) * wobble;
        rows.push(Row {
            table: 1,
            values: vec![
                Value::Unsigned(step),
                Value::Float(time),
                Value::from("centre"),
                Value::Unsigned(shell),
                Value::Float(50.0 * (shell + 1) as f64),
                Value::Float(outflow),
                Value::Float(outflow * (0.3 + 0.2 * shell as f64)),
            ],
        });
    }
    if step == 0 {
        rows.push(event(
            step,
            "black_holes",
            "field accretion_rate of black holes is not lent",
        ));
    }
    if step == FIRST_BLACK_HOLE {
        rows.push(event(
            step,
            "black_holes",
            "field accretion_rate of black holes is lent again",
        ));
    }
    Record {
        step,
        time,
        step_length: 0.03375,
        rows: rows.into(),
        carry: vec![step, step * step],
    }
}

/// A row of the table of events.
pub fn event(step: u64, gauge: &str, note: &str) -> Row {
    let values = vec![
        Value::Unsigned(step),
        Value::Float(time_of(step)),
        Value::from(gauge),
        Value::from(note),
    ];
    Row { table: 2, values }
}

/// Writes steps `steps` as one leg and closes it.
pub fn write_leg(path: &Path, steps: std::ops::Range<u64>) {
    let series = Series::open(path, opening()).expect("opens");
    for step in steps {
        enter(&series, record(step));
    }
    series.close(PATIENCE).expect("closes");
}

/// Enters a record however fast the test is.
pub fn enter(series: &Series, record: Record) {
    while series.status().records_waiting > 1000 {
        std::thread::sleep(Duration::from_millis(1));
    }
    series.enter(record).expect("enters");
}
