//! The packed buffer that one reduction combines, and the one operation that combines it.
//!
//! A buffer is a sequence of 64-bit integer cells that describes itself: a head that lists its segments,
//! then the segments. The operation is associative and commutative on every segment, whatever the values,
//! so the result never depends on how the ranks are ordered or grouped.
//!
//! ```text
//! cell 0        magic
//! cell 1        number of segments n
//! cell 2 … 1+n  one per segment: kind in the upper 8 bits, cells of one item in the next 24, items in the
//!               lower 32
//! then          the segments' cells, in order
//! ```

use std::ops::Range;

/// Limbs of a [`Kind::Wide`] sum: a two's-complement integer in units of 2^-1074, least limb first.
pub const WIDE_LIMBS: usize = 34;

const MAGIC: u64 = 0x6c69_6d6e_6f01_0001;
/// Replaces the magic when two buffers of different shape meet.
const MISMATCH: u64 = 0x6c69_6d6e_6fff_ffff;

/// How the cells of a segment combine.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Each cell: wrapping integer addition.
    Sum = 1,
    /// Each cell: the larger unsigned integer.
    Max = 2,
    /// Each item: addition with carry from cell to cell; [`WIDE_LIMBS`] cells for an exact sum.
    Wide = 3,
    /// One list: the largest items of both, largest first, compared cell by cell from the first; an item
    /// whose first cell is 0 counts as empty.
    Top = 4,
    /// One item: the one with the larger first cell (0: nothing said); equal ones compare on.
    Word = 5,
}

impl Kind {
    fn from_code(code: u64) -> Option<Kind> {
        [Kind::Sum, Kind::Max, Kind::Wide, Kind::Top, Kind::Word]
            .into_iter()
            .find(|kind| *kind as u64 == code)
    }
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
struct Segment {
    kind: Kind,
    words: usize,
    items: usize,
}

impl Segment {
    fn cells(self) -> usize {
        self.words * self.items
    }

    fn encode(self) -> u64 {
        ((self.kind as u64) << 56)
            | ((self.words as u64 & 0xff_ffff) << 32)
            | (self.items as u64 & 0xffff_ffff)
    }

    fn decode(cell: u64) -> Option<Segment> {
        let kind = Kind::from_code(cell >> 56)?;
        let words = ((cell >> 32) & 0xff_ffff) as usize;
        let items = (cell & 0xffff_ffff) as usize;
        (words > 0).then_some(Segment { kind, words, items })
    }
}

/// Which cells mean what; the same on every rank of a run, since it follows from the config alone.
#[derive(Clone, Debug, Default)]
pub struct Layout {
    segments: Vec<Segment>,
    /// Offset of each segment from the first cell after the head.
    offsets: Vec<usize>,
    body: usize,
}

/// A segment of a [`Layout`].
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Part(usize);

impl Layout {
    /// Adds a segment of `items` items of `words` cells each (below 2^24 words, 2^32 items).
    pub fn add(&mut self, kind: Kind, words: usize, items: usize) -> Part {
        let words = words.max(1);
        let segment = Segment { kind, words, items };
        self.segments.push(segment);
        self.offsets.push(self.body);
        self.body += segment.cells();
        Part(self.segments.len() - 1)
    }

    fn head(&self) -> usize {
        2 + self.segments.len()
    }

    /// Number of cells in a buffer.
    pub fn len(&self) -> usize {
        self.head() + self.body
    }

    /// Has no segment been added?
    pub fn is_empty(&self) -> bool {
        self.segments.is_empty()
    }

    /// Fills `cells` with an empty contribution: the head, and zeros.
    pub fn clear(&self, cells: &mut Vec<u64>) {
        cells.clear();
        cells.push(MAGIC);
        cells.push(self.segments.len() as u64);
        cells.extend(self.segments.iter().map(|segment| segment.encode()));
        cells.resize(self.len(), 0);
    }

    /// Where the cells of a segment stand in a buffer.
    pub fn range(&self, part: Part) -> Range<usize> {
        let start = self.head() + self.offsets[part.0];
        start..start + self.segments[part.0].cells()
    }

