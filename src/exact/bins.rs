//! Many sums of the same quantities, one set a bin: values come with the number of their bin.
//!
//! All bins share a window for each quantity, so a value is split into its two words without a look at its bin,
//! and adding it there is two integer additions.

use super::digits::Digits;
use super::total::Total;
use super::window::{self, ROOM, Window};
use crate::team::memory::fetch;

/// Values that are split at a time.
const CHUNK: usize = 128;

/// The words of a chunk of values of one quantity.
#[derive(Clone)]
struct Words {
    high: [i64; CHUNK],
    low: [i64; CHUNK],
}

impl Words {
    fn new() -> Words {
        Words {
            high: [0; CHUNK],
            low: [0; CHUNK],
        }
    }
}

/// Exact sums of several quantities in each of several bins, and the number of contributions in each.
pub struct Bins {
    quantities: usize,
    /// For each bin the number of contributions that are not in the digits yet, and each quantity's two words.
    pending: Vec<i64>,
    digits: Vec<Digits>,
    counts: Vec<u64>,
    windows: Vec<Option<Window>>,
    /// One for each quantity.
    words: Vec<Words>,
    left_out: u64,
    touched: bool,
}

impl Bins {
    /// Empty bins.
    pub fn new(bins: usize, quantities: usize) -> Bins {
        Bins {
            quantities,
            pending: vec![0; bins * (1 + 2 * quantities)],
            digits: vec![Digits::default(); bins * quantities],
            counts: vec![0; bins],
            windows: vec![None; quantities],
            words: vec![Words::new(); quantities],
            left_out: 0,
            touched: false,
        }
    }

    /// Adds one value of every quantity to the bin of each contribution, and counts it there. Values that are not
    /// finite are left out and counted apart.
    ///
    /// # Panics
    /// When a bin does not exist, or the lengths differ: a mistake of ours.
    pub fn add(&mut self, bins: &[u32], values: &[&[f64]]) {
        assert_eq!(values.len(), self.quantities);
        self.touched |= !bins.is_empty();
        for start in (0..bins.len()).step_by(CHUNK) {
            let end = (start + CHUNK).min(bins.len());
            for (quantity, values) in values.iter().enumerate() {
                self.split(quantity, &bins[start..end], &values[start..end]);
            }
            // The usual numbers of quantities have loops of their own.
            match self.quantities {
                1 => self.scatter::<3>(&bins[start..end]),
                2 => self.scatter::<5>(&bins[start..end]),
                4 => self.scatter::<9>(&bins[start..end]),
                _ => self.scatter_any(&bins[start..end]),
            }
        }
    }

    /// Splits values into their words. What does not fit is added to the digits, and 0 stands in its place.
    fn split(&mut self, quantity: usize, bins: &[u32], values: &[f64]) {
        if let Some(window) = self.windows[quantity] {
            let Words { high, low } = &mut self.words[quantity];
            let (high, low) = (&mut high[..values.len()], &mut low[..values.len()]);
            let fit = window::split_in(values, window, high, low);
            if !fit.misfit && !fit.remainder {
                return;
            }
        }
        self.split_otherwise(quantity, bins, values);
    }

    /// Splits what does not fit the present window: in another one, and what fits none value by value.
    #[cold]
    fn split_otherwise(&mut self, quantity: usize, bins: &[u32], values: &[f64]) {
        let place = |bin: u32| bin as usize * self.quantities + quantity;
        let Some(window) = Window::holding(window::largest_magnitude(values)) else {
            for (&bin, &value) in bins.iter().zip(values) {
                self.left_out += u64::from(!self.digits[place(bin)].add(value));
            }
            self.words[quantity] = Words::new();
            return;
        };
        if self.windows[quantity] != Some(window) {
            (0..self.counts.len()).for_each(|bin| self.take_up(bin));
            self.windows[quantity] = Some(window);
        }
        let Words { high, low } = &mut self.words[quantity];
        let (high, low) = (&mut high[..values.len()], &mut low[..values.len()]);
        if window::split_in(values, window, high, low).remainder {
            for (&bin, &value) in bins.iter().zip(values) {
                let remainder = window::remainder(value, window);
                if remainder != 0.0 {
                    self.digits[bin as usize * self.quantities + quantity].add(remainder);
                }
            }
        }
    }

