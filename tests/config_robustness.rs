//! Nothing a user can do to a config makes the reader fall over or look the other way.

use limnograph::config::{Config, Problem};
use proptest::prelude::*;

/// A config that uses every key that does not exclude another, one key a line.
const FULL: &str = r#"
[series]
description = "every key"

[units]
length = "kpc/h"
positions = "comoving"
mass = "1e10 Msun/h"
velocity = "km/s"
velocity_form = { a = 0.5, h = 0.0 }
time = "Gyr"
temperature = "K"
internal_energy = "km^2/s^2"
internal_energy_form = { a = -2.0, h = 0.0 }
density = "g cm^-3"
density_form = "comoving"
star_formation_rate = "Msun/yr"
accretion_rate = "Msun/yr"
energy = "erg"
momentum = "g cm/s"
solar_mass_in_grams = 1.989e33

[cosmology]
expanding = true
hubble = 70.0
omega_matter = 0.3
omega_lambda = 0.7
omega_radiation = 0.0
w = -1.0

[time]
coordinate = "t"
unit = "Gyr"
birth = "t"
birth_unit = "Myr"
birth_stamp = "end of step"

[volume]
box = 25.0
periodic = true
comoving_volume = "1e6 Mpc^3"
none = false

[imf]
name = "Chabrier"
return_fraction = 0.4

[cadence]
every_steps = 2
every_time = 0.5
every_ln_a = 0.01
synchronised_only = false

[elements]
names = ["hydrogen", "helium"]

[channels]
names = ["cosmic_rays"]

[threads]
sweep = 2

[gauges]
star_formation = true
"#;

fn problems(text: &str) -> Vec<Problem> {
    Config::parse(text, "limnograph.toml")
        .err()
        .unwrap_or_default()
}

/// Words that differ by one character: left out, doubled, changed, put in, or swapped with the next.
fn slips(word: &str) -> Vec<String> {
    let letters: Vec<char> = word.chars().collect();
    let mut slips = Vec::new();
    for at in 0..letters.len() {
        let with = |middle: &[char], after: usize| -> String {
            letters[..at]
                .iter()
                .chain(middle)
                .chain(&letters[after.min(letters.len())..])
                .collect()
        };
        slips.push(with(&[], at + 1));
        for letter in ['q', '_', letters[at].to_ascii_uppercase()] {
            slips.push(with(&[letter], at + 1));
            slips.push(with(&[letter], at));
        }
        if at + 1 < letters.len() {
            slips.push(with(&[letters[at + 1], letters[at]], at + 2));
        }
    }
    slips.retain(|slip| slip != word && !slip.is_empty());
    slips
}

/// Every key and section of [`FULL`] as (line, column, name), with how messages show it.
fn names() -> Vec<(usize, String, String)> {
    let mut names = Vec::new();
    for (line, text) in FULL.lines().enumerate() {
        if let Some(section) = text.strip_prefix('[') {
            let name = section.trim_end_matches(']');
            names.push((line, name.to_string(), format!("[{name}]")));
        } else if let Some((key, value)) = text.split_once(" = ") {
            if key != "star_formation" {
                names.push((line, key.to_string(), format!("`{key}`")));
            }
            if value.starts_with('{') {
                names.extend(["a", "h"].map(|key| (line, format!("{key} ="), format!("`{key}`"))));
            }
        }
    }
    names
}

#[test]
fn the_full_config_is_right() {
    assert_eq!(problems(FULL), []);
    assert_eq!(names().len(), 56);
}

#[test]
fn every_slip_in_a_key_is_a_problem_that_names_the_right_key() {
    let lines: Vec<&str> = FULL.lines().collect();
    let mut tried = 0;
    for (line, name, shown) in names() {
        let (word, rest) = name
            .split_once(' ')
            .map_or((name.as_str(), ""), |(word, _)| (word, " ="));
        for slip in slips(word) {
            let mut changed: Vec<String> = lines.iter().map(ToString::to_string).collect();
            changed[line] = lines[line].replacen(&name, &format!("{slip}{rest}"), 1);
            let text = changed.join("\n");
            let found = problems(&text);
            let is_named = found.iter().any(|problem| {
                let message = &problem.message;
                let hints = [
                    format!("did you mean {shown}"),
                    format!(" or {shown}"),
                    format!(", {shown}"),
                ];
                let is_hint = hints.iter().any(|hint| message.contains(hint));
                // A slip may also hit another key, or leave this one missing.
                problem.line == line + 1 && (is_hint || message.contains("duplicate key"))
                    || message.contains(&format!("{shown} is missing"))
            });
            assert!(is_named, "{slip} for {shown}: {found:?}");
            tried += 1;
        }
    }
    assert!(tried > 2500, "only {tried} slips were tried");
}

