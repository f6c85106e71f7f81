//! The config file: strict, with errors that name file, line and the nearest key that exists.
//!
//! `docs/config.md` explains every section and key.

mod cadence;
mod clockwork;
mod node;
mod problem;
mod read_units;
mod section;
mod units;
mod volume;

use std::sync::Arc;

pub use cadence::{Cadence, Tick};
pub use clockwork::{BirthStamp, BirthWindow, ClockError, Clockwork, Coordinate, Moment};
pub use problem::{Place, Problem};
pub use section::{Answer, Measure, Section};
pub use units::{Positions, Quantity, Units};
pub use volume::Volume;

use crate::units::{Cosmology, Expansion, Parameters, Symbols, Unit, raise};

/// A config that has been read and found right, but for the gauges, which read their own sections.
#[derive(Clone, Debug)]
pub struct Config {
    /// The file, as the user named it.
    pub file: Arc<str>,
    /// The text as it was read.
    pub text: String,
    /// CRC-32C of the text, which tells two configs apart.
    pub checksum: u32,
    /// What the user says of the run; may be empty.
    pub description: String,
    /// What the host's numbers mean.
    pub units: Units,
    /// How space expands, if it does.
    pub expansion: Expansion,
    /// What the host's time means.
    pub clockwork: Clockwork,
    /// The simulated region.
    pub volume: Volume,
    /// The initial mass function, if stated.
    pub imf: Option<Imf>,
    /// Which steps are measured.
    pub cadence: Cadence,
    /// Names of the elements that are lent or tallied, in the host's order.
    pub elements: Vec<String>,
    /// Names of tally channels beside [`CHANNELS`], in the order in which they are numbered.
    pub channels: Vec<String>,
    /// Threads that one sweep may use.
    pub sweep_threads: usize,
    /// The gauges that are switched on, by name in alphabetical order, each with its keys yet unread.
    pub gauges: Vec<(String, Section)>,
}

/// Tally channels that always exist.
pub const CHANNELS: [&str; 3] = ["wind", "stellar_return", "black_hole"];

/// An initial mass function.
#[derive(Clone, Debug, PartialEq)]
pub struct Imf {
    /// Which one.
    pub name: ImfName,
    /// Share of the mass formed that is returned at once, if stated; in [0, 1).
    pub return_fraction: Option<f64>,
}

/// The initial mass functions in common use.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ImfName {
    /// Chabrier 2003, PASP 115, 763.
    Chabrier,
    /// Kroupa 2001, MNRAS 322, 231.
    Kroupa,
    /// Salpeter 1955, ApJ 121, 161.
    Salpeter,
    /// None of these.
    Other,
}

/// A config longer than this is no config.
const LONGEST: usize = 1 << 20;

impl Config {
    /// Reads a config; `file` is what messages call it.
    ///
    /// # Errors
    /// Every problem that is found, in the order of the file, and at least one.
    pub fn parse(text: &str, file: &str) -> Result<Config, Vec<Problem>> {
        let file: Arc<str> = Arc::from(file);
        let at_start = |message: String| {
            vec![Problem {
                file: file.clone(),
                line: 1,
                column: 1,
                message,
            }]
        };
        if text.len() > LONGEST {
            return Err(at_start(format!(
                "found {} bytes; expected a config of at most {LONGEST}",
                text.len()
            )));
        }
        let entries = node::read(text, &file)?;
        let start = Place { line: 1, column: 1 };
        let mut root = Section::new(
            file.clone(),
            String::new(),
            start,
            entries,
            Symbols::default(),
        );
        let config = read(&mut root, text);
        let problems = root.finish().err().unwrap_or_default();
        match config {
            Some(config) if problems.is_empty() => Ok(config),
            _ if problems.is_empty() => Err(at_start("this config could not be read".to_string())),
            _ => Err(problems),
        }
    }

    /// The stated volume or that of the box [comoving Mpc³]; `None` where there is none.
    pub fn comoving_volume_mpc3(&self) -> Option<f64> {
        self.volume.comoving_volume_mpc3()
    }

    /// What the config comes to, in plain words, one statement a line: for people to check.
    pub fn statements(&self) -> Vec<String> {
        self.units.statements()
    }
}

