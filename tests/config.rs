//! What a config promises: all it states comes out as stated, and nothing wrong in it goes unnoticed.

use limnograph::config::{Config, ImfName, Positions, Problem, Quantity};
use limnograph::gauges::{self, Plan};
use limnograph::series::schema::Table;
use limnograph::units::Expansion;
use limnograph::units::constants::{KILOPARSEC, MEGAPARSEC, SOLAR_MASS, YEAR};

/// The whole examples of `docs/config.md`, which the tests work on so that they cannot rot.
pub fn examples() -> Vec<String> {
    let page = include_str!("../docs/config.md");
    let blocks = page
        .split("```toml\n")
        .skip(1)
        .filter_map(|rest| rest.split("```").next());
    blocks
        .filter(|block| block.contains("[units]"))
        .map(str::to_string)
        .collect()
}

fn parse(text: &str) -> Config {
    Config::parse(text, "limnograph.toml")
        .unwrap_or_else(|problems| panic!("{}\n{text}", shown(&problems)))
}

fn shown(problems: &[Problem]) -> String {
    problems
        .iter()
        .map(|problem| format!("{problem}\n"))
        .collect()
}

/// The problems of the first example when `from` is replaced.
fn problems(from: &str, to: &str) -> Vec<Problem> {
    let text = &examples()[0];
    assert!(text.contains(from), "{from:?} is not in the example");
    Config::parse(&text.replacen(from, to, 1), "limnograph.toml")
        .err()
        .unwrap_or_default()
}

#[track_caller]
fn assert_near(found: f64, expected: f64) {
    assert!(
        (found / expected - 1.0).abs() < 1e-14,
        "{found:e} should be {expected:e}"
    );
}

#[test]
fn the_examples_of_the_manual_are_right() {
    let examples = examples();
    assert_eq!(examples.len(), 2);
    for example in &examples {
        let config = parse(example);
        assert!(config.statements().len() >= Quantity::ALL.len() + 4);
    }
    let page = include_str!("../docs/config.md");
    let shown = parse(&examples[0]).statements()[..5].join("\n");
    assert!(page.contains(&shown), "the manual should show\n{shown}");
    let cosmological = parse(&examples[0]);
    assert_eq!(
        cosmological.description,
        "Saltmarsh, samphire variant: winds at constant energy"
    );
    assert_eq!(cosmological.units.positions(), Positions::Comoving);
    assert_eq!(
        cosmological.imf.as_ref().map(|imf| imf.name),
        Some(ImfName::Chabrier)
    );
    assert_eq!(
        cosmological.elements,
        ["hydrogen", "helium", "carbon", "oxygen", "iron"]
    );
    assert_eq!(cosmological.sweep_threads, 1);
    assert_near(
        cosmological.comoving_volume_mpc3().unwrap(),
        (25.0_f64 / 0.7).powi(3),
    );
    let names: Vec<&str> = cosmological
        .gauges
        .iter()
        .map(|(name, _)| name.as_str())
        .collect();
    assert_eq!(names, ["black_holes", "mass_budget", "star_formation"]);
    let isolated = parse(&examples[1]);
    assert_eq!(isolated.expansion, Expansion::Static);
    assert_eq!(isolated.comoving_volume_mpc3(), None);
    assert_eq!(isolated.volume.edges(1.0), None);
    assert_near(isolated.units.factor(Quantity::Mass, 1.0), 2.32e38);
    assert_near(isolated.units.factor(Quantity::SpecificEnergy, 1.0), 1.0);
}

#[test]
fn the_config_of_the_readme_is_right() {
    let page = include_str!("../README.md");
    let blocks: Vec<&str> = page
        .split("```toml\n")
        .skip(1)
        .filter_map(|rest| rest.split("```").next())
        .collect();
    assert!(!blocks.is_empty());
    for block in blocks {
        parse(block);
    }
}

