//! Units mean what they say, and ages and rates obey the closed forms there are.

use limnograph::units::constants::{
    GIGAYEAR, GRAVITATION, KM_PER_S_PER_MPC, MEGAPARSEC, MEGAYEAR, PROTON_MASS, SOLAR_MASS,
    SPEED_OF_LIGHT, THOMSON_CROSS_SECTION, YEAR,
};
use limnograph::units::{Cosmology, Dimension, Expansion, Parameters, Symbols, Unit};
use proptest::prelude::*;

fn unit(text: &str) -> Unit {
    Unit::parse(text, &Symbols::default())
        .unwrap_or_else(|error| panic!("{text:?} is refused: {error}"))
}

fn refusal(text: &str) -> (usize, String) {
    match Unit::parse(text, &Symbols::default()) {
        Err(error) => (error.position, error.message),
        Ok(unit) => panic!("{text:?} is read as {unit}"),
    }
}

#[track_caller]
fn assert_near(found: f64, expected: f64, tolerance: f64) {
    let error = (found / expected - 1.0).abs();
    assert!(
        error <= tolerance,
        "{found:e} should be {expected:e}, off by {error:e}"
    );
}

#[test]
fn units_are_read_as_people_write_them() {
    // Text, value in cgs, powers of h and a, dimension.
    let all = [
        ("Mpc/h", MEGAPARSEC, -1.0, 0.0, Dimension::LENGTH),
        ("a Mpc/h", MEGAPARSEC, -1.0, 1.0, Dimension::LENGTH),
        ("cMpc/h", MEGAPARSEC, -1.0, 1.0, Dimension::LENGTH),
        ("h^-1 Mpc", MEGAPARSEC, -1.0, 0.0, Dimension::LENGTH),
        (" Mpc  h-1 ", MEGAPARSEC, -1.0, 0.0, Dimension::LENGTH),
        ("1e10 Msun/h", 1e10 * SOLAR_MASS, -1.0, 0.0, Dimension::MASS),
        ("1e10Msun/h", 1e10 * SOLAR_MASS, -1.0, 0.0, Dimension::MASS),
        (
            "10^10 Msun / h",
            1e10 * SOLAR_MASS,
            -1.0,
            0.0,
            Dimension::MASS,
        ),
        (
            "10**10 M_sun h**-1",
            1e10 * SOLAR_MASS,
            -1.0,
            0.0,
            Dimension::MASS,
        ),
        ("1.989E43 g", 1.989e43, 0.0, 0.0, Dimension::MASS),
        ("km/s", 1e5, 0.0, 0.0, Dimension::VELOCITY),
        ("km s-1", 1e5, 0.0, 0.0, Dimension::VELOCITY),
        ("km/s*sqrt(a)", 1e5, 0.0, 0.5, Dimension::VELOCITY),
        ("a^0.5 km/s", 1e5, 0.0, 0.5, Dimension::VELOCITY),
        ("a^(1/2) * km/s", 1e5, 0.0, 0.5, Dimension::VELOCITY),
        ("km^2/s^2", 1e10, 0.0, 0.0, Dimension::SPECIFIC_ENERGY),
        ("(km/s)**2", 1e10, 0.0, 0.0, Dimension::SPECIFIC_ENERGY),
        ("( km / s ) ^ 2", 1e10, 0.0, 0.0, Dimension::SPECIFIC_ENERGY),
        ("erg/g", 1.0, 0.0, 0.0, Dimension::SPECIFIC_ENERGY),
        ("g cm^-3", 1.0, 0.0, 0.0, Dimension::DENSITY),
        ("g/cm^3", 1.0, 0.0, 0.0, Dimension::DENSITY),
        ("g/cm3", 1.0, 0.0, 0.0, Dimension::DENSITY),
        (
            "Msun/yr",
            SOLAR_MASS / YEAR,
            0.0,
            0.0,
            Dimension::MASS_PER_TIME,
        ),
        (
            "kpc/(km/s)",
            3.085_677_581_491_367e16,
            0.0,
            0.0,
            Dimension::TIME,
        ),
        ("1 eV", 1.602_176_634e-12, 0.0, 0.0, Dimension::ENERGY),
        ("2.5e3 K", 2500.0, 0.0, 0.0, Dimension::TEMPERATURE),
        ("K", 1.0, 0.0, 0.0, Dimension::TEMPERATURE),
        ("h", 1.0, 1.0, 0.0, Dimension::NUMBER),
        (
            "km/s/Mpc",
            1e5 / MEGAPARSEC,
            0.0,
            0.0,
            Dimension::new(0, 0, -1, 0),
        ),
        (
            "solMass.yr**-1.Mpc**-3",
            SOLAR_MASS / YEAR / MEGAPARSEC.powi(3),
            0.0,
            0.0,
            Dimension::new(-3, 1, -1, 0),
        ),
    ];
    for (text, cgs, h_power, a_power, dimension) in all {
        let unit = unit(text);
        assert_near(unit.factor_cgs, cgs, 2e-15);
        assert_eq!(
            (unit.h_power, unit.a_power, unit.dimension),
            (h_power, a_power, dimension),
            "{text}"
        );
    }
    assert_near(
        unit("a Mpc/h").to_cgs(0.7, 0.25),
        0.25 * MEGAPARSEC / 0.7,
        1e-15,
    );
}

