//! One pass over the lent arrays, block by block.
//!
//! Each lent number is read from memory once, converted to a double in a block small enough for cache, and
//! handed to every gauge that wants it. Elements with a number that is not finite are left out of the gauges
//! that need that field, and counted.

mod block;

pub use block::{BLOCK, Block, Parts, Rough, Work};

use crate::gauges::{Active, Moment, NeedState, Plan, Sample};
use crate::lend::{FIELDS, Field, Lot, Species};
use crate::team::crew::Crew;
use block::{Buffers, FieldSet};
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Mutex, PoisonError};

/// Elements that a thread takes at a time: many blocks, so that threads seldom meet, and few enough that all end
/// at about the same time.
const SHARE: usize = 32 * BLOCK;

/// The memory of one thread: its sample and its block.
pub struct Worker {
    /// What this thread has gathered since the last row.
    pub sample: Sample,
    /// Numbers that were not finite, by species and field.
    pub not_finite: Vec<u64>,
    buffers: Buffers,
    work: Work,
}

/// Everything that measures: the gauges' needs resolved, and a worker for each thread.
pub struct Sweep {
    workers: Vec<Mutex<Worker>>,
    crew: Crew,
    /// What became of each need on this rank since the last row, gauge by gauge.
    pub needs: Vec<Vec<NeedState>>,
    /// Gauges that can measure the present species, with the fields they read; kept for its memory.
    ready: Vec<(usize, FieldSet)>,
    /// All fields of the present pass; likewise.
    order: Vec<Field>,
}

/// What a pass reads.
#[derive(Clone, Copy, Default)]
struct Fields {
    /// Made ready in blocks.
    in_blocks: FieldSet,
    /// Read of some elements by some gauge.
    of_some: FieldSet,
    /// Those of them by whose rough values the elements are found.
    roughly: FieldSet,
}

/// Where a count of numbers that are not finite stands.
pub fn not_finite_index(species: Species, field: Field) -> usize {
    species as usize * Field::COUNT + field as usize
}

/// Nothing is left half done in a worker that could matter: after a panic the run sleeps.
fn worker(cell: &mut Mutex<Worker>) -> &mut Worker {
    cell.get_mut().unwrap_or_else(PoisonError::into_inner)
}

impl Sweep {
    /// Prepares for the gauges of a plan on `threads` threads, of which the caller's is one.
    ///
    /// # Errors
    /// When the system refuses the threads.
    pub fn new(plan: &Plan, elements: usize, threads: usize) -> Result<Sweep, String> {
        let threads = threads.max(1);
        let worker = || Worker {
            sample: Sample::new(plan),
            not_finite: vec![0; Species::COUNT * Field::COUNT],
            buffers: Buffers::new(elements),
            work: Work::default(),
        };
        let crew = Crew::new(threads)
            .map_err(|error| format!("cannot start {threads} threads for the sweep: {error}"))?;
        Ok(Sweep {
            workers: (0..threads).map(|_| Mutex::new(worker())).collect(),
            crew,
            needs: plan
                .needs
                .iter()
                .map(|needs| vec![NeedState::default(); needs.len()])
                .collect(),
            ready: Vec::with_capacity(plan.needs.len()),
            order: Vec::with_capacity(Field::COUNT),
        })
    }

    /// Measures what is lent of a species.
    pub fn sound(
        &mut self,
        species: Species,
        lot: &Lot,
        gauges: &mut [Active],
        plan: &Plan,
        moment: &Moment,
    ) {
        let fields = self.resolve(species, lot, plan);
        if self.ready.is_empty() || lot.count() == 0 {
            return;
        }
        for (index, _) in &self.ready {
            gauges[*index].gauge.prepare(moment);
        }
        let pass = Pass {
            species,
            lot,
            gauges,
            moment,
            fields,
            order: &self.order,
            ready: &self.ready,
        };
        if lot.count() <= SHARE || self.workers.len() == 1 {
            return pass.run(0, lot.count(), worker(&mut self.workers[0]));
        }
        let next = AtomicUsize::new(0);
        let workers = &self.workers;
        self.crew.run(&|number| {
            let mut worker = workers[number]
                .lock()
                .unwrap_or_else(PoisonError::into_inner);
            loop {
                let start = next.fetch_add(SHARE, Ordering::Relaxed);
                if start >= lot.count() {
                    break;
                }
                pass.run(start, (start + SHARE).min(lot.count()), &mut worker);
            }
        });
    }