#[test]
fn a_config_says_in_plain_words_what_it_comes_to() {
    let lines = parse(&examples()[0]).statements();
    // 1/0.7 Mpc in cm; 1e10 solar masses over 0.7; the age of the reference list; (25/0.7)³.
    for line in [
        "length: 1 = 4.408111e24 cm * a = 1428.571 kpc * a",
        "mass: 1 = 2.840586e43 g = 1.428571e10 Msun",
        "velocity: 1 = 100000 cm s^-1 * a^0.5 = 1 km/s * a^0.5",
        "star formation rate: 1 = 6.300891e25 g s^-1 = 1 Msun/yr",
        "temperature: 1 = 1 K (follows from the others)",
        "cosmology: h = 0.7, omega_matter = 0.3, omega_lambda = 0.7, omega_radiation = 0, curvature = 0, w = -1; \
         age 13.4670 Gyr at a = 1",
        "time: the clock counts in a, births in a; a birth time is the moment the star's step ends",
        "volume: a box of 25 x 25 x 25 host lengths at a = 1, periodic in xyz; densities refer to 45553.94 comoving Mpc^3",
        "gauges: black_holes, mass_budget, star_formation",
    ] {
        assert!(
            lines.iter().any(|found| found == line),
            "{line}\nis not among\n{}",
            lines.join("\n")
        );
    }
}

#[test]
fn units_follow_from_length_mass_and_velocity() {
    let units = parse(&examples()[0]).units;
    let (a, h) = (0.25, 0.7);
    let (length, mass, time) = (MEGAPARSEC / h, 1e10 * SOLAR_MASS / h, MEGAPARSEC / h / 1e5);
    for (quantity, expected) in [
        (Quantity::Length, length * a),
        (Quantity::ComovingLength, length),
        (Quantity::Mass, mass),
        (Quantity::Velocity, 1e5 * 0.5),
        (Quantity::Time, time),
        (Quantity::SpecificEnergy, 1e10),
        (Quantity::Density, mass / (length * a).powi(3)),
        (Quantity::StarFormationRate, SOLAR_MASS / YEAR),
        (Quantity::AccretionRate, mass / time),
        (Quantity::Energy, mass * 1e10),
        (Quantity::Momentum, mass * 1e5),
        (Quantity::Temperature, 1.0),
    ] {
        assert_near(units.factor(quantity, a), expected);
    }
    assert!(
        units.is_stated(Quantity::StarFormationRate) && !units.is_stated(Quantity::AccretionRate)
    );
}

#[test]
fn every_form_of_velocity_is_made_peculiar() {
    for (form, expected) in [
        ("\"peculiar\"", 1e5),
        ("\"peculiar/sqrt(a)\"", 1e5 * 0.5),
        ("\"dx/dt\"", 1e5 * 0.25),
        ("\"a^2 dx/dt\"", 1e5 / 0.25),
        ("{ a = 1.5, h = -1 }", 1e5 * 0.125 / 0.7),
        ("{}", 1e5),
    ] {
        let text = examples()[0].replace("\"peculiar/sqrt(a)\"", form);
        assert_near(
            parse(&text).units.factor(Quantity::Velocity, 0.25),
            expected,
        );
    }
}

#[test]
fn an_a_in_the_unit_of_length_says_comoving_and_is_not_counted_twice() {
    let plain = parse(&examples()[0]).units;
    for length in [
        "\"a Mpc/h\"",
        "\"cMpc/h\"",
        "\"Mpc/h\"\npositions = \"comoving\"",
        "\"a Mpc/h\"\npositions = \"comoving\"",
    ] {
        let text = examples()[0].replacen("\"Mpc/h\"", length, 1);
        assert_eq!(parse(&text).units, plain, "{length}");
    }
    let physical =
        parse(&examples()[0].replacen("\"Mpc/h\"", "\"Mpc/h\"\npositions = \"physical\"", 1));
    assert_near(
        physical.units.factor(Quantity::Length, 0.25),
        MEGAPARSEC / 0.7,
    );
    assert_near(
        physical.units.factor(Quantity::ComovingLength, 0.25),
        MEGAPARSEC / 0.7 * 4.0,
    );
    assert_near(
        physical.units.factor(Quantity::Density, 0.25),
        1e10 * SOLAR_MASS * 0.49 / MEGAPARSEC.powi(3),
    );
    // The box stays comoving, so what physical positions live in grows.
    assert_eq!(physical.volume.edges(0.5), Some([12.5; 3]));
    assert_eq!(parse(&examples()[0]).volume.edges(0.5), Some([25.0; 3]));
}

#[test]
fn a_stated_density_says_what_it_is() {
    let with = |more: &str| examples()[0].replacen("velocity =", &format!("{more}\nvelocity ="), 1);
    let density = |more: &str| parse(&with(more)).units.factor(Quantity::Density, 0.5);
    assert_near(
        density("density = \"g cm^-3\"\ndensity_form = \"physical\""),
        1.0,
    );
    assert_near(
        density("density = \"g cm^-3\"\ndensity_form = \"comoving\""),
        8.0,
    );
    assert_near(density("density = \"g/(a cm)^3\""), 8.0);
    let silent = Config::parse(&with("density = \"g cm^-3\""), "x").unwrap_err();
    assert!(
        silent[0].message.contains("density_form"),
        "{}",
        shown(&silent)
    );
}

