//! Writes what this library makes of many unit systems and cosmologies, for an outside check.
//!
//! One JSON object a line goes to the file named by the first argument: constants, units read from texts,
//! unit systems read from whole configs, and ages and rates of cosmologies. Everything is drawn from a fixed
//! sequence, so every run writes the same. To check it:
//!
//! ```sh
//! cargo run --example print_units_and_cosmology -- target/units_and_cosmology.jsonl
//! python tests/astropy/check_units_and_cosmology.py target/units_and_cosmology.jsonl
//! ```

use std::io::Write;

use limnograph::config::{Config, Quantity};
use limnograph::units::{Cosmology, Parameters, Symbols, Unit, constants};
use serde_json::{Value, json};

fn main() -> std::io::Result<()> {
    let Some(path) = std::env::args_os().nth(1) else {
        eprintln!("usage: print_units_and_cosmology FILE");
        std::process::exit(2);
    };
    let mut out = std::io::BufWriter::new(std::fs::File::create(path)?);
    let mut draws = Draws(0x5A17_3A25);
    let mut lines = constants();
    lines.extend((0..300).map(|_| unit(&mut draws)));
    lines.extend((0..240).map(|_| system(&mut draws)));
    lines.extend(cosmologies(&mut draws));
    for line in lines {
        writeln!(out, "{line}")?;
    }
    out.flush()
}

/// A sequence of numbers that is the same everywhere (splitmix64; Steele, Lea & Flood 2014, OOPSLA).
struct Draws(u64);

