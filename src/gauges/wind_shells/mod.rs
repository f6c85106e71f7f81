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
//! Order of operations, in host units: d = position − station, minus period × (the whole number nearest to
//! d × (1/period), ties to even) on periodic axes, r = √(dx·dx + dy·dy + dz·dz), v_r = (dx·vx + dy·vy + dz·vz)/r + κ·r, contribution m·v_r; κ is the
//! Hubble rate in host velocity per host length for physical shells and 0 for comoving ones. An element at
//! r = 0 has no direction and v_r = 0. Shell j holds the elements with edge[j] ≤ r < edge[j+1].
//!
//! Up to [`EACH`] stations every station has a row for each shell, of exact sums. Beyond it the rows tell of all
//! stations together, and the sums of each are of contributions rounded to 2^−40 solar masses (times km/s): they
//! take 64 bytes a bin, and like exact sums they do not depend on order or ranks.

mod columns;
mod flow;
mod settings;
mod stations;
mod summary;

use super::plan::{BinSums, Plan, TableHandle};
use super::{Entry, Gauge, Moment, Presence, Reading, Sample};
use crate::config::{Config, Quantity, Section, Volume};
use crate::lend::{Field, Species};
use crate::sweep::{BLOCK, Block, Parts, Work};
use crate::units::constants::{KILOPARSEC, SOLAR_MASS, YEAR};
use flow::Periods;
use stations::{Grid, Stations};

/// Up to so many stations have rows of their own.
const EACH: usize = 64;
/// The power of two to which the contributions of many stations are rounded, in solar masses and km/s.
const QUANTUM: i32 = -40;

const OUTWARD: usize = 0;
const INWARD: usize = 1;
const DIRECTIONS: usize = 2;

const FLUX: usize = 0;
const MASS: usize = 1;
const QUANTITIES: usize = 2;

/// How the lengths of the edges are meant.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Frame {
    Physical,
    Comoving,
}

/// The shells of one moment, in host units.
#[derive(Default)]
struct Shells {
    /// Edges of those shells that fit into half the periodic box; the others are not measured.
    edges: Vec<f64>,
    /// Squares beyond these are of elements outside all shells, whatever the rounding.
    squares: (f64, f64),
    /// The Hubble rate in host velocity per host length; 0 for comoving shells.
    hubble: f64,
    periods: Periods,
}

impl Shells {
    fn fitting(&self) -> usize {
        self.edges.len().saturating_sub(1)
    }
}

struct WindShells {
    stations: Stations,
    volume: Volume,
    /// In cm, physical or comoving.
    edges: Vec<f64>,
    frame: Frame,
    sums: BinSums,
    table: TableHandle,
    /// Of the moment that was prepared last.
    shells: Shells,
    grid: Grid,
    rough: flow::Rough,
    /// Room for the values of all stations in one shell.
    values: Vec<f64>,
}

pub(super) fn build(section: &mut Section, config: &Config, plan: &mut Plan) -> Box<dyn Gauge> {
    let frames = [("physical", Frame::Physical), ("comoving", Frame::Comoving)];
    let frame = section
        .choice("lengths", &frames)
        .required()
        .unwrap_or(Frame::Physical);
    let edges = settings::edges_in_cm(section);
    let stations = settings::stations(section);
    settings::check_against_box(section, config, frame, &edges);

    if stations.len() > 1 {
        plan.need(Species::Gas, Field::Position);
    } else {
        plan.need_roughly(Species::Gas, Field::Position);
    }
    for field in [Field::Velocity, Field::Mass] {
        plan.need_of_some(Species::Gas, field);
    }
    let bins = stations.len() * edges.len().saturating_sub(1) * DIRECTIONS;
    let (table, sums) = if stations.len() <= EACH {
        let about = "gas through spherical shells around stations, one row per station and shell";
        let table = plan.table("wind_shells", about, columns::of_each_station());
        (table, plan.bins(bins, QUANTITIES))
    } else {
        let about = "gas through spherical shells around many stations, one row per shell";
        let table = plan.table("wind_shells_summary", about, columns::of_all_stations());
        (table, plan.rounded_bins(bins, quanta(config)))
    };
    Box::new(WindShells {
        stations,
        volume: config.volume,
        edges,
        frame,
        sums,
        table,
        shells: Shells::default(),
        grid: Grid::default(),
        rough: flow::Rough::default(),
        values: Vec::new(),
    })
}

