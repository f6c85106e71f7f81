//! The loops over elements: where they are from a station, and what they carry through its shells.
//!
//! Plain loops over runs of doubles, compiled for several vector widths and chosen at run time. Every result comes
//! from one element alone by the operations written here, so the width changes nothing but the speed.

use crate::sweep::BLOCK;
use multiversion::multiversion;

/// Adding and subtracting 1.5·2^52 rounds to the nearest whole number, ties to even.
const WHOLE: f64 = 6_755_399_441_055_744.0;

/// The periodic box, by axis; both numbers are 0 on an axis that is not periodic.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Periods {
    pub lengths: [f64; 3],
    pub inverses: [f64; 3],
}

impl Periods {
    pub fn new(lengths: [Option<f64>; 3]) -> Periods {
        Periods {
            lengths: lengths.map(|length| length.unwrap_or(0.0)),
            inverses: lengths.map(|length| length.map_or(0.0, |length| 1.0 / length)),
        }
    }
}

/// From the station to its nearest image of the element: any number of boxes away.
#[inline(always)]
fn nearest_image(distance: f64, length: f64, inverse: f64) -> f64 {
    distance - length * ((distance * inverse + WHOLE) - WHOLE)
}

/// Elements that one word of marks tells of.
pub(super) const MARKS: usize = 64;

/// The geometry of one station's shells for rough positions.
#[derive(Default)]
pub(super) struct Rough {
    lengths: [f32; 3],
    inverses: [f32; 3],
    centre: [f32; 3],
    /// Turns distances into parts of the outermost radius, so that squares are of a size whatever the unit is.
    per_radius: f32,
    /// The same in double precision.
    exactly_per_radius: f64,
    /// The innermost radius as such a part.
    inner: f64,
    /// Numbers of the size of the centre and the box together.
    size: f64,
}

impl Rough {
    /// The geometry of shells from `inner` to `outer` around a place.
    pub fn new(periods: &Periods, centre: [f64; 3], (inner, outer): (f64, f64)) -> Rough {
        let is_in_range = (1e-30..1e30).contains(&outer);
        let all = centre.into_iter().chain(periods.lengths);
        Rough {
            lengths: periods.lengths.map(|length| length as f32),
            inverses: periods.inverses.map(|inverse| inverse as f32),
            centre: centre.map(|place| place as f32),
            per_radius: (1.0 / outer) as f32,
            exactly_per_radius: 1.0 / outer,
            inner: inner / outer,
            // Infinite where singles cannot tell anything.
            size: if is_in_range {
                all.fold(0.0, |sum, number| sum + number.abs())
            } else {
                f64::INFINITY
            },
        }
    }

    /// The squares of parts of the outermost radius beyond which are elements that lie outside, whatever the
    /// rounding, for positions with components up to `largest`. None where rounding to singles would blur the shells.
    ///
    /// Each of the roundings on the way to a distance is at most 2^-24 of a number that is no larger than
    /// position, centre and box together, and there are fewer than eight of them on an axis.
    pub fn bounds(&self, largest: f32) -> Option<(f32, f32)> {
        const MARGIN: f64 = 1e-5;
        const ROUNDINGS: f64 = 1.0 / 1_048_576.0;
        let size = self.size + f64::from(largest);
        let blur = size * ROUNDINGS * self.exactly_per_radius;
        if size > 1e30 || blur > 0.05 {
            return None;
        }
        let (low, high) = ((self.inner - blur).max(0.0), 1.0 + blur);
        Some((
            (low * low * (1.0 - MARGIN)) as f32,
            (high * high * (1.0 + MARGIN)) as f32,
        ))
    }

    /// Marks elements that may lie in the shells, a bit each. What stands beyond the elements is marked at random.
    pub fn mark(
        &self,
        positions: [&[f32; BLOCK]; 3],
        bounds: (f32, f32),
        room: &mut [f32; BLOCK],
        marks: &mut [u64; BLOCK / MARKS],
    ) {
        rough_squares(positions, self, room);
        rough_marks(room, bounds, marks);
    }
}

