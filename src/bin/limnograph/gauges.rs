//! The run table, gauge by gauge: latest values, units, how they went, and why some were not measured.

use crate::format;
use crate::notes::Notes;
use crate::screen::{Screen, harmless};
use crate::trend;
use limnograph::reader::{ColumnValues, TableView};
use limnograph::series::record::Value;
use limnograph::series::schema::{Column, Kind, ValueType};

/// A heading and lines, of which the first ones matter most.
pub struct Section {
    /// What stands over the lines.
    pub title: String,
    /// Lines that explain the others and are shown whenever one of them is.
    pub legend: Vec<String>,
    /// Ready to print.
    pub lines: Vec<String>,
    /// Columns for which the lines have no room.
    pub columns_left_out: usize,
}

/// Gauges of the library itself; they are told in words at the top.
pub const OWN_GAUGES: [&str; 2] = ["clock", "library"];

/// The gauges that have columns in a table, in its order; without the library's own.
pub fn names<'a>(table: &'a TableView<'_>) -> Vec<&'a str> {
    let mut names: Vec<&str> = Vec::new();
    for merged in table.columns() {
        let gauge = merged.column.gauge.as_str();
        if !names.contains(&gauge) && !OWN_GAUGES.contains(&gauge) {
            names.push(gauge);
        }
    }
    names
}

/// One section for each gauge of the run table.
pub fn sections(run: &TableView<'_>, notes: &Notes, screen: &Screen) -> Vec<Section> {
    names(run)
        .into_iter()
        .map(|name| section(run, name, notes, screen))
        .collect()
}

fn section(run: &TableView<'_>, gauge: &str, notes: &Notes, screen: &Screen) -> Section {
    let layout = Layout::for_columns(run, screen);
    let mut lines = Vec::new();
    let mut nulls: Vec<&Column> = Vec::new();
    let last = run.rows().saturating_sub(1);
    for (index, merged) in run.columns().iter().enumerate() {
        let column = &merged.column;
        if column.gauge != gauge || column.kind == Kind::Key {
            continue;
        }
        let latest = run.column_rows(index, last..run.rows()).value(0);
        if latest == Value::Null {
            nulls.push(column);
            continue;
        }
        lines.extend(layout.lines(
            screen,
            column,
            &latest,
            &run.column_rows(index, 0..run.rows()),
        ));
    }
    lines.extend(unmeasured(screen, &nulls, &notes.about(gauge)));
    Section {
        title: harmless(gauge),
        legend: Vec::new(),
        lines,
        columns_left_out: 0,
    }
}

/// Where things stand in a line.
struct Layout {
    name: usize,
    unit: usize,
    trend: usize,
}

const VALUE_WIDTH: usize = 10;

impl Layout {
    fn for_columns(run: &TableView<'_>, screen: &Screen) -> Layout {
        let shown = || {
            run.columns()
                .iter()
                .map(|merged| &merged.column)
                .filter(|column| !OWN_GAUGES.contains(&column.gauge.as_str()))
        };
        let longest = |length: &dyn Fn(&Column) -> usize| shown().map(length).max().unwrap_or(0);
        let name = longest(&|column| column.name.chars().count()).clamp(16, screen.width / 2 - 4);
        let unit = longest(&|column| format::unit(&column.unit).chars().count());
        let unit = unit.clamp(4, 16);
        let used = 2 + name + 1 + VALUE_WIDTH + 1 + unit + 1;
        Layout {
            name,
            unit,
            trend: screen.width.saturating_sub(used).min(40),
        }
    }

    /// One line, or two on a page without end where the name needs one for itself.
    fn lines(
        &self,
        screen: &Screen,
        column: &Column,
        latest: &Value,
        all: &ColumnValues,
    ) -> Vec<String> {
        let is_endless = screen.lines.is_none();
        let mut lines = Vec::new();
        let mut name = harmless(&column.name);
        if is_endless && name.chars().count() > self.name {
            lines.extend(screen.wrap(&name, 2));
            name.clear();
        }
        let name = screen.cut(&name, self.name);
        let value = format::value(latest, column.kind);
        if is_endless && column.value == ValueType::Text {
            lines.extend(screen.wrap(&format!("{name}: {value}"), 2));
            return lines;
        }
        let value = screen.cut(&value, VALUE_WIDTH);
        let unit = screen.cut(&format::unit(&column.unit), self.unit);
        let curve = match latest {
            // A vector shows itself rather than its past.
            Value::Floats(values) => trend::curve(
                values.iter().copied().map(Some),
                self.trend,
                screen.is_ascii,
            ),
            Value::Counts(values) => trend::curve(
                values.iter().map(|&count| Some(count as f64)),
                self.trend,
                screen.is_ascii,
            ),
            _ if column.value == ValueType::Text => String::new(),
            _ => trend::curve(
                (0..all.len()).map(|row| all.number(row)),
                self.trend,
                screen.is_ascii,
            ),
        };
        let (name_width, unit_width) = (self.name, self.unit);
        let line =
            format!("  {name:<name_width$} {value:>VALUE_WIDTH$} {unit:<unit_width$} {curve}");
        lines.push(line.trim_end().to_string());
        lines
    }
}

/// What was not measured, and what is noted about the gauge: which note goes with which column is not known.
fn unmeasured(screen: &Screen, nulls: &[&Column], notes: &[&str]) -> Vec<String> {
    let Some(first) = nulls.first() else {
        return Vec::new();
    };
    let is_endless = screen.lines.is_none();
    let others = nulls.len() - 1;
    let mut text = if is_endless {
        let names: Vec<&str> = nulls.iter().map(|column| column.name.as_str()).collect();
        names.join(", ")
    } else if others > 0 {
        format!("{} and {others} more", first.name)
    } else {
        first.name.clone()
    };
    text.push_str(if others > 0 {
        " are not measured"
    } else {
        " is not measured"
    });
    let mut lines = Vec::new();
    if is_endless && !notes.is_empty() {
        text.push_str("; the gauge notes:");
        lines.extend(screen.wrap(&harmless(&text), 2));
        lines.extend(
            notes
                .iter()
                .flat_map(|note| screen.wrap(&harmless(note), 4)),
        );
    } else {
        if !notes.is_empty() {
            // What stands before a semicolon is the cause; the rest explains.
            let cause = |note: &&str| note.split("; ").next().unwrap_or_default().to_string();
            let causes: Vec<String> = notes.iter().map(cause).collect();
            text.push_str(&format!("; the gauge notes: {}", causes.join(", ")));
        }
        lines.extend(screen.wrap(&harmless(&text), 2));
    }
    lines.iter().map(|line| screen.faint(line)).collect()
}
