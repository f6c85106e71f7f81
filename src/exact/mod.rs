//! Sums that are exact: the true sum of the contributions, rounded once.
//!
//! A finite double is an integer multiple of 2^-1074, so a long enough integer holds any sum of doubles
//! without error, and integer addition does not care about order. [`Accumulator`] takes values quickly on
//! one thread; [`Total`] is the canonical form that is combined over threads and ranks, subtracted without
//! loss, and rounded at the very end. See Neal 2015 (arXiv:1505.05571) for the idea.

mod accumulator;
mod bins;
mod digits;
mod total;
mod window;

pub use accumulator::Accumulator;
pub use bins::{Bins, Rounded};
pub use total::Total;

/// Maps a double that is not NaN to an integer with the same order; never 0.
pub fn order_key(value: f64) -> u64 {
    let bits = value.to_bits();
    if bits >> 63 == 1 {
        !bits
    } else {
        bits | (1 << 63)
    }
}

/// The double that [`order_key`] mapped to `key`.
pub fn from_order_key(key: u64) -> f64 {
    f64::from_bits(if key >> 63 == 1 {
        key & !(1 << 63)
    } else {
        !key
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn order_keys_keep_the_order(a in proptest::num::f64::ANY, b in proptest::num::f64::ANY) {
            prop_assume!(!a.is_nan() && !b.is_nan());
            prop_assert_eq!(order_key(a).cmp(&order_key(b)), a.total_cmp(&b));
            prop_assert_eq!(from_order_key(order_key(a)).to_bits(), a.to_bits());
            prop_assert_ne!(order_key(a), 0);
        }
    }
}
