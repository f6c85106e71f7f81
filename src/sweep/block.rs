//! A block of elements: a few hundred at a time, as doubles, one run of numbers for each component.

use crate::lend::{Field, Scalar, Shape, View};

/// Elements in a block: few enough that all fields of a block stay in a core's cache.
pub const BLOCK: usize = 128;

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
    values: &'a [f64],
    identities: &'a [u64],
    /// Where the first component of each field stands, in runs of [`BLOCK`]; none where it is not lent.
    runs: &'a [u16; Field::COUNT],
    fields: FieldSet,
    singles: FieldSet,
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

    /// One component of a field; empty where the field is not lent.
    pub fn component(&self, field: Field, component: usize) -> &'a [f64] {
        if !self.has(field) {
            return &[];
        }
        let start = (self.runs[field as usize] as usize + component) * BLOCK;
        &self.values[start..start + self.length]
    }

    /// One component of a field that is lent, as long as the longest block; beyond the elements its content means
    /// nothing.
    pub fn run(&self, field: Field, component: usize) -> &'a [f64; BLOCK] {
        let run = self.runs[field as usize] as usize + component;
        &self.values.as_chunks::<BLOCK>().0[run]
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
    /// Runs of numbers.
    pub runs: Box<[[f64; BLOCK]; RUNS]>,
    /// Runs of whole numbers.
    pub indices: Box<[[u32; BLOCK]; INDICES]>,
}

impl Default for Work {
    fn default() -> Self {
        Work {
            runs: Box::new([[0.0; BLOCK]; RUNS]),
            indices: Box::new([[0; BLOCK]; INDICES]),
        }
    }
}

/// Where a thread keeps its block.
pub(super) struct Buffers {
    length: usize,
    elements: usize,
    values: Vec<f64>,
    identities: Vec<u64>,
    runs: [u16; Field::COUNT],
    next_run: u16,
    loaded: FieldSet,
    singles: FieldSet,
    /// Fields with a number in this block that is not finite.
    bad: FieldSet,
    compact_values: Vec<f64>,
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
            values: vec![0.0; all * BLOCK],
            identities: vec![0; BLOCK],
            runs: [0; Field::COUNT],
            next_run: 0,
            loaded: FieldSet::default(),
            singles: FieldSet::default(),
            bad: FieldSet::default(),
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
        let first = self.next_run as usize * BLOCK;
        self.next_run += components as u16;
        let length = self.length;
        let runs = &mut self.values[first..first + components * BLOCK];
        let mut is_finite = true;
        if let ([x, y, z], []) = runs.as_chunks_mut::<BLOCK>()
            && field.info().shape == Shape::Vector
        {
            let into = [&mut x[..length], &mut y[..length], &mut z[..length]];
            is_finite = view.read_vectors(start, into);
        } else {
            for (component, run) in runs.chunks_exact_mut(BLOCK).enumerate() {
                is_finite &= view.read(component, start, &mut run[..length]);
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
                .all(|component| self.values[(run + component) * BLOCK + element].is_finite())
    }

    /// Are all these fields finite throughout the block?
    pub fn is_finite(&self, fields: FieldSet) -> bool {
        !self.bad.meets(fields)
    }

    /// The whole block, restricted to some fields.
    pub fn block(&self, fields: FieldSet) -> Block<'_> {
        Block {
            length: self.length,
            values: &self.values,
            identities: &self.identities,
            runs: &self.runs,
            fields,
            singles: self.singles,
        }
    }

    /// The elements for which all these fields are finite, moved together; none when there are none.
    pub fn finite_only(&mut self, fields: FieldSet) -> Option<Block<'_>> {
        let bad = FieldSet(self.bad.0 & fields.0);
        let mut kept = std::mem::take(&mut self.kept);
        kept.clear();
        kept.extend((0..self.length as u32).filter(|&element| {
            crate::lend::FIELDS
                .iter()
                .filter(|info| bad.has(info.field as usize))
                .all(|info| self.element_is_finite(info.field, element as usize))
        }));
        self.compact_values.resize(self.values.len(), 0.0);
        for run in 0..self.next_run as usize {
            for (to, from) in kept.iter().enumerate() {
                self.compact_values[run * BLOCK + to] = self.values[run * BLOCK + *from as usize];
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
            ..self.block(fields)
        })
    }
}
