//! The stations, and which of them an element may be near: a grid of cells that each list the stations whose
//! shells reach into them, so that an element asks one cell and not every station.

use super::flow::Periods;
use crate::sweep::BLOCK;
use crate::team::memory::fetch;
use multiversion::multiversion;

/// Most cells along an axis.
const MOST_CELLS: usize = 128;
/// Most places in all lists together, for each station: beyond it cells are made larger.
const PLACES: usize = 64;
/// Stations that an element is near, in most cases at most.
const USUAL: usize = 4;
/// Distances are rounded: cells and shells reach farther by this part.
const MARGIN: f64 = 1e-9;

/// The places that are measured around; what is asked for each element lies close together.
#[derive(Default)]
pub(super) struct Stations {
    pub names: Vec<std::sync::Arc<str>>,
    /// In host position units.
    pub positions: Vec<[f64; 3]>,
    /// In host velocity units.
    pub velocities: Vec<[f64; 3]>,
}

impl Stations {
    pub fn len(&self) -> usize {
        self.names.len()
    }
}

/// The cells of one moment.
#[derive(Default)]
pub(super) struct Grid {
    periods: Periods,
    reach: f64,
    counts: [usize; 3],
    /// Where the first cell begins, on an axis that is not periodic.
    origin: [f64; 3],
    /// Cells in a unit of length.
    per_length: [f64; 3],
    /// Where each cell's list begins in `lists`; one more than there are cells, and one for elements outside all.
    starts: Vec<u32>,
    lists: Vec<u32>,
}

/// Where to go on with pairs.
#[derive(Default)]
pub(super) struct Next {
    /// The first element that is not told in full.
    pub element: usize,
    /// How many of its stations are.
    taken: usize,
}

/// One axis of a cell index, as the loop needs it.
#[derive(Clone, Copy)]
struct Axis {
    /// Multiplied by a position: boxes, or cells where nothing is periodic.
    scale: f64,
    origin: f64,
    is_periodic: bool,
    cells: f64,
}

impl Grid {
    /// Makes the grid for shells that reach as far as `reach`, unless that has been done.
    pub fn renew(&mut self, stations: &[[f64; 3]], periods: Periods, reach: f64) {
        if self.reach == reach && self.periods == periods && !self.starts.is_empty() {
            return;
        }
        (self.periods, self.reach) = (periods, reach);
        let mut side = reach;
        loop {
            self.divide(stations, side);
            if self.fill(stations) {
                return;
            }
            side *= 1.5;
        }
    }

    /// Lays cells of about this side over the box, or over the stations where it is open.
    fn divide(&mut self, stations: &[[f64; 3]], side: f64) {
        for axis in 0..3 {
            let places = || stations.iter().map(|station| station[axis]);
            let period = self.periods.lengths[axis];
            let (origin, extent) = if period > 0.0 {
                (0.0, period)
            } else {
                let reach = self.reach * (1.0 + MARGIN);
                let low = places().fold(f64::INFINITY, f64::min) - reach;
                let high = places().fold(f64::NEG_INFINITY, f64::max) + reach;
                (low, high - low)
            };
            let count = (extent / side).clamp(1.0, MOST_CELLS as f64) as usize;
            self.counts[axis] = count;
            self.origin[axis] = origin;
            self.per_length[axis] = count as f64 / extent;
        }
    }

    fn cells(&self) -> usize {
        self.counts.iter().product()
    }

    /// Fills the lists; `false` when they would become too long.
    fn fill(&mut self, stations: &[[f64; 3]]) -> bool {
        let cells = self.cells();
        let mut starts = std::mem::take(&mut self.starts);
        let mut lists = std::mem::take(&mut self.lists);
        starts.clear();
        starts.resize(cells + 2, 0);
        let mut places = 0;
        for &station in stations {
            self.each_cell(station, |cell| {
                starts[cell + 1] += 1;
                places += 1;
            });
        }
        let fits = cells == 1 || places <= PLACES * stations.len() + cells;
        if fits {
            for cell in 0..cells {
                starts[cell + 1] += starts[cell];
            }
            let total = starts[cells];
            starts[cells + 1] = total;
            lists.clear();
            // A few more than there are, so that as many as usual can be read at once.
            lists.resize(total as usize + USUAL, 0);
            // Each start is moved to the end of its list while it is filled, and back afterwards.
            for (number, &station) in stations.iter().enumerate() {
                self.each_cell(station, |cell| {
                    lists[starts[cell] as usize] = number as u32;
                    starts[cell] += 1;
                });
            }
            starts.copy_within(0..cells, 1);
            starts[0] = 0;
        }
        (self.starts, self.lists) = (starts, lists);
        fits
    }

