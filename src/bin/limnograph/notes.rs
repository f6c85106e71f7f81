//! What the library had to say besides numbers: the rows of the table of events.

use limnograph::reader::{ColumnValues, SeriesReader};

/// The table of events.
const EVENTS: &str = "events";

/// One row of it.
struct Note {
    step: u64,
    source: String,
    text: String,
}

/// All of them, in the order of the rows.
pub struct Notes(Vec<Note>);

impl Notes {
    /// In the table of events the texts of a row are whom it concerns and what happened, in this order.
    pub fn read(reader: &SeriesReader) -> Notes {
        let Some(events) = reader.table(EVENTS) else {
            return Notes(Vec::new());
        };
        let texts: Vec<ColumnValues> = (0..events.columns().len())
            .map(|column| events.column_rows(column, 0..events.rows()))
            .filter(|values| matches!(values, ColumnValues::Text(_)))
            .collect();
        let [ColumnValues::Text(sources), ColumnValues::Text(texts), ..] = texts.as_slice() else {
            return Notes(Vec::new());
        };
        let note = |row: usize| {
            let (source, text) = (sources.get(row)?.clone(), texts.get(row)?.clone());
            let step = events.step(row)?;
            Some(Note { step, source, text })
        };
        Notes((0..events.rows()).filter_map(note).collect())
    }

    /// What has been said about a gauge, each thing once.
    pub fn about(&self, gauge: &str) -> Vec<&str> {
        let mut texts: Vec<&str> = Vec::new();
        for note in self.0.iter().filter(|note| note.source == gauge) {
            if !texts.contains(&note.text.as_str()) {
                texts.push(&note.text);
            }
        }
        texts
    }

    /// The last thing said about something else than these gauges: a rank in error, a run that fell asleep.
    pub fn last_but(&self, gauges: &[&str]) -> Option<String> {
        let note = self
            .0
            .iter()
            .rev()
            .find(|note| !gauges.contains(&note.source.as_str()))?;
        Some(format!(
            "step {}, {}: {}",
            note.step, note.source, note.text
        ))
    }
}