#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
fn rough_squares([x, y, z]: [&[f32; BLOCK]; 3], rough: &Rough, squares: &mut [f32; BLOCK]) {
    /// As [`WHOLE`], for singles.
    const WHOLE: f32 = 12_582_912.0;
    let (length, inverse, centre) = (rough.lengths, rough.inverses, rough.centre);
    let per_radius = rough.per_radius;
    let nearest = |distance: f32, axis: usize| {
        (distance - length[axis] * ((distance * inverse[axis] + WHOLE) - WHOLE)) * per_radius
    };
    for (((x, y), z), square) in x.iter().zip(y).zip(z).zip(squares) {
        let dx = nearest(x - centre[0], 0);
        let dy = nearest(y - centre[1], 1);
        let dz = nearest(z - centre[2], 2);
        *square = dx * dx + dy * dy + dz * dz;
    }
}

fn rough_marks(squares: &[f32; BLOCK], (low, high): (f32, f32), marks: &mut [u64; BLOCK / MARKS]) {
    /// Multiplied with eight bytes of 0 or 1 it moves them together as the bits of the topmost byte.
    const TOGETHER: u64 = 0x0102_0408_1020_4080;
    for (word, squares) in marks.iter_mut().zip(squares.as_chunks::<MARKS>().0) {
        let mut flags = [0; MARKS];
        for (square, flag) in squares.iter().zip(&mut flags) {
            *flag = u8::from((*square >= low) & (*square <= high));
        }
        *word = 0;
        for (place, flags) in flags.as_chunks::<8>().0.iter().enumerate() {
            let bits = u64::from_le_bytes(*flags).wrapping_mul(TOGETHER) >> 56;
            *word |= bits << (8 * place);
        }
    }
}

/// Writes down the elements that are marked, of `length`; returns how many.
pub(super) fn list(marks: &[u64; BLOCK / MARKS], length: usize, into: &mut [u32; BLOCK]) -> usize {
    let mut count = 0;
    for (word, &marks) in marks.iter().enumerate() {
        let beyond = length.saturating_sub(word * MARKS);
        let mut marks = if beyond < MARKS {
            marks & ((1 << beyond) - 1)
        } else {
            marks
        };
        while marks != 0 {
            // The remainder changes nothing; it lets the compiler leave out a check.
            into[count % BLOCK] = (word * MARKS) as u32 + marks.trailing_zeros();
            marks &= marks - 1;
            count += 1;
        }
    }
    count
}

/// Positions relative to a place, the nearest periodic images of them, and the squares of their distances.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn distances(
    centre: [f64; 3],
    periods: &Periods,
    runs: [&mut [f64]; 3],
    squares: &mut [f64],
) {
    let (length, inverse) = (periods.lengths, periods.inverses);
    let [dx, dy, dz] = runs;
    for (((dx, dy), dz), square) in dx.iter_mut().zip(dy).zip(dz).zip(squares) {
        *dx = nearest_image(*dx - centre[0], length[0], inverse[0]);
        *dy = nearest_image(*dy - centre[1], length[1], inverse[1]);
        *dz = nearest_image(*dz - centre[2], length[2], inverse[2]);
        *square = *dx * *dx + *dy * *dy + *dz * *dz;
    }
}

/// Do all squares lie from `low` to `high`?
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn are_within(squares: &[f64], low: f64, high: f64) -> bool {
    let outside = |square: &f64| u64::from(!((*square >= low) & (*square <= high)));
    squares.iter().map(outside).fold(0, |all, one| all | one) == 0
}

/// Distances from their squares, and what is carried outward: mass times radial velocity, relative to a station of
/// velocity `drift`, with the velocity of the expansion, `hubble` times the distance.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn carry(
    positions: [&[f64]; 3],
    velocities: [&[f64]; 3],
    masses: &[f64],
    drift: [f64; 3],
    hubble: f64,
    squares_to_radii: &mut [f64],
    fluxes: &mut [f64],
) {
    let [dx, dy, dz] = positions;
    let [vx, vy, vz] = velocities;
    let places = dx.iter().zip(dy).zip(dz);
    let motions = vx.iter().zip(vy).zip(vz);
    let results = squares_to_radii.iter_mut().zip(fluxes);
    for ((((dx, dy), dz), ((vx, vy), vz)), (mass, (radius, flux))) in
        places.zip(motions).zip(masses.iter().zip(results))
    {
        let along = dx * (vx - drift[0]) + dy * (vy - drift[1]) + dz * (vz - drift[2]);
        let r = radius.sqrt();
        let speed = along / r + hubble * r;
        let speed = if r > 0.0 { speed } else { 0.0 };
        *radius = r;
        *flux = mass * speed;
    }
}

