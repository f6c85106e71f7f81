//! Many stations in few numbers.

/// Percentiles that are told.
pub(super) const PERCENTILES: [usize; 3] = [16, 50, 84];

/// The smallest of the values that so many percent of them do not exceed (the nearest rank); the values change
/// places. None where there are no values.
pub(super) fn percentile(values: &mut [f64], percent: usize) -> Option<f64> {
    let rank = (values.len() * percent).div_ceil(100).max(1) - 1;
    if values.is_empty() {
        return None;
    }
    let (_, value, _) = values.select_nth_unstable_by(rank, f64::total_cmp);
    Some(*value)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The worked example of the nearest-rank method for {15, 20, 35, 40, 50}: the 30th percentile is 20, the 40th
    /// 20, the 50th 35, the 100th 50 (common textbook example, from memory).
    #[test]
    fn percentiles_are_of_the_nearest_rank() {
        let mut values = [35.0, 20.0, 15.0, 50.0, 40.0];
        for (percent, expected) in [(30, 20.0), (40, 20.0), (50, 35.0), (100, 50.0), (0, 15.0)] {
            assert_eq!(percentile(&mut values, percent), Some(expected));
        }
        assert_eq!(percentile(&mut [], 50), None);
    }
}
