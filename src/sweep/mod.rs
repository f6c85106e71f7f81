//! One pass over the lent arrays, block by block.
//!
//! Each lent number is read from memory once, converted to a double in a block small enough for cache, and
//! handed to every gauge that wants it. Elements with a number that is not finite are left out of the gauges
//! that need that field, and counted.

mod block;

pub use block::{BLOCK, Block, Work};

use crate::gauges::{Active, Moment, NeedState, Plan, Sample};
use crate::lend::{Field, Lot, Species};
use block::Buffers;

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
    workers: Vec<Worker>,
    /// Made once, and only when more than one thread was asked for.
    pool: Option<rayon::ThreadPool>,
    /// What became of each need on this rank since the last row, gauge by gauge.
    pub needs: Vec<Vec<NeedState>>,
}

/// Where a count of numbers that are not finite stands.
pub fn not_finite_index(species: Species, field: Field) -> usize {
    species as usize * Field::COUNT + field as usize
}

impl Sweep {
    /// Prepares for the gauges of a plan on `threads` threads, of which the caller's is one when it is the
    /// only one.
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
        let pool = (threads > 1).then(|| {
            rayon::ThreadPoolBuilder::new()
                .num_threads(threads)
                .thread_name(|index| format!("limno sweep {index}"))
                .spawn_handler(|thread| {
                    crate::team::thread::spawn("limno sweep", || thread.run()).map(|_| ())
                })
                .build()
                .map_err(|error| format!("cannot start {threads} threads for the sweep: {error}"))
        });
        Ok(Sweep {
            workers: (0..threads).map(|_| worker()).collect(),
            pool: pool.transpose()?,
            needs: plan
                .needs
                .iter()
                .map(|needs| vec![NeedState::default(); needs.len()])
                .collect(),
        })
    }

    /// Measures what is lent of a species.
    pub fn sound(
        &mut self,
        species: Species,
        lot: &Lot,
        gauges: &[Active],
        plan: &Plan,
        moment: &Moment,
    ) {
        let mut fields: Vec<Field> = Vec::with_capacity(Field::COUNT);
        let mut ready: Vec<(usize, Vec<Field>)> = Vec::with_capacity(gauges.len());
        for (index, needs) in plan.needs.iter().enumerate() {
            let mut complete = true;
            let mut wanted = Vec::new();
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
                    wanted.push(need.field);
                }
            }
            if complete && !wanted.is_empty() {
                fields.extend(
                    wanted
                        .iter()
                        .filter(|&field| !fields.contains(field))
                        .copied()
                        .collect::<Vec<_>>(),
                );
                ready.push((index, wanted));
            }
        }
        if ready.is_empty() || lot.count() == 0 {
            return;
        }
        let pass = Pass {
            species,
            lot,
            gauges,
            moment,
            fields: &fields,
            ready: &ready,
        };
        let blocks = lot.count().div_ceil(BLOCK);
        match &self.pool {
            None => pass.run(0, lot.count(), &mut self.workers[0]),
            Some(pool) => {
                let share = blocks.div_ceil(self.workers.len()) * BLOCK;
                let pass = &pass;
                pool.scope(|scope| {
                    for (index, worker) in self.workers.iter_mut().enumerate() {
                        let start = (index * share).min(lot.count());
                        let end = (start + share).min(lot.count());
                        scope.spawn(move |_| pass.run(start, end, worker));
                    }
                });
            }
        }
    }

    /// The samples of all threads.
    pub fn workers(&self) -> &[Worker] {
        &self.workers
    }

    /// The sample of the calling thread, for what is not measured from arrays.
    pub fn own_sample(&mut self) -> &mut Sample {
        &mut self.workers[0].sample
    }

    /// Forgets what was gathered, keeping the memory.
    pub fn clear(&mut self) {
        for worker in &mut self.workers {
            worker.sample.clear();
            worker.not_finite.fill(0);
        }
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
    /// Every field that some gauge reads, once.
    fields: &'a [Field],
    /// Gauges that have what they need, with the fields they read.
    ready: &'a [(usize, Vec<Field>)],
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
        let mut all_finite = true;
        buffers.begin(length);
        for &field in self.fields {
            if let Some(view) = self.lot.view(field) {
                let bad = buffers.load(field, view, start);
                not_finite[not_finite_index(self.species, field)] += bad;
                all_finite &= bad == 0;
            }
        }
        for (index, fields) in self.ready {
            let gauge = &self.gauges[*index].gauge;
            if all_finite || buffers.is_finite(fields) {
                gauge.measure(
                    self.species,
                    &buffers.block(fields),
                    self.moment,
                    work,
                    sample,
                );
            } else if let Some(block) = buffers.finite_only(fields) {
                gauge.measure(self.species, &block, self.moment, work, sample);
            }
        }
    }
}
