//! The quick way to sum a few hundred doubles exactly: fixed-point numbers of two words.
//!
//! Adding a large constant 1.5·2^(q+52) to x rounds x to a multiple of 2^q and leaves that multiple in the
//! low bits of the sum; the rounding error of the addition is itself a double, which a second constant takes
//! up in the same way 52 binary places lower. Both multiples are added as 64-bit integers, so no order of
//! summation and no vector width can change the result. A value that reaches below both words shows itself by
//! a remainder, and is then added the slow way. Plain IEEE additions throughout: nothing may be fused or
//! reordered, and Rust does neither.

use multiversion::multiversion;

/// Most values in one call: sums of so many 52-bit multiples fit into 63 bits.
pub(super) const LARGEST: usize = 1024;

/// Where the two words stand: multiples of 2^`high` and of 2^`low`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Window {
    pub high: i32,
    pub low: i32,
}

/// The sums of both words, and whether any value left a remainder below them.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Sums {
    pub high: i64,
    pub low: i64,
    pub remainder: bool,
}

/// A window that holds every value no larger than the one with these bits; none for values near the largest
/// double, or not finite.
pub(super) fn window_for(largest_bits: u64) -> Option<Window> {
    let exponent = ((largest_bits >> 52) & 0x7ff) as i32 - 1023;
    if exponent > 1020 {
        return None;
    }
    // |x| < 2^(exponent + 1) must stay below 2^(high + 51).
    let high = (exponent - 50).max(-1074 + 52);
    Some(Window {
        high,
        low: high - 52,
    })
}

/// 1.5·2^(place + 52): added to a number it rounds to multiples of 2^place.
fn constant(place: i32) -> f64 {
    f64::from_bits((((place + 52 + 1023) as u64) << 52) | (1 << 51))
}

/// Bits of the largest magnitude.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn largest_magnitude(values: &[f64]) -> u64 {
    values.iter().fold(0, |largest, value| {
        largest.max(value.to_bits() & (u64::MAX >> 1))
    })
}

/// Sums at most [`LARGEST`] values in a window that holds them all.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn sum_in(values: &[f64], window: Window) -> Sums {
    let (high, low) = (constant(window.high), constant(window.low));
    let (mut high_bits, mut low_bits, mut remainders) = (0u64, 0u64, 0u64);
    for &value in values {
        let coarse = value + high;
        let rest = value - (coarse - high);
        let fine = rest + low;
        let remainder = rest - (fine - low);
        high_bits = high_bits.wrapping_add(coarse.to_bits());
        low_bits = low_bits.wrapping_add(fine.to_bits());
        // A zero remainder may carry a sign.
        remainders |= remainder.to_bits() << 1;
    }
    let count = values.len() as u64;
    Sums {
        high: high_bits.wrapping_sub(count.wrapping_mul(high.to_bits())) as i64,
        low: low_bits.wrapping_sub(count.wrapping_mul(low.to_bits())) as i64,
        remainder: remainders != 0,
    }
}

/// What a value leaves below both words.
pub(super) fn remainder(value: f64, window: Window) -> f64 {
    let (high, low) = (constant(window.high), constant(window.low));
    let rest = value - ((value + high) - high);
    rest - ((rest + low) - low)
}
