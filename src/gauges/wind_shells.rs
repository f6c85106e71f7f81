//! Wind through shells: how much mass crosses spherical shells around a station, outward and inward.
//!
//! For a shell of thickness Δr, Ṁ = Σ m v_r / Δr over the elements in it, split by the sign of v_r. The
//! radial velocity is the one relative to the shell's own edge,
//!
//! ```text
//! v_r = (v_peculiar − v_station) · r̂ + H r − v_shell
//! ```
//!
//! with v_shell = 0 for shells of fixed physical radius and H r for shells of fixed comoving radius. The
//! Hubble flow through a physical shell is therefore part of the flux: in a uniform universe of density ρ
//! it is 4π r³ H ρ, while nothing crosses a comoving shell.
//!
//! Order of operations, in host units: d = position − station (moved to the nearest periodic image),
//! r = √(dx·dx + dy·dy + dz·dz), v_r = (dx·vx + dy·vy + dz·vz)/r + κ·r, contribution m·v_r; κ is the
//! Hubble rate in host velocity per host length for physical shells and 0 for comoving ones. An element at
//! r = 0 has no direction and v_r = 0. Shell j holds the elements with edge[j] ≤ r < edge[j+1].

use super::plan::{Counts, Plan, Sums, TableHandle};
use super::{Entry, Gauge, Moment, Presence, Reading, Sample};
use crate::config::{Config, Quantity, Section, Volume};
use crate::lend::{Field, Species};
use crate::series::schema::{Column, Kind, ValueType};
use crate::sweep::{Block, Work};
use crate::units::Dimension;
use crate::units::constants::{KILOPARSEC, SOLAR_MASS, YEAR};
use multiversion::multiversion;
use std::sync::Arc;

const OUTWARD: usize = 0;
const INWARD: usize = 1;
const MASS: usize = 2;
const SUMS: usize = 3;

/// How the lengths of the edges are meant.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Frame {
    Physical,
    Comoving,
}

/// The shells of one moment, in host units.
struct Shells {
    /// Host lengths in one cm of the edges.
    scale: f64,
    /// Number of shells that fit into half the periodic box; the others are not measured.
    fitting: usize,
    /// The Hubble rate in host velocity per host length; 0 for comoving shells.
    hubble: f64,
}

struct WindShells {
    station: Arc<str>,
    /// In host position units.
    position: [f64; 3],
    /// In host velocity units.
    velocity: [f64; 3],
    volume: Volume,
    /// In cm, physical or comoving.
    edges: Vec<f64>,
    frame: Frame,
    sums: Sums,
    inside: Counts,
    table: TableHandle,
}

