//! The host's time means one moment, every star is born in one row, and the cadence depends on nothing else.

use limnograph::config::{Cadence, Clockwork, Config, Coordinate, Tick};
use limnograph::units::constants::{GIGAYEAR, MEGAYEAR};
use proptest::prelude::*;

fn config(cosmology: &str, time: &str, cadence: &str) -> Config {
    let form = if cosmology.contains("false") {
        ""
    } else {
        "velocity_form = \"peculiar\""
    };
    let text = format!(
        "[units]\nlength = \"kpc\"\nmass = \"Msun\"\nvelocity = \"km/s\"\n{form}\n[cosmology]\n{cosmology}\n[time]\n{time}\n\
         [volume]\nnone = true\n[cadence]\n{cadence}\n"
    );
    Config::parse(&text, "limnograph.toml")
        .unwrap_or_else(|problems| panic!("{problems:?}\n{text}"))
}

const FLAT: &str = "hubble = 70\nomega_matter = 0.3\nomega_lambda = 0.7";
const STATIC: &str = "expanding = false";

fn clockwork(time: &str) -> Clockwork {
    config(FLAT, time, "").clockwork
}

#[track_caller]
fn assert_near(found: f64, expected: f64, tolerance: f64) {
    assert!(
        (found - expected).abs() <= tolerance * expected.abs(),
        "{found:e} should be {expected:e}"
    );
}

#[test]
fn every_coordinate_names_the_same_moment() {
    let clocks = [
        (clockwork("coordinate = \"a\""), 0.5),
        (clockwork("coordinate = \"ln a\""), 0.5_f64.ln()),
        // The age at z = 1 in the reference list, computed with astropy 8.0.2: 5.75165 Gyr.
        (clockwork("coordinate = \"t\"\nunit = \"Gyr\""), 5.75165),
    ];
    for (clock, time) in clocks {
        let moment = clock.moment(time).unwrap();
        assert_near(moment.scale_factor, 0.5, 1e-6);
        assert_near(moment.redshift, 1.0, 2e-6);
        assert_near(moment.age_seconds, 5.75165 * GIGAYEAR, 1e-6);
        assert_near(moment.ln_a, 0.5_f64.ln(), 1e-6);
    }
    let births = clockwork("coordinate = \"a\"\nbirth = \"z\"");
    assert_near(births.birth_moment(1.0).unwrap().scale_factor, 0.5, 1e-15);
    assert_eq!(births.birth, Coordinate::Redshift);
}

#[test]
fn without_a_cosmology_time_is_only_time() {
    let clock = config(STATIC, "coordinate = \"t\"\nunit = \"Myr\"", "").clockwork;
    let moment = clock.moment(-3.0).unwrap();
    assert_eq!(
        (moment.scale_factor, moment.redshift, moment.ln_a),
        (1.0, 0.0, 0.0)
    );
    assert_eq!(moment.age_seconds, -3.0 * MEGAYEAR);
    assert_eq!(clock.elapsed_seconds(1.0, 3.5).unwrap(), 2.5 * MEGAYEAR);
    // Without a unit of its own, time is in length over velocity.
    let clock = config(STATIC, "coordinate = \"t\"", "").clockwork;
    assert_near(
        clock.elapsed_seconds(0.0, 1.0).unwrap(),
        3.085_677_581_491_367e16,
        1e-14,
    );
}

#[test]
fn short_steps_keep_their_digits() {
    let clock = clockwork("coordinate = \"a\"");
    let hubble_rate = config(FLAT, "coordinate = \"a\"", "")
        .expansion
        .hubble_rate(0.5);
    // H dt = ln(1 + da/a), to first order in so short a step.
    let (from, to) = (0.5, 0.5 + 1e-10);
    assert_near(
        clock.elapsed_seconds(from, to).unwrap(),
        (to - from) / 0.5 / hubble_rate,
        1e-9,
    );
    assert_near(
        clock.elapsed_seconds(to, from).unwrap(),
        -(to - from) / 0.5 / hubble_rate,
        1e-9,
    );
}

