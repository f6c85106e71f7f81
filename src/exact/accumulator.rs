//! The way in: takes doubles on one thread, a few hundred at a time where it can.

use super::total::Total;
use super::window::{self, LARGEST};

/// Digits of 32 bits held in 64-bit integers; the upper halves take up carries until they are spread.
const DIGITS: usize = 2 * crate::team::cells::WIDE_LIMBS;
/// Every addition puts less than 2^33 on a digit, so this many fit before a digit could overflow.
const ROOM: u32 = 1 << 29;
/// Values that come one by one are held back until so many are there.
const HELD: usize = 64;
/// The exponent of the lowest bit of a total.
const LOWEST: i32 = -1074;

/// Adds doubles without any rounding.
#[derive(Clone)]
pub struct Accumulator {
    digits: [i64; DIGITS],
    held: [f64; HELD],
    holding: usize,
    since_spread: u32,
    left_out: u64,
}

impl Default for Accumulator {
    fn default() -> Self {
        Accumulator {
            digits: [0; DIGITS],
            held: [0.0; HELD],
            holding: 0,
            since_spread: 0,
            left_out: 0,
        }
    }
}

impl Accumulator {
    /// Adds one value exactly; a NaN or an infinity is left out and counted.
    #[inline]
    pub fn add(&mut self, value: f64) {
        if self.holding == HELD {
            self.settle();
        }
        self.held[self.holding] = value;
        self.holding += 1;
    }

    /// Adds every value of a slice exactly.
    pub fn add_slice(&mut self, values: &[f64]) {
        if values.len() < HELD / 2 {
            values.iter().for_each(|&value| self.add(value));
        } else {
            values
                .chunks(LARGEST)
                .for_each(|chunk| self.add_chunk(chunk));
        }
    }

    /// Adds the values that are held back.
    fn settle(&mut self) {
        let held = self.held;
        let holding = std::mem::take(&mut self.holding);
        self.add_chunk(&held[..holding]);
    }

    fn add_chunk(&mut self, values: &[f64]) {
        let Some(window) = window::window_for(window::largest_magnitude(values)) else {
            return values.iter().for_each(|&value| self.add_slowly(value));
        };
        let sums = window::sum_in(values, window);
        self.add_integer(sums.high, window.high);
        self.add_integer(sums.low, window.low);
        if sums.remainder {
            for &value in values {
                self.add_slowly(window::remainder(value, window));
            }
        }
    }

    /// Adds one value whatever it is.
    fn add_slowly(&mut self, value: f64) {
        let bits = value.to_bits();
        let exponent = ((bits >> 52) & 0x7ff) as i32;
        if exponent == 0x7ff {
            self.left_out += 1;
            return;
        }
        let fraction = (bits & ((1 << 52) - 1)) as i64;
        let mantissa = if exponent == 0 {
            fraction
        } else {
            fraction | (1 << 52)
        };
        let signed = if value.is_sign_negative() {
            -mantissa
        } else {
            mantissa
        };
        self.add_integer(signed, LOWEST + (exponent - 1).max(0));
    }

    /// Adds `integer` · 2^`place`, for places from the lowest bit of a total up.
    fn add_integer(&mut self, integer: i64, place: i32) {
        let shift = (place - LOWEST) as usize;
        // 63 bits moved by up to 31 reach into at most three digits.
        let spread = u128::from(integer.unsigned_abs()) << (shift % 32);
        let sign = integer >> 63;
        let signed = |part: u128| ((part & 0xffff_ffff) as i64 ^ sign) - sign;
        let digits = &mut self.digits[shift / 32..shift / 32 + 3];
        digits[0] += signed(spread);
        digits[1] += signed(spread >> 32);
        digits[2] += signed(spread >> 64);
        self.since_spread += 1;
        if self.since_spread >= ROOM {
            self.spread();
        }
    }

    /// Adds everything another accumulator holds.
    pub fn merge(&mut self, other: &Accumulator) {
        self.spread();
        let mut other = other.clone();
        other.settle();
        other.spread();
        self.digits
            .iter_mut()
            .zip(&other.digits)
            .for_each(|(mine, theirs)| *mine += theirs);
        self.since_spread += other.since_spread;
        self.left_out += other.left_out;
    }

    /// How many values were left out because they were not finite.
    pub fn left_out(&self) -> u64 {
        let held = self.held[..self.holding]
            .iter()
            .filter(|value| !value.is_finite())
            .count();
        self.left_out + held as u64
    }

    /// Moves what exceeds 32 bits of each digit up to the next.
    fn spread(&mut self) {
        let mut carry = 0i64;
        for digit in &mut self.digits {
            let value = *digit + carry;
            carry = value >> 32;
            *digit = value & 0xffff_ffff;
        }
        // The topmost digit keeps the sign.
        self.digits[DIGITS - 1] += carry << 32;
        self.since_spread = 1;
    }

    /// The exact sum so far.
    pub fn total(&self) -> Total {
        if self.holding > 0 {
            let mut settled = self.clone();
            settled.settle();
            return settled.total();
        }
        let mut total = Total::default();
        let mut carry = 0i64;
        for (limb, pair) in total
            .limbs_mut()
            .iter_mut()
            .zip(self.digits.chunks_exact(2))
        {
            let low = pair[0] + carry;
            let high = pair[1] + (low >> 32);
            carry = high >> 32;
            *limb = (low as u64 & 0xffff_ffff) | ((high as u64 & 0xffff_ffff) << 32);
        }
        total
    }

