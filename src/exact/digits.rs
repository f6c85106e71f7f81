//! The long integer that holds a sum of doubles while it grows.

use super::total::Total;

/// Digits of 32 bits held in 64-bit integers; the upper halves take up carries until they are spread.
const DIGITS: usize = 2 * crate::team::cells::WIDE_LIMBS;
/// Every addition puts less than 2^33 on a digit, so this many fit before a digit could overflow.
const ROOM: u32 = 1 << 29;
/// The exponent of the lowest bit of a total.
const LOWEST: i32 = -1074;

/// An exact sum that takes integers at any place.
#[derive(Clone)]
pub(super) struct Digits {
    digits: [i64; DIGITS],
    since_spread: u32,
    /// Has anything been added since it was last cleared?
    touched: bool,
}

impl Default for Digits {
    fn default() -> Self {
        Digits {
            digits: [0; DIGITS],
            since_spread: 0,
            touched: false,
        }
    }
}

impl Digits {
    /// Adds one value whatever it is; `false` when it is not finite and left out.
    pub fn add(&mut self, value: f64) -> bool {
        let bits = value.to_bits();
        let exponent = ((bits >> 52) & 0x7ff) as i32;
        if exponent == 0x7ff {
            return false;
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
        true
    }

    /// Adds `integer` · 2^`place`, for places from the lowest bit of a total up.
    pub fn add_integer(&mut self, integer: i64, place: i32) {
        let shift = (place - LOWEST) as usize;
        // 63 bits moved by up to 31 reach into at most three digits.
        let spread = u128::from(integer.unsigned_abs()) << (shift % 32);
        let sign = integer >> 63;
        let signed = |part: u128| ((part & 0xffff_ffff) as i64 ^ sign) - sign;
        let digits = &mut self.digits[shift / 32..shift / 32 + 3];
        digits[0] += signed(spread);
        digits[1] += signed(spread >> 32);
        digits[2] += signed(spread >> 64);
        self.touched = true;
        self.since_spread += 1;
        if self.since_spread >= ROOM {
            self.spread();
        }
    }

    /// Adds everything that another holds.
    pub fn merge(&mut self, other: &Digits) {
        if !other.touched {
            return;
        }
        let mut other = other.clone();
        other.spread();
        self.spread();
        self.digits
            .iter_mut()
            .zip(&other.digits)
            .for_each(|(mine, theirs)| *mine += theirs);
        self.since_spread += 1;
        self.touched = true;
    }

    /// Moves what exceeds 32 bits of each digit up to the next.
    pub fn spread(&mut self) {
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

    /// Has nothing been added since it was last cleared?
    pub fn is_untouched(&self) -> bool {
        !self.touched
    }

    /// The exact sum so far.
    pub fn total(&self) -> Total {
        let mut total = Total::default();
        if !self.touched {
            return total;
        }
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
        if self.touched {
            *self = Digits::default();
        }
    }
}