    /// Adds the words to the bins; `WIDTH` numbers are pending in each.
    fn scatter<const WIDTH: usize>(&mut self, bins: &[u32]) {
        let mut start = 0;
        while let Some(full) = self.scatter_some::<WIDTH>(bins, start) {
            self.take_up(bins[full] as usize);
            start = full;
        }
    }

    /// As [`Bins::scatter`] from one contribution on, up to one for which there is no room left in its bin.
    fn scatter_some<const WIDTH: usize>(&mut self, bins: &[u32], start: usize) -> Option<usize> {
        let cells = self.pending.as_chunks_mut::<WIDTH>().0;
        let (first, rest) = self.words.split_first()?;
        for (index, &bin) in bins.iter().enumerate().skip(start) {
            let at = index % CHUNK;
            let cell = &mut cells[bin as usize];
            if cell[0] >= ROOM as i64 {
                return Some(index);
            }
            cell[0] += 1;
            cell[1] += first.high[at];
            cell[2] += first.low[at];
            for (words, cell) in rest.iter().zip(cell[3..].as_chunks_mut::<2>().0) {
                cell[0] += words.high[at];
                cell[1] += words.low[at];
            }
        }
        None
    }

    /// As [`Bins::scatter`] for any number of quantities.
    fn scatter_any(&mut self, bins: &[u32]) {
        let width = 1 + 2 * self.quantities;
        for (index, &bin) in bins.iter().enumerate() {
            let first = bin as usize * width;
            if self.pending[first] >= ROOM as i64 {
                self.take_up(bin as usize);
            }
            self.pending[first] += 1;
            let cells = self.pending[first + 1..first + width]
                .as_chunks_mut::<2>()
                .0;
            for (words, cell) in self.words.iter().zip(cells) {
                cell[0] += words.high[index];
                cell[1] += words.low[index];
            }
        }
    }

    /// Moves what is pending of a bin to its digits.
    fn take_up(&mut self, bin: usize) {
        let width = 1 + 2 * self.quantities;
        let cell = &mut self.pending[bin * width..(bin + 1) * width];
        self.counts[bin] += cell[0] as u64;
        let words = cell[1..].as_chunks::<2>().0;
        let digits = &mut self.digits[bin * self.quantities..(bin + 1) * self.quantities];
        for ((&[high, low], window), digits) in words.iter().zip(&self.windows).zip(digits) {
            if let Some(window) = window {
                // A place that was never added to is left untouched, which saves clearing it.
                if high != 0 {
                    digits.add_integer(high, window.high);
                }
                if low != 0 {
                    digits.add_integer(low, window.low);
                }
            }
        }
        cell.fill(0);
    }

    /// Takes up all that is pending, so that [`Bins::total`] and [`Bins::number`] tell of everything.
    pub fn settle(&mut self) {
        if !self.touched {
            return;
        }
        (0..self.counts.len()).for_each(|bin| self.take_up(bin));
    }

    /// The exact sum of a quantity in a bin, as far as it has been settled.
    pub fn total(&self, bin: usize, quantity: usize) -> Total {
        self.digits[bin * self.quantities + quantity].total()
    }

    /// Contributions to a bin, as far as they have been settled.
    pub fn number(&self, bin: usize) -> u64 {
        self.counts[bin]
    }

    /// Has nothing been added since it was last cleared?
    pub fn is_untouched(&self) -> bool {
        !self.touched
    }

    /// How many values were left out because they were not finite.
    pub fn left_out(&self) -> u64 {
        self.left_out
    }

    /// Forgets everything but the size of the last values.
    pub fn clear(&mut self) {
        if self.touched {
            self.pending.fill(0);
            self.counts.fill(0);
            self.digits.iter_mut().for_each(Digits::clear);
            self.left_out = 0;
            self.touched = false;
        }
    }
}