impl Draws {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut bits = self.0;
        bits = (bits ^ (bits >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        bits = (bits ^ (bits >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        bits ^ (bits >> 31)
    }

    fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * (self.next() >> 11) as f64 / (1_u64 << 53) as f64
    }

    fn one_in(&mut self, chances: u64) -> bool {
        self.next().is_multiple_of(chances)
    }

    fn pick<T: Copy>(&mut self, from: &[T]) -> T {
        from[(self.next() % from.len() as u64) as usize]
    }
}

fn constants() -> Vec<Value> {
    [
        ("G", constants::GRAVITATION),
        ("c", constants::SPEED_OF_LIGHT),
        ("k_B", constants::BOLTZMANN),
        ("m_p", constants::PROTON_MASS),
        ("sigma_T", constants::THOMSON_CROSS_SECTION),
        ("GM_sun", constants::SOLAR_MASS_PARAMETER),
        ("M_sun", constants::SOLAR_MASS),
        ("L_sun", constants::SOLAR_LUMINOSITY),
        ("au", constants::ASTRONOMICAL_UNIT),
        ("pc", constants::PARSEC),
        ("kpc", constants::KILOPARSEC),
    ]
    .into_iter()
    .map(|(name, value)| json!({ "kind": "constant", "name": name, "cgs": value }))
    .collect()
}

const NAMES: [&str; 26] = [
    "cm", "m", "km", "pc", "kpc", "Mpc", "Gpc", "AU", "lyr", "g", "kg", "Msun", "solMass", "s",
    "d", "yr", "kyr", "Myr", "Gyr", "K", "erg", "J", "eV", "keV", "W", "Lsun",
];

/// A product of powers of names, in a spelling that both this library and astropy read.
fn unit(draws: &mut Draws) -> Value {
    let mut words = Vec::new();
    if draws.one_in(2) {
        words.push(
            draws
                .pick(&["1e10", "10", "2.5", "1.989e-3", "6.4E+5"])
                .to_string(),
        );
    }
    for _ in 0..1 + draws.next() % 4 {
        let name = draws.pick(&NAMES);
        words.push(
            match draws.pick(&[
                "", "^2", "^-1", "**-3", "^(1/2)", "^(-1/3)", "2", "-1", "**(5/2)",
            ]) {
                "" => name.to_string(),
                power => format!("{name}{power}"),
            },
        );
    }
    let text = words.join(draws.pick(&[" ", "*", " * "]));
    match Unit::parse(&text, &Symbols::default()) {
        Ok(unit) => {
            json!({ "kind": "unit", "text": text, "cgs": unit.factor_cgs, "h_power": unit.h_power,
            "a_power": unit.a_power, "base": unit.dimension.in_base_units() })
        }
        Err(error) => json!({ "kind": "unit", "text": text, "error": error.to_string() }),
    }
}

/// One stated unit: a number of something, with a power of h and of a.
struct Stated {
    number: f64,
    name: &'static str,
    h_power: i64,
    a_power: i64,
}

impl Stated {
    fn draw(
        draws: &mut Draws,
        names: &[&'static str],
        h_powers: &[i64],
        a_powers: &[i64],
    ) -> Stated {
        let number = match draws.next() % 3 {
            0 => 1.0,
            1 => 1e10,
            _ => draws.between(0.1, 20.0),
        };
        let (h_power, a_power) = (draws.pick(h_powers), draws.pick(a_powers));
        Stated {
            number,
            name: draws.pick(names),
            h_power,
            a_power,
        }
    }

    fn toml(&self) -> String {
        let h = match self.h_power {
            0 => String::new(),
            -1 => " / h".to_string(),
            power => format!(" * h^{power}"),
        };
        let a = match self.a_power {
            0 => String::new(),
            1 => " * a".to_string(),
            power => format!(" * a**({power})"),
        };
        format!("\"{} ({}){h}{a}\"", self.number, self.name)
    }

    fn json(&self) -> Value {
        json!({ "number": self.number, "name": self.name, "h": self.h_power, "a": self.a_power })
    }
}

/// A whole config with a unit system of its own, and the factors that come of it.
fn system(draws: &mut Draws) -> Value {
    let mut stated = serde_json::Map::new();
    let mut toml = String::from("[units]\n");
    let mut state = |key: &str, unit: Stated, toml: &mut String| {
        toml.push_str(&format!("{key} = {}\n", unit.toml()));
        stated.insert(key.to_string(), unit.json());
    };
    let lengths = ["kpc", "Mpc", "pc", "cm", "km", "lyr"];
    state(
        "length",
        Stated::draw(draws, &lengths, &[0, -1], &[0, 0, 1]),
        &mut toml,
    );
    state(
        "mass",
        Stated::draw(draws, &["Msun", "g", "kg"], &[0, -1], &[0]),
        &mut toml,
    );
    state(
        "velocity",
        Stated::draw(draws, &["km/s", "cm/s", "kpc/Gyr", "pc/Myr"], &[0], &[0]),
        &mut toml,
    );
    let mut rest = serde_json::Map::new();
    let mut optional = |draws: &mut Draws,
                        key: &str,
                        names: &[&'static str],
                        a_powers: &[i64],
                        toml: &mut String| {
        let is_wanted = draws.one_in(2);
        if is_wanted {
            let unit = Stated::draw(draws, names, &[0, -1, 2], a_powers);
            toml.push_str(&format!("{key} = {}\n", unit.toml()));
            rest.insert(key.to_string(), unit.json());
        }
        is_wanted
    };
    optional(
        draws,
        "time",
        &["Gyr", "s", "Myr", "kpc s/km"],
        &[0],
        &mut toml,
    );
    optional(
        draws,
        "star_formation_rate",
        &["Msun/yr", "g/s", "kg/Gyr"],
        &[0, -1],
        &mut toml,
    );
    optional(
        draws,
        "accretion_rate",
        &["Msun/yr", "g/s"],
        &[0],
        &mut toml,
    );
    optional(
        draws,
        "internal_energy",
        &["km^2/s^2", "erg/g", "J/kg", "(km/s)**2"],
        &[0],
        &mut toml,
    );
    optional(
        draws,
        "energy",
        &["erg", "keV", "Msun (km/s)^2"],
        &[0, 2],
        &mut toml,
    );
    optional(
        draws,
        "momentum",
        &["Msun km/s", "g cm s^-1"],
        &[0, 1],
        &mut toml,
    );
    optional(draws, "temperature", &["K"], &[0], &mut toml);
    let mut forms = serde_json::Map::new();
    if optional(
        draws,
        "density",
        &["g cm^-3", "Msun/kpc^3", "Msun pc**-3"],
        &[0],
        &mut toml,
    ) {
        let form = draws.pick(&["comoving", "physical"]);
        toml.push_str(&format!("density_form = \"{form}\"\n"));
        forms.insert("density_form".to_string(), json!(form));
    }
    let has_a = toml
        .lines()
        .any(|line| line.starts_with("length") && line.contains("* a"));
    if !has_a && draws.one_in(2) {
        let form = draws.pick(&["comoving", "physical"]);
        toml.push_str(&format!("positions = \"{form}\"\n"));
        forms.insert("positions".to_string(), json!(form));
    }
    let velocity_forms = [
        "peculiar",
        "peculiar/sqrt(a)",
        "dx/dt",
        "a^2 dx/dt",
        "powers",
    ];
    match draws.pick(&velocity_forms) {
        "powers" => {
            let (a, h) = (draws.between(-2.0, 2.0), draws.between(-1.0, 1.0));
            toml.push_str(&format!("velocity_form = {{ a = {a}, h = {h} }}\n"));
            forms.insert("velocity_form".to_string(), json!({ "a": a, "h": h }));
        }
        form => {
            toml.push_str(&format!("velocity_form = \"{form}\"\n"));
            forms.insert("velocity_form".to_string(), json!(form));
        }
    }
    if draws.one_in(3) {
        let a = draws.between(-2.0, 2.0);
        toml.push_str(&format!("internal_energy_form = {{ a = {a} }}\n"));
        forms.insert(
            "internal_energy_form".to_string(),
            json!({ "a": a, "h": 0.0 }),
        );
    }
    let solar_mass_g = draws
        .one_in(3)
        .then(|| draws.pick(&[1.989e33, 1.98892e33, 1.9885e33]));
    if let Some(grams) = solar_mass_g {
        toml.push_str(&format!("solar_mass_in_grams = {grams:e}\n"));
    }
    let hubble = draws.between(50.0, 80.0);
    let edge = draws.between(5.0, 200.0);
    toml.push_str(&format!(
        "[cosmology]\nhubble = {hubble}\nomega_matter = 0.3\nomega_lambda = 0.7\n[time]\ncoordinate = \"a\"\n\
         [volume]\nbox = {edge}\nperiodic = true\n"
    ));
    let a = draws.between(0.05, 1.0);
    stated.extend(rest);
    let base = json!({ "kind": "system", "config": toml, "stated": stated, "forms": forms, "h": hubble / 100.0,
        "a": a, "solar_mass_g": solar_mass_g, "edge": edge });
    match Config::parse(&toml, "random") {
        Err(problems) => {
            let problems: Vec<String> = problems.iter().map(ToString::to_string).collect();
            with(base, json!({ "error": problems }))
        }
        Ok(config) => {
            let factors: serde_json::Map<String, Value> = Quantity::ALL
                .iter()
                .map(|quantity| {
                    (
                        quantity.name().to_string(),
                        json!(config.units.factor(*quantity, a)),
                    )
                })
                .collect();
            with(
                base,
                json!({ "factors": factors, "volume_mpc3": config.comoving_volume_mpc3() }),
            )
        }
    }
}

fn with(mut base: Value, more: Value) -> Value {
    if let (Value::Object(base), Value::Object(more)) = (&mut base, more) {
        base.extend(more);
    }
    base
}

/// A grid of flat, curved, w ≠ -1 and radiation cases, and some drawn at random.
fn cosmologies(draws: &mut Draws) -> Vec<Value> {
    let mut all = vec![Parameters {
        h: 0.7,
        omega_matter: 0.3,
        omega_lambda: 0.7,
        omega_radiation: 0.0,
        w: -1.0,
    }];
    for (omega_matter, omega_lambda) in [
        (0.3, 0.7),
        (1.0, 0.0),
        (0.3, 0.0),
        (0.25, 0.9),
        (0.4, 0.3),
        (1.3, 0.2),
    ] {
        for omega_radiation in [0.0, 8.4e-5, 1e-3] {
            for w in [-1.0, -0.8, -0.5, -1.3] {
                all.push(Parameters {
                    h: 0.7,
                    omega_matter,
                    omega_lambda,
                    omega_radiation,
                    w,
                });
            }
        }
    }
    for _ in 0..20 {
        let omega_matter = draws.between(0.1, 0.6);
        all.push(Parameters {
            h: draws.between(0.5, 0.8),
            omega_matter,
            omega_lambda: 1.0 - omega_matter + draws.between(-0.2, 0.2),
            omega_radiation: draws.between(0.0, 2e-4),
            w: draws.between(-1.4, -0.6),
        });
    }
    all.into_iter().map(cosmology).collect()
}

fn cosmology(parameters: Parameters) -> Value {
    let Parameters {
        h,
        omega_matter,
        omega_lambda,
        omega_radiation,
        w,
    } = parameters;
    let base = json!({ "kind": "cosmology", "h": h, "omega_matter": omega_matter, "omega_lambda": omega_lambda,
        "omega_radiation": omega_radiation, "w": w });
    let cosmology = match Cosmology::new(parameters) {
        Ok(cosmology) => cosmology,
        Err(error) => return with(base, json!({ "error": error.to_string() })),
    };
    let redshifts = [
        -0.5, -0.3, 0.0, 0.1, 0.5, 1.0, 1.7, 2.0, 3.0, 4.5, 6.0, 8.0, 12.0, 20.0, 49.0, 127.0,
        1100.0, 1e5,
    ];
    let points: Vec<Value> = redshifts
        .into_iter()
        .map(|z| {
            let a = 1.0 / (1.0 + z);
            let age = cosmology.age(a);
            let earlier = a * (1.0 - 1e-7);
            json!({ "a": a, "age": age, "hubble_rate": cosmology.hubble_rate(a),
                "critical_density": cosmology.critical_density(a), "inverse": cosmology.scale_factor(age),
                "earlier": earlier, "between": cosmology.time_between(earlier, a) })
        })
        .collect();
    with(base, json!({ "points": points }))
}
