//! The way in: takes doubles on one thread, a few hundred at a time where it can.

use super::digits::Digits;
use super::total::Total;
use super::window::{self, ROOM, Sums, Window};

/// Values that come one by one are held back until so many are there.
const HELD: usize = 64;

/// Adds doubles without any rounding.
#[derive(Clone)]
pub struct Accumulator {
    digits: Digits,
    held: [f64; HELD],
    holding: usize,
    /// The window that the last values fitted into, kept because the next ones mostly fit too.
    window: Option<Window>,
    /// Sums in that window that are not in the digits yet, and of how many values.
    high: i64,
    low: i64,
    pending: usize,
    left_out: u64,
}

impl Default for Accumulator {
    fn default() -> Self {
        Accumulator {
            digits: Digits::default(),
            held: [0.0; HELD],
            holding: 0,
            window: None,
            high: 0,
            low: 0,
            pending: 0,
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
                .chunks(ROOM / 2)
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
        if let Some(window) = self.window {
            let sums = window::sum_in(values, window);
            if !sums.fit.misfit && !sums.fit.remainder {
                return self.take(sums, values.len());
            }
        }
        self.add_otherwise(values);
    }

    /// Adds what does not fit the present window: in another one, and what fits none value by value.
    #[cold]
    fn add_otherwise(&mut self, values: &[f64]) {
        let Some(window) = Window::holding(window::largest_magnitude(values)) else {
            return values.iter().for_each(|&value| self.add_slowly(value));
        };
        if self.window != Some(window) {
            self.unload();
            self.window = Some(window);
        }
        let sums = window::sum_in(values, window);
        self.take(sums, values.len());
        if sums.fit.remainder {
            for &value in values {
                self.add_slowly(window::remainder(value, window));
            }
        }
    }

    fn take(&mut self, sums: Sums, count: usize) {
        if self.pending + count > ROOM {
            self.unload();
        }
        self.high += sums.high;
        self.low += sums.low;
        self.pending += count;
    }

    /// Moves what is pending to the digits.
    fn unload(&mut self) {
        if let Some(window) = self.window.filter(|_| self.pending > 0) {
            self.digits.add_integer(self.high, window.high);
            self.digits.add_integer(self.low, window.low);
        }
        (self.high, self.low, self.pending) = (0, 0, 0);
    }

    fn add_slowly(&mut self, value: f64) {
        self.left_out += u64::from(!self.digits.add(value));
    }

    /// Adds everything another accumulator holds.
    pub fn merge(&mut self, other: &Accumulator) {
        let mut other = other.clone();
        other.settle();
        other.unload();
        self.digits.merge(&other.digits);
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

    /// Has nothing been added since it was last cleared?
    pub fn is_untouched(&self) -> bool {
        self.digits.is_untouched() && self.holding == 0 && self.pending == 0
    }

    /// The exact sum so far.
    pub fn total(&self) -> Total {
        if self.holding > 0 || self.pending > 0 {
            let mut settled = self.clone();
            settled.settle();
            settled.unload();
            return settled.digits.total();
        }
        self.digits.total()
    }

    /// Forgets everything but the size of the last values.
    pub fn clear(&mut self) {
        self.digits.clear();
        self.holding = 0;
        (self.high, self.low, self.pending) = (0, 0, 0);
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
            spread.settle();
            spread.unload();
            spread.digits.spread();
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