/// Sums in so many bins that exact ones would take too much room: every value is rounded to a multiple of a fixed
/// quantum, and the multiples are added as integers, so that neither order nor grouping matters.
///
/// A quantity takes 16 bytes a bin, the count of contributions 8.
pub struct Rounded {
    /// One for each quantity.
    windows: Vec<Window>,
    /// For each bin the two words of each quantity's integer, low one first, then the count.
    cells: Vec<u64>,
    width: usize,
    words: Vec<Words>,
    left_out: u64,
    touched: bool,
}

impl Rounded {
    /// Empty bins; each quantity has a quantum of 2^q, and its values may be up to 2^(q + 103). A sum holds 2^24 of the
    /// largest before it would wrap.
    pub fn new(bins: usize, quanta: &[i32]) -> Rounded {
        // A bin within one cache line where that costs no more than it gains.
        let width = match 2 * quanta.len() + 1 {
            wanted @ 5..=8 => wanted.next_multiple_of(8),
            wanted => wanted,
        };
        Rounded {
            windows: quanta.iter().map(|&quantum| Window::at(quantum)).collect(),
            cells: vec![0; bins * width],
            width,
            words: vec![Words::new(); quanta.len()],
            left_out: 0,
            touched: false,
        }
    }

    /// Adds one value of every quantity to the bin of each contribution, and counts it there. Values that are not
    /// finite, or too large, are left out and counted apart.
    ///
    /// # Panics
    /// When a bin does not exist, or the lengths differ: a mistake of ours.
    pub fn add(&mut self, bins: &[u32], values: &[&[f64]]) {
        assert_eq!(values.len(), self.windows.len());
        self.touched = true;
        for start in (0..bins.len()).step_by(CHUNK) {
            let end = (start + CHUNK).min(bins.len());
            // Bins lie anywhere: ask for all of them before the first is added to.
            for &bin in &bins[start..end] {
                fetch(&self.cells[bin as usize * self.width]);
            }
            for (quantity, values) in values.iter().enumerate() {
                self.split(quantity, &values[start..end]);
            }
            for (index, &bin) in bins[start..end].iter().enumerate() {
                let first = bin as usize * self.width;
                let cells = &mut self.cells[first..first + self.width];
                let (pairs, rest) = cells.as_chunks_mut::<2>();
                let mut pairs = pairs.iter_mut();
                for (words, cell) in self.words.iter().zip(&mut pairs) {
                    let held = i128::from(cell[0]) | i128::from(cell[1] as i64) << 64;
                    let (high, low) = (words.high[index], words.low[index]);
                    let sum = held.wrapping_add((i128::from(high) << 52) + i128::from(low));
                    (cell[0], cell[1]) = (sum as u64, (sum >> 64) as u64);
                }
                // The count follows the last pair.
                match pairs.next() {
                    Some(count) => count[0] += 1,
                    None => rest[0] += 1,
                }
            }
        }
    }

    fn split(&mut self, quantity: usize, values: &[f64]) {
        let length = values.len();
        let window = self.windows[quantity];
        let Words { high, low } = &mut self.words[quantity];
        let fit = window::split_in(values, window, &mut high[..length], &mut low[..length]);
        if fit.misfit {
            for (index, value) in values.iter().enumerate() {
                if value.abs() >= window.limit() || value.is_nan() {
                    (high[index], low[index]) = (0, 0);
                    self.left_out += 1;
                }
            }
        }
    }

    /// The sum of a quantity in a bin as two's-complement words, in quanta.
    pub fn cells(&self, bin: usize, quantity: usize) -> &[u64] {
        let at = bin * self.width + 2 * quantity;
        &self.cells[at..at + 2]
    }

    /// Contributions to a bin.
    pub fn number(&self, bin: usize) -> u64 {
        self.cells[bin * self.width + 2 * self.windows.len()]
    }

    /// Has nothing been added since it was last cleared?
    pub fn is_untouched(&self) -> bool {
        !self.touched
    }

    /// How many values were left out because they were not finite, or too large.
    pub fn left_out(&self) -> u64 {
        self.left_out
    }

