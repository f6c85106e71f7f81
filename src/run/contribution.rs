//! What a rank says in a reduction besides its sums: which step it means, how it fares, what it costs.
//!
//! Every rank receives the same combined words, so every rank draws the same conclusion from them; nothing
//! here may depend on anything else.

use super::status::Status;
use crate::exact::{from_order_key, order_key};
use crate::gauges::{NeedState, Packing, Plan};
use crate::lend::{Field, Species};
use crate::sweep::not_finite_index;
use crate::team::cells::{Kind, Layout, Part};

/// Bytes of text that a rank can send along; longer texts are cut.
const TEXT_BYTES: usize = 320;
const TEXT_WORDS: usize = TEXT_BYTES / 8;

/// What a rank is doing when it contributes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Condition {
    /// Entering a step, all well.
    Well,
    /// Entering a step of which something could not be measured.
    InError,
    /// Fell asleep after a fault of its own.
    Asleep,
    /// Closing the run.
    Closing,
    /// Called to enter without knowing which step, or whether it is measured: stands for the step that the others
    /// contribute to, whichever it is.
    InDoubt,
}

/// The clock words of a contribution.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StepWords {
    /// The host's step number.
    pub step: u64,
    /// The declared time coordinate, where it was acceptable.
    pub time: Option<f64>,
    /// Does this rank know when the last row was?
    pub has_interval: bool,
}

/// What the host said of the step, of which the row tells the largest of all ranks.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct HostWords {
    /// Steps marked since the last row, this one included.
    pub steps: u64,
    /// Is the host about to write a checkpoint?
    pub checkpoint: bool,
    /// Length of the step; 0 when not known.
    pub step_length: f64,
}

/// Where the words of a contribution stand.
pub struct Words {
    /// The whole buffer.
    pub layout: Layout,
    /// The gauges' cells.
    pub packing: Packing,
    ranks: Part,
    clock: Part,
    host: Part,
    cost: Part,
    needs: Part,
    not_finite: Part,
    text: Part,
    /// Fields whose numbers are checked, with their species.
    pub checked: Vec<(Species, Field)>,
}

const CONDITIONS: usize = 5;
const TIMED: usize = 5;
const WITHOUT_INTERVAL: usize = 6;
const LEFT_OUT: usize = 7;
const RANK_CELLS: usize = 8;
const COST_CELLS: usize = 3;

/// What a rank's part has cost since its last contribution, in ns; the row tells the largest of all ranks.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct CostWords {
    /// Time on steps, the library's included.
    pub host: u64,
    /// Time inside calls of the library.
    pub library: u64,
    /// Time spent waiting for the oldest reduction because a third would have been in flight.
    pub waiting: u64,
}

impl Words {
    /// The words of the gauges of a plan.
    pub fn new(plan: &Plan) -> Words {
        let mut checked: Vec<(Species, Field)> = Vec::new();
        for need in plan
            .needs
            .iter()
            .flatten()
            .filter(|need| need.field != Field::Id)
        {
            if !checked.contains(&(need.species, need.field)) {
                checked.push((need.species, need.field));
            }
        }
        checked.sort_unstable();
        let mut layout = Layout::default();
        let ranks = layout.add(Kind::Sum, 1, RANK_CELLS);
        let clock = layout.add(Kind::Max, 1, 4);
        let host = layout.add(Kind::Max, 1, 3);
        let cost = layout.add(Kind::Max, 1, COST_CELLS);
        let needs = layout.add(
            Kind::Sum,
            1,
            3 * plan.needs.iter().map(Vec::len).sum::<usize>(),
        );
        let not_finite = layout.add(Kind::Sum, 1, checked.len());
        let text = layout.add(Kind::Word, 1 + TEXT_WORDS, 1);
        let packing = Packing::new(plan, &mut layout);
        Words {
            layout,
            packing,
            ranks,
            clock,
            host,
            cost,
            needs,
            not_finite,
            text,
            checked,
        }
    }

    /// Says how this rank fares.
    pub fn put_condition(&self, buffer: &mut [u64], condition: Condition, left_out: u64) {
        let cells = &mut buffer[self.layout.range(self.ranks)];
        cells[condition as usize] = 1;
        cells[LEFT_OUT] = left_out;
    }

    /// Says which step this rank means.
    pub fn put_step(&self, buffer: &mut [u64], words: StepWords) {
        let cells = &mut buffer[self.layout.range(self.clock)];
        // The largest and, through the complement, the smallest; 0 in both places: nothing said.
        cells[0] = words.step.saturating_add(1);
        cells[1] = !words.step;
        if let Some(time) = words.time {
            cells[2] = order_key(time);
            cells[3] = !order_key(time);
        }
        let ranks = &mut buffer[self.layout.range(self.ranks)];
        ranks[TIMED] = u64::from(words.time.is_some());
        ranks[WITHOUT_INTERVAL] = u64::from(!words.has_interval);
    }

