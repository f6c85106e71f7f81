//! What is gathered on one thread, and what comes out of the reduction.

use super::plan::{Counts, Plan, Sums, Top, TopShape};
use crate::exact::{Accumulator, Total};
use crate::team::cells::{self, Kind, Layout, Part};

/// Sums, counts and lists that one thread fills; merged over threads, then over ranks.
#[derive(Clone)]
pub struct Sample {
    sums: Vec<Accumulator>,
    counts: Vec<u64>,
    tops: Vec<Vec<u64>>,
    shapes: Vec<TopShape>,
}

impl Sample {
    /// An empty sample of what the plan declares.
    pub fn new(plan: &Plan) -> Sample {
        Sample {
            sums: vec![Accumulator::default(); plan.sums],
            counts: vec![0; plan.counts],
            tops: plan
                .tops
                .iter()
                .map(|shape| vec![0; shape.words * shape.items])
                .collect(),
            shapes: plan.tops.clone(),
        }
    }

    /// One exact sum.
    #[inline]
    pub fn sum(&mut self, sums: Sums, index: usize) -> &mut Accumulator {
        debug_assert!(index < sums.length);
        &mut self.sums[sums.first + index]
    }

    /// One count.
    #[inline]
    pub fn count(&mut self, counts: Counts, index: usize) -> &mut u64 {
        debug_assert!(index < counts.length);
        &mut self.counts[counts.first + index]
    }

    /// Offers an item to a list of largest items; its first word must not be 0.
    pub fn offer(&mut self, top: Top, item: &[u64]) {
        debug_assert_eq!(item.len(), self.shapes[top.0].words);
        cells::insert_top(self.shapes[top.0].words, item, &mut self.tops[top.0]);
    }

    /// Contributions of finite values that were themselves not finite, so far.
    pub fn left_out(&self) -> u64 {
        self.sums.iter().map(Accumulator::left_out).sum()
    }

    /// Forgets everything, keeping the memory.
    pub fn clear(&mut self) {
        self.sums.iter_mut().for_each(Accumulator::clear);
        self.counts.fill(0);
        self.tops.iter_mut().for_each(|top| top.fill(0));
    }
}

/// Where a sample stands in the buffer of a reduction.
#[derive(Clone, Debug)]
pub struct Packing {
    sums: Part,
    counts: Part,
    tops: Vec<Part>,
    shapes: Vec<TopShape>,
}

impl Packing {
    /// Adds the segments of a plan's cells to a layout.
    pub fn new(plan: &Plan, layout: &mut Layout) -> Packing {
        Packing {
            sums: layout.add(Kind::Wide, 0, plan.sums),
            counts: layout.add(Kind::Sum, 1, plan.counts),
            tops: plan
                .tops
                .iter()
                .map(|shape| layout.add(Kind::Top, shape.words, shape.items))
                .collect(),
            shapes: plan.tops.clone(),
        }
    }

    /// Adds one thread's sample to a buffer.
    pub fn add(&self, layout: &Layout, sample: &Sample, buffer: &mut [u64]) {
        let sums = &mut buffer[layout.range(self.sums)];
        for (cells, sum) in sums.chunks_exact_mut(cells::WIDE_LIMBS).zip(&sample.sums) {
            cells::add_with_carry(cells, sum.total().cells());
        }
        for (cell, count) in buffer[layout.range(self.counts)]
            .iter_mut()
            .zip(&sample.counts)
        {
            *cell = cell.wrapping_add(*count);
        }
        for ((part, shape), top) in self.tops.iter().zip(&self.shapes).zip(&sample.tops) {
            let list = &mut buffer[layout.range(*part)];
            for item in top.chunks_exact(shape.words).filter(|item| item[0] != 0) {
                cells::insert_top(shape.words, item, list);
            }
        }
    }

    /// Views the combined buffer.
    pub fn reduced<'a>(&'a self, layout: &'a Layout, buffer: &'a [u64]) -> Reduced<'a> {
        Reduced {
            packing: self,
            layout,
            buffer,
        }
    }
}

/// The sums, counts and lists of all ranks.
#[derive(Clone, Copy)]
pub struct Reduced<'a> {
    packing: &'a Packing,
    layout: &'a Layout,
    buffer: &'a [u64],
}

impl<'a> Reduced<'a> {
    /// One exact sum.
    pub fn sum(&self, sums: Sums, index: usize) -> Total {
        let cells = &self.buffer[self.layout.range(self.packing.sums)];
        let first = (sums.first + index) * cells::WIDE_LIMBS;
        Total::from_cells(&cells[first..first + cells::WIDE_LIMBS])
    }

    /// One count.
    pub fn count(&self, counts: Counts, index: usize) -> u64 {
        self.buffer[self.layout.range(self.packing.counts)][counts.first + index]
    }

    /// The largest items, largest first.
    pub fn top(&self, top: Top) -> impl Iterator<Item = &'a [u64]> {
        let range = self.layout.range(self.packing.tops[top.0]);
        let buffer: &'a [u64] = self.buffer;
        buffer[range]
            .chunks_exact(self.packing.shapes[top.0].words)
            .filter(|item| item[0] != 0)
    }
}
