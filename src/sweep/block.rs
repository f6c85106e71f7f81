//! A block of elements: a few hundred at a time, as doubles, one run of numbers for each component.

use crate::lend::{Ahead, Field, Lot, Scalar, Shape, View};

/// Elements in a block: few enough that all fields of a block stay in a core's cache.
pub const BLOCK: usize = 256;

/// Numbers between two runs. Runs a power of two apart would share the lower bits of their addresses, and a
/// processor takes a number that is read from one for a number just written to the other.
const APART: usize = 24;

/// One run of numbers.
#[derive(Clone, Copy)]
pub(super) struct Run {
    numbers: [f64; BLOCK],
    _apart: [f64; APART],
}

impl Run {
    const EMPTY: Run = Run {
        numbers: [0.0; BLOCK],
        _apart: [0.0; APART],
    };
}

/// One run of rough numbers.
#[derive(Clone, Copy)]
struct RoughRun {
    numbers: [f32; BLOCK],
    _apart: [f32; APART],
}

impl RoughRun {
    const EMPTY: RoughRun = RoughRun {
        numbers: [0.0; BLOCK],
        _apart: [0.0; APART],
    };
}

/// Vectors of one field, rounded to singles.
pub struct Rough<'a> {
    /// The components; beyond the elements their content means nothing.
    pub runs: [&'a [f32; BLOCK]; 3],
    /// The largest magnitude of a component.
    pub largest: f32,
}

/// Some of the fields.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(super) struct FieldSet(u32);

const _: () = assert!(Field::COUNT <= u32::BITS as usize);

impl FieldSet {
    pub fn insert(&mut self, field: Field) {
        self.0 |= 1 << field as u32;
    }

    pub fn extend(&mut self, other: FieldSet) {
        self.0 |= other.0;
    }

    pub fn is_empty(self) -> bool {
        self.0 == 0
    }

    pub fn with(self, other: FieldSet) -> FieldSet {
        FieldSet(self.0 | other.0)
    }

    pub fn without(self, other: FieldSet) -> FieldSet {
        FieldSet(self.0 & !other.0)
    }

    pub fn has(self, index: usize) -> bool {
        self.0 >> index & 1 == 1
    }

    fn meets(self, other: FieldSet) -> bool {
        self.0 & other.0 != 0
    }
}

/// Elements of one species, all fields finite.
pub struct Block<'a> {
    length: usize,
    values: &'a [Run],
    identities: &'a [u64],
    /// Where the first component of each field stands, by its number; meaningless where it is not lent.
    runs: &'a [u16; Field::COUNT],
    fields: FieldSet,
    /// Those of the fields that stand in the runs.
    loaded: FieldSet,
    singles: FieldSet,
    /// Where the other fields are read, from element `start` on.
    lot: &'a Lot,
    start: usize,
    rough: Option<(Field, &'a [RoughRun; 3], f32)>,
}

impl<'a> Block<'a> {
    /// Number of elements.
    pub fn len(&self) -> usize {
        self.length
    }

    /// Are there none?
    pub fn is_empty(&self) -> bool {
        self.length == 0
    }

    /// Is the field lent?
    pub fn has(&self, field: Field) -> bool {
        self.fields.has(field as usize)
    }

    /// Does the host keep the field in single precision?
    pub fn is_single(&self, field: Field) -> bool {
        self.singles.has(field as usize)
    }

    /// One component of a field of some elements, also of a field that the gauge needs of some elements only.
    ///
    /// # Panics
    /// When an element does not exist, or the lengths differ: a mistake of ours.
    pub fn gather(&self, field: Field, component: usize, elements: &[u32], into: &mut [f64]) {
        if self.loaded.has(field as usize) {
            let run = self.run(field, component);
            for (&element, to) in elements.iter().zip(into) {
                *to = run[element as usize];
            }
        } else if let Some(view) = self.lot.view(field) {
            view.read_some(component, self.start, elements, into);
        }
    }

    /// As [`Block::gather`], for all components of vectors.
    pub fn gather_vectors(&self, field: Field, elements: &[u32], runs: [&mut [f64]; 3]) {
        match self.lot.view(field) {
            Some(view) if !self.loaded.has(field as usize) => {
                view.read_some_vectors(self.start, elements, runs);
            }
            _ => {
                for (component, run) in runs.into_iter().enumerate() {
                    self.gather(field, component, elements, run);
                }
            }
        }
    }