#[test]
fn a_value_of_any_other_type_is_a_problem_on_its_line() {
    let others = [
        "true",
        "\"wombat\"",
        "-1",
        "1e99",
        "[1, 2, 3, 4]",
        "{ wombat = 1 }",
        "1979-05-27",
        "inf",
        "[]",
        "''",
    ];
    for (line, text) in FULL.lines().enumerate() {
        let Some((key, value)) = text.split_once(" = ") else {
            continue;
        };
        for other in others {
            // What is right for some keys all the same.
            let is_right = match key {
                "description" => other.starts_with(['"', '\'']),
                "names" => other == "[]",
                "star_formation" => other.starts_with('{') || other == "true",
                "periodic" | "expanding" => other == "true",
                "synchronised_only" => other == "true",
                "omega_lambda" | "every_time" | "every_ln_a" | "box" | "length" | "mass"
                | "velocity" => other == "1e99",
                "w" => other == "-1",
                "time"
                | "temperature"
                | "internal_energy"
                | "density"
                | "star_formation_rate"
                | "accretion_rate"
                | "energy"
                | "momentum"
                | "unit"
                | "birth_unit" => other == "1e99",
                _ => false,
            };
            let changed: Vec<String> = FULL
                .lines()
                .enumerate()
                .map(|(at, text)| {
                    if at == line {
                        format!("{key} = {other}")
                    } else {
                        text.to_string()
                    }
                })
                .collect();
            let found = problems(&changed.join("\n"));
            // What is wrong with the densities together is said of their section.
            let is_found = found.iter().any(|problem| {
                problem.message.contains(key)
                    && (problem.line == line + 1 || key.starts_with("omega"))
            });
            if !is_right {
                assert!(is_found, "{key} = {other} in place of {value}: {found:?}");
            }
        }
    }
}

#[test]
fn problems_come_in_the_order_of_the_file() {
    let text = FULL.replace(" = ", " = - ");
    let lines: Vec<usize> = problems(&text).iter().map(|problem| problem.line).collect();
    assert!(lines.len() > 10 && lines.is_sorted(), "{lines:?}");
    let text = FULL.replace(" = ", "x = ");
    let lines: Vec<usize> = problems(&text).iter().map(|problem| problem.line).collect();
    assert!(lines.len() > 40 && lines.is_sorted());
}

#[test]
fn a_config_that_nests_without_end_is_refused() {
    for text in [
        "[".repeat(200_000),
        format!("a = {}", "[".repeat(200_000)),
        "a.".repeat(100_000),
        "{a=".repeat(50_000),
    ] {
        assert!(!problems(&text).is_empty());
    }
    let long = format!("# {}\n{FULL}", "x".repeat(2 << 20));
    assert!(
        problems(&long)[0]
            .message
            .contains("expected a config of at most")
    );
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(1500))]

    #[test]
    fn no_text_makes_the_reader_panic(text in any::<String>()) {
        prop_assert!(!problems(&text).is_empty());
    }

    #[test]
    fn no_bytes_make_the_reader_panic(bytes in prop::collection::vec(any::<u8>(), 0..200)) {
        prop_assert!(Config::parse_bytes(&bytes, "x").is_err());
    }

    /// Pieces of the file cut out, doubled, moved and garbled.
    #[test]
    fn no_mutilated_config_makes_the_reader_panic(
        cuts in prop::collection::vec((0..FULL.len(), 0..FULL.len(), 0..60_usize, any::<char>(), 0..4_u8), 1..6),
    ) {
        let mut letters: Vec<char> = FULL.chars().collect();
        for (from, to, length, letter, what) in cuts {
            let from = from.min(letters.len());
            let end = (from + length).min(letters.len());
            match what {
                0 => drop(letters.drain(from..end)),
                1 => {
                    let piece: Vec<char> = letters[from..end].to_vec();
                    let to = to.min(letters.len());
                    letters.splice(to..to, piece);
                }
                2 => letters.insert(from, letter),
                _ => letters.truncate(letters.len().saturating_sub(length)),
            }
        }
        let text: String = letters.into_iter().collect();
        match Config::parse(&text, "x") {
            Ok(config) => {
                for quantity in limnograph::config::Quantity::ALL {
                    prop_assert!(config.units.factor(quantity, 0.5) > 0.0);
                }
            }
            Err(problems) => {
                prop_assert!(!problems.is_empty());
                let count = text.lines().count().max(1);
                for problem in problems {
                    prop_assert!((1..=count + 1).contains(&problem.line) && problem.column >= 1);
                    prop_assert!(!problem.message.chars().any(char::is_control), "{:?}", problem.message);
                }
            }
        }
    }
}