#[test]
fn a_host_may_have_a_sun_of_its_own() {
    let symbols = Symbols {
        solar_mass_g: 1.989e33,
    };
    for name in ["Msun", "solMass", "M_sun", "Msol"] {
        assert_eq!(Unit::parse(name, &symbols).unwrap().factor_cgs, 1.989e33);
    }
}

#[test]
fn what_can_be_read_in_two_ways_is_refused() {
    assert_eq!(refusal("Msun/yr Mpc^3").0, 9);
    assert!(refusal("Msun/yr Mpc^3").1.contains("a/(b c)"));
    assert_eq!(unit("Msun/yr*Mpc^3").dimension, Dimension::new(3, 1, -1, 0));
    assert_eq!(
        unit("Msun/(yr Mpc^3)").dimension,
        Dimension::new(-3, 1, -1, 0)
    );
    assert!(refusal("a^1/2").1.contains("^(1/2)"));
    assert!(refusal("kpc^2^3").1.contains("power of a power"));
    assert!(refusal("10 10 g").1.contains("two numbers in a row"));
    assert!(refusal("h70").1.contains("more than one digit"));
}

#[test]
fn a_wrong_unit_says_where_and_what_was_meant() {
    for (text, position, hint) in [
        ("Mpcc/h", 1, "\"Mpc\""),
        ("1e10 Msum/h", 6, "\"Msun\""),
        ("kpc/Gry", 5, "\"Gyr\""),
        ("mpc", 1, "\"Mpc\""),
        ("km/s)", 5, "never opened"),
        ("(km/s", 1, "never closed"),
        ("km/", 4, "found the end"),
        ("", 1, "found nothing"),
        ("   ", 4, "found nothing"),
        ("km^", 4, "expected a power"),
        ("km^(1/0)", 4, "inf"),
        ("-3 km", 1, "'-'"),
        ("0 km", 1, "greater than 0"),
        ("1e999 km", 1, "inf"),
        ("(Gpc)^12", 1, "inf"),
        ("km^0.1", 1, "multiples of 1/6"),
        ("sqrt km", 6, "bracket after sqrt"),
        ("wombat", 1, "known units are"),
    ] {
        let (found_position, message) = refusal(text);
        assert_eq!(found_position, position, "{text:?}: {message}");
        assert!(message.contains(hint), "{text:?}: {message}");
    }
    let deep = "(".repeat(100_000);
    assert!(refusal(&deep).1.contains("characters long"));
    assert!(refusal(&"(".repeat(150)).1.contains("brackets within"));
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(2000))]

    #[test]
    fn a_unit_that_is_written_down_is_read_back_the_same(
        mantissa in 1.0..10.0_f64,
        exponent in -200..200_i32,
        powers in prop::array::uniform4(-30..30_i32),
        h_power in prop::sample::select(vec![0.0, 1.0, -1.0, 2.5, -0.37, 1e-3]),
        a_power in prop::sample::select(vec![0.0, 1.0, -3.0, 0.5, -1.25, 7.123456789]),
    ) {
        let base = Unit::from_cgs(mantissa * 10.0_f64.powi(exponent), Dimension::NUMBER).unwrap();
        let mut unit = Unit { h_power, a_power, ..base };
        let bases = [Dimension::LENGTH, Dimension::MASS, Dimension::TIME, Dimension::TEMPERATURE];
        for (dimension, sixths) in bases.into_iter().zip(powers) {
            let power = Unit::from_cgs(1.0, dimension).unwrap().power(f64::from(sixths) / 6.0).unwrap();
            unit = unit.times(&power).unwrap();
        }
        let text = unit.to_string();
        let back = Unit::parse(&text, &Symbols::default());
        prop_assert_eq!(back, Ok(unit), "{}", text);
    }

    #[test]
    fn no_text_makes_the_reader_of_units_panic(text in any::<String>()) {
        let _ = Unit::parse(&text, &Symbols::default());
    }

    #[test]
    fn no_heap_of_pieces_of_units_makes_it_panic_or_give_an_unusable_number(
        pieces in prop::collection::vec(prop::sample::select(vec![
            "km", "Mpc", "Msun", "h", "a", "s", "K", "sqrt", "(", ")", "/", "*", "**", "^", ".", " ", "-", "+", "1",
            "2", "1e10", "1e300", "1e-300", "0.5", "(1/2)", "^-3", "e", "_", "·", "²", "\u{0}",
        ]), 0..20),
    ) {
        if let Ok(unit) = Unit::parse(&pieces.concat(), &Symbols::default()) {
            prop_assert!(unit.factor_cgs.is_normal() && unit.factor_cgs > 0.0);
            prop_assert!(unit.h_power.is_finite() && unit.a_power.is_finite());
        }
    }
}