#[test]
fn the_hosts_own_sun_reaches_every_unit() {
    let text = examples()[0].replacen(
        "[cosmology]",
        "solar_mass_in_grams = 1.989e33\n[cosmology]",
        1,
    );
    let text = text.replace(
        "mass_budget = true",
        "[gauges.mass_budget]\nleast = \"2 Msun\"",
    );
    let mut config = parse(&text);
    assert_near(config.units.factor(Quantity::Mass, 1.0), 1.989e43 / 0.7);
    assert_near(
        config.units.factor(Quantity::StarFormationRate, 1.0),
        1.989e33 / YEAR,
    );
    let (_, mut section) = config.gauges.remove(1);
    let least = section
        .measure("least", Quantity::Mass.dimension())
        .required()
        .unwrap();
    assert_near(
        least.in_cgs(Quantity::Mass, &config.units, 1.0),
        2.0 * 1.989e33,
    );
}

#[test]
fn gauges_state_quantities_in_the_hosts_unit_or_their_own() {
    let text = examples()[0].replace(
        "mass_budget = true",
        "[gauges.wind_shells]\nradii = [30, \"30 kpc\", \"30 ckpc/h\"]",
    );
    let mut config = parse(&text);
    let (name, mut section) = config.gauges.pop().unwrap();
    assert_eq!(name, "wind_shells");
    let radii = section
        .measures("radii", Quantity::Length.dimension())
        .required()
        .unwrap();
    section.finish().unwrap();
    let units = &config.units;
    for (radius, physical, power) in [
        (radii[0], 30.0 * MEGAPARSEC / 0.7 * 0.5, 1.0),
        (radii[1], 30.0 * KILOPARSEC, 0.0),
        (radii[2], 15.0 * KILOPARSEC / 0.7, 1.0),
    ] {
        assert_near(radius.in_cgs(Quantity::Length, units, 0.5), physical);
        assert_near(
            radius.in_cgs(Quantity::ComovingLength, units, 0.5),
            physical * 2.0,
        );
        assert_eq!(radius.scale_factor_power(Quantity::Length, units), power);
    }
}

#[test]
fn a_gauge_reports_its_own_problems_like_any_other() {
    let text = examples()[0].replace(
        "mass_budget = true",
        "[gauges.wind_shels]\nshells = -3\ncolour = \"red\"",
    );
    let mut config = parse(&text);
    let (_, mut section) = config.gauges.pop().unwrap();
    assert_eq!(section.integer("shells", 1..=100).required(), None);
    assert_eq!(section.positive("radius").required(), None);
    let _ = section.flag("cold").or(false);
    let known = section
        .clone()
        .misnamed("gauge", &["wind_shells", "star_formation"]);
    let line = 1 + text
        .lines()
        .position(|line| line.contains("wind_shels"))
        .unwrap();
    assert_eq!(
        known.to_string(),
        format!(
            "limnograph.toml:{line}: [gauges] unknown gauge `wind_shels`; did you mean `wind_shells`?"
        )
    );
    let found = shown(&section.finish().unwrap_err());
    assert_eq!(
        found,
        format!(
            "limnograph.toml:{line}: [gauges.wind_shels] the key `radius` is missing; expected a number greater than 0\n\
             limnograph.toml:{}: [gauges.wind_shels] shells: found -3; expected a whole number from 1 to 100\n\
             limnograph.toml:{}: [gauges.wind_shels] unknown key `colour`; known here: cold, radius, shells\n",
            line + 1,
            line + 2
        )
    );
}

#[test]
fn all_problems_are_reported_at_once_each_with_its_line() {
    let text = examples()[0]
        .replace("mass = ", "mas = ")
        .replace("velocity = \"km/s\"", "velocity = \"kpc\"")
        .replace("box = 25.0", "box = nan")
        .replace("[imf]", "[inf]");
    let problems = Config::parse(&text, "my.toml").unwrap_err();
    let line_of = |start: &str| {
        1 + text
            .lines()
            .position(|line| line.starts_with(start))
            .unwrap()
    };
    let expected = [
        (line_of("[units]"), "`mass` is missing"),
        (line_of("mas ="), "did you mean `mass`?"),
        (
            line_of("velocity ="),
            "found \"kpc\", a length (cm); expected the unit of a velocity (cm s^-1)",
        ),
        (line_of("box ="), "found nan, which is out of range"),
        (
            line_of("[inf]"),
            "unknown section [inf]; did you mean [imf]?",
        ),
    ];
    assert_eq!(problems.len(), expected.len(), "{}", shown(&problems));
    for (problem, (line, part)) in problems.iter().zip(expected) {
        assert_eq!(problem.line, line, "{problem}");
        assert!(
            problem.message.contains(part),
            "{problem} should say {part}"
        );
        assert!(
            problem
                .to_string()
                .starts_with(&format!("my.toml:{line}: "))
        );
    }
}

