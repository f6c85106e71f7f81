//! The region that is simulated: its edges, its periodicity and the comoving volume rates are divided by.

use super::section::{Measure, Section};
use super::units::{Positions, Quantity, Units};
use crate::units::constants::MEGAPARSEC;
use crate::units::{Dimension, Unit};

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

    /// The comoving volume that densities refer to [Mpc³]; `None` where none is stated.
    pub fn comoving_volume_mpc3(&self) -> Option<f64> {
        self.comoving_mpc3
    }
}

/// Reads `[volume]`; `None` where it recorded a problem. `units` is `None` where they have problems.
pub(super) fn read(section: &mut Section, units: Option<&Units>, h: Option<f64>) -> Option<Volume> {
    let stated_none = section.flag("none").or(false);
    let comoving_volume = section
        .unit("comoving_volume", Dimension::VOLUME)
        .optional();
    let stated_volume =
        comoving_volume.and_then(|unit| comoving(section, "comoving_volume", unit, 3.0, h));
    let edges = edges(section);
    let periodic = periodic(section, edges.is_some());
    if section.is_number("comoving_volume") {
        section.refuse(
            "comoving_volume",
            "found a bare number; expected a volume with its unit, as in \"1e6 Mpc^3\"",
        );
    }
    let has_value = section.has("box") || section.has("comoving_volume");
    if stated_none && has_value {
        section.refuse(
            "none",
            "found true beside a box or a comoving_volume; leave one of them out",
        );
    }
    if !stated_none && !has_value {
        section.refuse(
            "box",
            "is missing; expected box, or comoving_volume, or none = true where there is no volume",
        );
    }
    // The comoving length of one host unit of length, and one physical at a = 1 is the same.
    let host_cm = units.map_or(1.0, |units| units.factor(Quantity::ComovingLength, 1.0));
    let grows = units.is_some_and(|units| {
        units.positions() == Positions::Physical
            && units.scale_factor_power(Quantity::ComovingLength) != 0.0
    });
    let edges = edges.map(|edges| {
        edges.map(|edge| match edge {
            Measure::Host(value) => Some(value),
            Measure::Stated(unit) => comoving(section, "box", unit, 1.0, h).map(|cm| cm / host_cm),
        })
    });
    let edges = match edges {
        Some([Some(x), Some(y), Some(z)]) => Some([x, y, z]),
        _ => None,
    };
    let box_volume = edges.map(|edges| {
        edges
            .map(|edge| edge * (host_cm / MEGAPARSEC))
            .iter()
            .product::<f64>()
    });
    let comoving_mpc3 = stated_volume
        .map(|cm3| cm3 / MEGAPARSEC / MEGAPARSEC / MEGAPARSEC)
        .or(box_volume);
    let out_of_range = |value: &f64| !(value.is_normal() && *value > 0.0);
    if comoving_mpc3.as_ref().is_some_and(out_of_range) || edges.iter().flatten().any(out_of_range)
    {
        let key = if section.has("box") {
            "box"
        } else {
            "comoving_volume"
        };
        section.refuse(
            key,
            "comes to a volume that is no usable number in Mpc^3; check its unit",
        );
    }
    (!section.has_problems()).then_some(Volume {
        edges,
        grows,
        periodic,
        comoving_mpc3,
    })
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
            section.refuse(
                key,
                "is missing; expected true, false or a list of three of them, for x, y and z",
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

/// A comoving length or volume in cgs; an `a` to the right power in its unit says no more than that.
fn comoving(
    section: &mut Section,
    key: &str,
    unit: Unit,
    power: f64,
    h: Option<f64>,
) -> Option<f64> {
    let is_marked = unit.a_power == power;
    let unit = if is_marked {
        unit.without_scale_factor()
    } else {
        unit
    };
    super::fixed_value(section, key, &unit, h)
}