fn parameters(omega_matter: f64, omega_lambda: f64, omega_radiation: f64, w: f64) -> Parameters {
    Parameters {
        h: 0.7,
        omega_matter,
        omega_lambda,
        omega_radiation,
        w,
    }
}

fn cosmology(omega_matter: f64, omega_lambda: f64, omega_radiation: f64, w: f64) -> Cosmology {
    let parameters = parameters(omega_matter, omega_lambda, omega_radiation, w);
    Cosmology::new(parameters).unwrap_or_else(|error| panic!("{error}"))
}

const HUBBLE: f64 = 70.0 * KM_PER_S_PER_MPC;
const SCALE_FACTORS: [f64; 12] = [
    1e-25, 1e-15, 1e-8, 1e-5, 1e-3, 0.02, 0.1, 0.3, 0.5, 1.0, 1.7, 2.0,
];

#[test]
fn ages_obey_the_closed_forms() {
    for a in SCALE_FACTORS {
        // Flat, matter and a cosmological constant: textbook closed form.
        let ratio: f64 = 0.7 / 0.3;
        let age = 2.0 / (3.0 * HUBBLE * 0.7_f64.sqrt()) * (ratio.sqrt() * a.powf(1.5)).asinh();
        assert_near(cosmology(0.3, 0.7, 0.0, -1.0).age(a), age, 1e-13);
        // Einstein-de Sitter.
        let age = 2.0 / (3.0 * HUBBLE) * a.powf(1.5);
        assert_near(cosmology(1.0, 0.0, 0.0, -1.0).age(a), age, 1e-13);
    }
    // Open, matter only: textbook parametric form, a = Ωm/(2(1-Ωm)) (cosh η - 1). It cancels at small η, so it
    // is held against at large ones.
    for eta in [1.0_f64, 2.0, 3.0, 3.5] {
        let (matter, curvature) = (0.3_f64, 0.7_f64);
        let a = matter / (2.0 * curvature) * (eta.cosh() - 1.0);
        let age = matter / (2.0 * HUBBLE * curvature.powf(1.5)) * (eta.sinh() - eta);
        assert_near(cosmology(0.3, 0.0, 0.0, -1.0).age(a), age, 1e-13);
    }
    // Flat, matter and radiation: ∫ a da/√(Ωr + Ωm a) done by hand is 2/3 (2 - √2) a²/√Ωr where the two are
    // equal, at a = Ωr/Ωm.
    let (radiation, matter) = (0.4_f64, 0.6_f64);
    let equal = radiation / matter;
    let age = 2.0 / 3.0 * (2.0 - 2.0_f64.sqrt()) * equal * equal / radiation.sqrt() / HUBBLE;
    assert_near(
        cosmology(matter, 0.0, radiation, -1.0).age(equal),
        age,
        1e-13,
    );
}

#[test]
fn ages_and_rates_are_those_of_the_reference_list() {
    // Computed with astropy 8.0.2, FlatLambdaCDM(70, 0.3), as its digits are listed.
    let flat = cosmology(0.3, 0.7, 0.0, -1.0);
    for (z, age, rate) in [
        (0.0, 13.46698, 70.0),
        (1.0, 5.75165, 123.2477),
        (2.0, 3.22663, 207.6536),
    ] {
        let a = 1.0 / (1.0 + z);
        assert_near(flat.age(a) / GIGAYEAR, age, 1e-6);
        assert_near(flat.hubble_rate(a) / KM_PER_S_PER_MPC, rate, 1e-6);
    }
    assert_near(flat.age(1.0 / 7.0) / GIGAYEAR, 0.91698, 1e-5);
    // 2.77537e11 h² Msun/Mpc³, also in the review of the Particle Data Group.
    let density = flat.critical_density(1.0) / 0.49 * MEGAPARSEC.powi(3) / SOLAR_MASS;
    assert_near(density, 2.77537e11, 2e-6);
}

#[test]
fn constants_give_the_eddington_luminosity_and_growth_time() {
    // 4πG Msun m_p c/σ_T per Msun, and σ_T c/(4πG m_p): Salpeter 1964, ApJ 140, 796.
    let luminosity =
        4.0 * std::f64::consts::PI * GRAVITATION * SOLAR_MASS * PROTON_MASS * SPEED_OF_LIGHT
            / THOMSON_CROSS_SECTION;
    assert_near(luminosity, 1.25707e38, 5e-6);
    let time = THOMSON_CROSS_SECTION * SPEED_OF_LIGHT
        / (4.0 * std::f64::consts::PI * GRAVITATION * PROTON_MASS);
    assert_near(time / MEGAYEAR, 450.49, 2e-5);
}