/// The quanta of flux and mass in host units, as powers of two. They depend on the config alone, not on the moment.
fn quanta(config: &Config) -> Vec<i32> {
    let in_host_units = |unit: f64| {
        let exponent = ((unit.to_bits() >> 52) & 0x7ff) as i32 - 1023;
        QUANTUM + exponent
    };
    let mass = SOLAR_MASS / config.units.factor(Quantity::Mass, 1.0);
    let velocity = 1e5 / config.units.factor(Quantity::Velocity, 1.0);
    let mut quanta = vec![0; QUANTITIES];
    quanta[FLUX] = in_host_units(mass * velocity);
    quanta[MASS] = in_host_units(mass);
    quanta
}

impl WindShells {
    /// Box lengths at this moment in host position units, of the axes that are periodic.
    fn periods(&self, moment: &Moment) -> [Option<f64>; 3] {
        let periodic = self.volume.periodic();
        let edges = self.volume.edges(moment.scale_factor);
        std::array::from_fn(|axis| edges.filter(|_| periodic[axis]).map(|edges| edges[axis]))
    }

    /// The shells of a moment.
    fn make_shells(&mut self, moment: &Moment) {
        let (physical, hubble) = match self.frame {
            Frame::Physical => (
                1.0,
                moment.hubble * moment.factors.position / moment.factors.velocity,
            ),
            Frame::Comoving => (moment.scale_factor, 0.0),
        };
        // Host lengths in one cm of the edges.
        let scale = physical / moment.factors.position;
        let periods = self.periods(moment);
        let shortest = periods.into_iter().flatten().reduce(f64::min);
        let fits = |edge: f64| shortest.is_none_or(|period| 2.0 * edge <= period * (1.0 + 1e-12));
        let shells = &mut self.shells;
        shells.periods = Periods::new(periods);
        shells.hubble = hubble;
        shells.edges.clear();
        let scaled = self.edges.iter().map(|edge| edge * scale).enumerate();
        let fitting = scaled.take_while(|&(index, edge)| index == 0 || fits(edge));
        shells.edges.extend(fitting.map(|(_, edge)| edge));
        let (first, last) = (
            shells.edges.first().copied().unwrap_or(0.0),
            shells.edges.last().copied().unwrap_or(0.0),
        );
        const MARGIN: f64 = 1e-14;
        shells.squares = (first * first * (1.0 - MARGIN), last * last * (1.0 + MARGIN));
    }

    /// Measures the elements of a block around the only station.
    fn measure_around_one(&self, block: &Block, work: &mut Work, sample: &mut Sample) {
        let centre = self.stations.positions[0];
        let Parts {
            runs: [dx, dy, dz, ..],
            indices: [elements, owners, _],
            rough_run,
            ahead,
        } = work.parts();
        let rough = block.roughly(Field::Position);
        let rough = rough.and_then(|rough| Some((self.rough.bounds(rough.largest)?, rough.runs)));
        let count = match rough {
            Some((bounds, runs)) => {
                let mut marks = [0; BLOCK / flow::MARKS];
                self.rough.mark(runs, bounds, rough_run, &mut marks);
                ahead.some();
                flow::list(&marks, block.len(), elements)
            }
            None => {
                (0..block.len()).for_each(|element| elements[element] = element as u32);
                block.len()
            }
        };
        if count == 0 {
            return;
        }
        owners[..count].fill(0);
        ahead.some();
        block.gather_vectors(
            Field::Position,
            &elements[..count],
            [&mut dx[..count], &mut dy[..count], &mut dz[..count]],
        );
        self.measure_candidates(block, centre, count, work, sample);
    }

    /// Measures the elements of a block around those stations that each of them is near.
    fn measure_around_many(&self, block: &Block, work: &mut Work, sample: &mut Sample) {
        let positions = block.vector(Field::Position);
        let [x, y, z] = [0, 1, 2].map(|axis| block.run(Field::Position, axis));
        let mut cells = [0; BLOCK];
        self.grid.cells_of(positions, &mut cells[..block.len()]);
        work.ahead.some();
        let mut next = stations::Next::default();
        while next.element < block.len() {
            let Parts {
                runs: [dx, dy, dz, ..],
                indices: [elements, owners, _],
                ..
            } = work.parts();
            let pairs = self
                .grid
                .pairs(&cells[..block.len()], &mut next, elements, owners);
            for (index, (&element, &owner)) in elements.iter().zip(&*owners).enumerate().take(pairs)
            {
                let place = &self.stations.positions[owner as usize];
                let element = element as usize % BLOCK;
                dx[index] = x[element] - place[0];
                dy[index] = y[element] - place[1];
                dz[index] = z[element] - place[2];
            }
            self.measure_candidates(block, [0.0; 3], pairs, work, sample);
        }
    }

