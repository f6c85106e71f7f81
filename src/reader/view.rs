//! One table over all legs.

use super::leg::{LegData, RecordMark};
use super::store::Store;
use super::values::{ColumnValues, Values};
use crate::series::schema::{Column, Kind, ValueType};
use std::collections::{BTreeMap, HashMap, HashSet};

/// Which rows a view shows.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Selection {
    /// What the run amounts to: rows that a later leg did over again are left out.
    #[default]
    Standing,
    /// All rows of all legs, leg by leg.
    Everything,
}

/// A row's place in the legs.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
struct Place {
    leg: u32,
    row: u32,
    is_superseded: bool,
}

/// A column of the merged table.
#[derive(Clone, Debug, PartialEq)]
pub struct MergedColumn {
    /// As the latest leg that has it declares it; the name carries `(until leg N)` when a later leg has
    /// another column of the same name with another unit, kind or type.
    pub column: Column,
    /// The first leg that has it.
    pub first_leg: u32,
    /// The last leg that has it.
    pub last_leg: u32,
    /// Where it stands in the legs that have it.
    places: BTreeMap<usize, usize>,
}

/// A table of the series, legs merged by the declared time coordinate.
pub struct TableView<'a> {
    name: String,
    description: String,
    legs: &'a [LegData],
    /// For each leg which of its tables this is.
    tables: Vec<Option<usize>>,
    columns: Vec<MergedColumn>,
    places: Vec<Place>,
}

impl<'a> TableView<'a> {
    /// The table of this name; `None` when no leg has it. `is_superseded(leg, record)` takes their indices.
    pub(super) fn new(
        legs: &'a [LegData],
        name: &str,
        selection: Selection,
        is_superseded: impl Fn(usize, usize) -> bool,
    ) -> Option<TableView<'a>> {
        let tables: Vec<Option<usize>> = legs
            .iter()
            .map(|leg| {
                leg.schema
                    .tables
                    .iter()
                    .position(|table| table.name == name)
            })
            .collect();
        let (leg, table) = legs
            .iter()
            .zip(&tables)
            .rev()
            .find_map(|(leg, &table)| Some((leg, table?)))?;
        let mut places = Vec::new();
        for (index, (leg, table)) in legs.iter().zip(&tables).enumerate() {
            let Some(table) = table.map(|table| &leg.tables[table]) else {
                continue;
            };
            let from = places.len();
            for (row, &record) in table.record_of_row.iter().enumerate() {
                let is_superseded = is_superseded(index, record as usize);
                if selection == Selection::Everything || !is_superseded {
                    places.push(Place {
                        leg: index as u32,
                        row: row as u32,
                        is_superseded,
                    });
                }
            }
            if !leg.is_ordered {
                // Stable, so the rows of one record keep their order.
                places[from..].sort_by_key(|place| {
                    leg.records[table.record_of_row[place.row as usize] as usize]
                        .preface
                        .number
                });
            }
        }
        Some(TableView {
            name: name.to_string(),
            description: leg.schema.tables[table].description.clone(),
            legs,
            columns: merge_columns(legs, &tables),
            tables,
            places,
        })
    }

    /// The table's name.
    pub fn name(&self) -> &str {
        &self.name
    }

    /// One sentence about it.
    pub fn description(&self) -> &str {
        &self.description
    }

    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.places.len()
    }

    /// The columns: those of the latest leg in its order, then those that ended before.
    pub fn columns(&self) -> &[MergedColumn] {
        &self.columns
    }

    /// Reads a whole column; rows of legs that do not have it are null.
    pub fn column(&self, name: &str) -> Option<ColumnValues> {
        let column = self
            .columns
            .iter()
            .position(|merged| merged.column.name == name)?;
        Some(self.column_rows(column, 0..self.rows()))
    }

    /// Reads some rows of a column, given by its place in [`TableView::columns`]; what is beyond the end is
    /// left out.
    pub fn column_rows(&self, column: usize, rows: std::ops::Range<usize>) -> ColumnValues {
        let Some(merged) = self.columns.get(column) else {
            return ColumnValues::Float(Values::default());
        };
        let rows =
            rows.start.min(self.rows())..rows.end.clamp(rows.start.min(self.rows()), self.rows());
        let stores: Vec<Option<&Store>> = (0..self.legs.len())
            .map(|leg| {
                let place = *merged.places.get(&leg)?;
                self.legs[leg].tables[self.tables[leg]?].stores.get(place)
            })
            .collect();
        let mut values = ColumnValues::for_column(&merged.column, rows.len());
        for place in &self.places[rows] {
            values.push_from(stores[place.leg as usize], place.row as usize);
        }
        values
    }

    fn mark(&self, row: usize) -> Option<&RecordMark> {
        let place = self.places.get(row)?;
        let leg = &self.legs[place.leg as usize];
        let table = &leg.tables[self.tables[place.leg as usize]?];
        leg.records
            .get(*table.record_of_row.get(place.row as usize)? as usize)
    }

    /// The leg that a row was entered in.
    pub fn leg(&self, row: usize) -> Option<u32> {
        self.places
            .get(row)
            .map(|place| self.legs[place.leg as usize].number)
    }

    /// Did a later leg do this row over again? Never in [`Selection::Standing`].
    pub fn is_superseded(&self, row: usize) -> bool {
        self.places
            .get(row)
            .is_some_and(|place| place.is_superseded)
    }

    /// The host's step number of a row.
    pub fn step(&self, row: usize) -> Option<u64> {
        self.mark(row).map(|mark| mark.preface.step)
    }

    /// The declared time coordinate of a row.
    pub fn time(&self, row: usize) -> Option<f64> {
        self.mark(row).map(|mark| mark.preface.time)
    }

    /// When the row was entered: milliseconds since 1970-01-01 UTC.
    pub fn entered(&self, row: usize) -> Option<u64> {
        self.mark(row).map(|mark| mark.preface.entered)
    }
}

/// What makes two columns of different legs one.
type Identity<'a> = (&'a str, &'a str, Kind, ValueType, u32);

fn merge_columns(legs: &[LegData], tables: &[Option<usize>]) -> Vec<MergedColumn> {
    let mut merged: Vec<MergedColumn> = Vec::new();
    let mut known: HashMap<Identity<'_>, usize> = HashMap::new();
    let mut names: HashSet<&str> = HashSet::new();
    for (index, (leg, table)) in legs.iter().zip(tables).enumerate().rev() {
        let Some(table) = table.and_then(|table| leg.schema.tables.get(table)) else {
            continue;
        };
        for (place, column) in table.columns.iter().enumerate() {
            let identity: Identity<'_> = (
                &column.name,
                &column.unit,
                column.kind,
                column.value,
                column.length,
            );
            let at = *known.entry(identity).or_insert_with(|| {
                let mut column = column.clone();
                if names.contains(column.name.as_str()) {
                    column.name = format!("{} (until leg {})", column.name, leg.number);
                }
                let (first_leg, last_leg) = (leg.number, leg.number);
                merged.push(MergedColumn {
                    column,
                    first_leg,
                    last_leg,
                    places: BTreeMap::new(),
                });
                merged.len() - 1
            });
            merged[at].first_leg = leg.number;
            merged[at].places.insert(index, place);
        }
        names.extend(table.columns.iter().map(|column| column.name.as_str()));
    }
    merged
}
