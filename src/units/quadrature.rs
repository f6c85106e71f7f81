//! Gauss–Legendre quadrature of fixed order.

/// Positive nodes and their weights of the 16-point rule on [-1, 1] (Abramowitz & Stegun 1964, table 25.4;
/// the tests derive them again from the Legendre recurrence).
const RULE: [(f64, f64); 8] = [
    (0.095_012_509_837_637_44, 0.189_450_610_455_068_5),
    (0.281_603_550_779_258_9, 0.182_603_415_044_923_58),
    (0.458_016_777_657_227_37, 0.169_156_519_395_002_54),
    (0.617_876_244_402_643_8, 0.149_595_988_816_576_74),
    (0.755_404_408_355_003, 0.124_628_971_255_533_88),
    (0.865_631_202_387_831_8, 0.095_158_511_682_492_79),
    (0.944_575_023_073_232_6, 0.062_253_523_938_647_894),
    (0.989_400_934_991_649_9, 0.027_152_459_411_754_096),
];

/// Integral of `function` from `start` over `width`, exact for polynomials up to degree 31.
pub(super) fn integrate(start: f64, width: f64, function: impl Fn(f64) -> f64) -> f64 {
    let half = 0.5 * width;
    let middle = start + half;
    let mut sum = 0.0;
    for (node, weight) in RULE.into_iter().rev() {
        let reach = half * node;
        sum += weight * (function(middle - reach) + function(middle + reach));
    }
    half * sum
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The Legendre polynomial of degree 16 and its derivative, by the three-term recurrence.
    fn legendre(x: f64) -> (f64, f64) {
        let (mut before, mut here) = (1.0, x);
        for degree in 2..=16 {
            let degree = f64::from(degree);
            let next = ((2.0 * degree - 1.0) * x * here - (degree - 1.0) * before) / degree;
            before = here;
            here = next;
        }
        (here, 16.0 * (before - x * here) / (1.0 - x * x))
    }

    #[test]
    fn nodes_are_roots_and_weights_are_theirs() {
        for (node, weight) in RULE {
            let (value, slope) = legendre(node);
            assert!(
                (value / slope).abs() < 4e-16,
                "{node} is no root: off by {}",
                value / slope
            );
            let expected = 2.0 / ((1.0 - node * node) * slope * slope);
            assert!(
                (weight / expected - 1.0).abs() < 1e-13,
                "{weight} should be {expected}"
            );
        }
    }

    #[test]
    fn the_highest_exact_polynomial_is_exact() {
        // ∫ over [1, 3] of x^31 dx = (3^32 - 1)/32.
        let exact = (3.0_f64.powi(32) - 1.0) / 32.0;
        let found = integrate(1.0, 2.0, |x| x.powi(31));
        assert!(
            (found / exact - 1.0).abs() < 1e-14,
            "{found} should be {exact}"
        );
    }
}
