//! Tables with several rows a step, such as one for each shell of each station: the latest row of each item.

use crate::format;
use crate::gauges::{OWN_GAUGES, Section};
use crate::screen::{Screen, harmless};
use crate::trend;
use limnograph::reader::{ColumnValues, TableView};
use limnograph::series::record::Value;
use limnograph::series::schema::{Column, Kind};
use std::collections::HashMap;

/// Most rows from the end of a table that are looked at.
const ROWS: usize = 500_000;
/// Most items that are told apart; there may be a hundred thousand stations.
const ITEMS: usize = 2000;
const TREND: usize = 12;

/// A section for a table whose key columns beyond those of the run table tell items apart; `None` when it has
/// no such column.
pub fn section(table: &TableView<'_>, run: &TableView<'_>, screen: &Screen) -> Option<Section> {
    let is_clock = |column: &Column| {
        let is_same = |other: &Column| other.kind == Kind::Key && other.name == column.name;
        run.columns().iter().any(|merged| is_same(&merged.column))
    };
    let (mut keys, mut others) = (Vec::new(), Vec::new());
    for (index, merged) in table.columns().iter().enumerate() {
        let column = &merged.column;
        match column.kind {
            _ if is_clock(column) || OWN_GAUGES.contains(&column.gauge.as_str()) => {}
            Kind::Key => keys.push(index),
            _ if column.length == 1 => others.push(index),
            _ => {}
        }
    }
    if keys.is_empty() || table.rows() == 0 {
        return None;
    }
    let items = Items::gather(table, &keys);
    let mut chosen = items.choose(&others, table, screen, &keys);
    let curve_of = items.liveliest(&chosen);
    chosen.sort_unstable();
    Some(items.draw(table, screen, &keys, &chosen, curve_of))
}

/// The rows of each item, in the order in which items first stand in the latest step.
struct Items {
    rows: Vec<Vec<usize>>,
    has_more: bool,
    columns: HashMap<usize, ColumnValues>,
    first_row: usize,
}

impl Items {
    fn gather(table: &TableView<'_>, keys: &[usize]) -> Items {
        let first_row = table.rows().saturating_sub(ROWS);
        let columns: HashMap<usize, ColumnValues> = (0..table.columns().len())
            .map(|column| (column, table.column_rows(column, first_row..table.rows())))
            .collect();
        let mut known: HashMap<String, usize> = HashMap::new();
        let mut rows: Vec<Vec<usize>> = Vec::new();
        let mut has_more = false;
        for row in 0..table.rows() - first_row {
            let key: Vec<String> = keys
                .iter()
                .map(|key| format!("{:?}", columns[key].value(row)))
                .collect();
            let next = rows.len();
            match known.get(&key.join("\u{1f}")) {
                Some(&item) => rows[item].push(row),
                None if next < ITEMS => {
                    known.insert(key.join("\u{1f}"), next);
                    rows.push(vec![row]);
                }
                None => has_more = true,
            }
        }
        // Items of the latest step first; what has not been seen for long comes last.
        rows.sort_by_key(|rows| {
            let last = rows.last().copied().unwrap_or(0);
            (std::cmp::Reverse(table.step(first_row + last)), last)
        });
        Items {
            rows,
            has_more,
            columns,
            first_row,
        }
    }

    /// How much a column changes over time, compared with its size, averaged over the items.
    fn liveliness(&self, column: usize) -> f64 {
        let values = &self.columns[&column];
        let mut total = 0.0;
        for rows in &self.rows {
            let numbers: Vec<f64> = rows
                .iter()
                .filter_map(|&row| values.number(row))
                .filter(|number| number.is_finite())
                .collect();
            let count = numbers.len().max(1) as f64;
            let mean = numbers.iter().sum::<f64>() / count;
            let size = numbers.iter().map(|number| number.abs()).sum::<f64>() / count;
            if size > 0.0 {
                total += numbers
                    .iter()
                    .map(|number| (number - mean).abs())
                    .sum::<f64>()
                    / count
                    / size;
            }
        }
        total / self.rows.len().max(1) as f64
    }

