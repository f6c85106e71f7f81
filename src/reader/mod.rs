//! Reading a series, also while a host writes it: without any coordination, on any node, never half a step.
//!
//! ```no_run
//! use limnograph::reader::SeriesReader;
//!
//! let mut series = SeriesReader::open("saltmarsh.limno")?;
//! series.refresh()?; // later, when more may have been written
//! let run = series.table("run").expect("every series has it");
//! let redshift = run.column("redshift");
//! # Ok::<(), limnograph::reader::ReadError>(())
//! ```

mod contents;
mod error;
mod journals;
mod leg;
mod manifests;
mod scan;
mod store;
mod values;
mod view;

pub use error::{Damage, DamageKind, Obstacle, ReadError, extent};
pub use values::{ColumnValues, Values};
pub use view::{MergedColumn, Selection, TableView};

use crate::series::encoding::Payload;
use crate::series::journal::{Continues, End, Gap};
use crate::series::layout::{EXTENSION, FileKind, Listing};
use crate::series::manifest::Manifest;
use crate::series::record::Record;
use contents::{Contents, Limit, explain, limits, read_payload};
use journals::JournalFile;
use leg::{LegData, RecordMark};
use manifests::Manifests;
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

/// A series, as far as it has been read.
pub struct SeriesReader {
    directory: PathBuf,
    manifests: Manifests,
    journals: BTreeMap<u32, JournalFile>,
    contents: Contents,
    /// For each leg the time from which later legs did its rows over again.
    limits: Vec<Option<Limit>>,
}

/// One leg in a few words.
#[derive(Clone, Debug, PartialEq)]
pub struct LegSummary {
    /// Its number.
    pub number: u32,
    /// When it was opened, in milliseconds since 1970-01-01 UTC; `None` when its manifest and heads are lost.
    pub opened: Option<u64>,
    /// How it was closed; `None` when it runs, was killed, or the note is lost.
    pub end: Option<End>,
    /// Measured steps read.
    pub records: usize,
    /// Of these, how many later legs did over again.
    pub superseded: usize,
    /// Rows of all tables.
    pub rows: usize,
    /// Step and time of the first record.
    pub first: Option<(u64, f64)>,
    /// Step and time of the last record.
    pub last: Option<(u64, f64)>,
    /// Its journals.
    pub journals: Vec<u32>,
    /// The version of the library that wrote it.
    pub library_version: Option<String>,
}

impl SeriesReader {
    /// Reads all that is there.
    ///
    /// # Errors
    /// There is nothing, it is no series, a newer version wrote it, or the system refuses. Damage is no error:
    /// everything else is read, and [`SeriesReader::damage`] tells.
    pub fn open(path: impl AsRef<Path>) -> Result<SeriesReader, ReadError> {
        let directory = path.as_ref().to_path_buf();
        let shown = directory.display();
        if directory.is_file() {
            return Err(ReadError::new(
                Obstacle::NotASeries,
                format!(
                    "{shown} is a file; a series is a directory whose name ends in `.{EXTENSION}`"
                ),
            ));
        }
        let listing =
            Listing::of(&directory).map_err(|error| ReadError::system(&directory, &error))?;
        if !listing.is_series() {
            return Err(ReadError::new(
                Obstacle::NotASeries,
                format!(
                    "{shown} holds no manifest and no journal; a series is a directory that a host wrote"
                ),
            ));
        }
        let mut reader = SeriesReader {
            directory,
            manifests: Manifests::default(),
            journals: BTreeMap::new(),
            contents: Contents::default(),
            limits: Vec::new(),
        };
        reader.refresh()?;
        Ok(reader)
    }

    /// Reads what has been written since; returns how many records are new.
    ///
    /// # Errors
    /// As [`SeriesReader::open`].
    pub fn refresh(&mut self) -> Result<usize, ReadError> {
        let listing = Listing::of(&self.directory)
            .map_err(|error| ReadError::system(&self.directory, &error))?;
        let before = self.records();
        for &number in &listing.journals {
            let directory = &self.directory;
            self.journals
                .entry(number)
                .or_insert_with(|| JournalFile::new(directory, number));
        }
        // Manifests are listed before the journals are read, so a leg begun in between has its head only.
        self.manifests.read(&self.directory, &listing.manifests)?;
        let mut journals = std::mem::take(&mut self.journals);
        let result = self.read_journals(&mut journals);
        self.journals = journals;
        result?;
        self.contents.legs.sort_by_key(|leg| leg.number);
        self.limits = limits(&self.contents.legs);
        Ok(self.records() - before)
    }