#[test]
fn times_that_mean_nothing_are_refused_with_their_range() {
    for (time, wrong) in [
        (
            "coordinate = \"a\"",
            vec![0.0, -1.0, 1e9, f64::NAN, f64::INFINITY],
        ),
        ("coordinate = \"ln a\"", vec![800.0, -800.0, f64::NAN]),
        (
            "coordinate = \"t\"\nunit = \"Gyr\"",
            vec![0.0, -1.0, 1e9, f64::NAN],
        ),
    ] {
        let clock = clockwork(time);
        for value in wrong {
            let error = clock.moment(value).unwrap_err();
            assert!(error.message.contains("expected a"), "{value}: {error}");
            assert!(clock.birth_window(None, value).is_err());
            assert!(clock.elapsed_seconds(value, value).is_err());
        }
    }
}

#[test]
fn a_star_that_carries_a_row_time_is_counted_on_the_stated_side() {
    let at_end = clockwork("coordinate = \"a\"");
    let window = at_end.birth_window(Some(0.5), 0.6).unwrap();
    assert!(
        !window.contains(0.5)
            && window.contains(0.55)
            && window.contains(0.6)
            && !window.contains(0.61)
    );
    let at_start = clockwork("coordinate = \"a\"\nbirth_stamp = \"start of step\"");
    let window = at_start.birth_window(Some(0.5), 0.6).unwrap();
    assert!(window.contains(0.5) && window.contains(0.55) && !window.contains(0.6));
    assert!(!window.contains(f64::NAN));
    // Redshift runs the other way.
    let redshift = clockwork("coordinate = \"a\"\nbirth = \"z\"");
    let window = redshift.birth_window(Some(0.25), 0.5).unwrap();
    assert!(
        !window.contains(3.0)
            && window.contains(2.0)
            && window.contains(1.0)
            && !window.contains(0.5)
    );
    // From the beginning on.
    assert!(redshift.birth_window(None, 0.5).unwrap().contains(1e4));
    assert!(at_end.birth_window(None, 0.5).unwrap().contains(1e-6));
}

#[test]
fn births_in_single_precision_fall_on_the_right_side() {
    let clock = clockwork("coordinate = \"a\"");
    let mut rounded_up = 0;
    for step in 1..1000 {
        let (last, now) = (f64::from(step) * 0.001, f64::from(step + 1) * 0.001);
        // What a host stores that keeps births as 32-bit floats.
        let (born_last, born_now) = (f64::from(last as f32), f64::from(now as f32));
        let window = clock.birth_window(Some(last), now).unwrap();
        let single = window.in_single_precision();
        assert!(
            !single.contains(born_last) && single.contains(born_now),
            "{last} to {now}"
        );
        rounded_up += usize::from(!window.contains(born_now));
    }
    // Without the rounding of the window about half of them would be missed.
    assert!(rounded_up > 300);
}

#[test]
fn births_in_another_unit_of_time_are_compared_in_theirs() {
    let clock =
        clockwork("coordinate = \"t\"\nunit = \"Gyr\"\nbirth = \"t\"\nbirth_unit = \"Myr\"");
    let window = clock.birth_window(Some(1.0), 2.0).unwrap();
    assert!(
        !window.contains(999.0)
            && window.contains(1001.0)
            && window.contains(2000.0)
            && !window.contains(2001.0)
    );
    assert_near(
        clock.birth_moment(1500.0).unwrap().age_seconds,
        1.5 * GIGAYEAR,
        1e-14,
    );
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(200))]

    #[test]
    fn every_star_is_born_in_exactly_one_row(
        mut rows in prop::collection::vec(0.01..1.0_f64, 2..20),
        births in prop::collection::vec(0.001..1.0_f64, 1..50),
        clock in prop::sample::select(vec![
            "coordinate = \"a\"", "coordinate = \"a\"\nbirth = \"ln a\"", "coordinate = \"a\"\nbirth = \"z\"",
            "coordinate = \"a\"\nbirth = \"t\"", "coordinate = \"a\"\nbirth_stamp = \"start of step\"",
            "coordinate = \"a\"\nbirth = \"z\"\nbirth_stamp = \"start of step\"",
        ]),
        is_single in any::<bool>(),
    ) {
        let clock = clockwork(clock);
        rows.sort_by(f64::total_cmp);
        let mut windows = vec![clock.birth_window(None, rows[0]).unwrap()];
        windows.extend(rows.windows(2).map(|pair| clock.birth_window(Some(pair[0]), pair[1]).unwrap()));
        let whole = clock.birth_window(None, rows[rows.len() - 1]).unwrap();
        // Some stars carry the very time of a row.
        for a in births.into_iter().chain(rows) {
            let birth = match clock.birth {
                Coordinate::ScaleFactor => a,
                Coordinate::LogScaleFactor => a.ln(),
                Coordinate::Redshift => 1.0 / a - 1.0,
                Coordinate::Time => a,
            };
            let (birth, counted, expected) = if is_single {
                let birth = f64::from(birth as f32);
                let counted = windows.iter().filter(|window| window.in_single_precision().contains(birth)).count();
                (birth, counted, whole.in_single_precision().contains(birth))
            } else {
                (birth, windows.iter().filter(|window| window.contains(birth)).count(), whole.contains(birth))
            };
            prop_assert_eq!(counted, usize::from(expected), "{}", birth);
        }
    }
}