    /// Says what the host said of the step.
    pub fn put_host(&self, buffer: &mut [u64], words: HostWords) {
        // The bits of floats that are not negative stand in the order of their values.
        let length = words.step_length.abs().to_bits();
        buffer[self.layout.range(self.host)].copy_from_slice(&[
            words.steps,
            u64::from(words.checkpoint),
            length,
        ]);
    }

    /// Says what the library and the host's steps have cost this rank.
    pub fn put_cost(&self, buffer: &mut [u64], words: CostWords) {
        let cells = [words.host, words.library, words.waiting];
        buffer[self.layout.range(self.cost)].copy_from_slice(&cells);
    }

    /// Says what became of the needs of every gauge.
    pub fn put_needs(&self, buffer: &mut [u64], needs: &[Vec<NeedState>]) {
        let cells = &mut buffer[self.layout.range(self.needs)];
        for (cells, state) in cells.chunks_exact_mut(3).zip(needs.iter().flatten()) {
            cells.copy_from_slice(&[state.soundings, state.with, state.without]);
        }
    }

    /// Adds one thread's counts of numbers that are not finite.
    pub fn add_not_finite(&self, buffer: &mut [u64], counts: &[u64]) {
        let cells = &mut buffer[self.layout.range(self.not_finite)];
        for (cell, (species, field)) in cells.iter_mut().zip(&self.checked) {
            *cell += counts[not_finite_index(*species, *field)];
        }
    }

    /// Says a sentence; of several ranks the lowest is heard, and one that fell asleep before all others.
    pub fn put_text(
        &self,
        buffer: &mut [u64],
        urgent: bool,
        rank: u32,
        status: Status,
        text: &str,
    ) {
        let cells = &mut buffer[self.layout.range(self.text)];
        cells[0] = u64::from(urgent) << 63
            | u64::from(u32::MAX - rank) << 16
            | (status as u64 & 0x7fff) << 1
            | 1;
        let end = text.floor_char_boundary(TEXT_BYTES);
        let bytes: &mut [u8] = bytemuck::cast_slice_mut(&mut cells[1..]);
        bytes[..end].copy_from_slice(&text.as_bytes()[..end]);
    }

    /// Reads the combined words.
    pub fn read(&self, buffer: &[u64]) -> Combined {
        let ranks = &buffer[self.layout.range(self.ranks)];
        let clock = &buffer[self.layout.range(self.clock)];
        let host = &buffer[self.layout.range(self.host)];
        let cost = &buffer[self.layout.range(self.cost)];
        let text = &buffer[self.layout.range(self.text)];
        let range = |high: u64, low: u64| (high != 0).then_some((!low, high));
        Combined {
            ranks: std::array::from_fn(|condition| ranks[condition]),
            timed: ranks[TIMED],
            without_interval: ranks[WITHOUT_INTERVAL],
            left_out: ranks[LEFT_OUT],
            steps: range(clock[0], clock[1]).map(|(low, high)| (low, high - 1)),
            times: range(clock[2], clock[3])
                .map(|(low, high)| (from_order_key(low), from_order_key(high))),
            host: HostWords {
                steps: host[0],
                checkpoint: host[1] != 0,
                step_length: f64::from_bits(host[2]),
            },
            cost: CostWords {
                host: cost[0],
                library: cost[1],
                waiting: cost[2],
            },
            said: read_text(text),
        }
    }

    /// What became of each need over all ranks, gauge by gauge.
    pub fn needs<'a>(&self, buffer: &'a [u64]) -> impl Iterator<Item = NeedState> + use<'a> {
        let cells = &buffer[self.layout.range(self.needs)];
        cells.chunks_exact(3).map(|cells| NeedState {
            soundings: cells[0],
            with: cells[1],
            without: cells[2],
        })
    }

    /// Elements with numbers that are not finite on all ranks, by checked field.
    pub fn not_finite<'a>(&self, buffer: &'a [u64]) -> &'a [u64] {
        &buffer[self.layout.range(self.not_finite)]
    }
}

fn read_text(cells: &[u64]) -> Option<Said> {
    let head = cells[0];
    if head == 0 {
        return None;
    }
    let bytes: &[u8] = bytemuck::cast_slice(&cells[1..]);
    let end = bytes
        .iter()
        .position(|&byte| byte == 0)
        .unwrap_or(bytes.len());
    Some(Said {
        rank: u32::MAX - (head >> 16) as u32,
        status: Status::from_number((head >> 1 & 0x7fff) as i32).unwrap_or(Status::Internal),
        text: String::from_utf8_lossy(&bytes[..end]).into_owned(),
    })
}

/// A sentence that one rank sent to all.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Said {
    /// Who.
    pub rank: u32,
    /// The status it has.
    pub status: Status,
    /// What it says.
    pub text: String,
}

