//! How a column went, in the space of a word.

const BLOCKS: [char; 8] = ['▁', '▂', '▃', '▄', '▅', '▆', '▇', '█'];
const ASCII: [char; 8] = ['_', '.', '-', '~', '=', '+', '*', '#'];
/// Positive values further apart than this are drawn by their logarithms.
const LINEAR_RANGE: f64 = 1000.0;

/// A curve of at most `width` characters from the first value to the last; blank where nothing was measured.
/// Empty when there are fewer than two values.
pub fn curve(
    values: impl ExactSizeIterator<Item = Option<f64>>,
    width: usize,
    is_ascii: bool,
) -> String {
    let mut means = bucket_means(values, width);
    let present = || means.iter().flatten().copied();
    let (low, high) = present().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| {
        (low.min(value), high.max(value))
    });
    if present().count() < 2 {
        return String::new();
    }
    let is_logarithmic = low > 0.0 && high / low > LINEAR_RANGE;
    let scale = |value: f64| if is_logarithmic { value.ln() } else { value };
    let (low, span) = (scale(low), scale(high) - scale(low));
    let marks = if is_ascii { ASCII } else { BLOCKS };
    let mark = |value: f64| {
        // Without any change the curve is a line at mid-height.
        let height = if span > 0.0 {
            (scale(value) - low) / span
        } else {
            0.5
        };
        marks[((height * 8.0) as usize).min(7)]
    };
    means.drain(..).map(|mean| mean.map_or(' ', mark)).collect()
}

/// Means of the finite values in up to `width` stretches of equal length.
fn bucket_means(
    values: impl ExactSizeIterator<Item = Option<f64>>,
    width: usize,
) -> Vec<Option<f64>> {
    let count = values.len();
    let buckets = width.min(count);
    let mut sums = vec![(0.0, 0_u32); buckets];
    for (index, value) in values.enumerate() {
        if let Some(value) = value.filter(|value| value.is_finite()) {
            let bucket = &mut sums[index * buckets / count];
            bucket.0 += value;
            bucket.1 += 1;
        }
    }
    sums.into_iter()
        .map(|(sum, count)| (count > 0).then(|| sum / f64::from(count)))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn drawn(values: &[Option<f64>], width: usize) -> String {
        curve(values.iter().copied(), width, false)
    }

    #[test]
    fn a_curve_rises_from_the_lowest_value_to_the_highest() {
        let ramp: Vec<_> = (0..8).map(|value| Some(f64::from(value))).collect();
        assert_eq!(drawn(&ramp, 20), "▁▂▃▄▅▆▇█");
        let decades: Vec<_> = (0..8).map(|value| Some(10_f64.powi(value))).collect();
        assert_eq!(drawn(&decades, 20), "▁▂▃▄▅▆▇█");
        assert_eq!(curve(ramp.iter().copied(), 20, true), "_.-~=+*#");
    }

    #[test]
    fn what_was_not_measured_is_blank_and_no_change_is_level() {
        assert_eq!(
            drawn(&[Some(1.0), None, Some(f64::NAN), Some(1.0)], 4),
            "▅  ▅"
        );
        assert_eq!(drawn(&[Some(1.0), None], 4), "");
        assert_eq!(drawn(&[], 4), "");
    }

    #[test]
    fn long_columns_are_averaged_into_the_width() {
        let many: Vec<_> = (0..1000).map(|value| Some(f64::from(value))).collect();
        assert_eq!(drawn(&many, 8), "▁▂▃▄▅▆▇█");
    }
}
