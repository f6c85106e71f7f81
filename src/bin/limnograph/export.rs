//! Tables for other programs.

use crate::open::Failure;
use limnograph::reader::{ColumnValues, Selection, SeriesReader, TableView};
use limnograph::series::record::Value;
use limnograph::series::schema::Column;
use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::Path;

/// Rows whose cells are taken out of the columns at a time.
const ROWS: usize = 4096;

/// Writes a table to a file as [`csv`] does.
pub fn csv_to_file(
    reader: &SeriesReader,
    table: &str,
    all_legs: bool,
    path: &Path,
) -> Result<(), Failure> {
    let view = view(reader, table, all_legs)?;
    let told =
        |error: io::Error| Failure::Told(format!("cannot write {}: {error}", path.display()));
    let mut out = BufWriter::new(File::create(path).map_err(told)?);
    write_table(&view, all_legs, &mut out)
        .and_then(|()| out.flush())
        .map_err(told)
}

/// Writes a table as CSV.
pub fn csv(
    reader: &SeriesReader,
    table: &str,
    all_legs: bool,
    out: &mut dyn Write,
) -> Result<(), Failure> {
    write_table(&view(reader, table, all_legs)?, all_legs, out)?;
    Ok(())
}

fn view<'a>(
    reader: &'a SeriesReader,
    table: &str,
    all_legs: bool,
) -> Result<TableView<'a>, Failure> {
    let selection = if all_legs {
        Selection::Everything
    } else {
        Selection::Standing
    };
    reader.table_with(table, selection).ok_or_else(|| {
        let names = reader.tables().join(", ");
        let path = reader.path().display();
        Failure::Told(format!("{path} has no table `{table}`; it has: {names}"))
    })
}

fn write_table(view: &TableView<'_>, all_legs: bool, out: &mut dyn Write) -> io::Result<()> {
    write_header(view, all_legs, out)?;
    let mut from = 0;
    while from < view.rows() {
        let rows = from..(from + ROWS).min(view.rows());
        let columns: Vec<ColumnValues> = (0..view.columns().len())
            .map(|column| view.column_rows(column, rows.clone()))
            .collect();
        for row in rows.clone() {
            if all_legs {
                let leg = view.leg(row).unwrap_or(0);
                write!(out, "{leg},{},", u8::from(view.is_superseded(row)))?;
            }
            for (index, (values, merged)) in columns.iter().zip(view.columns()).enumerate() {
                if index > 0 {
                    out.write_all(b",")?;
                }
                write_cell(&values.value(row - from), &merged.column, out)?;
            }
            out.write_all(b"\n")?;
        }
        from = rows.end;
    }
    Ok(())
}

fn write_header(view: &TableView<'_>, all_legs: bool, out: &mut dyn Write) -> io::Result<()> {
    let mut names = Vec::new();
    if all_legs {
        names.extend(["leg".to_string(), "superseded".to_string()]);
    }
    for merged in view.columns() {
        let Column {
            name, unit, length, ..
        } = &merged.column;
        let unit = if unit.is_empty() {
            String::new()
        } else {
            format!(" [{unit}]")
        };
        if *length == 1 {
            names.push(format!("{name}{unit}"));
        } else {
            names.extend((0..*length).map(|place| format!("{name}.{place}{unit}")));
        }
    }
    for (index, name) in names.iter().enumerate() {
        if index > 0 {
            out.write_all(b",")?;
        }
        write_text(name, out)?;
    }
    out.write_all(b"\n")
}

fn write_cell(value: &Value, column: &Column, out: &mut dyn Write) -> io::Result<()> {
    match value {
        // A vector that is null leaves all its cells empty.
        Value::Null => (1..column.length).try_for_each(|_| out.write_all(b",")),
        Value::Float(value) => write_float(*value, out),
        Value::Integer(value) => write!(out, "{value}"),
        Value::Unsigned(value) => write!(out, "{value}"),
        // Quoted when empty, to be told from null.
        Value::Text(text) if text.is_empty() => out.write_all(b"\"\""),
        Value::Text(text) => write_text(text, out),
        Value::Floats(values) => write_all(values, out, |&value, out| write_float(value, out)),
        Value::Counts(values) => write_all(values, out, |value, out| write!(out, "{value}")),
    }
}

fn write_all<T>(
    values: &[T],
    out: &mut dyn Write,
    write: impl Fn(&T, &mut dyn Write) -> io::Result<()>,
) -> io::Result<()> {
    for (index, value) in values.iter().enumerate() {
        if index > 0 {
            out.write_all(b",")?;
        }
        write(value, out)?;
    }
    Ok(())
}

fn write_float(value: f64, out: &mut dyn Write) -> io::Result<()> {
    if value.is_nan() {
        out.write_all(b"nan")
    } else {
        // The shortest digits that read back to the same number, with an exponent where that is shorter.
        write!(out, "{value:?}")
    }
}

/// Quotes a text where RFC 4180 asks for it.
fn write_text(text: &str, out: &mut dyn Write) -> io::Result<()> {
    if text.contains(['"', ',', '\r', '\n']) {
        write!(out, "\"{}\"", text.replace('"', "\"\""))
    } else {
        out.write_all(text.as_bytes())
    }
}
