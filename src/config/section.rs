//! A table of the config, read strictly: who asks for a key also says what may stand there, and what nobody
//! asked for is a problem.

use std::ops::RangeInclusive;
use std::sync::Arc;

use super::node::{Entry, Node, Value};
use super::problem::{Place, Problem, plain, quoted};
use crate::units::nearest::{either, nearest};
use crate::units::{Dimension, Symbols, Unit};

/// One table of the config, with the problems found in it so far.
///
/// ```
/// # use limnograph::config::Section;
/// # fn read(mut section: Section) -> Result<(f64, u64), Vec<limnograph::config::Problem>> {
/// let efficiency = section.positive("efficiency").or(0.1);
/// let shells = section.integer("shells", 1..=1000).required();
/// section.finish()?;
/// # Ok((efficiency, shells.unwrap_or(0))) }
/// ```
#[derive(Clone, Debug, PartialEq)]
pub struct Section {
    file: Arc<str>,
    path: String,
    place: Place,
    entries: Vec<Entry>,
    asked: Vec<String>,
    problems: Vec<Problem>,
    symbols: Symbols,
}

/// A quantity as the config states it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Measure {
    /// A bare number: so many of the host's own unit.
    Host(f64),
    /// A number with its unit, or a unit alone.
    Stated(Unit),
}

/// What was found under a key; say what its absence means to get at it.
#[must_use]
pub struct Answer<'s, T> {
    section: &'s mut Section,
    key: &'s str,
    expected: String,
    found: Found<T>,
}

enum Found<T> {
    Absent,
    /// Already reported.
    Bad,
    Good(T),
}

impl<T> Answer<'_, T> {
    /// The value; `None` when the key is absent, or its value was refused (and reported).
    pub fn optional(self) -> Option<T> {
        match self.found {
            Found::Good(value) => Some(value),
            Found::Absent | Found::Bad => None,
        }
    }

    /// The value, or `default` where there is none or it was refused (and reported).
    pub fn or(self, default: T) -> T {
        self.optional().unwrap_or(default)
    }

    /// The value; `None` means that a problem has been recorded.
    pub fn required(self) -> Option<T> {
        if matches!(self.found, Found::Absent) {
            let (key, expected) = (self.key, &self.expected);
            let message = if self.section.path.is_empty() {
                format!("the section [{key}] is missing")
            } else {
                format!(
                    "{}the key `{key}` is missing; expected {expected}",
                    self.section.prefix()
                )
            };
            self.section.push(self.section.place, message);
        }
        self.optional()
    }
}

impl Section {
    pub(super) fn new(
        file: Arc<str>,
        path: String,
        place: Place,
        entries: Vec<Entry>,
        symbols: Symbols,
    ) -> Section {
        Section {
            file,
            path,
            place,
            entries,
            asked: Vec::new(),
            problems: Vec::new(),
            symbols,
        }
    }

    pub(super) fn file(&self) -> Arc<str> {
        self.file.clone()
    }

    pub(super) fn set_symbols(&mut self, symbols: Symbols) {
        self.symbols = symbols;
    }

    /// Its name as the file has it, e.g. `gauges.wind_shells`; empty for the file as a whole.
    pub fn path(&self) -> &str {
        &self.path
    }

    /// Is the key there?
    pub fn has(&self, key: &str) -> bool {
        self.look(key).is_some()
    }

    /// The keys that are there, in the order of the file. Counts as asking for none of them.
    pub fn keys(&self) -> impl Iterator<Item = &str> {
        self.entries.iter().map(|entry| entry.key.as_str())
    }

    /// Does a list stand under the key?
    pub fn is_list(&self, key: &str) -> bool {
        matches!(
            self.look(key),
            Some(Entry {
                node: Node {
                    value: Value::List(_),
                    ..
                },
                ..
            })
        )
    }

    /// Does a table stand under the key?
    pub fn is_table(&self, key: &str) -> bool {
        matches!(
            self.look(key),
            Some(Entry {
                node: Node {
                    value: Value::Table(_),
                    ..
                },
                ..
            })
        )
    }

    /// Does `true` or `false` stand under the key?
    pub fn is_flag(&self, key: &str) -> bool {
        matches!(
            self.look(key),
            Some(Entry {
                node: Node {
                    value: Value::Flag(_),
                    ..
                },
                ..
            })
        )
    }

    /// Does a bare number stand under the key?
    pub fn is_number(&self, key: &str) -> bool {
        matches!(
            self.look(key),
            Some(Entry {
                node: Node {
                    value: Value::Float(_) | Value::Integer(_),
                    ..
                },
                ..
            })
        )
    }

