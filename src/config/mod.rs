//! The config file: strict, with errors that name file, line and the nearest key that exists.
//!
//! `docs/config.md` explains every section and key.

mod cadence;
mod clockwork;
mod convert;
mod node;
mod problem;
mod read_cosmology;
mod read_units;
mod section;
mod statements;
mod units;
mod volume;

use std::sync::Arc;

pub use cadence::{Cadence, Tick};
pub use clockwork::{BirthStamp, BirthWindow, ClockError, Clockwork, Coordinate, Moment};
pub use convert::Measure;
pub use problem::{Place, Problem};
pub use section::{Answer, Section};
pub use units::{Positions, Quantity, Units};
pub use volume::Volume;

use convert::Setting;

use crate::units::{Expansion, Symbols};

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
            Setting::default(),
        );
        let config = read(&mut root, text);
        let problems = root.finish().err().unwrap_or_default();
        match config {
            Some(config) if problems.is_empty() => Ok(config),
            _ if problems.is_empty() => Err(at_start("this config could not be read".to_string())),
            _ => Err(problems),
        }
    }

    /// Reads a config as it lies on disk; see [`Config::parse`].
    ///
    /// # Errors
    /// As for [`Config::parse`]; and where the bytes are no UTF-8.
    pub fn parse_bytes(bytes: &[u8], file: &str) -> Result<Config, Vec<Problem>> {
        match std::str::from_utf8(bytes) {
            Ok(text) => Config::parse(text, file),
            Err(error) => {
                let before = &bytes[..error.valid_up_to()];
                let line = 1 + before.iter().filter(|byte| **byte == b'\n').count();
                let message =
                    "found bytes that are no UTF-8 text; save the file as UTF-8".to_string();
                Err(vec![Problem {
                    file: Arc::from(file),
                    line,
                    column: 1,
                    message,
                }])
            }
        }
    }

    /// The stated volume or that of the box (comoving Mpc³); `None` where there is none.
    pub fn comoving_volume_mpc3(&self) -> Option<f64> {
        self.volume.comoving_volume_mpc3()
    }
}

/// Reads every section, so that all problems come to light; `None` where one has any.
fn read(root: &mut Section, text: &str) -> Option<Config> {
    set_solar_mass(root);
    let expansion = read_cosmology::read(root);
    // Where the cosmology is wrong the rest is read with some other, for its own problems.
    let assumed = match &expansion {
        Some(expansion) => expansion.clone(),
        None => read_cosmology::any()?,
    };
    let units = within(root, "units", true, |section| {
        // Its value has been put to use before, in `set_solar_mass`; here its problems are noted.
        let _ = solar_mass(section);
        read_units::read(section)
    })
    .flatten();
    let clockwork = within(root, "time", true, |section| {
        clockwork::read(section, &assumed, units.as_ref())
    })
    .flatten();
    let volume = within(root, "volume", true, |section| {
        volume::read(section, units.as_ref())
    })
    .flatten();
    let cadence = within(root, "cadence", false, |section| {
        cadence::read(section, &assumed)
    });
    let elements = within(root, "elements", false, |section| names(section, &[]));
    let channels = within(root, "channels", false, |section| names(section, &CHANNELS));
    let sweep_threads = within(root, "threads", false, |section| {
        section.integer("sweep", 1..=1024).or(1)
    });
    let description = within(root, "series", false, |section| {
        section.text("description").optional()
    })
    .flatten();
    Some(Config {
        file: root.file(),
        text: text.to_string(),
        checksum: crc32c::crc32c(text.as_bytes()),
        imf: within(root, "imf", false, read_imf).flatten(),
        gauges: read_gauges(root),
        description: description.unwrap_or_default(),
        cadence: cadence.unwrap_or_default(),
        elements: elements.unwrap_or_default(),
        channels: channels.unwrap_or_default(),
        sweep_threads: sweep_threads.unwrap_or(1) as usize,
        units: units?,
        expansion: expansion?,
        clockwork: clockwork?,
        volume: volume?,
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
        let symbols = Symbols { solar_mass_g };
        root.set_setting(Setting {
            symbols,
            ..root.setting()
        });
    }
}

fn solar_mass(units: &mut Section) -> Option<f64> {
    // One percent is far beyond any value in use: such a number is in other units.
    units
        .number_in("solar_mass_in_grams", 1.97e33..=2.01e33)
        .optional()
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
