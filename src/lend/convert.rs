//! Runs of numbers turned into doubles, and whether all of them are finite.
//!
//! Plain loops, compiled for several vector widths and chosen at run time. Conversions are exact or rounded once,
//! so the width changes nothing but the speed.

use multiversion::multiversion;

/// A single's bits without its sign, from which on it is not finite.
const LIMIT_32: u32 = 0x7f80_0000;
/// Added to a double's bits without its sign, it reaches the topmost bit only where the double is not finite.
const STEP_64: u64 = 1 << 52;

macro_rules! vectorised {
    ($(#[$doc:meta])* fn $name:ident($($argument:ident: $kind:ty),*) -> bool $body:block) => {
        $(#[$doc])*
        #[multiversion(targets(
            "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
            "x86_64+avx+avx2",
            "aarch64+neon"
        ))]
        pub(super) fn $name($($argument: $kind),*) -> bool $body
    };
}

vectorised! {
    /// Singles in a row.
    fn singles(from: &[f32], to: &mut [f64]) -> bool {
        let mut largest = 0;
        for (from, to) in from.iter().zip(to) {
            largest = largest.max(from.to_bits() & !(1 << 31));
            *to = f64::from(*from);
        }
        largest < LIMIT_32
    }
}

vectorised! {
    /// Doubles in a row.
    fn doubles(from: &[f64], to: &mut [f64]) -> bool {
        let mut marks = 0;
        for (from, to) in from.iter().zip(to) {
            marks |= (from.to_bits() & !(1 << 63)) + STEP_64;
            *to = *from;
        }
        marks >> 63 == 0
    }
}

vectorised! {
    /// Vectors of three singles, one after the other.
    fn single_triples(from: &[f32], x: &mut [f64], y: &mut [f64], z: &mut [f64]) -> bool {
        let mut largest = 0;
        for (((from, x), y), z) in from.as_chunks::<3>().0.iter().zip(x).zip(y).zip(z) {
            let bits = from.map(|number| number.to_bits() & !(1 << 31));
            largest = largest.max(bits[0]).max(bits[1]).max(bits[2]);
            *x = f64::from(from[0]);
            *y = f64::from(from[1]);
            *z = f64::from(from[2]);
        }
        largest < LIMIT_32
    }
}

vectorised! {
    /// Vectors of three doubles, one after the other.
    fn double_triples(from: &[f64], x: &mut [f64], y: &mut [f64], z: &mut [f64]) -> bool {
        let mut marks = 0;
        for (((from, x), y), z) in from.as_chunks::<3>().0.iter().zip(x).zip(y).zip(z) {
            let bits = from.map(|number| (number.to_bits() & !(1 << 63)) + STEP_64);
            marks |= bits[0] | bits[1] | bits[2];
            [*x, *y, *z] = *from;
        }
        marks >> 63 == 0
    }
}

/// Some of the vectors that lie one after the other.
///
/// # Panics
/// When an element does not exist.
pub(super) fn some_single_triples(from: &[f32], elements: &[u32], [x, y, z]: [&mut [f64]; 3]) {
    let from = from.as_chunks::<3>().0;
    for (((&element, x), y), z) in elements.iter().zip(x).zip(y).zip(z) {
        let vector = from[element as usize];
        (*x, *y, *z) = (vector[0].into(), vector[1].into(), vector[2].into());
    }
}

macro_rules! rough {
    ($number:ty, $run:ident, $triples:ident) => {
        /// Numbers in a row, rounded to singles; the bits of the largest magnitude.
        #[multiversion(targets(
            "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
            "x86_64+avx+avx2",
            "aarch64+neon"
        ))]
        pub(super) fn $run(from: &[$number], to: &mut [f32]) -> u32 {
            let mut largest = 0;
            for (from, to) in from.iter().zip(to) {
                *to = *from as f32;
                largest = largest.max(to.to_bits() & !(1 << 31));
            }
            largest
        }

        /// Vectors one after the other, rounded to singles; the bits of the largest magnitude.
        #[multiversion(targets(
            "x86_64+avx512f+avx512dq+avx512vl+avx512bw",
            "x86_64+avx+avx2",
            "aarch64+neon"
        ))]
        pub(super) fn $triples(
            from: &[$number],
            x: &mut [f32],
            y: &mut [f32],
            z: &mut [f32],
        ) -> u32 {
            let mut largest = 0;
            for (((from, x), y), z) in from.as_chunks::<3>().0.iter().zip(x).zip(y).zip(z) {
                let rough = from.map(|number| number as f32);
                let bits = rough.map(|number| number.to_bits() & !(1 << 31));
                largest = largest.max(bits[0]).max(bits[1]).max(bits[2]);
                [*x, *y, *z] = rough;
            }
            largest
        }
    };
}