/// The steps that are measured out of a run, as (step, time).
fn measured(cadence: &Cadence, steps: &[(u64, f64, bool)]) -> Vec<u64> {
    let mut last = None;
    let mut measured = Vec::new();
    for (step, time, is_synchronised) in steps {
        let now = Tick {
            step: *step,
            time: *time,
            ln_a: time.ln(),
        };
        if cadence.is_due(last, now, *is_synchronised) {
            last = Some(now);
            measured.push(*step);
        }
    }
    measured
}

fn run(time: impl Fn(u64) -> f64) -> Vec<(u64, f64, bool)> {
    (0..20)
        .map(|step| (step, time(step), step % 4 == 3))
        .collect()
}

#[test]
fn every_step_is_measured_unless_told_otherwise() {
    let steps = run(|step| 0.1 + 0.01 * step as f64);
    assert_eq!(measured(&Cadence::default(), &steps).len(), 20);
    assert_eq!(
        measured(&config(FLAT, "coordinate = \"a\"", "").cadence, &steps).len(),
        20
    );
}

#[test]
fn cadence_takes_the_first_step_beyond_each_multiple() {
    let cadence = |text: &str| config(FLAT, "coordinate = \"a\"", text).cadence;
    let steps = run(|step| 0.1 + 0.01 * step as f64);
    assert_eq!(
        measured(&cadence("every_steps = 5"), &steps),
        [0, 5, 10, 15]
    );
    // Multiples of 0.05 that the run steps on, though none of its times is one to the last bit.
    assert_eq!(
        measured(&cadence("every_time = 0.05"), &steps),
        [0, 5, 10, 15]
    );
    // ln a crosses -2.25, -2, -1.75, -1.5, -1.25 on the way from 0.1 to 0.29.
    assert_eq!(
        measured(&cadence("every_ln_a = 0.25"), &steps),
        [0, 1, 4, 8, 13, 19]
    );
    assert_eq!(
        measured(&cadence("every_steps = 8\nevery_time = 0.05"), &steps),
        [0, 5, 8, 10, 15, 16]
    );
}

#[test]
fn a_multiple_crossed_between_synchronised_steps_waits_for_the_next() {
    let cadence = config(
        FLAT,
        "coordinate = \"a\"",
        "every_steps = 5\nsynchronised_only = true",
    )
    .cadence;
    // Synchronised are 3, 7, 11, 15, 19; multiples 5, 10 and 15.
    assert_eq!(
        measured(&cadence, &run(|step| 0.1 + 0.01 * step as f64)),
        [3, 7, 11, 15]
    );
}

#[test]
fn a_restart_does_not_shift_the_cadence() {
    let cadence = config(FLAT, "coordinate = \"a\"", "every_steps = 5").cadence;
    let steps = run(|step| 0.1 + 0.01 * step as f64);
    let whole = measured(&cadence, &steps);
    // A checkpoint measured at step 7, from which the run goes on.
    let checkpoint = Some(Tick {
        step: 7,
        time: steps[7].1,
        ln_a: steps[7].1.ln(),
    });
    assert!(!cadence.is_due(
        checkpoint,
        Tick {
            step: 8,
            time: steps[8].1,
            ln_a: steps[8].1.ln()
        },
        true
    ));
    assert!(cadence.is_due(
        checkpoint,
        Tick {
            step: 10,
            time: steps[10].1,
            ln_a: steps[10].1.ln()
        },
        true
    ));
    assert!(whole.contains(&10));
}