/// What is wrong, by what it replaces; and what the first problem says of it.
const WRONG: [(&str, &str, &str); 40] = [
    ("\"Mpc/h\"", "\"Mpc / h", "this is not TOML"),
    ("\"Mpc/h\"", "5 kpc", "this is not TOML"),
    ("\"Mpc/h\"", "-1.0", "greater than 0"),
    ("\"Mpc/h\"", "1e400", "out of range"),
    (
        "\"Mpc/h\"",
        "\"3.0\"",
        "a bare number is written without quotes",
    ),
    (
        "\"Mpc/h\"",
        "\"a^2 Mpc\"",
        "expected a length without a, or a times one",
    ),
    (
        "\"Mpc/h\"",
        "\"a Mpc\"\npositions = \"physical\"",
        "leave one of them out",
    ),
    (
        "\"Mpc/h\"",
        "\"Mpc h^20\"",
        "expected powers from -10 to 10",
    ),
    ("\"1e10 Msun/h\"", "true", "found true"),
    ("\"1e10 Msun/h\"", "\"a Msun\"", "without it"),
    ("\"km/s\"", "\"a km/s\"", "expected it in velocity_form"),
    (
        "velocity_form = \"peculiar/sqrt(a)\"",
        "",
        "`velocity_form` is missing",
    ),
    (
        "\"peculiar/sqrt(a)\"",
        "\"comoving\"",
        "\"peculiar\", \"peculiar/sqrt(a)\", \"dx/dt\" or \"a^2 dx/dt\"",
    ),
    (
        "\"peculiar/sqrt(a)\"",
        "{ a = 0.5, b = 1 }",
        "unknown key `b`; did you mean `a` or `h`?",
    ),
    ("\"peculiar/sqrt(a)\"", "{ a = 50 }", "from -10 to 10"),
    (
        "[cosmology]",
        "internal_energy = \"a^2 km^2/s^2\"\n[cosmology]",
        "expected it in internal_energy_form",
    ),
    (
        "[cosmology]",
        "solar_mass_in_grams = 2e30\n[cosmology]",
        "from 1.97e33 to 2.01e33",
    ),
    (
        "[cosmology]",
        "density_form = 3\n[cosmology]",
        "\"comoving\" or \"physical\"",
    ),
    (
        "hubble = 70.0",
        "hubble = 0.7",
        "found 0.7; expected the Hubble constant in km/s/Mpc",
    ),
    ("hubble = 70.0", "", "`hubble` is missing"),
    (
        "hubble = 70.0",
        "hubble = 70\nhubble = 71",
        "this is not TOML: duplicate key",
    ),
    (
        "omega_lambda = 0.7",
        "omega_lambda = 2.5",
        "stops expanding near a",
    ),
    (
        "omega_lambda = 0.7",
        "omega_lambda = 0.7\nexpanding = false",
        "has no meaning beside expanding = false",
    ),
    (
        "coordinate = \"a\"",
        "coordinate = \"z\"",
        "\"a\", \"ln a\" or \"t\"",
    ),
    (
        "coordinate = \"a\"",
        "coordinate = \"a\"\nunit = \"Gyr\"",
        "no meaning unless the coordinate is \"t\"",
    ),
    (
        "coordinate = \"a\"",
        "coordinate = \"t\"\nunit = \"a Gyr\"",
        "changes with the scale factor",
    ),
    ("box = 25.0", "", "periodic axis; expected a box"),
    (
        "box = 25.0",
        "box = \"25 Gyr\"",
        "a time (s); expected a length",
    ),
    (
        "box = 25.0",
        "box = [25, 25]",
        "found 2 edges; expected one, or three",
    ),
    (
        "box = 25.0",
        "box = \"25 a^2 Mpc\"",
        "to the power 2; expected 1",
    ),
    ("box = 25.0", "box = 0", "found 0"),
    (
        "box = 25.0",
        "none = true\nbox = 25.0",
        "leave one of them out",
    ),
    (
        "box = 25.0",
        "comoving_volume = 1e6\nbox = 25.0",
        "without a unit",
    ),
    ("periodic = true", "", "`periodic` is missing"),
    (
        "periodic = true",
        "periodic = [true, false]",
        "expected three",
    ),
    (
        "name = \"Chabrier\"",
        "name = \"chabrier\"",
        "\"Chabrier\", \"Kroupa\"",
    ),
    (
        "every_ln_a = 0.001",
        "every_steps = 0",
        "a whole number from 1",
    ),
    ("\"carbon\"", "\"Helium\"", "exists already"),
    ("\"carbon\"", "\"C/H\"", "letters, digits and _"),
    (
        "mass_budget = true",
        "mass_budget = 1",
        "true, false or a table",
    ),
];