    /// A finite number.
    pub fn number<'s>(&'s mut self, key: &'s str) -> Answer<'s, f64> {
        self.answer(key, "a number".to_string(), |node, _| number(node))
    }

    /// A number greater than 0.
    pub fn positive<'s>(&'s mut self, key: &'s str) -> Answer<'s, f64> {
        self.answer(key, "a number greater than 0".to_string(), |node, _| {
            number(node).filter(|value| *value > 0.0)
        })
    }

    /// A number within the range, its ends included.
    pub fn number_in<'s>(
        &'s mut self,
        key: &'s str,
        range: RangeInclusive<f64>,
    ) -> Answer<'s, f64> {
        let expected = format!(
            "a number from {} to {}",
            plain(*range.start()),
            plain(*range.end())
        );
        self.answer(key, expected, |node, _| {
            number(node).filter(|value| range.contains(value))
        })
    }

    /// A whole number within the range, its ends included.
    pub fn integer<'s>(&'s mut self, key: &'s str, range: RangeInclusive<u64>) -> Answer<'s, u64> {
        let expected = format!("a whole number from {} to {}", range.start(), range.end());
        self.answer(key, expected, |node, _| match node.value {
            Value::Integer(value) => u64::try_from(value)
                .ok()
                .filter(|value| range.contains(value)),
            _ => None,
        })
    }

    /// `true` or `false`.
    pub fn flag<'s>(&'s mut self, key: &'s str) -> Answer<'s, bool> {
        self.answer(key, "true or false".to_string(), |node, _| flag(node))
    }

    /// A text.
    pub fn text<'s>(&'s mut self, key: &'s str) -> Answer<'s, String> {
        self.answer(key, "a text in quotes".to_string(), |node, _| {
            text(node).map(str::to_string)
        })
    }

    /// One of a few texts, each standing for a value.
    pub fn choice<'s, T: Clone>(
        &'s mut self,
        key: &'s str,
        choices: &[(&str, T)],
    ) -> Answer<'s, T> {
        let names: Vec<String> = choices
            .iter()
            .map(|(name, _)| format!("{name:?}"))
            .collect();
        let expected = either(&names);
        self.answer(key, expected, |node, _| {
            let found = text(node)?;
            choices
                .iter()
                .find(|(name, _)| *name == found)
                .map(|(_, value)| value.clone())
        })
    }

    /// A list of finite numbers.
    pub fn numbers<'s>(&'s mut self, key: &'s str) -> Answer<'s, Vec<f64>> {
        self.answer_or_why(key, "a list of numbers".to_string(), |node, _| {
            each(node, number)
        })
    }

    /// A list of texts.
    pub fn texts<'s>(&'s mut self, key: &'s str) -> Answer<'s, Vec<String>> {
        self.answer_or_why(key, "a list of texts".to_string(), |node, _| {
            each(node, |item| text(item).map(str::to_string))
        })
    }

    /// A list of `true` and `false`.
    pub fn flags<'s>(&'s mut self, key: &'s str) -> Answer<'s, Vec<bool>> {
        self.answer_or_why(key, "a list of true and false".to_string(), |node, _| {
            each(node, flag)
        })
    }

    /// A unit of the given dimension: its name, or a bare number that is its value in cgs.
    pub fn unit<'s>(&'s mut self, key: &'s str, dimension: Dimension) -> Answer<'s, Unit> {
        let expected = format!("the unit of {dimension}, as a name in quotes or its value in cgs");
        self.answer_or_why(key, expected, |node, symbols| match number(node) {
            Some(value) => Unit::from_cgs(value, dimension)
                .map_err(|error| format!("{}, which {error}", plain(value))),
            None => unit(node, dimension, symbols),
        })
    }

    /// The unit written under `key` where it can be read at all, without asking for the key.
    pub(super) fn unit_if_right(&self, key: &str) -> Option<Unit> {
        Unit::parse(text(&self.look(key)?.node)?, &self.symbols).ok()
    }

    /// A quantity of the given dimension: a bare number counts in the host's own unit, a text states its
    /// unit (`"30 kpc"`).
    pub fn measure<'s>(&'s mut self, key: &'s str, dimension: Dimension) -> Answer<'s, Measure> {
        let expected = measure_expected(dimension);
        self.answer_or_why(key, expected, |node, symbols| {
            measure(node, dimension, symbols)
        })
    }

    /// A list of quantities, each as for [`Section::measure`].
    pub fn measures<'s>(
        &'s mut self,
        key: &'s str,
        dimension: Dimension,
    ) -> Answer<'s, Vec<Measure>> {
        let expected = format!("a list, each of it {}", measure_expected(dimension));
        self.answer_or_why(key, expected, |node, symbols| {
            let items = list(node).ok_or_else(|| node.value.describe())?;
            items
                .iter()
                .map(|item| measure(item, dimension, symbols))
                .collect()
        })
    }

    /// A table of its own. Finish it too, and hand its problems to [`Section::adopt`].
    pub fn section<'s>(&'s mut self, key: &'s str) -> Answer<'s, Section> {
        let (file, path, symbols) = (self.file.clone(), self.below(key), self.symbols);
        self.answer(key, "a table".to_string(), |node, _| match &node.value {
            Value::Table(entries) => Some(Section::new(
                file,
                path,
                node.place,
                entries.clone(),
                symbols,
            )),
            _ => None,
        })
    }

    /// A list of tables, `[[name]]` in the file; each is finished as for [`Section::section`].
    pub fn sections<'s>(&'s mut self, key: &'s str) -> Answer<'s, Vec<Section>> {
        let (file, path, symbols) = (self.file.clone(), self.below(key), self.symbols);
        self.answer(
            key,
            format!("a list of tables, each under [[{path}]]"),
            |node, _| {
                list(node)?
                    .iter()
                    .map(|item| match &item.value {
                        Value::Table(entries) => Some(Section::new(
                            file.clone(),
                            path.clone(),
                            item.place,
                            entries.clone(),
                            symbols,
                        )),
                        _ => None,
                    })
                    .collect()
            },
        )
    }

    /// Switched on or off by `true` and `false`; a table is the caller's to read.
    pub(super) fn flag_or_table(&mut self, key: &str) -> bool {
        self.answer(
            key,
            "true, false or a table of its own".to_string(),
            |node, _| flag(node),
        )
        .or(false)
    }

    /// An empty table under `key`: what `key = true` stands for. Nothing where the key says otherwise.
    pub(super) fn empty(&self, key: &str) -> Option<Section> {
        let entry = self.look(key)?;
        Some(Section::new(
            self.file.clone(),
            self.below(key),
            entry.place,
            Vec::new(),
            self.symbols,
        ))
    }

    /// Records a problem with what stands under `key`, or with the table where the key is absent.
    pub fn refuse(&mut self, key: &str, message: impl AsRef<str>) {
        let place = self.look(key).map_or(self.place, |entry| entry.node.place);
        let message = format!("{}{key}: {}", self.prefix(), message.as_ref());
        self.push(place, message);
    }

    /// The problem that this table's own name is not among `known`; `what` says what they are.
    pub fn misnamed(self, what: &str, known: &[&str]) -> Problem {
        let (above, name) = self.path.rsplit_once('.').unwrap_or(("", &self.path));
        let prefix = if above.is_empty() {
            String::new()
        } else {
            format!("[{above}] ")
        };
        let message = unknown(what, name, known, |name| format!("`{name}`"));
        Problem {
            message: format!("{prefix}{message}"),
            file: self.file,
            line: self.place.line,
            column: self.place.column,
        }
    }

    /// Takes over the problems of a table below.
    pub fn adopt(&mut self, problems: Vec<Problem>) {
        self.problems.extend(problems);
    }

    /// Were problems found so far?
    pub fn has_problems(&self) -> bool {
        !self.problems.is_empty()
    }

    /// Done: reports every key that nobody asked for, and all problems found before.
    ///
    /// # Errors
    /// The problems, in the order of the file.
    pub fn finish(mut self) -> Result<(), Vec<Problem>> {
        let asked: Vec<String> = std::mem::take(&mut self.asked);
        let asked: Vec<&str> = asked.iter().map(String::as_str).collect();
        for entry in std::mem::take(&mut self.entries) {
            if !asked.contains(&entry.key.as_str()) {
                let message = self.unknown(&entry.key, &asked);
                self.push(entry.place, message);
            }
        }
        self.problems
            .sort_by_key(|problem| (problem.line, problem.column));
        if self.problems.is_empty() {
            Ok(())
        } else {
            Err(self.problems)
        }
    }

    fn unknown(&self, key: &str, known: &[&str]) -> String {
        match self.path.is_empty() {
            true => unknown("section", key, known, |name| format!("[{name}]")),
            false => {
                let message = unknown("key", key, known, |name| format!("`{name}`"));
                format!("{}{message}", self.prefix())
            }
        }
    }

    fn answer<'s, T>(
        &'s mut self,
        key: &'s str,
        expected: String,
        convert: impl FnOnce(&Node, &Symbols) -> Option<T>,
    ) -> Answer<'s, T> {
        self.answer_or_why(key, expected, |node, symbols| {
            convert(node, symbols).ok_or_else(|| node.value.describe())
        })
    }

    /// `convert` says what it found where that is not what was expected.
    fn answer_or_why<'s, T>(
        &'s mut self,
        key: &'s str,
        expected: String,
        convert: impl FnOnce(&Node, &Symbols) -> Result<T, String>,
    ) -> Answer<'s, T> {
        if !self.asked.iter().any(|asked| asked == key) {
            self.asked.push(key.to_string());
        }
        let converted = match self.look(key) {
            None => {
                return Answer {
                    section: self,
                    key,
                    expected,
                    found: Found::Absent,
                };
            }
            Some(entry) => convert(&entry.node, &self.symbols),
        };
        let found = match converted {
            Ok(value) => Found::Good(value),
            Err(found) => {
                self.refuse(key, format!("found {found}; expected {expected}"));
                Found::Bad
            }
        };
        Answer {
            section: self,
            key,
            expected,
            found,
        }
    }

    fn look(&self, key: &str) -> Option<&Entry> {
        self.entries.iter().find(|entry| entry.key == key)
    }

    fn below(&self, key: &str) -> String {
        if self.path.is_empty() {
            key.to_string()
        } else {
            format!("{}.{key}", self.path)
        }
    }

    fn prefix(&self) -> String {
        if self.path.is_empty() {
            String::new()
        } else {
            format!("[{}] ", self.path)
        }
    }

    fn push(&mut self, place: Place, message: String) {
        let file = self.file.clone();
        self.problems.push(Problem {
            file,
            line: place.line,
            column: place.column,
            message,
        });
    }
}