/// Reads every section, so that all problems come to light; `None` where one has any.
fn read(root: &mut Section, text: &str) -> Option<Config> {
    let file = root.file();
    set_solar_mass(root);
    let cosmology = within(root, "cosmology", true, read_cosmology).flatten();
    // With a cosmology that is wrong the rest is still read, for its own problems.
    let (expansion, h) = cosmology.clone().unwrap_or((Expansion::Static, Some(0.7)));
    let is_expanding = cosmology.is_none() || expansion != Expansion::Static;
    let setting = read_units::Setting { is_expanding, h };
    let units = within(root, "units", true, |section| {
        // Its value has been put to use before, in `set_solar_mass`; here its problems are noted.
        let _ = solar_mass(section);
        read_units::read(section, setting)
    })
    .flatten();
    let assumed = if cosmology.is_some() {
        expansion.clone()
    } else {
        any_expansion()?
    };
    let clockwork = within(root, "time", true, |section| {
        clockwork::read(section, &assumed, units.as_ref(), h)
    })
    .flatten();
    let volume = within(root, "volume", true, |section| {
        volume::read(section, units.as_ref(), h)
    })
    .flatten();
    let imf = within(root, "imf", false, read_imf).flatten();
    let cadence = within(root, "cadence", false, |section| {
        cadence::read(section, &assumed)
    })
    .unwrap_or_default();
    let elements =
        within(root, "elements", false, |section| names(section, &[])).unwrap_or_default();
    let channels =
        within(root, "channels", false, |section| names(section, &CHANNELS)).unwrap_or_default();
    let threads = within(root, "threads", false, |section| {
        section.integer("sweep", 1..=1024).or(1)
    })
    .unwrap_or(1);
    let description = within(root, "series", false, |section| {
        section.text("description").or(String::new())
    })
    .unwrap_or_default();
    let gauges = read_gauges(root);
    Some(Config {
        file,
        text: text.to_string(),
        checksum: crc32c::crc32c(text.as_bytes()),
        description,
        units: units?,
        expansion: cosmology.map(|_| expansion)?,
        clockwork: clockwork?,
        volume: volume?,
        imf,
        cadence,
        elements,
        channels,
        sweep_threads: threads as usize,
        gauges,
    })
}

/// Reads one section and takes over its problems.
fn within<T>(
    root: &mut Section,
    name: &str,
    is_required: bool,
    read: impl FnOnce(&mut Section) -> T,
) -> Option<T> {
    let answer = root.section(name);
    let mut section = if is_required {
        answer.required()
    } else {
        answer.optional()
    }?;
    let value = read(&mut section);
    if let Err(problems) = section.finish() {
        root.adopt(problems);
    }
    Some(value)
}

/// Makes `Msun` in every unit of the config the host's own.
fn set_solar_mass(root: &mut Section) {
    let Some(mut units) = root.section("units").optional() else {
        return;
    };
    if let Some(solar_mass_g) = solar_mass(&mut units) {
        root.set_symbols(Symbols { solar_mass_g });
    }
}

fn solar_mass(units: &mut Section) -> Option<f64> {
    // One percent is far beyond any value in use: such a number is in other units.
    units
        .number_in("solar_mass_in_grams", 1.97e33..=2.01e33)
        .optional()
}

fn read_cosmology(section: &mut Section) -> Option<(Expansion, Option<f64>)> {
    let is_expanding = section.flag("expanding").or(true);
    let hubble = section.number("hubble");
    let hubble = if is_expanding {
        hubble.required()
    } else {
        hubble.optional()
    };
    let omega_matter = section.number("omega_matter");
    let omega_matter = if is_expanding {
        omega_matter.required()
    } else {
        omega_matter.optional()
    };
    let omega_lambda = section.number("omega_lambda");
    let omega_lambda = if is_expanding {
        omega_lambda.required()
    } else {
        omega_lambda.optional()
    };
    let omega_radiation = section.number("omega_radiation").or(0.0);
    let w = section.number("w").or(-1.0);
    if !is_expanding {
        for key in ["omega_matter", "omega_lambda", "omega_radiation", "w"] {
            if section.has(key) {
                section.refuse(
                    key,
                    "has no meaning beside expanding = false; leave one of them out",
                );
            }
        }
        if let Some(hubble) = hubble.filter(|hubble| !(1.0..=1000.0).contains(hubble)) {
            section.refuse(
                "hubble",
                format!("found {hubble}; expected the Hubble constant in km/s/Mpc, such as 70"),
            );
        }
        return (!section.has_problems())
            .then_some((Expansion::Static, hubble.map(|hubble| hubble / 100.0)));
    }
    let h = hubble? / 100.0;
    let parameters = Parameters {
        h,
        omega_matter: omega_matter?,
        omega_lambda: omega_lambda?,
        omega_radiation,
        w,
    };
    match Cosmology::new(parameters) {
        Ok(cosmology) if !section.has_problems() => {
            Some((Expansion::Expanding(cosmology), Some(h)))
        }
        Ok(_) => None,
        Err(error) => {
            let key = if error.parameter.is_empty() {
                "omega_matter"
            } else {
                error.parameter
            };
            section.refuse(key, error.message);
            None
        }
    }
}

