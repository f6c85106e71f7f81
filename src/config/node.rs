//! A TOML document as values we own, each with its place in the file.

use std::sync::Arc;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::problem::{Lines, Place, Problem, plain, quoted};

/// One value and where it stands.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Node {
    pub(super) place: Place,
    pub(super) value: Value,
}

/// A value of TOML. Integers that do not fit 64 bits never get this far.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Value {
    Text(String),
    Integer(i64),
    Float(f64),
    Flag(bool),
    Date(String),
    List(Vec<Node>),
    Table(Vec<Entry>),
    /// A number that double precision or 64 bits cannot hold, infinity or NaN, in the user's spelling.
    Unusable(String),
}

/// One key of a table.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Entry {
    pub(super) key: String,
    pub(super) place: Place,
    pub(super) node: Node,
}

impl Value {
    /// How a message says what was found.
    pub(super) fn describe(&self) -> String {
        match self {
            Value::Text(text) => quoted(text),
            Value::Integer(number) => number.to_string(),
            Value::Float(number) => plain(*number),
            Value::Flag(flag) => flag.to_string(),
            Value::Date(date) => format!("the date {date}"),
            Value::List(items) => format!("a list of {}", items.len()),
            Value::Table(_) => "a table".to_string(),
            Value::Unusable(number) => format!("{number}, which is out of range"),
        }
    }
}

/// Reads a document: its entries, in the order of the file.
///
/// # Errors
/// All syntax errors, where there are any.
pub(super) fn read(text: &str, file: &Arc<str>) -> Result<Vec<Entry>, Vec<Problem>> {
    let lines = Lines::new(text);
    let (table, errors) = DeTable::parse_recoverable(text);
    if errors.is_empty() {
        return Ok(Converter { lines }.table(table.into_inner()));
    }
    let mut problems: Vec<Problem> = errors
        .iter()
        .map(|error| {
            let place = lines.place(error.span().map_or(0, |span| span.start));
            let message = format!("this is not TOML: {}", error.message());
            Problem {
                file: file.clone(),
                line: place.line,
                column: place.column,
                message,
            }
        })
        .collect();
    problems.sort_by_key(|problem| (problem.line, problem.column));
    // The first error of a line tends to cause the others.
    problems.dedup_by_key(|problem| problem.line);
    Err(problems)
}

struct Converter<'a> {
    lines: Lines<'a>,
}

impl Converter<'_> {
    /// In the order of the file.
    fn table(&self, table: DeTable<'_>) -> Vec<Entry> {
        let mut entries: Vec<Entry> = table
            .into_iter()
            .map(|(key, value)| {
                let place = self.lines.place(key.span().start);
                Entry {
                    key: key.into_inner().into_owned(),
                    place,
                    node: self.node(value),
                }
            })
            .collect();
        entries.sort_by_key(|entry| entry.place);
        entries
    }

    fn node(&self, spanned: Spanned<DeValue<'_>>) -> Node {
        let place = self.lines.place(spanned.span().start);
        let value = match spanned.into_inner() {
            DeValue::String(text) => Value::Text(text.into_owned()),
            DeValue::Integer(integer) => i64::from_str_radix(integer.as_str(), integer.radix())
                .map_or_else(|_| Value::Unusable(integer.to_string()), Value::Integer),
            DeValue::Float(float) => match float.as_str().parse::<f64>() {
                Ok(number) if number.is_finite() => Value::Float(number),
                _ => Value::Unusable(float.as_str().to_string()),
            },
            DeValue::Boolean(flag) => Value::Flag(flag),
            DeValue::Datetime(date) => Value::Date(date.to_string()),
            DeValue::Array(items) => {
                Value::List(items.into_iter().map(|item| self.node(item)).collect())
            }
            DeValue::Table(table) => Value::Table(self.table(table)),
        };
        Node { place, value }
    }
}
