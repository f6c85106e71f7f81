//! One screen of where a run stands.

use crate::format;
use crate::gauges::{self, Section};
use crate::items;
use crate::notes::Notes;
use crate::open::Failure;
use crate::screen::{Screen, harmless};
use limnograph::reader::{SeriesReader, TableView, extent};
use limnograph::series::now_milliseconds;
use limnograph::series::record::Value;
use limnograph::series::schema::Kind;
use std::io::Write;

/// Columns of the library's own that are told in words at the top.
const CLOCK: &str = "clock";
const LIBRARY: &str = "library";
const REDSHIFT: &str = "redshift";
const AGE: &str = "age";
const LIBRARY_SECONDS: &str = "library_seconds";
const HOST_SECONDS: &str = "host_seconds";
/// A host that has not entered a row for longer than this many of its usual intervals may have stopped.
const QUIET_INTERVALS: u64 = 5;
/// A shorter silence than this (in milliseconds) says nothing.
const SHORT_SILENCE: u64 = 60_000;

/// Writes the screen.
pub fn show(reader: &SeriesReader, screen: &Screen, out: &mut dyn Write) -> Result<(), Failure> {
    let Some(run) = reader.table("run") else {
        return Err(Failure::Told(format!(
            "{} has no run table that can be read; `limnograph audit` tells what is damaged",
            reader.path().display()
        )));
    };
    let notes = Notes::read(reader);
    let head = head(reader, &run, &notes, screen);
    let mut sections = Vec::new();
    if run.rows() > 0 {
        sections = gauges::sections(&run, &notes, screen);
        let tables = reader.tables();
        let tables = tables
            .iter()
            .filter(|&&name| name != "run")
            .filter_map(|name| reader.table(name));
        sections.extend(tables.filter_map(|table| items::section(&table, &run, screen)));
    }
    let used = head.len();
    for line in head {
        writeln!(out, "{line}")?;
    }
    let room = screen.lines.map(|lines| lines.saturating_sub(used));
    write_sections(&sections, room, screen, out)
}

fn head(reader: &SeriesReader, run: &TableView<'_>, notes: &Notes, screen: &Screen) -> Vec<String> {
    let path = reader
        .path()
        .file_name()
        .map_or_else(String::new, |name| name.to_string_lossy().into_owned());
    let (host, path) = (host_name(reader), harmless(&path));
    let mut lines = if host.chars().count() + path.chars().count() + 2 <= screen.width
        && path.chars().count() <= screen.width / 2
    {
        vec![screen.ends(&format!(" {host}"), &path)]
    } else {
        let mut lines = screen.wrap(&host, 1);
        lines.extend(screen.wrap(&path, 1));
        lines
    };
    for line in &mut lines {
        *line = screen.bold(line);
    }
    lines.push(screen.faint(&"~".repeat(screen.width)));
    if run.rows() == 0 {
        lines.push(" no row has been entered yet".to_string());
    } else {
        lines.extend(screen.wrap(&clock(reader, run), 1));
    }
    lines.extend(screen.wrap(&standing(reader, run), 1));
    lines.extend(cost(run).iter().flat_map(|cost| screen.wrap(cost, 1)));
    let health = health(reader);
    let health = health.iter().flat_map(|line| screen.wrap(line, 1));
    lines.extend(health.map(|line| screen.bold(&line)));
    lines.extend(notices(run).flat_map(|line| screen.wrap(&line, 1)));
    let mut known = gauges::names(run);
    let tables = reader.tables();
    let tables: Vec<_> = tables
        .iter()
        .filter_map(|name| reader.table(name))
        .collect();
    known.extend(tables.iter().flat_map(gauges::names));
    lines.extend(
        notes
            .last_but(&known)
            .iter()
            .flat_map(|note| screen.wrap(&harmless(note), 1)),
    );
    lines
}

fn host_name(reader: &SeriesReader) -> String {
    let Some(host) = reader.host() else {
        return "a host without a name".to_string();
    };
    let field = |name: &str| {
        host.get(name)
            .and_then(serde_json::Value::as_str)
            .filter(|text| !text.is_empty())
    };
    let name = host
        .as_str()
        .or_else(|| field("name"))
        .unwrap_or("a host without a name");
    let mut text = name.to_string();
    if let Some(version) = field("version") {
        text.push_str(&format!(" {version}"));
    }
    if let Some(description) = field("description") {
        text.push_str(&format!(", {description}"));
    }
    harmless(&text)
}