    /// Visits every cell that comes within reach of a place.
    fn each_cell(&self, place: [f64; 3], mut visit: impl FnMut(usize)) {
        let mut ranges = [(0i64, 0i64); 3];
        let mut at = [0.0; 3];
        for axis in 0..3 {
            let count = self.counts[axis] as i64;
            let period = self.periods.lengths[axis];
            // In cells, from the first one.
            at[axis] = if period > 0.0 {
                let boxes = place[axis] * self.periods.inverses[axis];
                (boxes - boxes.floor()) * count as f64
            } else {
                (place[axis] - self.origin[axis]) * self.per_length[axis]
            };
            let reach = self.reach * self.per_length[axis] * (1.0 + MARGIN) + MARGIN;
            let (low, high) = (
                (at[axis] - reach).floor() as i64,
                (at[axis] + reach).floor() as i64,
            );
            ranges[axis] = if period > 0.0 {
                // Each cell once, though the range may go round.
                (low, high.min(low + count - 1))
            } else {
                (low.max(0), high.min(count - 1))
            };
        }
        let whole_round =
            |axis: usize| ranges[axis].1 - ranges[axis].0 + 1 >= self.counts[axis] as i64;
        let gap = |axis: usize, cell: i64| {
            // From the place to the nearest point of the cell; 0 where the range goes all the way round.
            let gap = (cell as f64 - at[axis]).max(at[axis] - (cell + 1) as f64);
            if whole_round(axis) {
                0.0
            } else {
                (gap.max(0.0) / self.per_length[axis] - MARGIN * self.reach).max(0.0)
            }
        };
        let bound = self.reach * self.reach * (1.0 + 4.0 * MARGIN);
        let [nx, ny, _] = self.counts;
        for z in ranges[2].0..=ranges[2].1 {
            let gap_z = gap(2, z);
            for y in ranges[1].0..=ranges[1].1 {
                let gap_y = gap(1, y);
                for x in ranges[0].0..=ranges[0].1 {
                    let gap_x = gap(0, x);
                    if gap_x * gap_x + gap_y * gap_y + gap_z * gap_z <= bound {
                        let wrapped = |axis: usize, cell: i64| {
                            cell.rem_euclid(self.counts[axis] as i64) as usize
                        };
                        let cell = wrapped(0, x) + nx * (wrapped(1, y) + ny * wrapped(2, z));
                        visit(cell);
                    }
                }
            }
        }
    }

    /// The cell of each element; the last one, which lists no station, for elements outside.
    pub fn cells_of(&self, positions: [&[f64]; 3], into: &mut [u32]) {
        let axes = std::array::from_fn(|axis| {
            let is_periodic = self.periods.lengths[axis] > 0.0;
            Axis {
                scale: if is_periodic {
                    self.periods.inverses[axis]
                } else {
                    self.per_length[axis]
                },
                origin: self.origin[axis],
                is_periodic,
                cells: self.counts[axis] as f64,
            }
        });
        find_cells(positions, &axes, into);
        // Cells lie anywhere: ask for all of them, and then for all of their lists, before the first is looked at.
        let starts = || into.iter().map(|&cell| &self.starts[cell as usize]);
        starts().for_each(fetch);
        starts().for_each(|&start| fetch(&self.lists[start as usize]));
    }

    /// The stations that elements of a cell may be near.
    #[inline]
    fn near(&self, cell: u32) -> &[u32] {
        let cell = cell as usize;
        &self.lists[self.starts[cell] as usize..self.starts[cell + 1] as usize]
    }

    /// Writes down elements, of which `cells` are the cells, with the stations that each may be near, until all are
    /// told or there is no more room. Returns how many pairs there are, and leaves in `next` where to go on.
    pub fn pairs(
        &self,
        cells: &[u32],
        next: &mut Next,
        elements: &mut [u32; BLOCK],
        owners: &mut [u32; BLOCK],
    ) -> usize {
        let mut pairs = 0;
        while let Some(&cell) = cells.get(next.element) {
            let start = self.starts[cell as usize] as usize;
            let count = self.starts[cell as usize + 1] as usize - start;
            let room = elements[pairs..].first_chunk_mut::<USUAL>();
            let others = owners[pairs..].first_chunk_mut::<USUAL>();
            let near = self.lists[start..].first_chunk::<USUAL>();
            if let (Some(room), Some(others), Some(near)) = (room, others, near)
                && count <= USUAL
                && next.taken == 0
            {
                // As many as there usually are at most, without a branch on how many there are: what is too much is
                // written over next.
                room.fill(next.element as u32);
                *others = *near;
                pairs += count;
            } else {
                let near = &self.near(cell)[next.taken..];
                let fits = near.len().min(BLOCK - pairs);
                elements[pairs..pairs + fits].fill(next.element as u32);
                owners[pairs..pairs + fits].copy_from_slice(&near[..fits]);
                pairs += fits;
                if fits < near.len() {
                    next.taken += fits;
                    return pairs;
                }
            }
            *next = Next {
                element: next.element + 1,
                taken: 0,
            };
        }
        pairs
    }
}

