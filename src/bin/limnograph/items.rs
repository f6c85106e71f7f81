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
    let (chosen, curve_of) = items.choose(&others, table, screen, &keys);
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

    /// Does the column grow from item to item, as radii do from shell to shell? Items that differ in another
    /// key than the last are not compared.
    fn is_scale(&self, column: usize, keys: &[usize]) -> bool {
        let latest = || self.rows.iter().filter_map(|rows| rows.last().copied());
        let group = |row: usize| {
            keys[..keys.len() - 1]
                .iter()
                .map(move |key| self.columns[key].value(row))
        };
        let mut pairs = latest()
            .zip(latest().skip(1))
            .filter(|&(one, next)| group(one).eq(group(next)))
            .peekable();
        let number = |row: usize| self.columns[&column].number(row);
        pairs.peek().is_some()
            && pairs.all(
                |(one, next)| matches!((number(one), number(next)), (Some(a), Some(b)) if a < b),
            )
    }

    /// As many columns as fit, and which of them gets a curve: first the one that tells how large the items are,
    /// then the liveliest.
    fn choose(
        &self,
        columns: &[usize],
        table: &TableView<'_>,
        screen: &Screen,
        keys: &[usize],
    ) -> (Vec<usize>, Option<usize>) {
        // Rounded, so that columns that go alike stay in the order of the table.
        let life = |column: usize| (self.liveliness(column) * 100.0).round() as u64;
        let mut ranked: Vec<(u64, usize)> = columns
            .iter()
            .map(|&column| (life(column), column))
            .collect();
        ranked.sort_by_key(|&(life, column)| (std::cmp::Reverse(life), column));
        let liveliest = ranked.first().map(|&(_, column)| column);
        let scale = columns
            .iter()
            .copied()
            .find(|&column| self.is_scale(column, keys));
        let ranked = ranked.into_iter().map(|(_, column)| column);
        let order = scale
            .into_iter()
            .chain(ranked.filter(|&column| Some(column) != scale));
        let used: usize = keys.iter().map(|&key| self.width(table, key) + 2).sum();
        let mut room = screen.width.saturating_sub(used + 1 + TREND);
        let mut chosen = Vec::new();
        for column in order {
            let width = self.width(table, column) + 2;
            if width <= room {
                room -= width;
                chosen.push(column);
            }
        }
        chosen.sort_unstable();
        let curve_of = liveliest.filter(|column| chosen.contains(column));
        (chosen, curve_of)
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
        // A curve stands behind the column that it belongs to.
        let row_of = |cell: &dyn Fn(usize) -> String, curve: &str| {
            let mut line = String::new();
            for &column in &shown {
                let width = self.width(table, column);
                let text = screen.cut(&cell(column), width);
                if matches!(self.columns[&column], ColumnValues::Text(_)) {
                    line.push_str(&format!("  {text:<width$}"));
                } else {
                    line.push_str(&format!("  {text:>width$}"));
                }
                if curve_of == Some(column) {
                    line.push_str(&format!(" {curve:<TREND$}"));
                }
            }
            line.trim_end().to_string()
        };
        let described = |column: usize| &table.columns()[column].column;
        let names = row_of(&|column| harmless(&described(column).name), "");
        let units = row_of(&|column| format::unit(&described(column).unit), "");
        let line_of = |rows: &Vec<usize>| {
            let last = rows.last().copied().unwrap_or(0);
            let curve = curve_of.map_or(String::new(), |column| {
                let values = &self.columns[&column];
                trend::curve(
                    rows.iter().map(|&row| values.number(row)),
                    TREND,
                    screen.is_ascii,
                )
            });
            let cell = |column: usize| match self.columns[&column].value(last) {
                Value::Null => "null".to_string(),
                value => format::value(&value, described(column).kind),
            };
            let step = table.step(self.first_row + last);
            let is_old = step != table.step(table.rows() - 1);
            let age = step
                .filter(|_| is_old)
                .map_or(String::new(), |step| format!("  (step {step})"));
            screen.cut(&format!("{}{age}", row_of(&cell, &curve)), screen.width)
        };
        let mut lines: Vec<String> = self.rows.iter().map(line_of).collect();
        if self.has_more {
            lines.push(format!(
                "  and more; export --table {} has them all",
                table.name()
            ));
        }
        let mut legend = vec![screen.faint(&names)];
        if !units.is_empty() {
            legend.push(screen.faint(&units));
        }
        let by: Vec<&str> = keys
            .iter()
            .map(|&key| described(key).name.as_str())
            .collect();
        let title = harmless(&format!("{}, by {}", table.name(), by.join(" and ")));
        let title = screen.bold(&screen.cut(&title, screen.width));
        Section {
            title,
            legend,
            lines,
        }
    }
}
