//! The region that is simulated: its edges, its periodicity and the comoving volume rates are divided by.

use super::convert::Measure;
use super::section::Section;
use super::units::{Positions, Quantity, Units};
use crate::units::Dimension;
use crate::units::constants::MEGAPARSEC;

/// The simulated region.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Volume {
    edges: Option<[f64; 3]>,
    grows: bool,
    periodic: [bool; 3],
    comoving_mpc3: Option<f64>,
}

impl Volume {
    /// Edge lengths of the box in the host's unit of length at scale factor `a`, as its positions have them;
    /// `None` where there is no box. Comoving positions live in a box of constant edges.
    pub fn edges(&self, a: f64) -> Option<[f64; 3]> {
        self.edges.map(|edges| {
            if self.grows {
                edges.map(|edge| edge * a)
            } else {
                edges
            }
        })
    }

    /// Which axes are periodic.
    pub fn periodic(&self) -> [bool; 3] {
        self.periodic
    }

    /// The comoving volume that densities refer to (Mpc³); `None` where none is stated.
    pub fn comoving_volume_mpc3(&self) -> Option<f64> {
        self.comoving_mpc3
    }
}

/// Reads `[volume]`; `None` where it recorded a problem. `units` is `None` where they have problems.
pub(super) fn read(section: &mut Section, units: Option<&Units>) -> Option<Volume> {
    let is_none = section.flag("none").or(false);
    let edges = edges(section);
    let periodic = periodic(section, edges.is_some());
    // One host unit of length at a = 1, where comoving and physical are the same.
    let host_cm = units.map_or(1.0, |units| units.factor(Quantity::ComovingLength, 1.0));
    let edges_cm = edges.and_then(|edges| comoving(section, "box", 1.0, edges, host_cm));
    let box_mpc3 =
        edges_cm.map(|edges| edges.map(|edge| edge / MEGAPARSEC).iter().product::<f64>());
    let stated_mpc3 = stated_volume(section);
    let is_stated = section.has("box") || section.has("comoving_volume");
    if is_none && is_stated {
        section.refuse(
            "none",
            "found true beside a box or a comoving_volume; leave one of them out",
        );
    }
    if !is_none && !is_stated {
        section.missing(
            "box",
            "box, or comoving_volume, or none = true where there is no volume",
        );
    }
    let comoving_mpc3 = stated_mpc3.or(box_mpc3);
    if comoving_mpc3.is_some_and(|volume| !volume.is_normal()) {
        let key = if stated_mpc3.is_some() {
            "comoving_volume"
        } else {
            "box"
        };
        section.refuse(
            key,
            "comes to a volume that double precision cannot hold in Mpc^3; check its unit",
        );
    }
    let grows =
        units.is_some_and(|units| units.is_expanding() && units.positions() == Positions::Physical);
    let edges = edges.map(|edges| {
        edges.map(|edge| match edge {
            Measure::Host(value) => value,
            Measure::Stated { cgs, .. } => cgs / host_cm,
        })
    });
    (!section.has_problems()).then_some(Volume {
        edges,
        grows,
        periodic,
        comoving_mpc3,
    })
}

/// `comoving_volume`, in Mpc³. A bare number would be in units nobody thinks in.
fn stated_volume(section: &mut Section) -> Option<f64> {
    let key = "comoving_volume";
    let stated = section.measure(key, Dimension::VOLUME).optional()?;
    if let Measure::Host(value) = stated {
        section.refuse(
            key,
            format!("found {value} without a unit; expected a text with one, as in \"1e6 Mpc^3\""),
        );
        return None;
    }
    let [cm3] = comoving(section, key, 3.0, [stated], 1.0)?;
    Some(cm3 / MEGAPARSEC / MEGAPARSEC / MEGAPARSEC)
}

/// Comoving quantities in cgs, of lengths to the given power. An `a` to that power in a unit says no more than
/// that the quantity is comoving, which it is anyway.
fn comoving<const N: usize>(
    section: &mut Section,
    key: &str,
    power: f64,
    measures: [Measure; N],
    host: f64,
) -> Option<[f64; N]> {
    let mut cgs = [0.0; N];
    for (to, measure) in cgs.iter_mut().zip(measures) {
        *to = match measure {
            Measure::Host(value) => value * host,
            Measure::Stated { cgs, a_power } if a_power == 0.0 || a_power == power => cgs,
            Measure::Stated { a_power, .. } => {
                section.refuse(
                    key,
                    format!(
                        "found the scale factor to the power {a_power}; expected {power}, or none"
                    ),
                );
                return None;
            }
        };
    }
    Some(cgs)
}

/// One edge length for a cube, or three.
fn edges(section: &mut Section) -> Option<[Measure; 3]> {
    if !section.is_list("box") {
        return section
            .measure("box", Dimension::LENGTH)
            .optional()
            .map(|edge| [edge; 3]);
    }
    let edges = section.measures("box", Dimension::LENGTH).optional()?;
    let count = edges.len();
    edges
        .try_into()
        .map_err(|_| {
            section.refuse(
                "box",
                format!("found {count} edges; expected one, or three"),
            )
        })
        .ok()
}

fn periodic(section: &mut Section, has_box: bool) -> [bool; 3] {
    let key = "periodic";
    if !section.has(key) {
        // Asked for, so that a slip in another key can point to it.
        let missing = section.flag(key).optional().is_none();
        if has_box && missing {
            section.missing(
                key,
                "true, false or a list of three of them, for x, y and z",
            );
        }
        return [false; 3];
    }
    let periodic = if section.is_list(key) {
        section.flags(key).optional().and_then(|flags| {
            let count = flags.len();
            flags
                .try_into()
                .map_err(|_| {
                    section.refuse(
                        key,
                        format!("found a list of {count}; expected three, for x, y and z"),
                    )
                })
                .ok()
        })
    } else {
        section.flag(key).optional().map(|flag| [flag; 3])
    };
    let periodic = periodic.unwrap_or([false; 3]);
    if periodic.contains(&true) && !section.has("box") {
        section.refuse(
            key,
            "found a periodic axis; expected a box with it, which says where it closes",
        );
    }
    periodic
}
