//! What is gathered on one thread, and what comes out of the reduction.

use super::plan::{BinShape, BinSums, Counts, Plan, Sums, Top, TopShape};
use crate::exact::{Accumulator, Bins, Rounded, Total};
use crate::team::cells::{self, Kind, Layout, Part, WIDE_LIMBS};

/// Cells of a sum of rounded values.
const ROUNDED_LIMBS: usize = 2;

/// Sums in bins, as their number allows.
enum Binned {
    Exact(Bins),
    Rounded(Rounded),
}

/// Sums, counts and lists that one thread fills; merged over threads, then over ranks.
pub struct Sample {
    sums: Vec<Accumulator>,
    counts: Vec<u64>,
    bins: Vec<Binned>,
    tops: Vec<Vec<u64>>,
    shapes: Vec<TopShape>,
}

impl Sample {
    /// An empty sample of what the plan declares.
    pub fn new(plan: &Plan) -> Sample {
        let binned = |shape: &BinShape| {
            if shape.quanta.is_empty() {
                Binned::Exact(Bins::new(shape.bins, shape.quantities))
            } else {
                Binned::Rounded(Rounded::new(shape.bins, &shape.quanta))
            }
        };
        Sample {
            sums: vec![Accumulator::default(); plan.sums],
            counts: vec![0; plan.counts],
            bins: plan.bins.iter().map(binned).collect(),
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

    /// Adds a value of every quantity to the bin of each contribution, and counts it there.
    pub fn scatter(&mut self, sums: BinSums, bins: &[u32], values: &[&[f64]]) {
        match &mut self.bins[sums.0] {
            Binned::Exact(held) => held.add(bins, values),
            Binned::Rounded(held) => held.add(bins, values),
        }
    }

    /// Offers an item to a list of largest items; its first word must not be 0.
    pub fn offer(&mut self, top: Top, item: &[u64]) {
        debug_assert_eq!(item.len(), self.shapes[top.0].words);
        cells::insert_top(self.shapes[top.0].words, item, &mut self.tops[top.0]);
    }

    /// Contributions of finite values that were themselves not finite, so far.
    pub fn left_out(&self) -> u64 {
        let binned = self.bins.iter().map(|binned| match binned {
            Binned::Exact(held) => held.left_out(),
            Binned::Rounded(held) => held.left_out(),
        });
        self.sums
            .iter()
            .map(Accumulator::left_out)
            .chain(binned)
            .sum()
    }

    /// Forgets everything, keeping the memory.
    pub fn clear(&mut self) {
        self.sums.iter_mut().for_each(Accumulator::clear);
        self.counts.fill(0);
        self.bins.iter_mut().for_each(|binned| match binned {
            Binned::Exact(held) => held.clear(),
            Binned::Rounded(held) => held.clear(),
        });
        self.tops.iter_mut().for_each(|top| top.fill(0));
    }
}

/// Where a sample stands in the buffer of a reduction.
#[derive(Clone, Debug)]
pub struct Packing {
    sums: Part,
    counts: Part,
    /// For each set of bins its sums and its counts.
    bins: Vec<(BinShape, Part, Part)>,
    tops: Vec<Part>,
    shapes: Vec<TopShape>,
}

impl Packing {
    /// Adds the segments of a plan's cells to a layout.
    pub fn new(plan: &Plan, layout: &mut Layout) -> Packing {
        let mut binned = |shape: &BinShape| {
            let limbs = if shape.quanta.is_empty() {
                WIDE_LIMBS
            } else {
                ROUNDED_LIMBS
            };
            let sums = layout.add(Kind::Wide, limbs, shape.bins * shape.quantities);
            (shape.clone(), sums, layout.add(Kind::Sum, 1, shape.bins))
        };
        let bins = plan.bins.iter().map(&mut binned).collect();
        Packing {
            sums: layout.add(Kind::Wide, WIDE_LIMBS, plan.sums),
            counts: layout.add(Kind::Sum, 1, plan.counts),
            bins,
            tops: plan
                .tops
                .iter()
                .map(|shape| layout.add(Kind::Top, shape.words, shape.items))
                .collect(),
            shapes: plan.tops.clone(),
        }
    }

    /// Adds one thread's sample to a buffer.
    pub fn add(&self, layout: &Layout, sample: &mut Sample, buffer: &mut [u64]) {
        let sums = &mut buffer[layout.range(self.sums)];
        for (cells, sum) in sums.chunks_exact_mut(WIDE_LIMBS).zip(&sample.sums) {
            if !sum.is_untouched() {
                cells::add_with_carry(cells, sum.total().cells());
            }
        }
        for (cell, count) in buffer[layout.range(self.counts)]
            .iter_mut()
            .zip(&sample.counts)
        {
            *cell = cell.wrapping_add(*count);
        }
        for ((shape, sums, counts), binned) in self.bins.iter().zip(&mut sample.bins) {
            match binned {
                Binned::Exact(held) if !held.is_untouched() => {
                    held.settle();
                    let cells = &mut buffer[layout.range(*sums)];
                    for (place, cells) in cells.chunks_exact_mut(WIDE_LIMBS).enumerate() {
                        let (bin, quantity) = (place / shape.quantities, place % shape.quantities);
                        cells::add_with_carry(cells, held.total(bin, quantity).cells());
                    }
                    let cells = &mut buffer[layout.range(*counts)];
                    for (bin, cell) in cells.iter_mut().enumerate() {
                        *cell = cell.wrapping_add(held.number(bin));
                    }
                }
                Binned::Rounded(held) if !held.is_untouched() => {
                    let cells = &mut buffer[layout.range(*sums)];
                    for (place, cells) in cells.chunks_exact_mut(ROUNDED_LIMBS).enumerate() {
                        let (bin, quantity) = (place / shape.quantities, place % shape.quantities);
                        cells::add_with_carry(cells, held.cells(bin, quantity));
                    }
                    let cells = &mut buffer[layout.range(*counts)];
                    for (bin, cell) in cells.iter_mut().enumerate() {
                        *cell = cell.wrapping_add(held.number(bin));
                    }
                }
                _ => {}
            }
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
        let first = (sums.first + index) * WIDE_LIMBS;
        Total::from_cells(&cells[first..first + WIDE_LIMBS])
    }

    /// One count.
    pub fn count(&self, counts: Counts, index: usize) -> u64 {
        self.buffer[self.layout.range(self.packing.counts)][counts.first + index]
    }

    /// The sum of a quantity over several bins, rounded once.
    pub fn binned(
        &self,
        sums: BinSums,
        quantity: usize,
        bins: impl IntoIterator<Item = usize>,
    ) -> f64 {
        let (shape, part, _) = &self.packing.bins[sums.0];
        let cells = &self.buffer[self.layout.range(*part)];
        let place = |bin: usize| bin * shape.quantities + quantity;
        match shape.quanta.get(quantity) {
            None => {
                let mut total = Total::default();
                for bin in bins {
                    let first = place(bin) * WIDE_LIMBS;
                    total += &Total::from_cells(&cells[first..first + WIDE_LIMBS]);
                }
                total.to_f64()
            }
            Some(&quantum) => {
                let mut sum = [0; ROUNDED_LIMBS];
                for bin in bins {
                    let first = place(bin) * ROUNDED_LIMBS;
                    cells::add_with_carry(&mut sum, &cells[first..first + ROUNDED_LIMBS]);
                }
                Rounded::value(&sum, quantum)
            }
        }
    }

    /// Contributions to several bins.
    pub fn binned_count(&self, sums: BinSums, bins: impl IntoIterator<Item = usize>) -> u64 {
        let (_, _, part) = &self.packing.bins[sums.0];
        let cells = &self.buffer[self.layout.range(*part)];
        bins.into_iter().map(|bin| cells[bin]).sum()
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