pub(super) fn build(section: &mut Section, config: &Config, plan: &mut Plan) -> Box<dyn Gauge> {
    let frames = [("physical", Frame::Physical), ("comoving", Frame::Comoving)];
    let frame = section
        .choice("lengths", &frames)
        .required()
        .unwrap_or(Frame::Physical);
    let edges = edges_in_cm(section);
    let mut name = "station".to_string();
    let (mut position, mut velocity) = ([0.0; 3], [0.0; 3]);
    if let Some(mut station) = section.section("station").required() {
        name = station.text("name").or(name);
        let listed = station.numbers("position").required();
        position = listed.map_or(position, |numbers| {
            three(&mut station, "position", &numbers)
        });
        let listed = station.numbers("velocity").optional();
        velocity = listed.map_or(velocity, |numbers| {
            three(&mut station, "velocity", &numbers)
        });
        section.adopt(station.finish().err().unwrap_or_default());
    }
    check_against_box(section, config, frame, &edges);

    for field in [Field::Position, Field::Velocity, Field::Mass] {
        plan.need(Species::Gas, field);
    }
    let table = plan.table(
        "wind_shells",
        "gas through spherical shells around a station, one row per shell",
        columns(),
    );
    let shells = edges.len().saturating_sub(1);
    Box::new(WindShells {
        station: name.into(),
        position,
        velocity,
        volume: config.volume,
        frame,
        sums: plan.sums(shells * SUMS),
        inside: plan.counts(shells),
        edges,
        table,
    })
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

fn columns() -> Vec<Column> {
    let float = |name: &str, unit: &str, kind, description: &str| {
        Column::new(
            "wind_shells",
            name,
            unit,
            kind,
            ValueType::Float,
            description,
        )
    };
    let rate = "solMass.yr**-1";
    vec![
        Column::new(
            "wind_shells",
            "step",
            "",
            Kind::Key,
            ValueType::Unsigned,
            "the host's step number",
        ),
        Column::new(
            "wind_shells",
            "station",
            "",
            Kind::Key,
            ValueType::Text,
            "name of the station",
        ),
        Column::new(
            "wind_shells",
            "shell",
            "",
            Kind::Key,
            ValueType::Unsigned,
            "number of the shell, from the inside",
        ),
        float(
            "radius_inner",
            "kpc",
            Kind::Instant,
            "physical radius of the shell's inner edge",
        ),
        float(
            "radius_outer",
            "kpc",
            Kind::Instant,
            "physical radius of the shell's outer edge",
        ),
        float(
            "mass_outflow_rate",
            rate,
            Kind::Instant,
            "mass of gas that moves outward through the shell per time",
        ),
        float(
            "mass_inflow_rate",
            rate,
            Kind::Instant,
            "mass of gas that moves inward through the shell per time, as a positive number",
        ),
        float(
            "gas_mass",
            "solMass",
            Kind::Instant,
            "mass of gas in the shell",
        ),
        Column::new(
            "wind_shells",
            "elements",
            "",
            Kind::Instant,
            ValueType::Unsigned,
            "gas elements in the shell",
        ),
    ]
}

/// The edges in cm: listed, or spaced evenly in radius or in its logarithm.
fn edges_in_cm(section: &mut Section) -> Vec<f64> {
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
fn check_against_box(section: &mut Section, config: &Config, frame: Frame, edges: &[f64]) {
    let Some(&largest) = edges.last() else { return };
    let expanding = config.expansion.cosmology().is_some();
    if expanding && frame == Frame::Physical {
        // How large the box is then depends on the moment; see `WindShells::shells`.
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

impl WindShells {
    /// Box lengths at this moment in host position units, of the axes that are periodic.
    fn periods(&self, moment: &Moment) -> [Option<f64>; 3] {
        let periodic = self.volume.periodic();
        let edges = self.volume.edges(moment.scale_factor);
        std::array::from_fn(|axis| edges.filter(|_| periodic[axis]).map(|edges| edges[axis]))
    }

    fn shells(&self, moment: &Moment) -> Shells {
        let (physical, hubble) = match self.frame {
            Frame::Physical => (
                1.0,
                moment.hubble * moment.factors.position / moment.factors.velocity,
            ),
            Frame::Comoving => (moment.scale_factor, 0.0),
        };
        let scale = physical / moment.factors.position;
        let shortest = self.periods(moment).into_iter().flatten().reduce(f64::min);
        let fits =
            |edge: &f64| shortest.is_none_or(|period| 2.0 * edge * scale <= period * (1.0 + 1e-12));
        let fitting = self
            .edges
            .iter()
            .skip(1)
            .take_while(|edge| fits(edge))
            .count();
        Shells {
            scale,
            fitting,
            hubble,
        }
    }
}

impl Gauge for WindShells {
    fn measure(
        &self,
        _species: Species,
        block: &Block,
        moment: &Moment,
        work: &mut Work,
        sample: &mut Sample,
    ) {
        let shells = self.shells(moment);
        if shells.fitting == 0 {
            return;
        }
        let position = block.vector(Field::Position);
        let [vx, vy, vz] = block.vector(Field::Velocity);
        let mass = block.scalar(Field::Mass);
        let periods = self.periods(moment);
        let [dx, dy, dz, radius] = work.runs(block.len());
        for (axis, to) in [&mut *dx, &mut *dy, &mut *dz].into_iter().enumerate() {
            match periods[axis] {
                Some(period) => nearest_images(position[axis], self.position[axis], period, to),
                None => differences(position[axis], self.position[axis], to),
            }
        }
        lengths(dx, dy, dz, radius);
        let edges = &self.edges[..=shells.fitting];
        let first = edges[0] * shells.scale;
        let last = edges[shells.fitting] * shells.scale;
        for (index, &r) in radius.iter().enumerate() {
            if !(first <= r && r < last) {
                continue;
            }
            let shell = edges[1..shells.fitting]
                .iter()
                .filter(|&edge| edge * shells.scale <= r)
                .count();
            let relative = [
                vx[index] - self.velocity[0],
                vy[index] - self.velocity[1],
                vz[index] - self.velocity[2],
            ];
            let along = dx[index] * relative[0] + dy[index] * relative[1] + dz[index] * relative[2];
            let speed = if r > 0.0 {
                along / r + shells.hubble * r
            } else {
                0.0
            };
            let direction = if speed >= 0.0 { OUTWARD } else { INWARD };
            sample
                .sum(self.sums, shell * SUMS + direction)
                .add(mass[index] * speed);
            sample.sum(self.sums, shell * SUMS + MASS).add(mass[index]);
            *sample.count(self.inside, shell) += 1;
        }
    }

    fn enter(&mut self, reading: &Reading, moment: &Moment, entry: &mut Entry) {
        let measured = reading.presence(Species::Gas) == Presence::Measured;
        if measured && self.shells(moment).fitting + 1 < self.edges.len() {
            entry.note(
                "a shell reaches beyond half the periodic box and is null as long as it does",
            );
        }
        let fitting = if measured {
            self.shells(moment).fitting
        } else {
            0
        };
        let physical = if self.frame == Frame::Comoving {
            moment.scale_factor
        } else {
            1.0
        };
        for (index, edges) in self.edges.windows(2).enumerate() {
            let (inner, outer) = (edges[0] * physical, edges[1] * physical);
            entry.row(self.table);
            entry.cell(moment.step);
            entry.cell(&self.station);
            entry.cell(index as u64);
            entry.cell(inner / KILOPARSEC);
            entry.cell(outer / KILOPARSEC);
            if index < fitting {
                let rate = moment.factors.mass * moment.factors.velocity / (outer - inner) * YEAR
                    / SOLAR_MASS;
                let sum = |which: usize| reading.sum(self.sums, index * SUMS + which);
                // Subtracting from zero keeps a zero inflow a plain zero.
                entry.cell(sum(OUTWARD) * rate);
                entry.cell(0.0 - sum(INWARD) * rate);
                entry.cell(sum(MASS) * moment.factors.mass / SOLAR_MASS);
                entry.cell(reading.reduced.count(self.inside, index));
            } else {
                entry.null_cells(4);
            }
        }
    }
}

/// Distances from a centre.
fn differences(from: &[f64], centre: f64, to: &mut [f64]) {
    from.iter().zip(to).for_each(|(&at, d)| *d = at - centre);
}

/// Distances from a centre to the nearest periodic image; any number of boxes away.
#[multiversion(targets("x86_64+avx+avx2", "aarch64+neon"))]
fn nearest_images(from: &[f64], centre: f64, period: f64, to: &mut [f64]) {
    // Adding and subtracting 1.5·2^52 rounds to the nearest whole number, ties to even.
    const WHOLE: f64 = 6_755_399_441_055_744.0;
    for (&at, d) in from.iter().zip(to) {
        let distance = at - centre;
        *d = distance - period * ((distance / period + WHOLE) - WHOLE);
    }
}

/// Lengths of vectors.
#[multiversion(targets("x86_64+avx+avx2", "aarch64+neon"))]
fn lengths(x: &[f64], y: &[f64], z: &[f64], to: &mut [f64]) {
    for (((&x, &y), &z), length) in x.iter().zip(y).zip(z).zip(to) {
        *length = (x * x + y * y + z * z).sqrt();
    }
}