    /// The double nearest to a sum of [`Rounded::cells`].
    pub fn value(cells: &[u64], quantum: i32) -> f64 {
        let word = |index: usize| cells.get(index).copied().unwrap_or(0);
        let sum = i128::from(word(0)) | i128::from(word(1) as i64) << 64;
        // `as` rounds to nearest even. The power of two is applied in two steps, each of them a normal double.
        let low = Window::at(quantum).low;
        let power = |exponent: i32| f64::from_bits(((exponent + 1023) as u64) << 52);
        sum as f64 * power(low / 2) * power(low - low / 2)
    }

    /// Forgets everything.
    pub fn clear(&mut self) {
        if self.touched {
            self.cells.fill(0);
            self.left_out = 0;
            self.touched = false;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::Accumulator;
    use proptest::prelude::*;

    fn exact(values: impl IntoIterator<Item = f64>) -> Accumulator {
        let mut sum = Accumulator::default();
        values.into_iter().for_each(|value| sum.add(value));
        sum
    }

    proptest! {
        /// Whatever the sizes of the values, each bin holds the exact sum and number of its own.
        #[test]
        fn bins_hold_what_single_sums_hold(
            wide in proptest::collection::vec((0u32..5, proptest::num::f64::ANY), 0..600),
            narrow in proptest::collection::vec((0u32..5, -1e3f64..1e3), 0..6000),
        ) {
            for given in [&wide, &narrow, &[&narrow[..], &wide[..], &narrow[..]].concat()] {
                let indices: Vec<u32> = given.iter().map(|&(bin, _)| bin).collect();
                let values: Vec<f64> = given.iter().map(|&(_, value)| value).collect();
                let doubled: Vec<f64> = values.iter().map(|value| value * 3.0).collect();
                let mut bins = Bins::new(5, 2);
                bins.add(&indices, &[&values, &doubled]);
                bins.settle();
                let mut left_out = 0;
                for bin in 0..5u32 {
                    let own = || given.iter().filter(move |&&(b, _)| b == bin).map(|&(_, value)| value);
                    let (plain, tripled) = (exact(own()), exact(own().map(|value| value * 3.0)));
                    prop_assert_eq!(bins.total(bin as usize, 0), plain.total());
                    prop_assert_eq!(bins.total(bin as usize, 1), tripled.total());
                    prop_assert_eq!(bins.number(bin as usize), own().count() as u64);
                    left_out += plain.left_out() + tripled.left_out();
                }
                prop_assert_eq!(bins.left_out(), left_out);
                bins.clear();
                bins.add(&indices, &[&values, &doubled]);
                bins.settle();
                prop_assert_eq!(bins.number(0), given.iter().filter(|&&(b, _)| b == 0).count() as u64);
            }
        }

        /// Rounded sums are the sums of the rounded values, in any order.
        #[test]
        fn rounded_sums_are_sums_of_multiples(
            given in proptest::collection::vec((0u32..3, -1e6f64..1e6), 0..1500),
        ) {
            let quantum = -20;
            let unit = 2f64.powi(quantum);
            let mut order = given.clone();
            order.reverse();
            for given in [&given, &order] {
                let indices: Vec<u32> = given.iter().map(|&(bin, _)| bin).collect();
                let values: Vec<f64> = given.iter().map(|&(_, value)| value).collect();
                let mut bins = Rounded::new(3, &[quantum]);
                bins.add(&indices, &[&values]);
                for bin in 0..3u32 {
                    let sum: i128 = given.iter().filter(|&&(b, _)| b == bin)
                        .map(|&(_, value)| (value / unit).round_ties_even() as i128).sum();
                    prop_assert_eq!(Rounded::value(bins.cells(bin as usize, 0), quantum), sum as f64 * unit);
                }
            }
        }
    }

    #[test]
    fn rounded_sums_leave_out_what_is_too_large_or_not_finite() {
        let mut bins = Rounded::new(1, &[0]);
        bins.add(
            &[0; 5],
            &[&[3.0, f64::NAN, f64::INFINITY, 2f64.powi(103), -2.0]],
        );
        assert_eq!(
            (Rounded::value(bins.cells(0, 0), 0), bins.left_out()),
            (1.0, 3)
        );
        assert_eq!(bins.number(0), 5);
    }
}