    /// Measures those pairs of an element and a station that are within reach of each other. They stand in the first
    /// two runs of indices, the positions of the elements relative to the stations, but for `centre`, in the first three
    /// runs of numbers.
    fn measure_candidates(
        &self,
        block: &Block,
        centre: [f64; 3],
        pairs: usize,
        work: &mut Work,
        sample: &mut Sample,
    ) {
        let Parts {
            runs: [dx, dy, dz, squares, ..],
            indices: [elements, owners, _],
            ahead,
            ..
        } = work.parts();
        ahead.some();
        let runs = [&mut dx[..pairs], &mut dy[..pairs], &mut dz[..pairs]];
        flow::distances(centre, &self.shells.periods, runs, &mut squares[..pairs]);
        let (low, high) = self.shells.squares;
        let mut count = 0;
        if flow::are_within(&squares[..pairs], low, high) {
            count = pairs;
        } else {
            for from in 0..pairs {
                (dx[count], dy[count], dz[count]) = (dx[from], dy[from], dz[from]);
                (elements[count], owners[count]) = (elements[from], owners[from]);
                squares[count] = squares[from];
                count += usize::from((squares[from] >= low) & (squares[from] <= high));
            }
        }
        self.measure_pairs(block, count, work, sample);
    }

    /// Measures pairs of an element and a station that are within reach of each other, but for a margin. They stand
    /// in the first two runs of indices, where the element is from the station in the first three runs of numbers,
    /// and the square of its distance in the fourth.
    fn measure_pairs(&self, block: &Block, pairs: usize, work: &mut Work, sample: &mut Sample) {
        let shells = &self.shells;
        let mut count = pairs;
        let Parts {
            runs: [dx, dy, dz, squares, vx, vy, vz, masses, fluxes, ..],
            indices: [elements, owners, bins],
            ahead,
            ..
        } = work.parts();
        ahead.some();
        block.gather_vectors(
            Field::Velocity,
            &elements[..count],
            [&mut vx[..count], &mut vy[..count], &mut vz[..count]],
        );
        ahead.some();
        block.gather(Field::Mass, 0, &elements[..count], &mut masses[..count]);
        // One station's velocity is subtracted together with the rest; subtracting 0 afterwards changes nothing.
        let mut drift = self.stations.velocities[0];
        if self.stations.len() > 1 {
            drift = [0.0; 3];
            let bins_of_each = (self.edges.len() as u32 - 1) * DIRECTIONS as u32;
            for (index, owner) in owners[..count].iter_mut().enumerate() {
                let velocity = &self.stations.velocities[*owner as usize];
                vx[index] -= velocity[0];
                vy[index] -= velocity[1];
                vz[index] -= velocity[2];
                *owner *= bins_of_each;
            }
        }
        let radii = &mut squares[..count];
        flow::carry(
            [&dx[..count], &dy[..count], &dz[..count]],
            [&vx[..count], &vy[..count], &vz[..count]],
            &masses[..count],
            drift,
            shells.hubble,
            radii,
            &mut fluxes[..count],
        );
        ahead.some();
        let fitting = shells.fitting();
        let ends = (shells.edges[0], shells.edges[fitting]);
        flow::count_edges(radii, &shells.edges[1..fitting], bins);
        let are_within = flow::find_bins(
            radii,
            &fluxes[..count],
            &owners[..count],
            ends,
            &mut bins[..count],
        );
        ahead.some();
        if !are_within {
            // The margins have let some in that lie just outside.
            let mut kept = 0;
            for from in 0..count {
                (masses[kept], fluxes[kept], bins[kept]) = (masses[from], fluxes[from], bins[from]);
                kept += usize::from(ends.0 <= squares[from] && squares[from] < ends.1);
            }
            count = kept;
        }
        sample.scatter(
            self.sums,
            &bins[..count],
            &[&fluxes[..count], &masses[..count]],
        );
    }

    /// Physical radii of the edges of each shell, in cm.
    fn radii(&self, moment: &Moment) -> impl Iterator<Item = (f64, f64)> {
        let physical = match self.frame {
            Frame::Comoving => moment.scale_factor,
            Frame::Physical => 1.0,
        };
        self.edges
            .windows(2)
            .map(move |pair| (pair[0] * physical, pair[1] * physical))
    }

