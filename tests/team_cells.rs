//! One reduction's operation: its result must not depend on how the ranks are ordered or grouped, and no
//! buffer, however damaged, may bring it down.

use limnograph::team::cells::{Kind, Layout, Part, add_with_carry, combine, insert_top};
use proptest::prelude::*;

/// Any mixture of segments.
fn layouts() -> impl Strategy<Value = (Layout, Vec<Part>)> {
    let kind = prop_oneof![
        Just(Kind::Sum),
        Just(Kind::Max),
        Just(Kind::Wide),
        Just(Kind::Top),
        Just(Kind::Word)
    ];
    prop::collection::vec((kind, 1usize..4, 0usize..5), 0..6).prop_map(|segments| {
        let mut layout = Layout::default();
        let parts = segments
            .into_iter()
            .map(|(kind, words, items)| layout.add(kind, words, items))
            .collect();
        (layout, parts)
    })
}

/// Values that meet equal ones, empty ones and carries often.
fn cell() -> impl Strategy<Value = u64> {
    prop_oneof![0u64..3, Just(u64::MAX), Just(u64::MAX - 1), any::<u64>()]
}

/// A layout and some contributions to it.
fn contributions(count: usize) -> impl Strategy<Value = (Layout, Vec<Vec<u64>>)> {
    layouts().prop_flat_map(move |(layout, _)| {
        let mut empty = Vec::new();
        layout.clear(&mut empty);
        let head = empty.len() - body(&layout);
        let bodies = prop::collection::vec(prop::collection::vec(cell(), body(&layout)), count);
        (Just(layout), bodies).prop_map(move |(layout, bodies)| {
            let buffers = bodies
                .into_iter()
                .map(|body| [&empty[..head], &body].concat())
                .collect();
            (layout, buffers)
        })
    })
}

/// Cells after the head.
fn body(layout: &Layout) -> usize {
    let mut cells = Vec::new();
    layout.clear(&mut cells);
    layout.len() - 2 - cells[1] as usize
}

fn joined(left: &[u64], right: &[u64]) -> Vec<u64> {
    let mut into = right.to_vec();
    combine(left, &mut into);
    into
}

proptest! {
    #[test]
    fn order_does_not_matter((layout, c) in contributions(2)) {
        let (one, other) = (joined(&c[0], &c[1]), joined(&c[1], &c[0]));
        prop_assert!(layout.agrees(&one));
        prop_assert_eq!(one, other);
    }

    #[test]
    fn grouping_does_not_matter((_, c) in contributions(4)) {
        let in_turn = joined(&joined(&joined(&c[0], &c[1]), &c[2]), &c[3]);
        let in_pairs = joined(&joined(&c[0], &c[1]), &joined(&c[2], &c[3]));
        let from_the_end = joined(&c[3], &joined(&c[1], &joined(&c[2], &c[0])));
        prop_assert_eq!(&in_turn, &in_pairs);
        prop_assert_eq!(&in_turn, &from_the_end);
    }

    #[test]
    fn an_empty_contribution_changes_nothing((layout, c) in contributions(2)) {
        let both = joined(&c[0], &c[1]);
        let mut empty = Vec::new();
        layout.clear(&mut empty);
        prop_assert_eq!(joined(&empty, &both), both.clone());
        prop_assert_eq!(joined(&both, &empty), both);
    }

    #[test]
    fn lists_hold_the_largest_of_all(
        lists in prop::collection::vec(prop::collection::vec(prop::array::uniform2(0u64..6), 3), 1..5)
    ) {
        let mut layout = Layout::default();
        let part = layout.add(Kind::Top, 2, 3);
        let mut result = Vec::new();
        layout.clear(&mut result);
        for list in &lists {
            let mut cells = Vec::new();
            layout.clear(&mut cells);
            for item in list {
                insert_top(2, item, &mut cells[layout.range(part)]);
            }
            combine(&cells, &mut result);
        }
        let mut all: Vec<[u64; 2]> = lists.concat();
        all.sort_unstable_by(|a, b| b.cmp(a));
        prop_assert_eq!(&result[layout.range(part)], all[..3].concat());
    }

    #[test]
    fn wide_sums_carry_like_long_integers(
        a in prop::array::uniform4(cell()), b in prop::array::uniform4(cell())
    ) {
        let long = |n: [u64; 4], at: usize| u128::from(n[at]) | u128::from(n[at + 1]) << 64;
        let (low, carry) = long(a, 0).overflowing_add(long(b, 0));
        let high = long(a, 2).wrapping_add(long(b, 2)).wrapping_add(u128::from(carry));
        let mut sum = a;
        add_with_carry(&mut sum, &b);
        prop_assert_eq!((long(sum, 0), long(sum, 2)), (low, high));
    }

    #[test]
    fn different_shapes_are_marked_on_both_sides(
        (one, _) in layouts(), (other, _) in layouts()
    ) {
        let (mut a, mut b) = (Vec::new(), Vec::new());
        one.clear(&mut a);
        other.clear(&mut b);
        let same_shape = a[..] == b[..];
        for result in [joined(&a, &b), joined(&b, &a)] {
            prop_assert_eq!(one.agrees(&result), same_shape);
            prop_assert_eq!(other.agrees(&result), same_shape);
        }
    }

    #[test]
    fn a_mark_is_never_lost((layout, c) in contributions(3)) {
        let mut marked = c[0].clone();
        combine(&[], &mut marked);
        prop_assert!(!layout.agrees(&marked));
        for result in [
            joined(&joined(&marked, &c[1]), &c[2]),
            joined(&c[1], &joined(&c[2], &marked)),
            joined(&joined(&c[1], &marked), &c[2]),
        ] {
            prop_assert!(!layout.agrees(&result));
        }
    }

    #[test]
    fn arbitrary_cells_do_no_harm(
        a in prop::collection::vec(cell(), 0..40), b in prop::collection::vec(cell(), 0..40)
    ) {
        let result = joined(&a, &b);
        prop_assert_eq!(result.len(), b.len());
    }

    #[test]
    fn damaged_buffers_do_no_harm(
        (layout, c) in contributions(2),
        damage in prop::collection::vec((any::<prop::sample::Index>(), cell()), 1..4),
        both in any::<bool>(),
        cut in any::<prop::sample::Index>(),
    ) {
        let (mut one, mut other) = (c[0].clone(), c[1].clone());
        for (place, value) in damage {
            let place = place.index(one.len());
            one[place] = value;
            if both {
                other[place] = value;
            }
        }
        let result = joined(&one, &other);
        prop_assert_eq!(result.len(), other.len());
        let kept = cut.index(one.len());
        let short = joined(&one[..kept], &other);
        prop_assert!(!layout.agrees(&short), "a shorter buffer never agrees");
        prop_assert_eq!(joined(&other, &one[..kept]).len(), kept);
    }
}

#[test]
fn the_smallest_buffers_do_no_harm() {
    for length in 0..3 {
        let mut into = vec![7; length];
        combine(&[], &mut into);
        combine(&vec![7; length], &mut into);
        assert_eq!(into.len(), length);
    }
    let layout = Layout::default();
    let mut cells = Vec::new();
    layout.clear(&mut cells);
    let copy = cells.clone();
    combine(&copy, &mut cells);
    assert!(layout.agrees(&cells) && layout.is_empty());
}
