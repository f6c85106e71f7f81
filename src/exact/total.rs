//! The canonical exact sum: a two's-complement integer in units of 2^-1074.

use crate::team::cells::{WIDE_LIMBS, add_with_carry};
use std::ops::{AddAssign, SubAssign};

/// An exact sum of doubles. Holds 2^77 of the largest doubles before it would wrap.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Total {
    limbs: [u64; WIDE_LIMBS],
}

impl Default for Total {
    fn default() -> Self {
        Total {
            limbs: [0; WIDE_LIMBS],
        }
    }
}

impl Total {
    /// Reads a total from the cells of a reduction; cells missing at the end count as zero.
    pub fn from_cells(cells: &[u64]) -> Total {
        let mut total = Total::default();
        for (limb, cell) in total.limbs.iter_mut().zip(cells) {
            *limb = *cell;
        }
        total
    }

    /// The cells that a reduction adds.
    pub fn cells(&self) -> &[u64] {
        &self.limbs
    }

    pub(super) fn limbs_mut(&mut self) -> &mut [u64] {
        &mut self.limbs
    }

    /// Is it exactly zero?
    pub fn is_zero(&self) -> bool {
        self.limbs.iter().all(|&limb| limb == 0)
    }

    fn is_negative(&self) -> bool {
        self.limbs[WIDE_LIMBS - 1] >> 63 == 1
    }

    fn negate(&mut self) {
        let mut carry = true;
        for limb in &mut self.limbs {
            let (value, overflow) = (!*limb).overflowing_add(u64::from(carry));
            *limb = value;
            carry = overflow;
        }
    }

    /// The nearest double, ties to even; infinite where no finite double is near enough; zero is +0.
    pub fn to_f64(&self) -> f64 {
        let mut magnitude = self.clone();
        let sign = u64::from(self.is_negative()) << 63;
        if sign != 0 {
            magnitude.negate();
        }
        let limbs = &magnitude.limbs;
        let Some(top) = limbs.iter().rposition(|&limb| limb != 0) else {
            return 0.0;
        };
        let bit_length = top * 64 + 64 - limbs[top].leading_zeros() as usize;
        // Up to 53 bits the integer is itself a double, counted in the smallest subnormal.
        let drop = bit_length.saturating_sub(53);
        let mut kept = bits_from(limbs, drop);
        if drop > 0 {
            let half = bit(limbs, drop - 1);
            let beyond = any_below(limbs, drop - 1);
            if half && (beyond || kept & 1 == 1) {
                kept += 1;
            }
        }
        // Adding the kept bits to a biased exponent of `drop` lets the implicit bit, a carry out of the
        // rounding and the step from subnormal to normal all fall into place.
        let encoded = if drop == 0 {
            kept
        } else {
            ((drop as u64) << 52) + kept
        };
        f64::from_bits(sign | encoded.min(0x7ff << 52))
    }
}

fn bit(limbs: &[u64], at: usize) -> bool {
    limbs[at / 64] >> (at % 64) & 1 == 1
}

fn any_below(limbs: &[u64], bits: usize) -> bool {
    limbs[..bits / 64].iter().any(|&limb| limb != 0)
        || (!bits.is_multiple_of(64) && limbs[bits / 64] << (64 - bits % 64) != 0)
}

/// The 64 bits that begin at bit `from`.
fn bits_from(limbs: &[u64], from: usize) -> u64 {
    let low = limbs[from / 64] >> (from % 64);
    match limbs.get(from / 64 + 1) {
        Some(&next) if !from.is_multiple_of(64) => low | (next << (64 - from % 64)),
        _ => low,
    }
}

impl AddAssign<&Total> for Total {
    fn add_assign(&mut self, other: &Total) {
        add_with_carry(&mut self.limbs, &other.limbs);
    }
}

impl SubAssign<&Total> for Total {
    fn sub_assign(&mut self, other: &Total) {
        let mut negated = other.clone();
        negated.negate();
        add_with_carry(&mut self.limbs, &negated.limbs);
    }
}
