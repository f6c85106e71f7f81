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
    /// What stands over the lines, ready to print.
    pub title: String,
    /// Lines that explain the others and are shown whenever one of them is.
    pub legend: Vec<String>,
    /// Ready to print.
    pub lines: Vec<String>,
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
        lines.push(layout.line(
            screen,
            column,
            &latest,
            &run.column_rows(index, 0..run.rows()),
        ));
    }
    if let Some(first) = nulls.first() {
        lines.extend(unmeasured(
            screen,
            first,
            nulls.len() - 1,
            &notes.about(gauge),
        ));
    }
    Section {
        title: screen.bold(&screen.cut(&harmless(gauge), screen.width)),
        legend: Vec::new(),
        lines,
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
        let unit = longest(&|column| format::unit(&column.unit).chars().count()).clamp(4, 16);
        let used = 2 + name + 1 + VALUE_WIDTH + 1 + unit + 1;
        Layout {
            name,
            unit,
            trend: screen.width.saturating_sub(used).min(40),
        }
    }

    fn line(&self, screen: &Screen, column: &Column, latest: &Value, all: &ColumnValues) -> String {
        let name = screen.cut(&harmless(&column.name), self.name);
        let value = screen.cut(&format::value(latest, column.kind), VALUE_WIDTH);
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
        line.trim_end().to_string()
    }
}

/// What was not measured, and why when that is known; on lines of its own when one is too short.
fn unmeasured(screen: &Screen, first: &Column, others: usize, reasons: &[&str]) -> Vec<String> {
    let others = if others > 0 {
        format!(" and {others} more")
    } else {
        String::new()
    };
    let mut lines = vec![format!("  {}{others}: not measured", harmless(&first.name))];
    if screen.lines.is_none() {
        lines.extend(
            reasons
                .iter()
                .map(|reason| format!("    {}", harmless(reason))),
        );
    } else if !reasons.is_empty() {
        // What stands before a semicolon is the cause; the rest explains.
        let causes: Vec<&str> = reasons
            .iter()
            .map(|reason| reason.split("; ").next().unwrap_or(reason))
            .collect();
        let causes = harmless(&causes.join(", "));
        if lines[0].chars().count() + 2 + causes.chars().count() <= screen.width {
            lines[0].push_str(&format!(": {causes}"));
        } else {
            lines.push(format!("    {causes}"));
        }
    }
    lines
        .iter()
        .map(|line| screen.faint(&screen.cut(line, screen.width)))
        .collect()
}