    /// Outflow and inflow rates and mass of one shell of one station, in solar masses and years, and its elements.
    fn values_of(
        &self,
        reading: &Reading,
        moment: &Moment,
        station: usize,
        shell: usize,
        thickness: f64,
    ) -> ([f64; 3], u64) {
        let bin = (station * (self.edges.len() - 1) + shell) * DIRECTIONS;
        let sum = |quantity, bins: std::ops::Range<usize>| {
            reading.reduced.binned(self.sums, quantity, bins)
        };
        let rate = moment.factors.mass * moment.factors.velocity / thickness * YEAR / SOLAR_MASS;
        let outward = sum(FLUX, bin + OUTWARD..bin + OUTWARD + 1) * rate;
        // Subtracting from zero keeps a zero inflow a plain zero.
        let inward = 0.0 - sum(FLUX, bin + INWARD..bin + INWARD + 1) * rate;
        let mass = sum(MASS, bin..bin + DIRECTIONS) * moment.factors.mass / SOLAR_MASS;
        let elements = reading
            .reduced
            .binned_count(self.sums, bin..bin + DIRECTIONS);
        ([outward, inward, mass], elements)
    }

    fn enter_each(&self, reading: &Reading, moment: &Moment, fitting: usize, entry: &mut Entry) {
        for (station, name) in self.stations.names.iter().enumerate() {
            for (shell, (inner, outer)) in self.radii(moment).enumerate() {
                entry.row(self.table);
                entry.cell(moment.step);
                entry.cell(name);
                entry.cell(shell as u64);
                entry.cell(inner / KILOPARSEC);
                entry.cell(outer / KILOPARSEC);
                if shell < fitting {
                    let (sums, elements) =
                        self.values_of(reading, moment, station, shell, outer - inner);
                    sums.into_iter().for_each(|sum| entry.cell(sum));
                    entry.cell(elements);
                } else {
                    entry.null_cells(4);
                }
            }
        }
    }

    fn enter_all(&mut self, reading: &Reading, moment: &Moment, fitting: usize, entry: &mut Entry) {
        let mut of_all = std::mem::take(&mut self.values);
        let stations = self.stations.len();
        for (shell, (inner, outer)) in self.radii(moment).enumerate() {
            entry.row(self.table);
            entry.cell(moment.step);
            entry.cell(shell as u64);
            entry.cell(inner / KILOPARSEC);
            entry.cell(outer / KILOPARSEC);
            entry.cell(stations as u64);
            if shell < fitting {
                // One run of values for each quantity.
                of_all.clear();
                of_all.resize(3 * stations, 0.0);
                let mut elements = 0;
                for station in 0..stations {
                    let (sums, own) =
                        self.values_of(reading, moment, station, shell, outer - inner);
                    elements += own;
                    for (quantity, value) in sums.into_iter().enumerate() {
                        of_all[quantity * stations + station] = value;
                    }
                }
                entry.cell(elements);
                for own in of_all.chunks_exact_mut(stations) {
                    // In the order of the stations, before they change places.
                    let total: f64 = own.iter().sum();
                    for percent in summary::PERCENTILES {
                        entry.cell(summary::percentile(own, percent));
                    }
                    entry.cell(total);
                }
            } else {
                entry.null_cells(1 + 3 * (summary::PERCENTILES.len() + 1));
            }
        }
        self.values = of_all;
    }
}

impl Gauge for WindShells {
    fn prepare(&mut self, moment: &Moment) {
        self.make_shells(moment);
        if let (Some(&inner), Some(&outer), [station]) = (
            self.shells.edges.first(),
            self.shells.edges.last(),
            &*self.stations.positions,
        ) {
            self.rough = flow::Rough::new(&self.shells.periods, *station, (inner, outer));
        }
        if let Some(&reach) = self.shells.edges.last()
            && self.stations.len() > 1
        {
            self.grid
                .renew(&self.stations.positions, self.shells.periods, reach);
        }
    }

    fn measure(
        &self,
        _species: Species,
        block: &Block,
        _moment: &Moment,
        work: &mut Work,
        sample: &mut Sample,
    ) {
        if self.shells.fitting() == 0 {
            return;
        }
        if self.stations.len() > 1 {
            self.measure_around_many(block, work, sample);
        } else {
            self.measure_around_one(block, work, sample);
        }
    }

    fn enter(&mut self, reading: &Reading, moment: &Moment, entry: &mut Entry) {
        // The moment of the row may not be the one that was measured last.
        self.make_shells(moment);
        let measured = reading.presence(Species::Gas) == Presence::Measured;
        if measured && self.shells.edges.len() < self.edges.len() {
            entry.note(
                "a shell reaches beyond half the periodic box and is null as long as it does",
            );
        }
        let fitting = if measured { self.shells.fitting() } else { 0 };
        if self.stations.len() <= EACH {
            self.enter_each(reading, moment, fitting, entry);
        } else {
            self.enter_all(reading, moment, fitting, entry);
        }
    }
}