    /// The vectors of a field that the gauge needs roughly; none where they could not be rounded to singles, or where
    /// elements were left out.
    pub fn roughly(&self, field: Field) -> Option<Rough<'a>> {
        let (held, [x, y, z], largest) = self.rough?;
        (held == field).then_some(Rough {
            runs: [&x.numbers, &y.numbers, &z.numbers],
            largest,
        })
    }

    /// One component of a field; empty where the field is not lent, or needed of some elements only.
    pub fn component(&self, field: Field, component: usize) -> &'a [f64] {
        if !self.has(field) || !self.loaded.has(field as usize) {
            return &[];
        }
        &self.run(field, component)[..self.length]
    }

    /// One component of a field that is lent, as long as the longest block; beyond the elements its content means
    /// nothing.
    pub fn run(&self, field: Field, component: usize) -> &'a [f64; BLOCK] {
        let run = self.runs[field as usize] as usize + component;
        &self.values[run].numbers
    }

    /// The numbers of a field with one component.
    pub fn scalar(&self, field: Field) -> &'a [f64] {
        self.component(field, 0)
    }

    /// The components of a vector field.
    pub fn vector(&self, field: Field) -> [&'a [f64]; 3] {
        [0, 1, 2].map(|component| self.component(field, component))
    }

    /// The identities; empty where they are not lent.
    pub fn identities(&self) -> &'a [u64] {
        if self.has(Field::Id) {
            &self.identities[..self.length]
        } else {
            &[]
        }
    }
}

/// Runs of numbers that a gauge may use.
const RUNS: usize = 12;
/// Runs of whole numbers likewise.
const INDICES: usize = 3;

/// Room in which a gauge computes the contributions of a block; its content is left over from whoever came before.
pub struct Work {
    /// What is read next: ask for some of it between one loop and the next, and it arrives meanwhile.
    pub ahead: Ahead,
    runs: Box<[Run; RUNS]>,
    indices: Box<[[u32; BLOCK]; INDICES]>,
    rough_run: Box<[f32; BLOCK]>,
}

/// The parts of a [`Work`].
pub struct Parts<'a> {
    /// Runs of numbers.
    pub runs: [&'a mut [f64; BLOCK]; RUNS],
    /// Runs of whole numbers.
    pub indices: [&'a mut [u32; BLOCK]; INDICES],
    /// A run of rough numbers.
    pub rough_run: &'a mut [f32; BLOCK],
    /// As [`Work::ahead`].
    pub ahead: &'a mut Ahead,
}

impl Default for Work {
    fn default() -> Self {
        Work {
            ahead: Ahead::default(),
            runs: Box::new([Run::EMPTY; RUNS]),
            indices: Box::new([[0; BLOCK]; INDICES]),
            rough_run: Box::new([0.0; BLOCK]),
        }
    }
}

impl Work {
    /// All of it at once.
    pub fn parts(&mut self) -> Parts<'_> {
        Parts {
            runs: self.runs.each_mut().map(|run| &mut run.numbers),
            indices: self.indices.each_mut(),
            rough_run: &mut self.rough_run,
            ahead: &mut self.ahead,
        }
    }
}

/// Where a thread keeps its block.
pub(super) struct Buffers {
    length: usize,
    elements: usize,
    values: Vec<Run>,
    identities: Vec<u64>,
    runs: [u16; Field::COUNT],
    next_run: u16,
    loaded: FieldSet,
    singles: FieldSet,
    /// Fields with a number in this block that is not finite.
    bad: FieldSet,
    /// Rough vectors of a field, and their largest component.
    rough: Box<[RoughRun; 3]>,
    rough_field: Option<(Field, f32)>,
    compact_values: Vec<Run>,
    compact_identities: Vec<u64>,
    kept: Vec<u32>,
}

impl Buffers {
    pub fn new(elements: usize) -> Buffers {
        let all: usize = crate::lend::FIELDS
            .iter()
            .map(|info| info.field.components(elements))
            .sum();
        Buffers {
            length: 0,
            elements,
            values: vec![Run::EMPTY; all],
            identities: vec![0; BLOCK],
            runs: [0; Field::COUNT],
            next_run: 0,
            loaded: FieldSet::default(),
            singles: FieldSet::default(),
            bad: FieldSet::default(),
            rough: Box::new([RoughRun::EMPTY; 3]),
            rough_field: None,
            compact_values: Vec::new(),
            compact_identities: Vec::new(),
            kept: Vec::new(),
        }
    }

    /// Starts a new block.
    pub fn begin(&mut self, length: usize) {
        self.length = length;
        self.loaded = FieldSet::default();
        self.singles = FieldSet::default();
        self.bad = FieldSet::default();
        self.rough_field = None;
        self.next_run = 0;
    }