    fn read_journals(
        &mut self,
        journals: &mut BTreeMap<u32, JournalFile>,
    ) -> Result<(), ReadError> {
        let (manifests, contents) = (&self.manifests, &mut self.contents);
        for journal in journals.values_mut() {
            let path = FileKind::Journal.path(&self.directory, journal.number);
            journal.read(&mut |arrival| contents.take(&arrival, manifests, &path))?;
        }
        Ok(())
    }

    /// The series directory.
    pub fn path(&self) -> &Path {
        &self.directory
    }

    /// What the latest leg says of itself; `None` when no manifest can be used.
    pub fn manifest(&self) -> Option<&Manifest> {
        self.manifests.latest()
    }

    /// All manifests that can be used, first leg first.
    pub fn manifests(&self) -> impl Iterator<Item = &Manifest> {
        self.manifests.all()
    }

    /// What the host of the latest leg says of itself, from its manifest or else a journal.
    pub fn host(&self) -> Option<&serde_json::Value> {
        let head = || {
            self.contents
                .heads
                .values()
                .max_by_key(|head| head.leg)
                .map(|head| &head.host)
        };
        self.manifest().map(|manifest| &manifest.host).or_else(head)
    }

    /// The column of the run table that holds the declared time coordinate, as the latest leg names it.
    pub fn time_column(&self) -> Option<&str> {
        let head = || self.contents.heads.values().max_by_key(|head| head.leg);
        let name = self
            .manifest()
            .map(|manifest| manifest.time_column.as_str());
        name.or_else(|| head().map(|head| head.time_column.as_str()))
            .filter(|name| !name.is_empty())
    }

    /// Names of all tables: those of the latest leg in its order, then those that ended before.
    pub fn tables(&self) -> Vec<&str> {
        let mut names: Vec<&str> = Vec::new();
        for table in self
            .contents
            .legs
            .iter()
            .rev()
            .flat_map(|leg| &leg.schema.tables)
        {
            if !names.contains(&table.name.as_str()) {
                names.push(&table.name);
            }
        }
        names
    }

