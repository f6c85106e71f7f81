//! What has been read of one leg.

use super::store::Store;
use crate::series::encoding::{Payload, Preface};
use crate::series::journal::End;
use crate::series::schema::Schema;
use std::collections::BTreeMap;

/// Where a record stands and what identifies it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RecordMark {
    /// What stands before its rows.
    pub preface: Preface,
    /// The number of the journal it was read from.
    pub journal: u32,
    /// Where its frame begins there.
    pub offset: u64,
}

/// The rows of one table of a leg, in the order they were read.
#[derive(Clone, Debug)]
pub struct LegTable {
    /// For each row the index of its record in [`LegData::records`].
    pub record_of_row: Vec<u32>,
    /// One a column of the leg's schema.
    pub stores: Vec<Store>,
}

/// All that has been read of one leg.
#[derive(Clone, Debug)]
pub struct LegData {
    /// The leg's number.
    pub number: u32,
    /// Its tables and columns.
    pub schema: Schema,
    /// One a table of the schema.
    pub tables: Vec<LegTable>,
    /// In the order they were read.
    pub records: Vec<RecordMark>,
    /// Which record numbers were read.
    pub seen: Ranges,
    /// Do the records stand in the order of their numbers?
    pub is_ordered: bool,
    /// How it was closed, when it was.
    pub end: Option<End>,
}

impl LegData {
    /// An empty leg with this schema.
    pub fn new(number: u32, schema: Schema) -> LegData {
        let tables = schema
            .tables
            .iter()
            .map(|table| LegTable {
                record_of_row: Vec::new(),
                stores: table.columns.iter().map(Store::new).collect(),
            })
            .collect();
        LegData {
            number,
            schema,
            tables,
            records: Vec::new(),
            seen: Ranges::default(),
            is_ordered: true,
            end: None,
        }
    }

    /// Takes in a record, unless it is there already (some are written twice after a disk's failure).
    /// `None` when its rows do not fit the schema; nothing of it is kept then.
    pub fn add(&mut self, payload: &Payload<'_>, journal: u32, offset: u64) -> Option<()> {
        if self.seen.contains(payload.preface.number) {
            return Some(());
        }
        payload.rows(&self.schema, |_, _| {})?;
        let index = u32::try_from(self.records.len()).ok()?;
        let tables = &mut self.tables;
        payload.rows(&self.schema, |table, cells| {
            let table = &mut tables[table];
            table.record_of_row.push(index);
            for (store, cell) in table.stores.iter_mut().zip(cells) {
                store.push(cell);
            }
        })?;
        let preface = payload.preface;
        self.is_ordered &= self
            .records
            .last()
            .is_none_or(|last| last.preface.number < preface.number);
        self.seen.insert(preface.number);
        self.records.push(RecordMark {
            preface,
            journal,
            offset,
        });
        Some(())
    }

    /// The record with the lowest number.
    pub fn first(&self) -> Option<&RecordMark> {
        self.records.iter().min_by_key(|mark| mark.preface.number)
    }

    /// The first record that measured a step; notes without a row of the run table do not count.
    pub fn first_measured(&self) -> Option<&RecordMark> {
        let rows = self.tables.first()?.record_of_row.iter();
        rows.filter_map(|&record| self.records.get(record as usize))
            .min_by_key(|mark| mark.preface.number)
    }

    /// The record with the highest number.
    pub fn last(&self) -> Option<&RecordMark> {
        self.records.iter().max_by_key(|mark| mark.preface.number)
    }

    /// Rows of all tables.
    pub fn rows(&self) -> usize {
        self.tables
            .iter()
            .map(|table| table.record_of_row.len())
            .sum()
    }
}

/// A set of numbers that mostly follow each other.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Ranges {
    /// First and last of each stretch.
    stretches: BTreeMap<u64, u64>,
}

impl Ranges {
    /// Is the number in the set?
    pub fn contains(&self, number: u64) -> bool {
        self.stretches
            .range(..=number)
            .next_back()
            .is_some_and(|(_, &last)| number <= last)
    }

    /// Adds a number.
    pub fn insert(&mut self, number: u64) {
        if self.contains(number) {
            return;
        }
        let mut first = number;
        let mut last = number;
        if let Some((&start, &end)) = self.stretches.range(..number).next_back()
            && end.checked_add(1) == Some(number)
        {
            first = start;
        }
        if let Some(after) = number.checked_add(1)
            && let Some(end) = self.stretches.remove(&after)
        {
            last = end;
        }
        self.stretches.insert(first, last);
    }

    /// The stretches of numbers below `bound` that are not in the set: first and last of each.
    pub fn holes_below(&self, bound: u64) -> Vec<(u64, u64)> {
        let mut holes = Vec::new();
        let mut next = 0;
        for (&first, &last) in self.stretches.range(..bound) {
            if first > next {
                holes.push((next, first - 1));
            }
            next = last.saturating_add(1);
        }
        if next < bound {
            holes.push((next, bound - 1));
        }
        holes
    }

    /// The number after the highest one.
    pub fn end(&self) -> u64 {
        self.stretches
            .last_key_value()
            .map_or(0, |(_, &last)| last.saturating_add(1))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn holes_are_what_was_not_inserted() {
        let mut ranges = Ranges::default();
        for number in [3, 4, 9, 8, 5, 0, 3, u64::MAX] {
            ranges.insert(number);
        }
        assert_eq!(ranges.holes_below(12), [(1, 2), (6, 7), (10, 11)]);
        assert!(ranges.contains(9) && !ranges.contains(7) && ranges.contains(u64::MAX));
        assert_eq!(ranges.end(), u64::MAX);
    }
}