#[test]
fn a_static_space_does_not_expand() {
    assert_eq!(Expansion::Static.hubble_rate(0.5), 0.0);
}

#[test]
fn ages_outside_their_range_are_no_numbers() {
    let flat = cosmology(0.3, 0.7, 0.0, -1.0);
    for a in [0.0, -1.0, f64::NAN, f64::INFINITY, 1001.0] {
        assert!(flat.age(a).is_nan(), "{a}");
        assert!(flat.time_between(0.5, a).is_nan(), "{a}");
    }
    for age in [0.0, -1.0, f64::NAN, f64::INFINITY, 1e30] {
        assert_eq!(flat.scale_factor(age), None, "{age}");
    }
}

#[test]
fn a_universe_that_stops_expanding_is_refused() {
    // No big bang (a bounce), turnaround before a = 2, and a near halt on the way (loitering).
    for (matter, lambda) in [(0.1, 2.0), (3.0, 0.0), (0.3, -1.0), (0.3, 1.713_46)] {
        let error = Cosmology::new(parameters(matter, lambda, 0.0, -1.0)).unwrap_err();
        assert!(
            error.message.contains("stops expanding near a = "),
            "{matter}, {lambda}: {error}"
        );
    }
    // One that turns around later is fine up to a = 2.
    assert_eq!(cosmology(1.2, 0.0, 0.0, -1.0).largest_scale_factor(), 2.0);
    for (key, wrong) in [
        (
            "hubble",
            Parameters {
                h: 0.007,
                ..parameters(0.3, 0.7, 0.0, -1.0)
            },
        ),
        (
            "hubble",
            Parameters {
                h: f64::NAN,
                ..parameters(0.3, 0.7, 0.0, -1.0)
            },
        ),
        ("omega_matter", parameters(0.0, 1.0, 0.0, -1.0)),
        ("omega_lambda", parameters(0.3, f64::INFINITY, 0.0, -1.0)),
        ("omega_radiation", parameters(0.3, 0.7, -1e-5, -1.0)),
        ("w", parameters(0.3, 0.7, 0.0, 0.0)),
    ] {
        assert_eq!(Cosmology::new(wrong).unwrap_err().parameter, key);
    }
}

/// Universes that expand up to a = 2 without a halt.
fn any_cosmology() -> impl Strategy<Value = Cosmology> {
    (0.3..1.0, 0.05..1.0, -0.3..1.2, 0.0..2e-3, -2.0..-0.34)
        .prop_map(
            |(h, omega_matter, omega_lambda, omega_radiation, w)| Parameters {
                h,
                omega_matter,
                omega_lambda,
                omega_radiation,
                w,
            },
        )
        .prop_filter_map("expands", |parameters| Cosmology::new(parameters).ok())
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(40))]

    #[test]
    fn the_scale_factor_is_the_inverse_of_the_age(
        cosmology in any_cosmology(),
        exponents in prop::collection::vec(-20.0..0.3_f64, 20),
    ) {
        for a in exponents.into_iter().map(|exponent| 10.0_f64.powf(exponent)) {
            let back = cosmology.scale_factor(cosmology.age(a)).unwrap();
            prop_assert!((back / a - 1.0).abs() < 1e-12, "{} came back as {}", a, back);
        }
    }

    #[test]
    fn times_add_up_and_never_run_backwards(
        cosmology in any_cosmology(),
        start in 1e-6..1.9_f64,
        widths in prop::collection::vec(1e-12..0.1_f64, 2),
    ) {
        let middle = (start * (1.0 + widths[0])).min(2.0);
        let end = (middle * (1.0 + widths[1])).min(2.0);
        let (first, second) = (cosmology.time_between(start, middle), cosmology.time_between(middle, end));
        let whole = cosmology.time_between(start, end);
        prop_assert!(first > 0.0 && second >= 0.0);
        prop_assert!(((first + second) / whole - 1.0).abs() < 1e-12);
        let difference = cosmology.age(end) - cosmology.age(start);
        prop_assert!((whole - difference).abs() < 1e-12 * cosmology.age(end));
        prop_assert_eq!(cosmology.time_between(end, start), -whole);
        // A short step is its width over the rate.
        let near = start * (1.0 + 1e-9);
        let rate = cosmology.hubble_rate(0.5 * (start + near));
        let expected = (near - start) / (0.5 * (start + near)) / rate;
        prop_assert!((cosmology.time_between(start, near) / expected - 1.0).abs() < 1e-13);
    }
}