#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
fn find_cells(positions: [&[f64]; 3], axes: &[Axis; 3], into: &mut [u32]) {
    const WHOLE: f64 = 6_755_399_441_055_744.0;
    /// Added to a whole number from 0 to 2^52, it leaves the number in the low bits.
    const TO_BITS: f64 = 4_503_599_627_370_496.0;
    let outside = axes[0].cells * axes[1].cells * axes[2].cells;
    let [x, y, z] = positions;
    for (((x, y), z), cell) in x.iter().zip(y).zip(z).zip(into) {
        let along = |place: f64, axis: &Axis| {
            let boxes = place * axis.scale;
            // From −1/2 to 1/2, which are the same place, so the cells are counted from the middle of the box on.
            let part = boxes - ((boxes + WHOLE) - WHOLE);
            let part = if part < 0.0 { part + 1.0 } else { part };
            let from_origin = (place - axis.origin) * axis.scale;
            let place = if axis.is_periodic {
                part * axis.cells
            } else {
                from_origin
            };
            let whole = ((place - 0.5) + WHOLE) - WHOLE;
            if axis.is_periodic {
                whole.max(0.0).min(axis.cells - 1.0)
            } else {
                whole
            }
        };
        let (a, b, c) = (
            along(*x, &axes[0]),
            along(*y, &axes[1]),
            along(*z, &axes[2]),
        );
        let is_inside = (a >= 0.0)
            & (a < axes[0].cells)
            & (b >= 0.0)
            & (b < axes[1].cells)
            & (c >= 0.0)
            & (c < axes[2].cells);
        let number = a + axes[0].cells * (b + axes[1].cells * c);
        let number = if is_inside { number } else { outside };
        *cell = (number + TO_BITS).to_bits() as u32;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        /// Whoever is within reach of a station finds it in the list of its cell, once.
        #[test]
        fn no_station_within_reach_is_missed(
            places in proptest::collection::vec(proptest::array::uniform3(-3.0f64..9.0), 1..40),
            elements in proptest::collection::vec(proptest::array::uniform3(-7.0f64..13.0), 1..200),
            reach in 0.01f64..2.9,
            periodic in proptest::array::uniform3(proptest::bool::ANY),
        ) {
            let lengths = [6.0, 7.0, 6.5];
            let periods = Periods::new(std::array::from_fn(|axis| periodic[axis].then_some(lengths[axis])));
            let mut grid = Grid::default();
            grid.renew(&places, periods, reach);
            let runs: [Vec<f64>; 3] =
                std::array::from_fn(|axis| elements.iter().map(|element| element[axis]).collect());
            let mut cells = vec![0; elements.len()];
            grid.cells_of([&runs[0], &runs[1], &runs[2]], &mut cells);
            for (element, &cell) in elements.iter().zip(&cells) {
                let near = grid.near(cell);
                for (number, station) in places.iter().enumerate() {
                    let square: f64 = (0..3).map(|axis| {
                        let distance = element[axis] - station[axis];
                        let period = lengths[axis];
                        let nearest = if periodic[axis] { distance - period * (distance / period).round() } else { distance };
                        nearest * nearest
                    }).sum();
                    let listed = near.iter().filter(|&&near| near as usize == number).count();
                    prop_assert!(listed <= 1);
                    prop_assert!(listed == 1 || square.sqrt() > reach, "{:?} {:?}", element, station);
                }
            }
            // The pairs are those of the lists, however often there is no more room.
            let mut told = Vec::new();
            let mut next = Next::default();
            while next.element < cells.len() {
                let (mut of, mut owners) = ([0; BLOCK], [0; BLOCK]);
                let pairs = grid.pairs(&cells, &mut next, &mut of, &mut owners);
                told.extend(of.into_iter().zip(owners).take(pairs));
            }
            let listed = cells.iter().enumerate()
                .flat_map(|(element, &cell)| grid.near(cell).iter().map(move |&owner| (element as u32, owner)));
            prop_assert_eq!(told, listed.collect::<Vec<_>>());
        }
    }
}