    /// Does a combined buffer have this layout's shape on every rank?
    pub fn agrees(&self, cells: &[u64]) -> bool {
        cells.len() == self.len()
            && cells[0] == MAGIC
            && cells[1] == self.segments.len() as u64
            && self
                .segments
                .iter()
                .zip(&cells[2..])
                .all(|(segment, &cell)| segment.encode() == cell)
    }
}

/// Combines `other` into `into`: the one operation of every reduction.
///
/// Never panics: buffers whose heads disagree leave `into` marked, which [`Layout::agrees`] reports.
pub fn combine(other: &[u64], into: &mut [u64]) {
    if into.is_empty() {
        return;
    }
    let head = match into.get(1) {
        Some(&count) if count <= into.len() as u64 => 2 + count as usize,
        _ => return into[0] = MISMATCH,
    };
    let same = other.len() == into.len()
        && head <= into.len()
        && into[0] == MAGIC
        && other[..head] == into[..head];
    if !same {
        return into[0] = MISMATCH;
    }
    let (head_cells, mut into) = into.split_at_mut(head);
    let mut other = &other[head..];
    for &cell in &head_cells[2..] {
        let Some(segment) = Segment::decode(cell).filter(|segment| segment.cells() <= into.len())
        else {
            return head_cells[0] = MISMATCH;
        };
        let (mine, rest) = into.split_at_mut(segment.cells());
        let (theirs, other_rest) = other.split_at(segment.cells());
        combine_segment(segment, theirs, mine);
        into = rest;
        other = other_rest;
    }
}

fn combine_segment(segment: Segment, theirs: &[u64], mine: &mut [u64]) {
    match segment.kind {
        Kind::Sum => mine
            .iter_mut()
            .zip(theirs)
            .for_each(|(m, t)| *m = m.wrapping_add(*t)),
        Kind::Max => mine
            .iter_mut()
            .zip(theirs)
            .for_each(|(m, t)| *m = (*m).max(*t)),
        Kind::Wide => mine
            .chunks_exact_mut(segment.words)
            .zip(theirs.chunks_exact(segment.words))
            .for_each(|(m, t)| add_with_carry(m, t)),
        Kind::Top => merge_top(segment.words, theirs, mine),
        Kind::Word => mine
            .chunks_exact_mut(segment.words)
            .zip(theirs.chunks_exact(segment.words))
            .filter(|(m, t)| t > &&**m)
            .for_each(|(m, t)| m.copy_from_slice(t)),
    }
}

/// `into += other` as little-endian integers, modulo 2^(64 n).
pub fn add_with_carry(into: &mut [u64], other: &[u64]) {
    let mut carry = false;
    for (m, t) in into.iter_mut().zip(other) {
        let (sum, first) = m.overflowing_add(*t);
        let (sum, second) = sum.overflowing_add(u64::from(carry));
        *m = sum;
        carry = first | second;
    }
}

/// Inserts every item of `theirs` into the list `mine`, which keeps its length and ends in descending order.
fn merge_top(words: usize, theirs: &[u64], mine: &mut [u64]) {
    put_in_order(words, mine);
    for item in theirs.chunks_exact(words) {
        insert_top(words, item, mine);
    }
}

/// Lists are descending already unless a contribution was made wrongly; then the result would depend on
/// which rank it came from.
fn put_in_order(words: usize, list: &mut [u64]) {
    for end in (words..list.len()).step_by(words) {
        let (ordered, rest) = list.split_at(end);
        let item = &rest[..words];
        if let Some(place) = ordered.chunks_exact(words).position(|held| item > held) {
            list[place * words..end + words].rotate_right(words);
        }
    }
}

/// Inserts one item into a descending list of items of `words` cells, dropping the smallest.
pub fn insert_top(words: usize, item: &[u64], list: &mut [u64]) {
    let items = list.len() / words;
    let place = list.chunks_exact(words).position(|held| item > held);
    if let Some(place) = place {
        list.copy_within(place * words..(items - 1) * words, (place + 1) * words);
        list[place * words..(place + 1) * words].copy_from_slice(item);
    }
}