/// Stands in for a cosmology that could not be read, so that the rest of the config can be.
fn any_expansion() -> Option<Expansion> {
    let parameters = Parameters {
        h: 0.7,
        omega_matter: 0.3,
        omega_lambda: 0.7,
        omega_radiation: 0.0,
        w: -1.0,
    };
    Cosmology::new(parameters).ok().map(Expansion::Expanding)
}

fn read_imf(section: &mut Section) -> Option<Imf> {
    const NAMES: [(&str, ImfName); 4] = [
        ("Chabrier", ImfName::Chabrier),
        ("Kroupa", ImfName::Kroupa),
        ("Salpeter", ImfName::Salpeter),
        ("other", ImfName::Other),
    ];
    let name = section.choice("name", &NAMES).required();
    let return_fraction = section.number_in("return_fraction", 0.0..=0.99).optional();
    Some(Imf {
        name: name?,
        return_fraction,
    })
}

/// `names = [...]`, which become parts of column names.
fn names(section: &mut Section, taken: &[&str]) -> Vec<String> {
    const MOST: usize = 256;
    let names = section.texts("names").required().unwrap_or_default();
    if names.len() > MOST {
        section.refuse(
            "names",
            format!("found {} names; expected at most {MOST}", names.len()),
        );
    }
    for (index, name) in names.iter().enumerate() {
        let is_word = name.len() <= 32
            && name.starts_with(|first: char| first.is_ascii_alphabetic())
            && name
                .chars()
                .all(|letter| letter.is_ascii_alphanumeric() || letter == '_');
        if !is_word {
            let found = problem::quoted(name);
            section.refuse(
                "names",
                format!(
                    "found {found}; expected letters, digits and _, a letter first, at most 32"
                ),
            );
        }
        let is_twice = names[..index]
            .iter()
            .any(|before| before.eq_ignore_ascii_case(name));
        if is_twice || taken.iter().any(|taken| taken.eq_ignore_ascii_case(name)) {
            let found = problem::quoted(name);
            section.refuse(
                "names",
                format!("found {found}, which exists already; expected a name of its own"),
            );
        }
    }
    names
}

/// `name = true` or a table switches a gauge on, `name = false` off.
fn read_gauges(root: &mut Section) -> Vec<(String, Section)> {
    let mut gauges = within(root, "gauges", false, |section| {
        let names: Vec<String> = section.keys().map(str::to_string).collect();
        let mut gauges = Vec::new();
        for name in names {
            let gauge = if section.is_table(&name) {
                section.section(&name).optional()
            } else {
                let is_on = section.flag_or_table(&name);
                if is_on { section.empty(&name) } else { None }
            };
            gauges.extend(gauge.map(|gauge| (name, gauge)));
        }
        gauges
    })
    .unwrap_or_default();
    gauges.sort_by(|(left, _), (right, _)| left.cmp(right));
    gauges
}

/// A value in cgs that does not change with time; `None` where a problem was recorded.
fn fixed_value(section: &mut Section, key: &str, unit: &Unit, h: Option<f64>) -> Option<f64> {
    if unit.a_power != 0.0 {
        section.refuse(
            key,
            "found the scale factor in its unit; expected a value that does not change with time",
        );
        return None;
    }
    if unit.h_power != 0.0 && h.is_none() {
        section.refuse(
            key,
            "found h; expected hubble under [cosmology], which says what h is",
        );
        return None;
    }
    let value = unit.factor_cgs * raise(h.unwrap_or(1.0), unit.h_power);
    if !value.is_normal() {
        section.refuse(
            key,
            format!("comes to {value:e} in cgs; expected a number in double precision"),
        );
        return None;
    }
    Some(value)
}