#[test]
fn each_mistake_is_found_and_explained_once() {
    for (from, to, part) in WRONG {
        let problems = problems(from, to);
        let found = shown(&problems);
        assert!(
            found.contains(part),
            "{from} -> {to}: should say {part:?}, says:\n{found}"
        );
        // Two keys that are each wrong beside the third, or a box that is also missed by its axes.
        let twofold = to.contains("expanding = false") || (from == "box = 25.0" && to.is_empty());
        assert_eq!(
            problems.len(),
            if twofold { 2 } else { 1 },
            "{from} -> {to}:\n{found}"
        );
    }
}

#[test]
fn without_a_cosmology_nothing_may_depend_on_it() {
    let text = &examples()[1];
    for (from, to, part) in [
        ("\"kpc\"", "\"kpc/h\"", "states no hubble"),
        ("\"kpc\"", "\"a kpc\"", "expanding = false"),
        (
            "\"kpc\"",
            "\"kpc\"\npositions = \"comoving\"",
            "leave it out",
        ),
        ("\"peculiar\"", "\"dx/dt\"", "expanding = false"),
        ("\"t\"", "\"a\"", "expected \"t\""),
        ("every_steps = 10", "every_ln_a = 0.1", "use every_time"),
        (
            "birth_stamp",
            "birth = \"z\"\nbirth_stamp",
            "expected \"t\"",
        ),
    ] {
        assert!(text.contains(from));
        let problems = Config::parse(&text.replacen(from, to, 1), "x").unwrap_err();
        assert!(
            shown(&problems).contains(part),
            "{to} should say {part:?}, says:\n{}",
            shown(&problems)
        );
    }
    let with_h = text
        .replacen("\"kpc\"", "\"kpc/h\"", 1)
        .replace("expanding = false", "expanding = false\nhubble = 50");
    assert_near(
        parse(&with_h).units.factor(Quantity::Length, 1.0),
        2.0 * KILOPARSEC,
    );
}

#[test]
fn volumes_come_out_as_stated() {
    let with = |volume: &str| {
        let text = examples()[0].replace("box = 25.0", volume);
        parse(&text).comoving_volume_mpc3()
    };
    assert_near(
        with("box = \"25 Mpc/h\"").unwrap(),
        (25.0_f64 / 0.7).powi(3),
    );
    assert_near(with("box = \"25 cMpc\"").unwrap(), 15625.0);
    assert_near(
        with("box = [10, 20, \"7 Mpc\"]").unwrap(),
        7.0 * 200.0 / 0.49,
    );
    assert_near(
        with("box = 25.0\ncomoving_volume = \"(10 Mpc/h)^3\"").unwrap(),
        1000.0 / 0.343,
    );
    let text = examples()[0].replace("box = 25.0\nperiodic = true", "none = true");
    assert_eq!(
        parse(
            &text
                .replace("box = 25.0", "")
                .replace("periodic = true", "none = true")
        )
        .comoving_volume_mpc3(),
        None
    );
    let mixed = parse(&examples()[0].replace("periodic = true", "periodic = [true, false, true]"));
    assert_eq!(mixed.volume.periodic(), [true, false, true]);
}

#[test]
fn the_text_is_kept_and_told_apart() {
    let text = &examples()[0];
    let config = parse(text);
    assert_eq!(&config.text, text);
    assert_eq!(config.checksum, crc32c::crc32c(text.as_bytes()));
    assert_ne!(
        parse(&text.replace("25.0", "25.5")).checksum,
        config.checksum
    );
    assert!(
        shown(&Config::parse_bytes(b"[units]\nlength = \"\xff\"", "x").unwrap_err())
            .starts_with("x:2: ")
    );
    assert_eq!(
        Config::parse_bytes(text.as_bytes(), "x").unwrap().text,
        *text
    );
}

