//! What a restarted run knows of the legs before it: when rows were entered, and what gauges left behind.
//!
//! The time of the first row of the new leg decides which earlier rows still stand; so rank 0 reads them when
//! the run is opened, all ranks keep the times, and the choice is made when that first row comes.

use crate::reader::SeriesReader;
use std::path::Path;

/// Rows before a restart that are kept in memory, the latest.
const KEPT_ROWS: usize = 100_000;
/// States of gauges that are kept in memory, the latest.
const KEPT_STATES: usize = 64;
/// Words of a row when it is sent to the other ranks.
const WORDS: usize = 3;

/// A row of an earlier leg.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct PastRow {
    pub step: u64,
    pub time: f64,
    pub step_length: f64,
}

/// What gauges left behind in a row.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct PastState {
    pub time: f64,
    pub words: Vec<u64>,
}

/// The earlier legs, as far as a new one needs them.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct History {
    rows: Vec<PastRow>,
    states: Vec<PastState>,
}

impl History {
    /// Reads the standing rows of a series. One that is not there, or cannot be read, has no history: the new
    /// leg then begins its accounts anew.
    pub fn read(path: &Path) -> History {
        let Ok(reader) = SeriesReader::open(path) else {
            return History::default();
        };
        let Some(run) = reader.table("run") else {
            return History::default();
        };
        let column = |name: &str| run.column(name);
        let (Some(steps), Some(times), Some(lengths), Some(checkpoints)) = (
            column("step"),
            column("time"),
            column("step_length"),
            column("checkpoint"),
        ) else {
            return History::default();
        };
        let mut rows = Vec::new();
        let mut with_state = Vec::new();
        let mut leg_before = None;
        for row in run.rows().saturating_sub(KEPT_ROWS)..run.rows() {
            let (Some(step), Some(time)) = (steps.number(row), times.number(row)) else {
                continue;
            };
            let step_length = lengths.number(row).unwrap_or(0.0);
            rows.push(PastRow {
                step: step as u64,
                time,
                step_length,
            });
            // Gauges leave their state in the first row of a leg and at checkpoints.
            if checkpoints.number(row) == Some(1.0) || run.leg(row) != leg_before {
                with_state.push(time);
            }
            leg_before = run.leg(row);
        }
        rows.sort_by(|one, other| one.time.total_cmp(&other.time));
        let states = with_state[with_state.len().saturating_sub(KEPT_STATES)..]
            .iter()
            .filter_map(|&time| {
                let record = reader.last_record(Some(time), 0.0).ok()??;
                (record.time == time && !record.carry.is_empty()).then_some(PastState {
                    time,
                    words: record.carry,
                })
            })
            .collect();
        History { rows, states }
    }

    /// The rows in a form that can be sent to other ranks; the states stay with rank 0.
    pub fn to_bytes(&self) -> Vec<u8> {
        let words: Vec<u64> = self
            .rows
            .iter()
            .flat_map(|row| [row.step, row.time.to_bits(), row.step_length.to_bits()])
            .collect();
        bytemuck::cast_slice(&words).to_vec()
    }

    /// The rows that rank 0 sent.
    pub fn from_bytes(bytes: &[u8]) -> History {
        let words: Vec<u64> = bytes
            .chunks_exact(8)
            .filter_map(|chunk| Some(u64::from_ne_bytes(chunk.try_into().ok()?)))
            .collect();
        let rows = words
            .chunks_exact(WORDS)
            .map(|row| PastRow {
                step: row[0],
                time: f64::from_bits(row[1]),
                step_length: f64::from_bits(row[2]),
            })
            .collect();
        History {
            rows,
            states: Vec::new(),
        }
    }

    /// The last row that stands when the new leg's first row is at `time`: within half a step counts as equal,
    /// and equal ones are done over again.
    pub fn last_row_before(&self, time: f64, step_length: f64) -> Option<PastRow> {
        self.rows
            .iter()
            .rev()
            .find(|row| stands(row.time, time, step_length))
            .copied()
    }

    /// The last state that stands likewise.
    pub fn last_state_before(&self, time: f64, step_length: f64) -> Option<&PastState> {
        self.states
            .iter()
            .rev()
            .find(|state| stands(state.time, time, step_length))
    }
}

fn stands(past: f64, now: f64, step_length: f64) -> bool {
    past < now && now - past >= 0.5 * step_length
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_last_row_before_the_first_new_one_is_found() {
        let row = |step, time| PastRow {
            step,
            time,
            step_length: 0.1,
        };
        let history = History {
            rows: vec![row(1, 0.1), row(2, 0.2), row(3, 0.3)],
            states: Vec::new(),
        };
        assert_eq!(history.last_row_before(0.3, 0.1), Some(row(2, 0.2)));
        assert_eq!(history.last_row_before(0.33, 0.1), Some(row(2, 0.2)));
        assert_eq!(history.last_row_before(0.4, 0.1), Some(row(3, 0.3)));
        assert_eq!(history.last_row_before(0.1, 0.1), None);
        assert_eq!(History::from_bytes(&history.to_bytes()), history);
    }
}