/// "unknown key `mas`; did you mean `mass`?"
fn unknown(what: &str, name: &str, known: &[&str], quote: impl Fn(&str) -> String) -> String {
    let near = nearest(name, known.iter().copied());
    let shown: String = name.escape_debug().take(60).collect();
    let shown = quote(&shown);
    if !near.is_empty() {
        let near: Vec<String> = near.into_iter().map(quote).collect();
        return format!("unknown {what} {shown}; did you mean {}?", either(&near));
    }
    if known.is_empty() {
        return format!("unknown {what} {shown}; none is expected here");
    }
    let mut known = known.to_vec();
    known.sort_unstable();
    format!("unknown {what} {shown}; known here: {}", known.join(", "))
}

fn number(node: &Node) -> Option<f64> {
    match node.value {
        Value::Float(value) => Some(value),
        Value::Integer(value) => Some(value as f64),
        _ => None,
    }
}

fn text(node: &Node) -> Option<&str> {
    match &node.value {
        Value::Text(text) => Some(text),
        _ => None,
    }
}

fn list(node: &Node) -> Option<&[Node]> {
    match &node.value {
        Value::List(items) => Some(items),
        _ => None,
    }
}

fn flag(node: &Node) -> Option<bool> {
    match node.value {
        Value::Flag(flag) => Some(flag),
        _ => None,
    }
}

