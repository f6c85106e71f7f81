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

/// Positions relative to one station, and the squares of their distances.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn distances(
    from: [&[f64]; 3],
    centre: [f64; 3],
    periods: &Periods,
    to: [&mut [f64]; 3],
    squares: &mut [f64],
) {
    let (length, inverse) = (periods.lengths, periods.inverses);
    let [x, y, z] = from;
    let [dx, dy, dz] = to;
    let elements = x.iter().zip(y).zip(z);
    let results = dx.iter_mut().zip(dy).zip(dz).zip(squares);
    for (((x, y), z), (((dx, dy), dz), square)) in elements.zip(results) {
        *dx = nearest_image(x - centre[0], length[0], inverse[0]);
        *dy = nearest_image(y - centre[1], length[1], inverse[1]);
        *dz = nearest_image(z - centre[2], length[2], inverse[2]);
        *square = *dx * *dx + *dy * *dy + *dz * *dz;
    }
}

/// As [`distances`], for differences that have been taken already.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn wrap(periods: &Periods, runs: [&mut [f64]; 3], squares: &mut [f64]) {
    let (length, inverse) = (periods.lengths, periods.inverses);
    let [dx, dy, dz] = runs;
    for (((dx, dy), dz), square) in dx.iter_mut().zip(dy).zip(dz).zip(squares) {
        *dx = nearest_image(*dx, length[0], inverse[0]);
        *dy = nearest_image(*dy, length[1], inverse[1]);
        *dz = nearest_image(*dz, length[2], inverse[2]);
        *square = *dx * *dx + *dy * *dy + *dz * *dz;
    }
}

/// Elements that one word of marks tells of.
pub(super) const MARKS: usize = 64;

/// Marks which squares lie from `low` to `high`, a bit each.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn mark(squares: &[f64; BLOCK], low: f64, high: f64, marks: &mut [u64; BLOCK / MARKS]) {
    const BITS: usize = 8;
    for (word, squares) in marks.iter_mut().zip(squares.as_chunks::<MARKS>().0) {
        *word = 0;
        for (place, squares) in squares.as_chunks::<BITS>().0.iter().enumerate() {
            let mut bits = 0u8;
            for (bit, &square) in squares.iter().enumerate() {
                bits |= u8::from((square >= low) & (square <= high)) << bit;
            }
            *word |= u64::from(bits) << (BITS * place);
        }
    }
}

/// Distances from their squares, and what is carried outward: mass times radial velocity, relative to a shell that
/// moves with velocity −`hubble` times its radius against the coordinates.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn carry(
    positions: [&[f64]; 3],
    velocities: [&[f64]; 3],
    masses: &[f64],
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
        let along = dx * vx + dy * vy + dz * vz;
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
    let mut outside = 0;
    let contributions = radii.iter().zip(fluxes).zip(firsts);
    for (((&radius, &flux), first), bin) in contributions.zip(shells_to_bins) {
        *bin = first + 2 * *bin + u32::from(flux < 0.0);
        outside |= u64::from((radius < low) | (radius >= high));
    }
    outside == 0
}
