//! A table of the config, read strictly: who asks for a key also says what may stand there, and what nobody
//! asked for is a problem.

use std::ops::RangeInclusive;
use std::sync::Arc;

use super::convert::{Measure, Setting, constant, each, flag, list, measure, number, text, unit};
use super::node::{Entry, Node, Value};
use super::problem::{Place, Problem, plain};
use crate::units::nearest::{either, nearest};
use crate::units::{Dimension, Unit};

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
    setting: Setting,
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
            self.section.missing(self.key, &self.expected);
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
        setting: Setting,
    ) -> Section {
        Section {
            file,
            path,
            place,
            entries,
            asked: Vec::new(),
            problems: Vec::new(),
            setting,
        }
    }

    pub(super) fn file(&self) -> Arc<str> {
        self.file.clone()
    }

    pub(super) fn setting(&self) -> Setting {
        self.setting
    }

    /// What units may rely on from here on, in this table and those below.
    pub(super) fn set_setting(&mut self, setting: Setting) {
        self.setting = setting;
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
    pub(super) fn unit<'s>(&'s mut self, key: &'s str, dimension: Dimension) -> Answer<'s, Unit> {
        let expected = format!(
            "the unit of {dimension}, as a text or a number greater than 0 that is its value in cgs"
        );
        self.answer_or_why(key, expected, |node, setting| {
            unit(node, dimension, setting)
        })
    }

    /// A quantity that does not change with time, in cgs: a text with its unit (`"0.1 m_p cm^-3"`), or a bare
    /// number in cgs.
    pub fn constant<'s>(&'s mut self, key: &'s str, dimension: Dimension) -> Answer<'s, f64> {
        let expected =
            format!("{dimension}, as a text with its unit or a number greater than 0 in cgs");
        self.answer_or_why(key, expected, |node, setting| {
            constant(node, dimension, setting)
        })
    }

    /// The unit written under `key` where it can be read at all, without asking for the key.
    pub(super) fn unit_if_right(&self, key: &str) -> Option<Unit> {
        Unit::parse(text(&self.look(key)?.node)?, &self.setting.symbols).ok()
    }

    /// A quantity of the given dimension: a bare number counts in the host's own unit, a text states its
    /// unit (`"30 kpc"`).
    pub fn measure<'s>(&'s mut self, key: &'s str, dimension: Dimension) -> Answer<'s, Measure> {
        let expected = host_or_stated(dimension);
        self.answer_or_why(key, expected, |node, setting| {
            measure(node, dimension, setting)
        })
    }

    /// A list of quantities, each as for [`Section::measure`].
    pub fn measures<'s>(
        &'s mut self,
        key: &'s str,
        dimension: Dimension,
    ) -> Answer<'s, Vec<Measure>> {
        let expected = format!("a list, each of it {}", host_or_stated(dimension));
        self.answer_or_why(key, expected, |node, setting| {
            let items = list(node).ok_or_else(|| node.value.describe())?;
            items
                .iter()
                .map(|item| measure(item, dimension, setting))
                .collect()
        })
    }

    /// A table of its own. Finish it too, and hand its problems to [`Section::adopt`].
    pub fn section<'s>(&'s mut self, key: &'s str) -> Answer<'s, Section> {
        let (file, path, setting) = (self.file.clone(), self.below(key), self.setting);
        self.answer(key, "a table".to_string(), |node, _| match &node.value {
            Value::Table(entries) => Some(Section::new(
                file,
                path,
                node.place,
                entries.clone(),
                setting,
            )),
            _ => None,
        })
    }

    /// A list of tables, `[[name]]` in the file; each is finished as for [`Section::section`].
    pub fn sections<'s>(&'s mut self, key: &'s str) -> Answer<'s, Vec<Section>> {
        let (file, path, setting) = (self.file.clone(), self.below(key), self.setting);
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
                            setting,
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
            self.setting,
        ))
    }

    /// Records a problem with what stands under `key`, or with the table where the key is absent.
    pub fn refuse(&mut self, key: &str, message: impl AsRef<str>) {
        let place = self.look(key).map_or(self.place, |entry| entry.node.place);
        let message = format!("{}{key}: {}", self.prefix(), message.as_ref());
        self.push(place, message);
    }

    /// Records a problem with the table as a whole.
    pub fn reject(&mut self, message: &str) {
        let message = format!("{}{message}", self.prefix());
        self.push(self.place, message);
    }

    /// Records that a key is missing, for keys that are required only beside others.
    pub fn missing(&mut self, key: &str, expected: &str) {
        if self.path.is_empty() {
            self.reject(&format!("the section [{key}] is missing"));
        } else {
            self.reject(&format!("the key `{key}` is missing; expected {expected}"));
        }
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
        convert: impl FnOnce(&Node, &Setting) -> Option<T>,
    ) -> Answer<'s, T> {
        self.answer_or_why(key, expected, |node, setting| {
            convert(node, setting).ok_or_else(|| node.value.describe())
        })
    }

    /// `convert` says what it found where that is not what was expected.
    fn answer_or_why<'s, T>(
        &'s mut self,
        key: &'s str,
        expected: String,
        convert: impl FnOnce(&Node, &Setting) -> Result<T, String>,
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
            Some(entry) => convert(&entry.node, &self.setting),
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

fn host_or_stated(dimension: Dimension) -> String {
    format!(
        "{dimension}, as a number greater than 0 in the host's own unit or a text with its unit"
    )
}
