//! The same twelve contributions, dealt to any number of ranks.

use limnograph::team::cells::{Kind, Layout, Part, WIDE_LIMBS, combine};

pub const CONTRIBUTIONS: u64 = 12;

/// A layout with a segment of every kind.
pub fn layout() -> (Layout, [Part; 5]) {
    let mut layout = Layout::default();
    let parts = [
        layout.add(Kind::Sum, 1, 7),
        layout.add(Kind::Max, 1, 5),
        layout.add(Kind::Wide, WIDE_LIMBS, 9),
        layout.add(Kind::Top, 3, 4),
        layout.add(Kind::Word, 6, 1),
    ];
    (layout, parts)
}

/// Contribution `index` to step `step`: any integers will do, so they come from a mixing of both numbers.
pub fn contribution(step: u64, index: u64) -> Vec<u64> {
    let (layout, parts) = layout();
    let mut cells = Vec::new();
    layout.clear(&mut cells);
    let mut state = step.wrapping_mul(0x1234_5678_9ABC_DEF1) ^ index;
    for part in parts {
        for cell in &mut cells[layout.range(part)] {
            *cell = mix(&mut state);
        }
    }
    // Few different first cells, so that lists and words meet equal ones and empty ones too.
    for first in cells[layout.range(parts[3])].iter_mut().step_by(3) {
        *first %= 4;
    }
    sort_descending(&mut cells[layout.range(parts[3])], 3);
    cells[layout.range(parts[4])][0] %= 3;
    cells
}

/// All contributions combined here, in order.
pub fn expected(step: u64) -> Vec<u64> {
    combined(step, 0..CONTRIBUTIONS)
}

/// The contributions with the given numbers combined.
pub fn combined(step: u64, numbers: impl Iterator<Item = u64>) -> Vec<u64> {
    let (layout, _) = layout();
    let mut cells = Vec::new();
    layout.clear(&mut cells);
    for index in numbers {
        combine(&contribution(step, index), &mut cells);
    }
    cells
}

fn sort_descending(list: &mut [u64], words: usize) {
    let mut items: Vec<Vec<u64>> = list.chunks_exact(words).map(<[u64]>::to_vec).collect();
    items.sort();
    items.reverse();
    list.copy_from_slice(&items.concat());
}

/// SplitMix64 (Steele, Lea & Flood 2014).
fn mix(state: &mut u64) -> u64 {
    *state = state.wrapping_add(0x9E37_79B9_7F4A_7C15);
    let mut z = *state;
    z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
    z ^ (z >> 31)
}
