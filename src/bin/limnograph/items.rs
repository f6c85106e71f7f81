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
            _ => others.push(index),
        }
    }
    if keys.is_empty() || table.rows() == 0 {
        return None;
    }
    let items = Items::gather(table, &keys, screen);
    let blocks = items.choose(&others, table, screen, &keys);
    let left_out = others.len()
        - blocks
            .iter()
            .map(|block| block.columns.len())
            .sum::<usize>();
    let by: Vec<&str> = keys
        .iter()
        .map(|&key| table.columns()[key].column.name.as_str())
        .collect();
    let mut blocks = blocks
        .iter()
        .map(|block| items.draw(table, screen, &keys, block));
    let (legend, mut lines) = blocks.next()?;
    for (more_legend, more_lines) in blocks {
        lines.push(String::new());
        lines.extend(more_legend);
        lines.extend(more_lines);
    }
    if items.has_more {
        let text = format!("and more; export --table {} has them all", table.name());
        lines.extend(screen.wrap(&harmless(&text), 2));
    }
    Some(Section {
        title: harmless(&format!("{}, by {}", table.name(), by.join(" and "))),
        legend,
        lines,
        columns_left_out: left_out,
    })
}

/// Columns that stand side by side behind the keys; one of them may have a curve.
#[derive(Default)]
struct Block {
    columns: Vec<usize>,
    curve_of: Option<usize>,
    /// Characters in the curve.
    trend: usize,
}

/// The rows of each item, in the order in which items first stand in the latest step.
struct Items {
    rows: Vec<Vec<usize>>,
    has_more: bool,
    columns: HashMap<usize, ColumnValues>,
    widths: Vec<usize>,
    first_row: usize,
}

impl Items {
    fn gather(table: &TableView<'_>, keys: &[usize], screen: &Screen) -> Items {
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
        let mut items = Items {
            rows,
            has_more,
            columns,
            widths: Vec::new(),
            first_row,
        };
        items.widths = (0..table.columns().len())
            .map(|column| items.width(table, column, screen))
            .collect();
        items
    }

    /// Does the column stay the same for each item, as the radii of a shell do?
    fn is_constant(&self, column: usize) -> bool {
        let values = &self.columns[&column];
        self.rows.iter().all(|rows| {
            let mut present = rows
                .iter()
                .filter(|&&row| !values.is_null(row))
                .map(|&row| values.value(row));
            present
                .next()
                .is_none_or(|first| present.all(|value| value == first))
        })
    }

    /// Columns that tell what the item is rather than what was measured of it: those right behind the keys that
    /// never change and share a unit.
    fn describing(&self, columns: &[usize], table: &TableView<'_>) -> usize {
        let unit = |column: usize| &table.columns()[column].column.unit;
        let Some(&first) = columns.first() else {
            return 0;
        };
        columns
            .iter()
            .take_while(|&&column| {
                let kind = table.columns()[column].column.kind;
                kind == Kind::Instant && unit(column) == unit(first) && self.is_constant(column)
            })
            .count()
    }

    /// Which columns are shown, in blocks one under the other. On a page without end these are all; else one
    /// block: the first column that describes the item, then what was measured in the order of the table.
    fn choose(
        &self,
        columns: &[usize],
        table: &TableView<'_>,
        screen: &Screen,
        keys: &[usize],
    ) -> Vec<Block> {
        let (describing, measured) = columns.split_at(self.describing(columns, table));
        let lively = measured
            .iter()
            .copied()
            .find(|&column| !self.is_constant(column));
        let curve_of = lively.or(measured.first().copied());
        let used: usize = keys.iter().map(|&key| self.widths[key] + 2).sum();
        let room = screen.width.saturating_sub(used);
        let needed = |column: usize, trend: usize| {
            let curve = if curve_of == Some(column) {
                trend + 1
            } else {
                0
            };
            self.widths[column] + 2 + curve
        };
        if screen.lines.is_none() {
            let mut blocks = vec![Block::default()];
            let mut left = room;
            for &column in columns {
                let width = needed(column, TREND);
                if width > left && blocks.last().is_some_and(|block| !block.columns.is_empty()) {
                    blocks.push(Block::default());
                    left = room;
                }
                left = left.saturating_sub(width);
                if let Some(block) = blocks.last_mut() {
                    block.columns.push(column);
                    block.curve_of = block.curve_of.or(curve_of.filter(|&of| of == column));
                    block.trend = TREND;
                }
            }
            return blocks;
        }
        // The first measured column comes before anything else; for it the curve is made shorter, then what
        // describes the item is left out.
        let main = measured
            .first()
            .map_or(0, |&column| self.widths[column] + 2);
        let sign = describing.first().copied();
        let sign = sign.filter(|&column| self.widths[column] + 2 + main <= room);
        let sign_width = sign.map_or(0, |column| self.widths[column] + 2);
        let free = room.saturating_sub(main + sign_width);
        let trend = TREND.min(free.saturating_sub(1));
        let mut left = room.saturating_sub(sign_width);
        let mut chosen: Vec<usize> = sign.into_iter().collect();
        let rest = describing.iter().filter(|&&column| Some(column) != sign);
        for &column in measured.iter().chain(rest) {
            let width = needed(column, trend);
            if width <= left || (chosen.is_empty() && measured.first() == Some(&column)) {
                left = left.saturating_sub(width);
                chosen.push(column);
            }
        }
        chosen.sort_unstable();
        vec![Block {
            curve_of: curve_of.filter(|column| trend > 0 && chosen.contains(column)),
            columns: chosen,
            trend,
        }]
    }

    fn width(&self, table: &TableView<'_>, column: usize, screen: &Screen) -> usize {
        let longest_text = if screen.lines.is_none() {
            screen.width / 2
        } else {
            20
        };
        let described = &table.columns()[column].column;
        let values = &self.columns[&column];
        let longest = self.rows.iter().filter_map(|rows| rows.last()).map(|&row| {
            format::value(&values.value(row), described.kind)
                .chars()
                .count()
                .min(longest_text)
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
        block: &Block,
    ) -> (Vec<String>, Vec<String>) {
        let (curve_of, trend) = (block.curve_of, block.trend);
        let shown: Vec<usize> = keys.iter().chain(&block.columns).copied().collect();
        // A curve stands behind the column that it belongs to.
        let row_of = |cell: &dyn Fn(usize) -> String, curve: &str| {
            let mut line = String::new();
            for &column in &shown {
                let width = self.widths[column];
                let text = screen.cut(&cell(column), width);
                if matches!(self.columns[&column], ColumnValues::Text(_)) {
                    line.push_str(&format!("  {text:<width$}"));
                } else {
                    line.push_str(&format!("  {text:>width$}"));
                }
                if curve_of == Some(column) {
                    line.push_str(&format!(" {curve:<trend$}"));
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
                    trend,
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
        let lines: Vec<String> = self.rows.iter().map(line_of).collect();
        let mut legend = vec![screen.faint(&screen.cut(&names, screen.width))];
        if !units.is_empty() {
            legend.push(screen.faint(&screen.cut(&units, screen.width)));
        }
        (legend, lines)
    }
}