#[test]
fn files_from_other_systems_are_read_alike() {
    let text = &examples()[0];
    let units = parse(text).units;
    assert_eq!(parse(&text.replace('\n', "\r\n")).units, units);
    assert_eq!(parse(&format!("\u{feff}{text}")).units, units);
    let wrong = text.replace("mass = ", "mas = ");
    let lines = |text: &str| -> Vec<usize> {
        Config::parse(text, "x")
            .unwrap_err()
            .iter()
            .map(|problem| problem.line)
            .collect()
    };
    assert_eq!(lines(&wrong), lines(&wrong.replace('\n', "\r\n")));
}

/// The config with these lines for the stations of the wind shells, which begin on line 5 of their section.
fn with_stations(stations: &str) -> Result<Vec<String>, String> {
    let shells = "[gauges.wind_shells]\nlengths = \"physical\"\nunit = \"kpc\"\nedges = [10, 20]\n";
    let text = examples()[0].replacen("mass_budget = true", &format!("{shells}{stations}"), 1);
    let section = 1 + text
        .lines()
        .take_while(|line| !line.contains("wind_shells"))
        .count();
    let config = parse(&text);
    let mut plan = Plan::new(vec![Table {
        name: "run".to_string(),
        description: String::new(),
        columns: Vec::new(),
    }]);
    match gauges::build(&config, &mut plan) {
        Ok(_) => Ok(plan.tables.into_iter().map(|table| table.name).collect()),
        // Lines are told from the section on, which has the first.
        Err(problems) => {
            let told = problems.into_iter().map(|mut problem| {
                problem.line = problem.line + 1 - section;
                format!("{problem}\n")
            });
            Err(told.collect())
        }
    }
}

#[test]
fn what_is_wrong_with_stations_is_explained() {
    const ONE: &str = "station = { position = [1, 2, 3] }\n";
    const TWO: &str = "stations = [\n  { position = [1, 2, 3] },\n  { position = [4, 5, 6] },\n]\n";
    for right in [ONE, TWO] {
        assert!(with_stations(right).is_ok(), "{right}");
    }
    for (wrong, expected) in [
        (
            format!("{ONE}{TWO}"),
            "6: [gauges.wind_shells] stations: expected either one `station` or a list of `stations`",
        ),
        (
            "stations = []\n".to_string(),
            "5: [gauges.wind_shells] stations: expected at least one station",
        ),
        (
            TWO.replace("position =", "name = \"here\", position ="),
            "5: [gauges.wind_shells] stations: found two stations named `here`; expected a name for each",
        ),
        // Left out, the name is the station's number, from 1 on.
        (
            TWO.replace("position = [1", "name = \"station 2\", position = [1"),
            "5: [gauges.wind_shells] stations: found two stations named `station 2`; expected a name for each",
        ),
        (
            TWO.replace("position = [4", "name = \"station 1\", position = [4"),
            "5: [gauges.wind_shells] stations: found two stations named `station 1`; expected a name for each",
        ),
        (
            TWO.replace("position = [4, 5, 6]", "name = \"there\""),
            "7: [gauges.wind_shells.stations] the key `position` is missing; expected a list of numbers",
        ),
        (
            TWO.replace("[4, 5, 6]", "[4, 5]"),
            "7: [gauges.wind_shells.stations] position: found 2 numbers; expected three: x, y, z",
        ),
        (
            "station = { name = \"there\" }\n".to_string(),
            "5: [gauges.wind_shells.station] the key `position` is missing; expected a list of numbers",
        ),
        (
            String::new(),
            "1: [gauges.wind_shells] the key `station` is missing; expected a table, or a list of tables `stations`",
        ),
    ] {
        assert_eq!(
            with_stations(&wrong).unwrap_err(),
            format!("limnograph.toml:{expected}\n"),
            "{wrong}"
        );
    }
}

#[test]
fn beyond_64_stations_rows_tell_of_all_together() {
    let stations = |count: usize| {
        format!(
            "stations = [{}]\n",
            "{ position = [1, 2, 3] },".repeat(count)
        )
    };
    assert_eq!(
        with_stations(&stations(64)).unwrap(),
        ["run", "wind_shells"]
    );
    assert_eq!(
        with_stations(&stations(65)).unwrap(),
        ["run", "wind_shells_summary"]
    );
}