    fn liveliest(&self, columns: &[usize]) -> Option<usize> {
        columns
            .iter()
            .copied()
            .max_by(|&one, &other| self.liveliness(one).total_cmp(&self.liveliness(other)))
    }

    /// As many columns as fit: one that describes the items and hardly changes, then the liveliest.
    fn choose(
        &self,
        columns: &[usize],
        table: &TableView<'_>,
        screen: &Screen,
        keys: &[usize],
    ) -> Vec<usize> {
        let mut by_life: Vec<usize> = columns.to_vec();
        by_life.sort_by(|&one, &other| self.liveliness(other).total_cmp(&self.liveliness(one)));
        if let Some(calmest) = by_life.pop() {
            by_life.insert(0, calmest);
        }
        let used: usize = keys.iter().map(|&key| self.width(table, key) + 2).sum();
        let mut room = screen.width.saturating_sub(used + 2 + TREND);
        let mut chosen = Vec::new();
        for column in by_life {
            let width = self.width(table, column) + 2;
            if width <= room {
                room -= width;
                chosen.push(column);
            }
        }
        chosen
    }

    fn width(&self, table: &TableView<'_>, column: usize) -> usize {
        let described = &table.columns()[column].column;
        let values = &self.columns[&column];
        let longest = self
            .rows
            .iter()
            .take(64)
            .filter_map(|rows| rows.last())
            .map(|&row| {
                format::value(&values.value(row), described.kind)
                    .chars()
                    .count()
                    .min(20)
            });
        let name = described.name.chars().count();
        let unit = format::unit(&described.unit).chars().count();
        longest.max().unwrap_or(0).max(name).max(unit)
    }

    fn draw(
        &self,
        table: &TableView<'_>,
        screen: &Screen,
        keys: &[usize],
        chosen: &[usize],
        curve_of: Option<usize>,
    ) -> Section {
        let shown: Vec<usize> = keys.iter().chain(chosen).copied().collect();
        let row_of = |cell: &dyn Fn(usize) -> String| {
            let mut line = String::new();
            for &column in &shown {
                let width = self.width(table, column);
                let text = screen.cut(&cell(column), width);
                line.push_str(&format!("  {text:>width$}"));
            }
            line
        };
        let names = row_of(&|column| harmless(&table.columns()[column].column.name));
        let units = row_of(&|column| format::unit(&table.columns()[column].column.unit));
        let curve_name = curve_of.map_or(String::new(), |column| {
            harmless(&table.columns()[column].column.name)
        });
        let lines = self.rows.iter().map(|rows| {
            let last = rows.last().copied().unwrap_or(0);
            let cells = row_of(&|column| {
                let kind = table.columns()[column].column.kind;
                match self.columns[&column].value(last) {
                    Value::Null => "null".to_string(),
                    value => format::value(&value, kind),
                }
            });
            let curve = curve_of.map_or(String::new(), |column| {
                let values = &self.columns[&column];
                trend::curve(
                    rows.iter().map(|&row| values.number(row)),
                    TREND,
                    screen.is_ascii,
                )
            });
            let age = table
                .step(self.first_row + last)
                .filter(|&step| Some(step) != self.latest_step(table));
            let age = age.map_or(String::new(), |step| format!("  (step {step})"));
            format!("{cells}  {curve}{age}").trim_end().to_string()
        });
        let mut lines: Vec<String> = lines.collect();
        if self.has_more {
            lines.push(format!(
                "  and more; export --table {} has them all",
                table.name()
            ));
        }
        let title = screen.cut(&harmless(table.name()), screen.width);
        let mut legend = vec![
            screen.faint(&screen.cut(format!("{names}  {curve_name}").trim_end(), screen.width)),
        ];
        if !units.trim().is_empty() {
            legend.push(screen.faint(units.trim_end()));
        }
        Section {
            title: screen.bold(&title),
            legend,
            lines,
        }
    }

    fn latest_step(&self, table: &TableView<'_>) -> Option<u64> {
        table.step(table.rows() - 1)
    }
}