/// Edges that are compared at a time.
const EDGES: usize = 8;
/// Up to so many edges all are compared; beyond it a search takes fewer steps.
const FEW: usize = 32;

/// For each radius the number of the edges, which rise, that are not beyond it.
pub(super) fn count_edges(radii: &[f64], edges: &[f64], into: &mut [u32]) {
    if edges.len() > FEW {
        for (radius, count) in radii.iter().zip(into) {
            *count = edges.partition_point(|edge| edge <= radius) as u32;
        }
        return;
    }
    into[..radii.len()].fill(0);
    for some in edges.chunks(EDGES) {
        let mut padded = [f64::INFINITY; EDGES];
        padded[..some.len()].copy_from_slice(some);
        add_edges(radii, &padded, into);
    }
}

#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
fn add_edges(radii: &[f64], edges: &[f64; EDGES], into: &mut [u32]) {
    for (radius, count) in radii.iter().zip(into) {
        for edge in edges {
            *count += u32::from(edge <= radius);
        }
    }
}

/// Turns the numbers of shells into those of bins: two a shell, the second for what moves inward. `firsts` are the
/// first bins of the stations. Returns whether all radii lie from `low` on and below `high`.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn find_bins(
    radii: &[f64],
    fluxes: &[f64],
    firsts: &[u32],
    (low, high): (f64, f64),
    shells_to_bins: &mut [u32],
) -> bool {
    let mut outside = 0u64;
    let contributions = radii.iter().zip(fluxes).zip(firsts);
    for (((&radius, &flux), first), bin) in contributions.zip(shells_to_bins) {
        *bin = first + 2 * *bin + u32::from(flux < 0.0);
        outside |= u64::from((radius < low) | (radius >= high));
    }
    outside == 0
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        /// Whoever lies in the shells is marked, wherever the station, whatever the unit of length.
        #[test]
        fn no_element_in_the_shells_is_left_out_by_rounding(
            places in proptest::collection::vec(proptest::array::uniform3(-1.5f64..2.5), BLOCK),
            centre in proptest::array::uniform3(-0.5f64..1.5),
            inner in 0.0f64..0.3,
            width in 1e-4f64..0.2,
            power in -25i32..25,
            periodic in proptest::array::uniform3(proptest::bool::ANY),
        ) {
            let unit = 10f64.powi(power);
            let (inner, outer) = (inner * unit, (inner + width) * unit);
            let centre = centre.map(|place| place * unit);
            let lengths = [1.0, 1.1, 1.3].map(|length| length * unit);
            let periods = Periods::new(std::array::from_fn(|axis| periodic[axis].then_some(lengths[axis])));
            // Some exactly on an edge, as far as doubles go, in the direction of an axis.
            let place = |index: usize, axis: usize| match (index % 8, axis == index / 8 % 3) {
                (0, true) => centre[axis] + outer * (1.0 - 1e-15),
                (1, true) => centre[axis] - inner,
                (0 | 1, false) => centre[axis],
                _ => places[index][axis] * unit,
            };
            let runs: [[f64; BLOCK]; 3] = std::array::from_fn(|axis| std::array::from_fn(|index| place(index, axis)));
            let rough = runs.map(|run| run.map(|number| number as f32));
            let largest = rough.iter().flatten().fold(0f32, |most, number| most.max(number.abs()));
            let geometry = Rough::new(&periods, centre, (inner, outer));
            if let Some(bounds) = geometry.bounds(largest) {
                let mut marks = [0; BLOCK / MARKS];
                geometry.mark([&rough[0], &rough[1], &rough[2]], bounds, &mut [0.0; BLOCK], &mut marks);
                let mut listed = [0; BLOCK];
                let count = list(&marks, BLOCK, &mut listed);
                let [x, y, z] = &runs;
                for (index, ((x, y), z)) in x.iter().zip(y).zip(z).enumerate() {
                    let element = [x, y, z];
                    let d: [f64; 3] = std::array::from_fn(|axis| {
                        nearest_image(element[axis] - centre[axis], periods.lengths[axis], periods.inverses[axis])
                    });
                    let r = (d[0] * d[0] + d[1] * d[1] + d[2] * d[2]).sqrt();
                    let is_listed = listed[..count].contains(&(index as u32));
                    prop_assert!(is_listed || r < inner || r >= outer, "{index}: {r} {inner} {outer}");
                }
            } else {
                prop_assert!(width < 1e-3 || inner + outer < 0.5 * unit);
            }
        }
    }
}
