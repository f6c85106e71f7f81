//! Is the series whole? In plain words.

use crate::format::{self, count};
use crate::open::Failure;
use crate::screen::harmless;
use limnograph::reader::{
    Damage, DamageKind, LegSummary, Selection, SeriesReader, TableView, extent,
};
use limnograph::series::journal::Gap;
use std::io::Write;

/// Writes what is known of the series; returns the exit code.
pub fn tell(reader: &SeriesReader, out: &mut dyn Write) -> Result<u8, Failure> {
    let damage = reader.damage();
    let path = reader.path().display();
    let gaps = match reader.gaps().len() {
        0 => String::new(),
        number => format!(", with {} that it tells of", count(number, "gap")),
    };
    if damage.is_empty() {
        writeln!(out, "{path} is whole{gaps}")?;
    } else {
        writeln!(out, "{path} is DAMAGED {}{gaps}", extent(&damage))?;
    }
    tell_legs(reader, out)?;
    tell_tables(reader, out)?;
    tell_files(reader, out)?;
    tell_gaps(reader.gaps(), out)?;
    tell_damage(reader, &damage, out)?;
    Ok(u8::from(!damage.is_empty()))
}

fn tell_legs(reader: &SeriesReader, out: &mut dyn Write) -> Result<(), Failure> {
    writeln!(out, "\nlegs")?;
    let legs = reader.legs();
    let run = reader.table_with("run", Selection::Everything);
    let last_number = legs.last().map(|leg| leg.number);
    for leg in legs {
        let opened = leg
            .opened
            .map_or_else(|| "at an unknown time".to_string(), format::moment);
        let version = leg.library_version.as_deref().unwrap_or("unknown");
        writeln!(
            out,
            "  {}  opened {opened} by limnograph {}",
            leg.number,
            harmless(version)
        )?;
        let steps = LegSteps::count(run.as_ref(), leg.number);
        writeln!(out, "     {}", rows_of(&leg, &steps))?;
        if steps.superseded > 0 {
            writeln!(
                out,
                "     {} of its steps superseded: a later leg did them over again; kept, and left out unless asked for",
                steps.superseded
            )?;
        }
        match &leg.end {
            Some(end) => writeln!(
                out,
                "     closed by the host {}",
                format::moment(end.closed)
            )?,
            None if Some(leg.number) == last_number => writeln!(
                out,
                "     not closed: the host is running, or it was stopped without closing"
            )?,
            None => writeln!(out, "     not closed: the host was stopped without closing")?,
        }
    }
    Ok(())
}

/// The measured steps of a leg. Each has one row in the run table; a record that only tells of an event has none.
#[derive(Default)]
struct LegSteps {
    number: usize,
    superseded: usize,
    first: Option<(u64, f64)>,
    last: Option<(u64, f64)>,
}

impl LegSteps {
    fn count(run: Option<&TableView<'_>>, leg: u32) -> LegSteps {
        let mut steps = LegSteps::default();
        let Some(run) = run else {
            return steps;
        };
        for row in (0..run.rows()).filter(|&row| run.leg(row) == Some(leg)) {
            let place = run.step(row).zip(run.time(row));
            steps.number += 1;
            steps.superseded += usize::from(run.is_superseded(row));
            steps.first = steps.first.or(place);
            steps.last = place.or(steps.last);
        }
        steps
    }
}

fn rows_of(leg: &LegSummary, steps: &LegSteps) -> String {
    let rows = count(leg.rows, "row");
    match (steps.first, steps.last) {
        (Some((step, time)), Some(_)) if steps.number == 1 => {
            format!("1 step with {rows} in all tables: step {step} at time {time}")
        }
        (Some((first_step, first_time)), Some((last_step, last_time))) => format!(
            "{} with {rows} in all tables: step {first_step} at time {first_time} to step {last_step} at time {last_time}",
            count(steps.number, "step")
        ),
        _ if leg.rows > 0 => format!("no measured step; {rows} in other tables"),
        _ => "no row".to_string(),
    }
}

fn tell_tables(reader: &SeriesReader, out: &mut dyn Write) -> Result<(), Failure> {
    writeln!(out, "\ntables")?;
    let names = reader.tables();
    let width = names
        .iter()
        .map(|name| name.chars().count())
        .max()
        .unwrap_or(0);
    for name in names {
        let all = reader
            .table_with(name, Selection::Everything)
            .map_or(0, |table| table.rows());
        if let Some(table) = reader.table(name) {
            let superseded = match all - table.rows() {
                0 => String::new(),
                number => format!(", {number} superseded"),
            };
            let (rows, columns) = (
                count(table.rows(), "row"),
                count(table.columns().len(), "column"),
            );
            writeln!(
                out,
                "  {:width$}  {rows}, {columns}{superseded}",
                harmless(name)
            )?;
        }
    }
    Ok(())
}

fn tell_files(reader: &SeriesReader, out: &mut dyn Write) -> Result<(), Failure> {
    writeln!(out, "\nfiles")?;
    for manifest in reader.manifests() {
        let config = manifest
            .config_sha256
            .get(..12)
            .unwrap_or(&manifest.config_sha256);
        writeln!(
            out,
            "  manifest of leg {}: config with SHA-256 {}…",
            manifest.leg,
            harmless(config)
        )?;
    }
    for (name, bytes) in reader.journal_files() {
        writeln!(out, "  {name}: {bytes} bytes")?;
    }
    for (journal, before) in reader.continuations() {
        writeln!(
            out,
            "  journal {journal} goes on from journal {}, of which {} bytes count: {}",
            before.journal,
            before.good_bytes,
            harmless(&before.reason)
        )?;
    }
    Ok(())
}

fn tell_gaps(gaps: &[Gap], out: &mut dyn Write) -> Result<(), Failure> {
    if gaps.is_empty() {
        writeln!(out, "\ngaps: none")?;
        return Ok(());
    }
    writeln!(out, "\ngaps")?;
    for gap in gaps {
        let steps = if gap.first_step == gap.last_step {
            format!("step {}", gap.first_step)
        } else {
            format!("between step {} and step {}", gap.first_step, gap.last_step)
        };
        let number = usize::try_from(gap.records).unwrap_or(usize::MAX);
        writeln!(
            out,
            "  leg {}: {} missing, {steps}: {}",
            gap.leg,
            count(number, "step"),
            harmless(&gap.reason)
        )?;
    }
    Ok(())
}

fn tell_damage(
    reader: &SeriesReader,
    damage: &[Damage],
    out: &mut dyn Write,
) -> Result<(), Failure> {
    if damage.is_empty() {
        writeln!(out, "\ndamage: none")?;
        return Ok(());
    }
    writeln!(out, "\ndamage")?;
    for damage in damage {
        let place = match damage.kind {
            DamageKind::Missing => damage.file.clone(),
            DamageKind::Unreadable if damage.from == damage.to => damage.file.clone(),
            _ => format!(
                "{}, bytes {} to {}",
                damage.file,
                damage.from,
                damage.to.saturating_sub(1)
            ),
        };
        writeln!(out, "  {place}: {}", harmless(&damage.text))?;
    }
    let steps = reader
        .table_with("run", Selection::Everything)
        .map_or(0, |run| run.rows());
    let rows: usize = reader.legs().iter().map(|leg| leg.rows).sum();
    writeln!(
        out,
        "\n{} of {} are good and stay readable; nothing was changed. If there is a copy of the damaged files \
         elsewhere, put it back.",
        count(rows, "row"),
        count(steps, "step")
    )?;
    Ok(())
}