    /// Finds the gauges that have what they need of a species, and all fields that they read.
    fn resolve(&mut self, species: Species, lot: &Lot, plan: &Plan) -> Fields {
        let mut fields = Fields::default();
        self.ready.clear();
        for (index, needs) in plan.needs.iter().enumerate() {
            let mut complete = true;
            let mut wanted = FieldSet::default();
            let mut of_some = FieldSet::default();
            for (need, state) in needs.iter().zip(&mut self.needs[index]) {
                if need.species != species {
                    continue;
                }
                state.soundings += 1;
                if lot.lacks(need.field) {
                    // Also where the gauge could do without the field: the host meant to lend it.
                    state.with += u64::from(need.optional);
                    state.without += 1;
                    complete = false;
                } else if lot.count() == 0 {
                    continue;
                } else if lot.view(need.field).is_none() {
                    state.without += 1;
                    complete &= need.optional;
                } else {
                    state.with += 1;
                    wanted.insert(need.field);
                    if need.of_some {
                        of_some.insert(need.field);
                    }
                    if need.roughly {
                        fields.roughly.insert(need.field);
                    }
                }
            }
            if complete && !wanted.is_empty() {
                fields.in_blocks.extend(wanted.without(of_some));
                fields.of_some.extend(of_some);
                self.ready.push((index, wanted));
            }
        }
        let all = fields.in_blocks.with(fields.of_some);
        self.order.clear();
        self.order.extend(
            FIELDS
                .iter()
                .map(|info| info.field)
                .filter(|&field| all.has(field as usize)),
        );
        fields
    }

    /// Calls `visit` for the worker of every thread.
    pub fn each_worker(&mut self, mut visit: impl FnMut(&mut Worker)) {
        self.workers.iter_mut().for_each(|cell| visit(worker(cell)));
    }

    /// The sample of the calling thread, for what is not measured from arrays.
    pub fn own_sample(&mut self) -> &mut Sample {
        &mut worker(&mut self.workers[0]).sample
    }

    /// Forgets what was gathered, keeping the memory.
    pub fn clear(&mut self) {
        self.each_worker(|worker| {
            worker.sample.clear();
            worker.not_finite.fill(0);
        });
        self.needs
            .iter_mut()
            .for_each(|needs| needs.fill(NeedState::default()));
    }
}

/// One pass over one species.
struct Pass<'a> {
    species: Species,
    lot: &'a Lot,
    gauges: &'a [Active],
    moment: &'a Moment,
    /// Every field that some gauge reads.
    fields: Fields,
    /// All of these fields.
    order: &'a [Field],
    /// Gauges that have what they need, with the fields they read.
    ready: &'a [(usize, FieldSet)],
}

impl Pass<'_> {
    fn run(&self, start: usize, end: usize, worker: &mut Worker) {
        let mut at = start;
        while at < end {
            let length = BLOCK.min(end - at);
            self.measure_block(at, length, worker);
            at += length;
        }
    }

    fn measure_block(&self, start: usize, length: usize, worker: &mut Worker) {
        let Worker {
            sample,
            not_finite,
            buffers,
            work,
        } = worker;
        let Fields {
            in_blocks, roughly, ..
        } = self.fields;
        buffers.begin(length);
        work.ahead.clear();
        for &field in self.order {
            let Some(view) = self.lot.view(field) else {
                continue;
            };
            let index = field as usize;
            // While this block is measured the next one arrives.
            work.ahead.add(view, start + length, BLOCK);
            work.ahead.some();
            let mut bad = 0;
            if roughly.has(index) {
                bad = buffers.check_roughly(field, view, start);
            }
            if in_blocks.has(index) {
                bad = buffers.load(field, view, start);
            } else if !roughly.has(index) {
                bad = buffers.check(field, view, start);
            }
            not_finite[not_finite_index(self.species, field)] += bad;
        }
        for &(index, fields) in self.ready {
            let gauge = &self.gauges[index].gauge;
            work.ahead.some();
            if buffers.is_finite(fields) {
                let block = buffers.block(fields, self.lot, start);
                gauge.measure(self.species, &block, self.moment, work, sample);
            } else if let Some(block) = buffers.finite_only(fields, self.lot, start) {
                gauge.measure(self.species, &block, self.moment, work, sample);
            }
        }
    }
}
