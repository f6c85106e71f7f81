//! The quick way to sum a few hundred doubles exactly: fixed-point numbers of two words.
//!
//! Adding a large constant 1.5·2^(q+52) to x rounds x to a multiple of 2^q and leaves that multiple in the
//! low bits of the sum; the rounding error of the addition is itself a double, which a second constant takes
//! up in the same way 52 binary places lower. Both multiples are added as 64-bit integers, so no order of
//! summation and no vector width can change the result. A value too large for the window changes the exponent
//! of the first addition; one that reaches below both words shows itself by a remainder, and what remains is
//! then added the slow way. Plain IEEE additions throughout: nothing may be fused or reordered, and Rust does
//! neither.

use multiversion::multiversion;

/// Most values that may be added in one window before its sums have to be taken up: each word of a value is less
/// than 2^52, so the sums stay within 63 bits.
pub(super) const ROOM: usize = 2048;

/// Where the two words stand: multiples of 2^`high` and of 2^`low`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Window {
    pub high: i32,
    pub low: i32,
}

/// What became of the values of one call.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Fit {
    /// Some value is too large for the window, or not finite: nothing that came out can be used.
    pub misfit: bool,
    /// Some value left a remainder below both words.
    pub remainder: bool,
}

impl Fit {
    /// From the bits in which the high constant was changed, and those of all remainders, joined.
    fn of(changes: u64, remainders: u64) -> Fit {
        Fit {
            misfit: changes >> 52 != 0,
            // A zero remainder may carry a sign.
            remainder: remainders << 1 != 0,
        }
    }
}

/// The sums of both words.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Sums {
    pub high: i64,
    pub low: i64,
    pub fit: Fit,
}

impl Window {
    /// A window whose low word counts multiples of 2^`low`, for values below 2^(`low` + 103).
    pub fn at(low: i32) -> Window {
        let low = low.clamp(-1074, 970 - 52 - 52);
        Window {
            high: low + 52,
            low,
        }
    }

    /// Values of this magnitude and more do not fit.
    pub fn limit(self) -> f64 {
        f64::from_bits(((self.high + 51 + 1023) as u64) << 52)
    }

    /// A window that holds every value no larger than the one with these bits, and some larger ones; none for
    /// values near the largest double, or not finite.
    pub fn holding(largest_bits: u64) -> Option<Window> {
        const SPARE: i32 = 2;
        let exponent = ((largest_bits >> 52) & 0x7ff) as i32 - 1023;
        if exponent > 1020 - SPARE {
            return None;
        }
        // |x| < 2^(exponent + 1) must stay below 2^(high + 51).
        let high = (exponent + SPARE - 50).max(-1074 + 52);
        Some(Window {
            high,
            low: high - 52,
        })
    }
}

/// 1.5·2^(place + 52): added to a number it rounds to multiples of 2^place.
fn constant(place: i32) -> f64 {
    f64::from_bits((((place + 52 + 1023) as u64) << 52) | (1 << 51))
}

/// One value in the words of a window: what the constants become by adding it, and what stays below both.
struct Parts {
    coarse: u64,
    fine: u64,
    remainder: f64,
}

/// The operations on which everything here rests.
#[inline(always)]
fn part(value: f64, high: f64, low: f64) -> Parts {
    let coarse = value + high;
    let rest = value - (coarse - high);
    let fine = rest + low;
    Parts {
        coarse: coarse.to_bits(),
        fine: fine.to_bits(),
        remainder: rest - (fine - low),
    }
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

/// Sums at most [`ROOM`] values in a window.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn sum_in(values: &[f64], window: Window) -> Sums {
    let (high, low) = (constant(window.high), constant(window.low));
    let (mut high_bits, mut low_bits, mut remainders, mut changes) = (0u64, 0u64, 0u64, 0u64);
    for &value in values {
        let parts = part(value, high, low);
        high_bits = high_bits.wrapping_add(parts.coarse);
        low_bits = low_bits.wrapping_add(parts.fine);
        changes |= parts.coarse ^ high.to_bits();
        remainders |= parts.remainder.to_bits();
    }
    let count = values.len() as u64;
    Sums {
        high: high_bits.wrapping_sub(count.wrapping_mul(high.to_bits())) as i64,
        low: low_bits.wrapping_sub(count.wrapping_mul(low.to_bits())) as i64,
        fit: Fit::of(changes, remainders),
    }
}

/// Sums at most [`ROOM`] values in the high word of a window alone, which is enough for values of few digits: what it
/// does not hold is a remainder.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn sum_in_one(values: &[f64], window: Window) -> Sums {
    let high = constant(window.high);
    let (mut high_bits, mut remainders, mut changes) = (0u64, 0u64, 0u64);
    for &value in values {
        let coarse = value + high;
        let rest = value - (coarse - high);
        high_bits = high_bits.wrapping_add(coarse.to_bits());
        changes |= coarse.to_bits() ^ high.to_bits();
        remainders |= rest.to_bits();
    }
    let count = values.len() as u64;
    Sums {
        high: high_bits.wrapping_sub(count.wrapping_mul(high.to_bits())) as i64,
        low: 0,
        fit: Fit::of(changes, remainders),
    }
}

/// Splits values into the words of a window, one multiple each.
#[multiversion(targets(
    "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
    "x86_64+avx+avx2",
    "aarch64+neon"
))]
pub(super) fn split_in(
    values: &[f64],
    window: Window,
    high_words: &mut [i64],
    low_words: &mut [i64],
) -> Fit {
    let (high, low) = (constant(window.high), constant(window.low));
    let (mut remainders, mut changes) = (0u64, 0u64);
    for ((&value, high_word), low_word) in values.iter().zip(high_words).zip(low_words) {
        let parts = part(value, high, low);
        *high_word = parts.coarse.wrapping_sub(high.to_bits()) as i64;
        *low_word = parts.fine.wrapping_sub(low.to_bits()) as i64;
        changes |= parts.coarse ^ high.to_bits();
        remainders |= parts.remainder.to_bits();
    }
    Fit::of(changes, remainders)
}

/// What a value leaves below both words.
pub(super) fn remainder(value: f64, window: Window) -> f64 {
    part(value, constant(window.high), constant(window.low)).remainder
}