/// The combined words: the same on every rank.
#[derive(Clone, Debug, PartialEq)]
pub struct Combined {
    ranks: [u64; CONDITIONS],
    /// Ranks that gave an acceptable time.
    pub timed: u64,
    /// Ranks that do not know when the last row was.
    pub without_interval: u64,
    /// Contributions that overflowed.
    pub left_out: u64,
    /// Smallest and largest step number.
    pub steps: Option<(u64, u64)>,
    /// Earliest and latest time.
    pub times: Option<(f64, f64)>,
    /// What the host said, of all ranks the largest.
    pub host: HostWords,
    /// What it has cost, of all ranks the largest.
    pub cost: CostWords,
    /// What the lowest rank with something to say says.
    pub said: Option<Said>,
}

impl Combined {
    /// How many ranks are in a condition.
    pub fn ranks(&self, condition: Condition) -> u64 {
        self.ranks[condition as usize]
    }

    /// Must everyone go to sleep? Then why.
    pub fn reason_to_sleep(&self) -> Option<String> {
        let said = self
            .said
            .as_ref()
            .map(|said| format!("rank {}: {}", said.rank, said.text));
        if self.ranks(Condition::Asleep) > 0 {
            return Some(said.unwrap_or_else(|| "a rank fell asleep without a word".to_string()));
        }
        let closing = self.ranks(Condition::Closing);
        let entering = self.ranks(Condition::Well) + self.ranks(Condition::InError);
        if closing > 0 && entering > 0 {
            return Some(format!(
                "{closing} ranks closed the run while {entering} were entering a step; every rank must make the same \
                 calls of limno_enter and limno_close"
            ));
        }
        match (self.steps, self.times) {
            (Some((first, last)), _) if first != last => Some(format!(
                "the ranks disagree on the step: {first} on one, {last} on another; every rank must enter the same steps"
            )),
            (_, Some((first, last))) if first != last => Some(format!(
                "the ranks disagree on the time of a step: {first:?} on one, {last:?} on another; give every rank the \
                 same clock"
            )),
            _ => None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::team::cells::combine;

    fn words() -> Words {
        Words::new(&Plan::new(vec![crate::series::schema::Table {
            name: "run".to_string(),
            description: String::new(),
            columns: Vec::new(),
        }]))
    }

    fn contribution(words: &Words, step: u64, time: f64, condition: Condition) -> Vec<u64> {
        let mut buffer = Vec::new();
        words.layout.clear(&mut buffer);
        words.put_condition(&mut buffer, condition, 0);
        words.put_step(
            &mut buffer,
            StepWords {
                step,
                time: Some(time),
                has_interval: true,
            },
        );
        buffer
    }

    #[test]
    fn ranks_that_agree_stay_awake_and_others_sleep() {
        let words = words();
        for (step, time, condition, reason) in [
            (7, 0.5, Condition::Well, None),
            (8, 0.5, Condition::Well, Some("disagree on the step")),
            (7, 0.25, Condition::Well, Some("disagree on the time")),
            (7, 0.5, Condition::Closing, Some("closed the run while")),
            (7, 0.5, Condition::Asleep, Some("fell asleep")),
            (7, 0.5, Condition::InError, None),
            (7, 0.5, Condition::InDoubt, None),
        ] {
            let mut all = contribution(&words, 7, 0.5, Condition::Well);
            combine(&contribution(&words, step, time, condition), &mut all);
            let combined = words.read(&all);
            match (reason, combined.reason_to_sleep()) {
                (None, found) => assert_eq!(found, None),
                (Some(reason), found) => assert!(
                    found.clone().is_some_and(|text| text.contains(reason)),
                    "{found:?}"
                ),
            }
        }
    }

    #[test]
    fn a_rank_in_doubt_does_not_keep_the_others_from_closing() {
        let words = words();
        let alone = |condition| {
            let mut buffer = Vec::new();
            words.layout.clear(&mut buffer);
            words.put_condition(&mut buffer, condition, 0);
            buffer
        };
        for (condition, is_fatal) in [(Condition::InDoubt, false), (Condition::InError, true)] {
            let mut all = alone(Condition::Closing);
            combine(&alone(condition), &mut all);
            let combined = words.read(&all);
            assert_eq!(combined.reason_to_sleep().is_some(), is_fatal);
            assert_eq!(combined.ranks(Condition::Closing), 1);
        }
    }

    #[test]
    fn the_lowest_rank_is_heard_and_a_sleeper_before_all() {
        let words = words();
        let mut all = contribution(&words, 1, 1.0, Condition::Well);
        for (rank, urgent) in [(5, false), (2, false), (3, true), (9, true)] {
            let mut one = contribution(&words, 1, 1.0, Condition::InError);
            words.put_text(
                &mut one,
                urgent,
                rank,
                Status::BadArgument,
                &format!("rank {rank} has ü{}", "x".repeat(400)),
            );
            combine(&one, &mut all);
        }
        let said = words.read(&all).said.unwrap();
        assert_eq!((said.rank, said.status), (3, Status::BadArgument));
        assert!(said.text.starts_with("rank 3 has ü") && said.text.len() <= TEXT_BYTES);
    }
}