    /// Reads a field's numbers; returns how many elements have one that is not finite.
    pub fn load(&mut self, field: Field, view: &View, start: usize) -> u64 {
        self.loaded.insert(field);
        self.runs[field as usize] = self.next_run;
        if view.scalar() == Scalar::F32 {
            self.singles.insert(field);
        }
        if field.info().shape == Shape::Identity {
            view.read_identities(start, &mut self.identities[..self.length]);
            return 0;
        }
        let components = field.components(self.elements);
        let first = self.next_run as usize;
        self.next_run += components as u16;
        let length = self.length;
        let runs = &mut self.values[first..first + components];
        let mut is_finite = true;
        if let [x, y, z] = &mut *runs
            && field.info().shape == Shape::Vector
        {
            let into = [x, y, z].map(|run| &mut run.numbers[..length]);
            is_finite = view.read_vectors(start, into);
        } else {
            for (component, run) in runs.iter_mut().enumerate() {
                is_finite &= view.read(component, start, &mut run.numbers[..length]);
            }
        }
        if is_finite {
            return 0;
        }
        self.bad.insert(field);
        (0..length)
            .filter(|&element| !self.element_is_finite(field, element))
            .count() as u64
    }

    fn element_is_finite(&self, field: Field, element: usize) -> bool {
        let run = self.runs[field as usize] as usize;
        field.info().shape == Shape::Identity
            || (0..field.components(self.elements))
                .all(|component| self.values[run + component].numbers[element].is_finite())
    }

    /// Are all these fields finite throughout the block?
    pub fn is_finite(&self, fields: FieldSet) -> bool {
        !self.bad.meets(fields)
    }

    /// Looks whether a field's numbers are finite, without reading them into the block unless some are not; returns
    /// how many elements have one that is not.
    pub fn check(&mut self, field: Field, view: &View, start: usize) -> u64 {
        if view.scalar() == Scalar::F32 {
            self.singles.insert(field);
        }
        if view.is_finite(start, self.length) {
            return 0;
        }
        self.load(field, view, start)
    }

    /// As [`Buffers::check`], and makes rough values on the way; one field a block.
    pub fn check_roughly(&mut self, field: Field, view: &View, start: usize) -> u64 {
        let length = self.length;
        if self.rough_field.is_some() {
            return self.check(field, view, start);
        }
        let runs = self.rough.each_mut().map(|run| &mut run.numbers[..length]);
        match view.read_roughly(start, runs) {
            Some(largest) => {
                self.rough_field = Some((field, largest));
                0
            }
            None => self.check(field, view, start),
        }
    }

    /// The whole block, restricted to some fields; `lot` holds it from element `start` on.
    pub fn block<'a>(&'a self, fields: FieldSet, lot: &'a Lot, start: usize) -> Block<'a> {
        Block {
            loaded: self.loaded,
            lot,
            start,
            rough: self
                .rough_field
                .map(|(field, largest)| (field, &*self.rough, largest)),
            length: self.length,
            values: &self.values,
            identities: &self.identities,
            runs: &self.runs,
            fields,
            singles: self.singles,
        }
    }

    /// The elements for which all these fields are finite, moved together; none when there are none. Fields that
    /// were only looked at are read first, since elements have other numbers afterwards.
    pub fn finite_only<'a>(
        &'a mut self,
        fields: FieldSet,
        lot: &'a Lot,
        start: usize,
    ) -> Option<Block<'a>> {
        for info in &crate::lend::FIELDS {
            let index = info.field as usize;
            if fields.has(index)
                && !self.loaded.has(index)
                && let Some(view) = lot.view(info.field)
            {
                self.load(info.field, view, start);
            }
        }
        let bad = FieldSet(self.bad.0 & fields.0);
        let mut kept = std::mem::take(&mut self.kept);
        kept.clear();
        kept.extend((0..self.length as u32).filter(|&element| {
            crate::lend::FIELDS
                .iter()
                .filter(|info| bad.has(info.field as usize))
                .all(|info| self.element_is_finite(info.field, element as usize))
        }));
        self.compact_values.resize(self.values.len(), Run::EMPTY);
        for run in 0..self.next_run as usize {
            for (to, from) in kept.iter().enumerate() {
                self.compact_values[run].numbers[to] = self.values[run].numbers[*from as usize];
            }
        }
        self.compact_identities.clear();
        self.compact_identities
            .extend(kept.iter().map(|&from| self.identities[from as usize]));
        let length = kept.len();
        self.kept = kept;
        (length > 0).then(|| Block {
            length,
            values: &self.compact_values,
            identities: &self.compact_identities,
            rough: None,
            ..self.block(fields, lot, start)
        })
    }
}