/// The host's clock in the latest row.
fn clock(reader: &SeriesReader, run: &TableView<'_>) -> String {
    let last = run.rows() - 1;
    let mut parts = vec![format!("step {}", run.step(last).unwrap_or(0))];
    let time = reader.time_column().unwrap_or("");
    for name in [time, REDSHIFT, AGE] {
        let found = run.columns().iter().position(|merged| {
            merged.column.name == name && (merged.column.gauge == CLOCK || name == time)
        });
        let Some(index) = found else { continue };
        let column = &run.columns()[index].column;
        let value = run.column_rows(index, last..last + 1).value(0);
        if value != Value::Null {
            let number = format::with_unit(&format::value(&value, column.kind), &column.unit);
            parts.push(harmless(&format!("{} {number}", column.name)));
        }
    }
    parts.join("   ")
}

/// How many rows and legs, and whether the host still writes. A host that was killed leaves no word, so that it
/// runs is only inferred.
fn standing(reader: &SeriesReader, run: &TableView<'_>) -> String {
    let legs = reader.legs();
    let mut text = format::count(run.rows(), "row");
    if legs.len() > 1 {
        text.push_str(&format!(" in {} legs", legs.len()));
    }
    let now = now_milliseconds();
    let entered = run.rows().checked_sub(1).and_then(|last| run.entered(last));
    let is_closed = legs.last().is_some_and(|leg| leg.end.is_some());
    // A leg that has just begun is a sign of life as well.
    let sign = entered.max(legs.last().and_then(|leg| leg.opened));
    let silence = sign.map(|sign| now.saturating_sub(sign));
    let row_age = entered.map(|entered| now.saturating_sub(entered));
    text.push_str(&signs_of_life(is_closed, row_age, silence, quiet_time(run)));
    text
}

/// What can be said of the host, from the age of the latest row and of the latest sign of life.
fn signs_of_life(
    is_closed: bool,
    row_age: Option<u64>,
    silence: Option<u64>,
    quiet_time: u64,
) -> String {
    if let Some(silence) = silence.filter(|&silence| !is_closed && silence > quiet_time) {
        return format!(
            "; the host has not closed it and has not written for {}",
            format::age(silence)
        );
    }
    let row = row_age.map_or(String::new(), |age| {
        format!(", the last {} ago", format::age(age))
    });
    let host = match (is_closed, silence) {
        (true, _) => "closed by the host",
        (false, Some(_)) => "not closed, the host seems to be running",
        (false, None) => "not closed by the host",
    };
    format!("{row}; {host}")
}

/// A silence after which a host that writes has probably stopped: several of its usual intervals in the latest
/// leg, at least a minute.
fn quiet_time(run: &TableView<'_>) -> u64 {
    let last = run.rows().saturating_sub(1);
    let leg = run.leg(last);
    let recent = (last.saturating_sub(50)..last).find(|&row| run.leg(row) == leg);
    let interval = recent.and_then(|recent| {
        let stretch = run.entered(last)?.saturating_sub(run.entered(recent)?);
        Some(stretch / (last - recent) as u64)
    });
    (interval.unwrap_or(0).saturating_mul(QUIET_INTERVALS)).max(SHORT_SILENCE)
}

/// What the library costs the host, over the latest leg.
fn cost(run: &TableView<'_>) -> Option<String> {
    let (library, host) = (run.column(LIBRARY_SECONDS)?, run.column(HOST_SECONDS)?);
    let leg = run.leg(run.rows().checked_sub(1)?);
    let (mut spent, mut total, mut steps) = (0.0, 0.0, 0);
    for row in (0..run.rows()).filter(|&row| run.leg(row) == leg) {
        if let (Some(inside), Some(all)) = (library.number(row), host.number(row)) {
            spent += inside;
            total += all;
            steps += 1;
        }
    }
    if steps == 0 || !(total > 0.0 && spent.is_finite() && total.is_finite()) {
        return None;
    }
    Some(format!(
        "the library takes {} of the host's time: {} of {} a row",
        format::percent(spent / total),
        format::seconds(spent / f64::from(steps)),
        format::seconds(total / f64::from(steps))
    ))
}