/// Every item of a list; or what was found that is not as expected.
fn each<T>(node: &Node, convert: impl Fn(&Node) -> Option<T>) -> Result<Vec<T>, String> {
    let items = list(node).ok_or_else(|| node.value.describe())?;
    items
        .iter()
        .map(|item| convert(item).ok_or_else(|| format!("{} in the list", item.value.describe())))
        .collect()
}

fn unit(node: &Node, dimension: Dimension, symbols: &Symbols) -> Result<Unit, String> {
    let written = text(node).ok_or_else(|| node.value.describe())?;
    let unit =
        Unit::parse(written, symbols).map_err(|error| format!("{} ({error})", quoted(written)))?;
    if unit.dimension == dimension {
        Ok(unit)
    } else if unit.dimension == Dimension::NUMBER {
        Err(format!(
            "{}, a pure number (a bare number is written without quotes)",
            quoted(written)
        ))
    } else {
        Err(format!("{}, {}", quoted(written), unit.dimension))
    }
}

fn measure(node: &Node, dimension: Dimension, symbols: &Symbols) -> Result<Measure, String> {
    match number(node) {
        Some(value) if value > 0.0 => Ok(Measure::Host(value)),
        Some(value) => Err(plain(value)),
        None => unit(node, dimension, symbols).map(Measure::Stated),
    }
}

fn measure_expected(dimension: Dimension) -> String {
    format!(
        "{dimension}: a number greater than 0 in the host's own unit, or a text with number and unit"
    )
}
