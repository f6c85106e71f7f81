//! The exact sum of an array beside the plain one: `cargo bench --bench exact -- [ELEMENTS] [REPETITIONS]`.
//!
//! One thread. Both sum the same doubles; a repetition times each, and ratios are formed in each repetition. The plain
//! sum adds one number after another, as `iter().sum()` does; the one in eight lanes is what a reader of assembly
//! would write, and is told for information. Prints "name value" lines with the median, and `_min` and `_max`.

use limnograph::exact::Accumulator;
use limnograph::team::cells::{Kind, Layout, WIDE_LIMBS, combine};
use std::hint::black_box;
use std::process::ExitCode;
use std::time::Instant;

/// A mixer of 64 bits (Steele, Lea & Flood 2014, OOPSLA), as in arrays.c.
fn mixed(state: u64) -> u64 {
    let mut state = (state + 1).wrapping_mul(0x9e37_79b9_7f4a_7c15);
    state = (state ^ (state >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    state = (state ^ (state >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    state ^ (state >> 31)
}

/// Star formation rates as hosts have them: some powers of ten, one sign.
fn number(index: usize) -> f64 {
    let chance = (mixed(index as u64) >> 11) as f64 * (-53f64).exp2();
    1e-4 * (8.0 * chance).exp()
}

fn plain_sum(values: &[f64]) -> f64 {
    values.iter().sum()
}

fn sum_in_lanes(values: &[f64]) -> f64 {
    let mut lanes = [0.0; 32];
    let chunks = values.chunks_exact(32);
    let rest: f64 = chunks.remainder().iter().sum();
    for chunk in chunks {
        for (lane, value) in lanes.iter_mut().zip(chunk) {
            *lane += value;
        }
    }
    lanes.iter().sum::<f64>() + rest
}

fn exact_sum(values: &[f64]) -> f64 {
    let mut accumulator = Accumulator::default();
    accumulator.add_slice(values);
    accumulator.total().to_f64()
}

fn timed(sum: fn(&[f64]) -> f64, values: &[f64]) -> (f64, f64) {
    let start = Instant::now();
    let found = sum(black_box(values));
    (start.elapsed().as_secs_f64(), black_box(found))
}

/// Nanoseconds a cell of the one operation of a reduction takes, for a buffer as the usual gauges make it.
fn combining() -> f64 {
    const SUMS: usize = 53;
    const ROUNDS: u32 = 2000;
    let mut layout = Layout::default();
    let part = layout.add(Kind::Wide, WIDE_LIMBS, SUMS);
    let (mut other, mut into) = (Vec::new(), Vec::new());
    layout.clear(&mut other);
    layout.clear(&mut into);
    for (index, cell) in other[layout.range(part)].iter_mut().enumerate() {
        *cell = mixed(index as u64);
    }
    let start = Instant::now();
    for _ in 0..ROUNDS {
        combine(black_box(&other), black_box(&mut into));
    }
    start.elapsed().as_secs_f64() * 1e9 / f64::from(ROUNDS) / layout.len() as f64
}

fn tell(name: &str, mut values: Vec<f64>) {
    values.sort_by(f64::total_cmp);
    let median = values[values.len() / 2];
    println!("{name} {median:.6e}");
    println!("{name}_min {:.6e}", values[0]);
    println!("{name}_max {:.6e}", values[values.len() - 1]);
}

fn main() -> ExitCode {
    // Cargo adds words of its own, such as --bench.
    let mut words = std::env::args()
        .skip(1)
        .filter(|word| !word.starts_with("--"));
    let mut number_or = |default: usize| match words.next() {
        None => Some(default),
        Some(word) => word.parse().ok().filter(|&number| number > 0),
    };
    let (Some(count), Some(repetitions)) = (number_or(20_000_000), number_or(21)) else {
        eprintln!("exact: expected ELEMENTS and REPETITIONS, whole numbers above 0");
        return ExitCode::FAILURE;
    };
    let values: Vec<f64> = (0..count).map(number).collect();
    let mut seconds: [Vec<f64>; 3] = Default::default();
    for repetition in 0..=repetitions {
        let times = [plain_sum, sum_in_lanes, exact_sum].map(|sum| timed(sum, &values));
        let exact = times[2].1;
        for (_, found) in times {
            // A plain sum of numbers of one sign is off by less than half a unit in the last place an addition.
            if (found - exact).abs() > 1.2e-16 * count as f64 * exact {
                eprintln!("exact: a plain sum is {found:e}, the exact one {exact:e}");
                return ExitCode::FAILURE;
            }
        }
        // The first round warms up.
        if repetition > 0 {
            for (list, (time, _)) in seconds.iter_mut().zip(times) {
                list.push(time);
            }
        }
    }
    let over = |which: usize| -> Vec<f64> {
        seconds[2]
            .iter()
            .zip(&seconds[which])
            .map(|(exact, other)| exact / other)
            .collect()
    };
    tell("exact_sum_over_plain_sum", over(0));
    tell("exact_sum_over_sum_in_lanes", over(1));
    let [plain, lanes, exact] = seconds;
    tell("plain_sum_seconds", plain);
    tell("sum_in_lanes_seconds", lanes);
    tell("exact_sum_seconds", exact);
    tell(
        "combine_ns_per_cell",
        (0..repetitions).map(|_| combining()).collect(),
    );
    ExitCode::SUCCESS
}
