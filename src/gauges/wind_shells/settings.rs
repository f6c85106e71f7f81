//! What the config says of stations and shells.

use super::Frame;
use super::stations::Stations;
use crate::config::{Config, Quantity, Section};
use crate::units::Dimension;

/// The stations: one, or a list.
pub(super) fn stations(section: &mut Section) -> Stations {
    let sections = match (section.has("station"), section.has("stations")) {
        (false, true) => section.sections("stations").or(Vec::new()),
        (true, true) => {
            section.refuse(
                "stations",
                "expected either one `station` or a list of `stations`",
            );
            let _ = section.section("station").optional();
            section.sections("stations").or(Vec::new())
        }
        (true, false) => section.section("station").required().into_iter().collect(),
        (false, false) => {
            section.missing("station", "a table, or a list of tables `stations`");
            Vec::new()
        }
    };
    let is_list = section.has("stations");
    if is_list && sections.is_empty() && !section.has_problems() {
        section.refuse("stations", "expected at least one station");
    }
    let mut stations = Stations::default();
    for mut given in sections {
        let number = stations.len() + 1;
        let name = given.text("name").or(if is_list {
            format!("station {number}")
        } else {
            "station".to_string()
        });
        let listed = given.numbers("position").required();
        let position = listed.map_or([0.0; 3], |numbers| three(&mut given, "position", &numbers));
        let listed = given.numbers("velocity").optional();
        let velocity = listed.map_or([0.0; 3], |numbers| three(&mut given, "velocity", &numbers));
        section.adopt(given.finish().err().unwrap_or_default());
        stations.names.push(name.into());
        stations.positions.push(position);
        stations.velocities.push(velocity);
    }
    let mut names: Vec<&str> = stations.names.iter().map(|name| &**name).collect();
    names.sort_unstable();
    if let Some(pair) = names.windows(2).find(|pair| pair[0] == pair[1]) {
        let text = format!(
            "found two stations named `{}`; expected a name for each",
            pair[0]
        );
        section.refuse("stations", text);
    }
    stations
}

/// Three components of a list.
fn three(section: &mut Section, key: &str, numbers: &[f64]) -> [f64; 3] {
    numbers.try_into().unwrap_or_else(|_| {
        section.refuse(
            key,
            format!("found {} numbers; expected three: x, y, z", numbers.len()),
        );
        [0.0; 3]
    })
}

/// The edges in cm: listed, or spaced evenly in radius or in its logarithm.
pub(super) fn edges_in_cm(section: &mut Section) -> Vec<f64> {
    let unit = section
        .constant("unit", Dimension::LENGTH)
        .required()
        .unwrap_or(1.0);
    let edges = match (section.has("edges"), section.has("shells")) {
        (true, false) => section.numbers("edges").or(Vec::new()),
        (false, true) => {
            section
                .section("shells")
                .optional()
                .map_or_else(Vec::new, |mut shells| {
                    let edges = spaced(&mut shells);
                    section.adopt(shells.finish().err().unwrap_or_default());
                    edges
                })
        }
        _ => {
            section.refuse("edges", "expected either `edges = [a list of radii]` or `shells = { from, to, count, spacing }`");
            let _ = (
                section.numbers("edges").optional(),
                section.section("shells").optional(),
            );
            return Vec::new();
        }
    };
    let rising =
        edges.len() >= 2 && edges[0] >= 0.0 && edges.windows(2).all(|pair| pair[0] < pair[1]);
    if !rising && !section.has_problems() {
        let key = if section.has("edges") {
            "edges"
        } else {
            "shells"
        };
        section.refuse(
            key,
            "expected at least two radii, none negative, each larger than the one before",
        );
    }
    edges.iter().map(|edge| edge * unit).collect()
}

fn spaced(shells: &mut Section) -> Vec<f64> {
    let from = shells.number("from").required().unwrap_or(0.0);
    let to = shells.number("to").required().unwrap_or(1.0);
    let count = shells.integer("count", 1..=1000).or(8) as usize;
    let logarithmic = shells
        .choice("spacing", &[("linear", false), ("logarithmic", true)])
        .or(false);
    if logarithmic && from <= 0.0 {
        shells.refuse("from", "logarithmic spacing needs an inner radius above 0");
    }
    spaced_edges(from, to, count, logarithmic)
}

fn spaced_edges(from: f64, to: f64, count: usize, logarithmic: bool) -> Vec<f64> {
    let edge = |index: usize| {
        let share = index as f64 / count as f64;
        if logarithmic {
            from * (to / from).powf(share)
        } else {
            from + (to - from) * share
        }
    };
    // The ends are the numbers given, not what rounding makes of them.
    (0..=count)
        .map(|index| {
            if index == 0 {
                from
            } else if index == count {
                to
            } else {
                edge(index)
            }
        })
        .collect()
}

/// A shell that reaches beyond half the box would meet its own periodic image.
pub(super) fn check_against_box(
    section: &mut Section,
    config: &Config,
    frame: Frame,
    edges: &[f64],
) {
    let Some(&largest) = edges.last() else { return };
    let expanding = config.expansion.cosmology().is_some();
    if expanding && frame == Frame::Physical {
        // How large the box is then depends on the moment; see `WindShells::prepare`.
        return;
    }
    let lengths = config.volume.edges(1.0).unwrap_or_default();
    let unit = config.units.factor(Quantity::Length, 1.0);
    for (length, periodic) in lengths.into_iter().zip(config.volume.periodic()) {
        let share = largest / (0.5 * length * unit);
        if periodic && share > 1.0 + 1e-12 {
            let key = if section.has("edges") {
                "edges"
            } else {
                "shells"
            };
            let text = format!(
                "the largest shell reaches {share:.4} times half the periodic box; expected at most 1"
            );
            return section.refuse(key, text);
        }
    }
}
