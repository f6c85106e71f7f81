//! Is a config right, and what comes of it?

use crate::format;
use crate::open::Failure;
use limnograph::config::{Config, Problem};
use limnograph::gauges::{self, Plan};
use limnograph::series::schema::{Column, Table};
use std::io::Write;
use std::path::Path;

/// Writes what the config says or what is wrong with it; returns the exit code.
pub fn check(path: &Path, out: &mut dyn Write) -> Result<u8, Failure> {
    let text = std::fs::read_to_string(path)
        .map_err(|error| Failure::Told(format!("cannot read {}: {error}", path.display())))?;
    let name = path.to_string_lossy();
    let (config, tables) = match understand(&text, &name) {
        Ok(understood) => understood,
        Err(problems) => {
            for problem in &problems {
                writeln!(out, "{problem}")?;
            }
            writeln!(out, "{}", format::count(problems.len(), "problem"))?;
            return Ok(1);
        }
    };
    writeln!(out, "{name} is right")?;
    writeln!(out)?;
    for statement in config.statements() {
        writeln!(out, "  {statement}")?;
    }
    tell_columns(&tables, out)?;
    Ok(0)
}

/// Builds what the library would build of the config, gauges included.
fn understand(text: &str, name: &str) -> Result<(Config, Vec<Table>), Vec<Problem>> {
    let config = Config::parse(text, name)?;
    let run = Table {
        name: "run".to_string(),
        description: String::new(),
        columns: Vec::new(),
    };
    let mut plan = Plan::new(vec![run]);
    gauges::build(&config, &mut plan)?;
    Ok((config, plan.tables))
}

fn tell_columns(tables: &[Table], out: &mut dyn Write) -> Result<(), Failure> {
    let all = || tables.iter().flat_map(|table| &table.columns);
    let width = all()
        .map(|column| column.name.chars().count())
        .max()
        .unwrap_or(0);
    for table in tables {
        let mut gauge = "";
        for column in &table.columns {
            if column.gauge != gauge {
                gauge = &column.gauge;
                let where_to = if table.name == "run" {
                    String::new()
                } else {
                    format!(", table {}", table.name)
                };
                writeln!(out, "\n{gauge}{where_to}")?;
            }
            writeln!(out, "  {:width$}  {}", column.name, describe(column))?;
        }
    }
    if all().next().is_none() {
        writeln!(
            out,
            "\nno gauge is switched on: the series will hold the host's clock and nothing else"
        )?;
    }
    Ok(())
}

fn describe(column: &Column) -> String {
    let unit = format::unit(&column.unit);
    let unit = if unit.is_empty() {
        String::new()
    } else {
        format!(" [{unit}]")
    };
    format!("{}{unit}", column.description)
}