    /// Forgets everything.
    pub fn clear(&mut self) {
        self.digits = [0; DIGITS];
        self.holding = 0;
        self.since_spread = 0;
        self.left_out = 0;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn exact(values: &[f64]) -> f64 {
        let mut accumulator = Accumulator::default();
        accumulator.add_slice(values);
        accumulator.total().to_f64()
    }

    #[test]
    fn known_sums_come_out_to_the_bit() {
        assert_eq!(exact(&[]).to_bits(), 0.0f64.to_bits());
        assert_eq!(exact(&[-0.0, -0.0]).to_bits(), 0.0f64.to_bits());
        assert_eq!(exact(&[1e308, 1e308, -1e308]), 1e308);
        assert_eq!(exact(&[1e308, 1e308]), f64::INFINITY);
        assert_eq!(exact(&[1e16, 1.0, -1e16]), 1.0);
        assert_eq!(exact(&[1e300, 1.0, 1e-300, -1e300, -1.0]), 1e-300);
        assert_eq!(
            exact(&[f64::MIN_POSITIVE, -f64::from_bits(1)]),
            f64::from_bits((1 << 52) - 1)
        );
        // Ten times 0.1 is 1 exactly to the nearest double (worked example in Python's math.fsum documentation).
        assert_eq!(exact(&[0.1; 10]), 1.0);
        // Half-way cases: to even, unless something far below tips the balance.
        assert_eq!(exact(&[9007199254740992.0, 1.0]), 9007199254740992.0);
        assert_eq!(
            exact(&[9007199254740992.0, 1.0, 1e-300]),
            9007199254740994.0
        );
        assert_eq!(
            exact(&[-9007199254740992.0, -1.0, -1e-300]),
            -9007199254740994.0
        );
    }

    #[test]
    fn what_is_not_finite_is_left_out_and_counted() {
        let mut accumulator = Accumulator::default();
        accumulator.add_slice(&[1.0, f64::NAN, f64::INFINITY, 2.0, f64::NEG_INFINITY]);
        assert_eq!(accumulator.total().to_f64(), 3.0);
        assert_eq!(accumulator.left_out(), 3);
    }

    #[test]
    fn spreading_carries_changes_nothing() {
        let values: Vec<f64> = (0..1000).map(|i| (f64::from(i) - 480.0) * 1.7e13).collect();
        let mut plain = Accumulator::default();
        let mut spread = Accumulator::default();
        for &value in &values {
            plain.add(value);
            spread.add(value);
            spread.spread();
        }
        assert_eq!(plain.total(), spread.total());
    }

    proptest! {
        /// Integers scaled by a power of two are summed exactly by 128-bit arithmetic as well.
        #[test]
        fn sums_equal_integer_arithmetic(
            values in proptest::collection::vec((-(1i64 << 53)..(1i64 << 53), 0u32..60), 0..200),
            scale in -900i32..850,
        ) {
            let unit = 2f64.powi(scale);
            let floats: Vec<f64> = values.iter().map(|&(m, e)| m as f64 * f64::from(e).exp2() * unit).collect();
            let sum: i128 = values.iter().map(|&(m, e)| i128::from(m) << e).sum();
            // `as` rounds to nearest even; scaling by a power of two is exact in this range.
            prop_assert_eq!(exact(&floats), sum as f64 * unit);
        }

        /// Values of very different size in one slice: those that leave both words are caught.
        #[test]
        fn the_quick_way_equals_the_slow_one(
            values in proptest::collection::vec(proptest::num::f64::ANY, 0..2500),
            narrow in proptest::collection::vec(-1e3f64..1e3, 0..1500),
        ) {
            for values in [&values, &narrow, &[&narrow[..], &values[..]].concat()] {
                let mut quick = Accumulator::default();
                quick.add_slice(values);
                let mut slow = Accumulator::default();
                values.iter().for_each(|&value| slow.add_slowly(value));
                prop_assert_eq!(quick.total(), slow.total());
                prop_assert_eq!(quick.left_out(), slow.left_out());
                let mut single = Accumulator::default();
                values.iter().for_each(|&value| single.add(value));
                prop_assert_eq!(single.total(), slow.total());
            }
        }

        #[test]
        fn order_and_grouping_do_not_matter(
            mut values in proptest::collection::vec(proptest::num::f64::NORMAL | proptest::num::f64::SUBNORMAL, 0..100),
            cut in 0usize..100,
        ) {
            let total = |part: &[f64]| {
                let mut accumulator = Accumulator::default();
                accumulator.add_slice(part);
                accumulator.total()
            };
            let forward = total(&values);
            values.reverse();
            let (left, right) = values.split_at(cut.min(values.len()));
            let mut grouped = total(left);
            grouped += &total(right);
            prop_assert_eq!(&forward, &grouped);
            grouped -= &forward;
            prop_assert_eq!(grouped.to_f64().to_bits(), 0);
        }
    }
}
