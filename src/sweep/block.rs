//! A block of elements: a few hundred at a time, as doubles, one run of numbers for each component.

use crate::lend::{Field, Scalar, Shape, View};
use multiversion::multiversion;

/// Elements in a block: few enough that all fields of a block stay in a core's cache.
pub const BLOCK: usize = 1024;

/// Elements of one species, all fields finite.
pub struct Block<'a> {
    length: usize,
    values: &'a [f64],
    identities: &'a [u64],
    /// Where the first component of each field stands, in runs of [`BLOCK`]; none where it is not lent.
    runs: [Option<u16>; Field::COUNT],
    single: &'a [bool; Field::COUNT],
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
        self.runs[field as usize].is_some()
    }

    /// Does the host keep the field in single precision?
    pub fn is_single(&self, field: Field) -> bool {
        self.single[field as usize]
    }

    /// One component of a field; empty where the field is not lent.
    pub fn component(&self, field: Field, component: usize) -> &'a [f64] {
        match self.runs[field as usize] {
            Some(run) => {
                let start = (run as usize + component) * BLOCK;
                &self.values[start..start + self.length]
            }
            None => &[],
        }
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

/// Room in which a gauge computes the contributions of a block.
pub struct Work {
    runs: Vec<f64>,
}

impl Default for Work {
    fn default() -> Self {
        Work {
            runs: vec![0.0; 4 * BLOCK],
        }
    }
}

impl Work {
    /// Four runs of numbers, each as long as a block; their content is left over from whoever came before.
    pub fn runs(&mut self, length: usize) -> [&mut [f64]; 4] {
        let mut chunks = self.runs.chunks_exact_mut(BLOCK);
        std::array::from_fn(|_| {
            chunks
                .next()
                .map_or(&mut [] as &mut [f64], |run| &mut run[..length])
        })
    }
}

/// Where a thread keeps its block.
pub(super) struct Buffers {
    length: usize,
    elements: usize,
    values: Vec<f64>,
    identities: Vec<u64>,
    runs: [Option<u16>; Field::COUNT],
    next_run: u16,
    single: [bool; Field::COUNT],
    /// Fields with a number in this block that is not finite.
    bad: [bool; Field::COUNT],
    compact_values: Vec<f64>,
    compact_identities: Vec<u64>,
}

impl Buffers {
    pub(super) fn new(elements: usize) -> Buffers {
        let all: usize = crate::lend::FIELDS
            .iter()
            .map(|info| info.field.components(elements))
            .sum();
        Buffers {
            length: 0,
            elements,
            values: vec![0.0; all * BLOCK],
            identities: vec![0; BLOCK],
            runs: [None; Field::COUNT],
            next_run: 0,
            single: [false; Field::COUNT],
            bad: [false; Field::COUNT],
            compact_values: Vec::new(),
            compact_identities: Vec::new(),
        }
    }

    /// Starts a new block.
    pub(super) fn begin(&mut self, length: usize) {
        self.length = length;
        self.runs = [None; Field::COUNT];
        self.bad = [false; Field::COUNT];
        self.next_run = 0;
    }

    /// Reads a field's numbers; returns how many elements have one that is not finite.
    pub(super) fn load(&mut self, field: Field, view: &View, start: usize) -> u64 {
        self.runs[field as usize] = Some(self.next_run);
        self.single[field as usize] = view.scalar() == Scalar::F32;
        if field.info().shape == Shape::Identity {
            view.read_identities(start, &mut self.identities[..self.length]);
            return 0;
        }
        let components = field.components(self.elements);
        let mut any_bad = false;
        for component in 0..components {
            let run = self.next_run as usize * BLOCK;
            let into = &mut self.values[run..run + self.length];
            view.read(component, start, into);
            any_bad |= !all_finite(into);
            self.next_run += 1;
        }
        self.bad[field as usize] = any_bad;
        if !any_bad {
            return 0;
        }
        (0..self.length)
            .filter(|&element| !self.element_is_finite(field, element))
            .count() as u64
    }

    fn element_is_finite(&self, field: Field, element: usize) -> bool {
        let Some(run) = self.runs[field as usize] else {
            return true;
        };
        if field.info().shape == Shape::Identity {
            return true;
        }
        (0..field.components(self.elements))
            .all(|component| self.values[(run as usize + component) * BLOCK + element].is_finite())
    }

    /// Are all these fields finite throughout the block?
    pub(super) fn is_finite(&self, fields: &[Field]) -> bool {
        fields.iter().all(|&field| !self.bad[field as usize])
    }

    /// The whole block, restricted to some fields.
    pub(super) fn block(&self, fields: &[Field]) -> Block<'_> {
        Block {
            length: self.length,
            values: &self.values,
            identities: &self.identities,
            runs: std::array::from_fn(|index| {
                self.runs[index].filter(|_| fields.iter().any(|f| *f as usize == index))
            }),
            single: &self.single,
        }
    }

    /// The elements for which all these fields are finite, moved together; none when there are none.
    pub(super) fn finite_only(&mut self, fields: &[Field]) -> Option<Block<'_>> {
        let kept: Vec<usize> = (0..self.length)
            .filter(|&element| {
                fields
                    .iter()
                    .all(|&field| self.element_is_finite(field, element))
            })
            .collect();
        if kept.is_empty() {
            return None;
        }
        self.compact_values.resize(self.values.len(), 0.0);
        for run in 0..self.next_run as usize {
            for (to, from) in kept.iter().enumerate() {
                self.compact_values[run * BLOCK + to] = self.values[run * BLOCK + from];
            }
        }
        self.compact_identities.clear();
        self.compact_identities
            .extend(kept.iter().map(|&from| self.identities[from]));
        let length = kept.len();
        Some(Block {
            length,
            values: &self.compact_values,
            identities: &self.compact_identities,
            ..self.block(fields)
        })
    }
}

/// True when no number is NaN or infinite; without branches, so that it runs at the speed of memory.
#[allow(clippy::eq_op)] // A number minus itself is the question that is asked here.
#[multiversion(targets("x86_64+avx+avx2", "aarch64+neon"))]
fn all_finite(values: &[f64]) -> bool {
    // x - x is zero for a finite x and NaN otherwise, and a NaN stays in the sum.
    let mut sums = [0.0; 8];
    let chunks = values.chunks_exact(8);
    let rest: f64 = chunks.remainder().iter().map(|value| value - value).sum();
    for chunk in chunks {
        for (sum, value) in sums.iter_mut().zip(chunk) {
            *sum += value - value;
        }
    }
    rest == 0.0 && sums.iter().all(|sum| *sum == 0.0)
}