/// Damage and gaps; nothing when the series is whole.
fn health(reader: &SeriesReader) -> Vec<String> {
    let mut lines = Vec::new();
    let damage = reader.damage();
    if !damage.is_empty() {
        let path = reader.path().display();
        lines.push(format!(
            "the series is damaged {}: limnograph audit {path}",
            extent(&damage)
        ));
    }
    let missing: u64 = reader
        .gaps()
        .iter()
        .map(|gap| gap.records)
        .fold(0, u64::saturating_add);
    if let Some(gap) = reader.gaps().last() {
        lines.push(format!(
            "{missing} rows are missing: {}",
            harmless(&gap.reason)
        ));
    }
    lines
}

/// What the library counts of its own accord is worth a line when it is not zero.
fn notices(run: &TableView<'_>) -> impl Iterator<Item = String> {
    let counts = run.columns().iter().enumerate().filter(|(_, merged)| {
        merged.column.gauge == LIBRARY && merged.column.kind == Kind::Increment
    });
    counts.filter_map(|(index, merged)| {
        let values = run.column_rows(index, 0..run.rows());
        let total: f64 = (0..values.len()).filter_map(|row| values.number(row)).sum();
        let text = format!(
            "{}: {} ({})",
            merged.column.name,
            format::number(total),
            merged.column.description
        );
        (total > 0.0).then(|| harmless(&text))
    })
}

/// Writes what fits into `room` lines: a line of each section in turn until there is no room.
fn write_sections(
    sections: &[Section],
    room: Option<usize>,
    screen: &Screen,
    out: &mut dyn Write,
) -> Result<(), Failure> {
    let shown = share(sections, room);
    let needed: usize = sections
        .iter()
        .zip(&shown)
        .map(|(section, &lines)| 1 + lines + section.legend.len())
        .sum();
    let has_air = room.is_none_or(|room| needed + sections.len() <= room);
    for (section, &lines) in sections.iter().zip(&shown) {
        if has_air {
            writeln!(out)?;
        }
        let left_out = section.lines.len() - lines;
        let remark = match (left_out, section.columns_left_out) {
            (0, 0) => String::new(),
            (_, 0) => format!(" ({left_out} more with --all)"),
            (0, columns) => format!(" ({} with --all)", more_columns(columns)),
            (_, columns) => format!(
                " ({}, {} with --all)",
                format::count(left_out, "more row"),
                more_columns(columns)
            ),
        };
        let room = screen.width.saturating_sub(remark.chars().count());
        let mut title = section.title.as_str();
        if title.chars().count() > room {
            // The keys stand over their columns as well.
            title = title.split(", by ").next().unwrap_or(title);
        }
        writeln!(
            out,
            "{}{}",
            screen.bold(&screen.cut(title, room)),
            screen.faint(&remark)
        )?;
        for line in section
            .legend
            .iter()
            .filter(|_| lines > 0)
            .chain(&section.lines[..lines])
        {
            writeln!(out, "{line}")?;
        }
    }
    Ok(())
}

fn more_columns(number: usize) -> String {
    format::count(number, "more column")
}

/// How many lines each section gets.
fn share(sections: &[Section], room: Option<usize>) -> Vec<usize> {
    let Some(room) = room else {
        return sections.iter().map(|section| section.lines.len()).collect();
    };
    let mut left = room.saturating_sub(sections.len());
    let mut shown = vec![0; sections.len()];
    loop {
        let before = left;
        for (section, lines) in sections.iter().zip(&mut shown) {
            let price = if *lines == 0 {
                1 + section.legend.len()
            } else {
                1
            };
            if *lines < section.lines.len() && price <= left {
                *lines += 1;
                left -= price;
            }
        }
        if left == before {
            return shown;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn that_a_host_runs_is_never_told_as_a_fact() {
        let told = |is_closed, age| signs_of_life(is_closed, Some(age), Some(age), 60_000);
        assert_eq!(
            told(false, 29_000),
            ", the last 29 s ago; not closed, the host seems to be running"
        );
        assert_eq!(
            told(false, 240_000),
            "; the host has not closed it and has not written for 4 min"
        );
        assert_eq!(
            told(true, 240_000),
            ", the last 4 min ago; closed by the host"
        );
        assert_eq!(
            signs_of_life(false, None, None, 60_000),
            "; not closed by the host"
        );
    }
}