    /// One table over all legs, without rows that a later leg did over again.
    pub fn table(&self, name: &str) -> Option<TableView<'_>> {
        self.table_with(name, Selection::Standing)
    }

    /// One table over all legs.
    pub fn table_with(&self, name: &str, selection: Selection) -> Option<TableView<'_>> {
        let legs = &self.contents.legs;
        TableView::new(legs, name, selection, |leg, record| {
            self.is_superseded(leg, record)
        })
    }

    fn is_superseded(&self, leg: usize, record: usize) -> bool {
        let time = self.contents.legs[leg].records[record].preface.time;
        self.limits[leg].is_some_and(|limit| limit.covers(time))
    }

    /// Records read, superseded ones included.
    pub fn records(&self) -> usize {
        self.contents.legs.iter().map(|leg| leg.records.len()).sum()
    }

    /// The legs, first one first; also those of which there is only a manifest.
    pub fn legs(&self) -> Vec<LegSummary> {
        let mut numbers: Vec<u32> = self.contents.legs.iter().map(|leg| leg.number).collect();
        numbers.extend(self.manifests.all().map(|manifest| manifest.leg));
        numbers.sort_unstable();
        numbers.dedup();
        numbers
            .into_iter()
            .map(|number| self.leg_summary(number))
            .collect()
    }

    fn leg_summary(&self, number: u32) -> LegSummary {
        let heads = || {
            self.contents
                .heads
                .values()
                .filter(move |head| head.leg == number)
        };
        let manifest = self.manifests.of_leg(number);
        let index = self
            .contents
            .legs
            .iter()
            .position(|leg| leg.number == number);
        let leg = index.map(|index| &self.contents.legs[index]);
        let superseded = index.map_or(0, |index| {
            (0..self.contents.legs[index].records.len())
                .filter(|&at| self.is_superseded(index, at))
                .count()
        });
        let place = |mark: &RecordMark| (mark.preface.step, mark.preface.time);
        LegSummary {
            number,
            opened: manifest
                .map(|manifest| manifest.opened)
                .or_else(|| heads().next().map(|head| head.leg_opened)),
            end: leg.and_then(|leg| leg.end.clone()),
            records: leg.map_or(0, |leg| leg.records.len()),
            superseded,
            rows: leg.map_or(0, LegData::rows),
            first: leg.and_then(LegData::first).map(place),
            last: leg.and_then(LegData::last).map(place),
            journals: heads().map(|head| head.journal).collect(),
            library_version: manifest
                .map(|manifest| manifest.library_version.clone())
                .or_else(|| heads().next().map(|head| head.library_version.clone())),
        }
    }

    /// Rows that the host entered and that the disk could not take, as the journals tell.
    pub fn gaps(&self) -> &[Gap] {
        &self.contents.gaps
    }

    /// Everything that is damaged, by file; empty when the series is whole.
    ///
    /// While a host writes, an incomplete frame at the end of its journal may stand here for a moment.
    pub fn damage(&self) -> Vec<Damage> {
        let mut damage: Vec<Damage> = self.manifests.damage().cloned().collect();
        for journal in self.journals.values() {
            let given_up_from = self.given_up_from(journal.number);
            damage.extend(
                journal
                    .damage()
                    .filter(|damage| damage.from < given_up_from)
                    .cloned(),
            );
        }
        damage.extend(self.missing_manifests());
        damage.extend(self.missing_records());
        damage
    }

    /// A later journal of the leg says from where on this one was given up; its end is then no loss.
    fn given_up_from(&self, journal: u32) -> u64 {
        let continues = self
            .contents
            .heads
            .values()
            .filter_map(|head| head.continues.as_ref());
        continues
            .filter(|before| before.journal == journal)
            .map(|before| before.good_bytes)
            .min()
            .unwrap_or(u64::MAX)
    }

    fn missing_manifests(&self) -> impl Iterator<Item = Damage> {
        let legs = self.contents.legs.iter().map(|leg| leg.number);
        legs.filter(|&leg| self.manifests.of_leg(leg).is_none()).map(|leg| Damage {
            file: FileKind::Manifest.name(leg),
            from: 0,
            to: 0,
            kind: DamageKind::Unreadable,
            text: format!("the manifest of leg {leg} is missing or damaged; its rows are read by its journals"),
        })
    }

    fn missing_records(&self) -> Vec<Damage> {
        let mut damage = Vec::new();
        for leg in &self.contents.legs {
            let gaps: Vec<&Gap> = self
                .contents
                .gaps
                .iter()
                .filter(|gap| gap.leg == leg.number)
                .collect();
            // Nothing that a damaged count claims makes this loop longer: there is one hole between two records.
            let bound = leg.end.as_ref().map_or(leg.seen.end(), |end| end.records);
            let mut holes = leg.seen.holes_below(bound);
            for gap in gaps {
                explain(&mut holes, gap);
            }
            for (first, last) in holes {
                let count = last - first + 1;
                damage.push(Damage {
                    file: format!("leg {}", leg.number),
                    from: first,
                    to: last.saturating_add(1),
                    kind: DamageKind::Missing,
                    text: if count == 1 {
                        format!("record {first} was entered and is in no journal")
                    } else {
                        format!("records {first} to {last} were entered and are in no journal")
                    },
                });
            }
        }
        damage
    }

    /// The journals that later journals of the same leg went on from, and why.
    pub fn continuations(&self) -> Vec<(u32, &Continues)> {
        let heads = self.contents.heads.values();
        heads
            .filter_map(|head| Some((head.journal, head.continues.as_ref()?)))
            .collect()
    }

    /// File names and lengths of the journals read.
    pub fn journal_files(&self) -> Vec<(String, u64)> {
        self.journals
            .values()
            .map(|journal| (journal.name(), journal.length()))
            .collect()
    }

    /// The last standing record whose time is not after `time` (within `tolerance`), with its carried state;
    /// `None` for `time` means the last of all. Read again from its journal.
    ///
    /// # Errors
    /// When the journal cannot be read any longer.
    pub fn last_record(
        &self,
        time: Option<f64>,
        tolerance: f64,
    ) -> Result<Option<Record>, ReadError> {
        let mut best: Option<(&LegData, &RecordMark)> = None;
        for (index, leg) in self.contents.legs.iter().enumerate() {
            for (at, mark) in leg.records.iter().enumerate() {
                let is_early = time.is_none_or(|time| mark.preface.time <= time + tolerance);
                let is_later = best.is_none_or(|(best_leg, best)| {
                    (leg.number, mark.preface.number) > (best_leg.number, best.preface.number)
                });
                if is_early && is_later && !self.is_superseded(index, at) {
                    best = Some((leg, mark));
                }
            }
        }
        let Some((leg, mark)) = best else {
            return Ok(None);
        };
        let path = FileKind::Journal.path(&self.directory, mark.journal);
        let payload =
            read_payload(&path, mark.offset).map_err(|error| ReadError::system(&path, &error))?;
        let record = Payload::read(&payload).and_then(|payload| payload.record(&leg.schema));
        record.map(Some).ok_or_else(|| {
            let text = format!("{} has changed since it was read", path.display());
            ReadError::new(Obstacle::Disk, text)
        })
    }
}