rough!(f32, rough_singles, rough_single_triples);
rough!(f64, rough_doubles, rough_double_triples);

vectorised! {
    /// Are all these singles finite?
    fn are_finite_singles(values: &[f32]) -> bool {
        let mut largest = 0;
        for value in values {
            largest = largest.max(value.to_bits() & !(1 << 31));
        }
        largest < LIMIT_32
    }
}

vectorised! {
    /// Are all these doubles finite?
    fn are_finite(values: &[f64]) -> bool {
        let mut marks = 0;
        for value in values {
            marks |= (value.to_bits() & !(1 << 63)) + STEP_64;
        }
        marks >> 63 == 0
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn every_number_arrives_and_none_that_is_not_finite_goes_unseen(
            singles_given in proptest::collection::vec(proptest::num::f32::ANY, 0..120),
            doubles_given in proptest::collection::vec(proptest::num::f64::ANY, 0..120),
        ) {
            let mut to = vec![0.0; doubles_given.len()];
            let finite = doubles(&doubles_given, &mut to);
            prop_assert_eq!(finite, doubles_given.iter().all(|value| value.is_finite()));
            prop_assert_eq!(are_finite(&doubles_given), finite);
            prop_assert!(to.iter().zip(&doubles_given).all(|(a, b)| a.to_bits() == b.to_bits()));

            let mut to = vec![0.0; singles_given.len()];
            let finite = singles(&singles_given, &mut to);
            prop_assert_eq!(are_finite_singles(&singles_given), finite);
            prop_assert_eq!(finite, singles_given.iter().all(|value| value.is_finite()));
            prop_assert!(to.iter().zip(&singles_given).all(|(a, b)| a.to_bits() == f64::from(*b).to_bits() || b.is_nan()));

            let mut rough = vec![0f32; doubles_given.len()];
            let largest = f32::from_bits(rough_doubles(&doubles_given, &mut rough));
            let expected = doubles_given.iter().map(|&value| value as f32);
            prop_assert!(expected.clone().zip(&rough).all(|(a, &b)| a == b || a.is_nan()));
            prop_assert_eq!(largest.is_finite(), expected.clone().all(f32::is_finite));
            if largest.is_finite() {
                prop_assert_eq!(largest, expected.fold(0f32, |most, value| most.max(value.abs())));
            }

            let whole = doubles_given.len() / 3;
            let [mut x, mut y, mut z] = [const { Vec::new() }; 3].map(|_: Vec<f64>| vec![0.0; whole]);
            let finite = double_triples(&doubles_given[..3 * whole], &mut x, &mut y, &mut z);
            prop_assert_eq!(finite, doubles_given[..3 * whole].iter().all(|value| value.is_finite()));
            for element in 0..whole {
                for (component, run) in [&x, &y, &z].into_iter().enumerate() {
                    prop_assert_eq!(run[element].to_bits(), doubles_given[3 * element + component].to_bits());
                }
            }
            let whole = singles_given.len() / 3;
            let [mut x, mut y, mut z] = [const { Vec::new() }; 3].map(|_: Vec<f64>| vec![0.0; whole]);
            let finite = single_triples(&singles_given[..3 * whole], &mut x, &mut y, &mut z);
            prop_assert_eq!(finite, singles_given[..3 * whole].iter().all(|value| value.is_finite()));
            for element in 0..whole {
                for (component, run) in [&x, &y, &z].into_iter().enumerate() {
                    let given = singles_given[3 * element + component];
                    prop_assert!(run[element] == f64::from(given) || given.is_nan());
                }
            }
        }
    }
}
