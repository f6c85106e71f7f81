//! Sorting what the frames hold into legs.

use super::error::ReadError;
use super::journals::Arrival;
use super::leg::LegData;
use super::manifests::{Manifests, newer};
use crate::series::check_schema;
use crate::series::encoding::Payload;
use crate::series::frame::{HEADER_BYTES, Header, kind};
use crate::series::journal::{End, Gap, Head};
use crate::series::layout::FORMAT;
use crate::series::schema::Schema;
use serde::Deserialize;
use std::collections::{BTreeMap, HashSet};
use std::fs::File;
use std::io;
use std::os::unix::fs::FileExt;
use std::path::Path;

/// What the frames of all journals held.
#[derive(Default)]
pub struct Contents {
    /// Ascending by number once a refresh is over.
    pub legs: Vec<LegData>,
    /// The heads by number of their journal.
    pub heads: BTreeMap<u32, Head>,
    /// In the order they were read.
    pub gaps: Vec<Gap>,
    known_gaps: HashSet<(u32, u64, u64)>,
}

/// The part of a head that every version will be able to read.
#[derive(Deserialize)]
struct AnyHead {
    format: u32,
}

impl Contents {
    /// Takes in a frame; returns what is wrong with its content.
    ///
    /// # Errors
    /// When a newer version wrote the journal.
    pub fn take(
        &mut self,
        arrival: &Arrival<'_>,
        manifests: &Manifests,
        path: &Path,
    ) -> Result<Option<String>, ReadError> {
        Ok(match arrival.kind {
            kind::HEAD => {
                if let Ok(AnyHead { format }) = serde_json::from_slice(arrival.payload)
                    && format > FORMAT
                {
                    return Err(newer(path, format));
                }
                self.take_head(arrival).err()
            }
            kind::RECORD => self.take_record(arrival, manifests).err(),
            kind::GAP => self.take_gap(arrival.payload).err(),
            kind::END => self.take_end(arrival.payload).err(),
            kind::FIRST_OPTIONAL.. => None,
            other => Some(format!(
                "a frame of kind {other}, which this version does not know"
            )),
        })
    }

    fn take_head(&mut self, arrival: &Arrival<'_>) -> Result<(), String> {
        let head: Head = serde_json::from_slice(arrival.payload)
            .map_err(|error| format!("the head frame is not understood: {error}"))?;
        self.leg(head.leg, Some(&head.schema))?;
        self.heads.insert(arrival.journal, head);
        Ok(())
    }

    fn take_record(&mut self, arrival: &Arrival<'_>, manifests: &Manifests) -> Result<(), String> {
        let payload = Payload::read(arrival.payload).ok_or("a record that is too short")?;
        let number = payload.preface.leg;
        let schema = manifests.of_leg(number).map(|manifest| &manifest.schema);
        let leg = self.leg(number, schema)?;
        leg.add(&payload, arrival.journal, arrival.offset)
            .ok_or_else(|| {
                format!(
                    "record {} does not fit the tables of leg {number}",
                    payload.preface.number
                )
            })
    }

    fn take_gap(&mut self, payload: &[u8]) -> Result<(), String> {
        let gap: Gap = serde_json::from_slice(payload)
            .map_err(|error| format!("the note of a gap is not understood: {error}"))?;
        // Notes are written twice after a disk's failure, like records.
        if self
            .known_gaps
            .insert((gap.leg, gap.first_number, gap.last_number))
        {
            self.gaps.push(gap);
        }
        Ok(())
    }

    fn take_end(&mut self, payload: &[u8]) -> Result<(), String> {
        let end: End = serde_json::from_slice(payload)
            .map_err(|error| format!("the end frame is not understood: {error}"))?;
        let leg = self.leg(end.leg, None)?;
        leg.end = Some(end);
        Ok(())
    }

    /// The leg of this number, begun with `schema` when there is none yet.
    fn leg(&mut self, number: u32, schema: Option<&Schema>) -> Result<&mut LegData, String> {
        // The leg asked for is nearly always the last one.
        let index = match self.legs.iter().rposition(|leg| leg.number == number) {
            Some(index) => index,
            None => {
                let schema =
                    schema.ok_or_else(|| format!("nothing is left that describes leg {number}"))?;
                check_schema(schema)
                    .map_err(|error| format!("leg {number} has an impossible schema: {error}"))?;
                self.legs.push(LegData::new(number, schema.clone()));
                self.legs.len() - 1
            }
        };
        Ok(&mut self.legs[index])
    }
}

/// The first moment of a later leg.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limit {
    time: f64,
    tolerance: f64,
}

impl Limit {
    /// Is a record of this time one that the later leg did over again?
    pub fn covers(self, time: f64) -> bool {
        time >= self.time || self.time - time < self.tolerance
    }

    /// Where it begins; of two that begin alike the one that includes its beginning comes first.
    fn begin(self) -> (f64, f64) {
        (self.time - self.tolerance, self.time)
    }
}

/// For each leg the earliest moment at which a later one begins.
pub fn limits(legs: &[LegData]) -> Vec<Option<Limit>> {
    let mut limits = vec![None; legs.len()];
    let mut earliest: Option<Limit> = None;
    for (index, leg) in legs.iter().enumerate().rev() {
        limits[index] = earliest;
        let Some(first) = leg.first_measured().map(|mark| mark.preface) else {
            continue;
        };
        let tolerance = 0.5 * first.step_length.abs();
        let limit = Limit {
            time: first.time,
            tolerance: if tolerance.is_finite() {
                tolerance
            } else {
                0.0
            },
        };
        if first.time.is_finite()
            && earliest.is_none_or(|earliest| limit.begin() < earliest.begin())
        {
            earliest = Some(limit);
        }
    }
    limits
}

/// Takes out of `holes` what a gap tells of, when it tells of all that is missing in its stretch.
pub fn explain(holes: &mut Vec<(u64, u64)>, gap: &Gap) {
    let clip = |&(first, last): &(u64, u64)| {
        let (first, last) = (first.max(gap.first_number), last.min(gap.last_number));
        (first <= last).then_some((first, last))
    };
    let missing = holes
        .iter()
        .filter_map(clip)
        .fold(0_u64, |sum, (first, last)| {
            sum.saturating_add((last - first).saturating_add(1))
        });
    if missing > gap.records {
        return;
    }
    let mut unexplained = Vec::with_capacity(holes.len());
    for hole in holes.iter() {
        let Some((first, last)) = clip(hole) else {
            unexplained.push(*hole);
            continue;
        };
        if hole.0 < first {
            unexplained.push((hole.0, first - 1));
        }
        if last < hole.1 {
            unexplained.push((last + 1, hole.1));
        }
    }
    *holes = unexplained;
}

/// Reads the payload of the frame that begins at `offset` once more.
///
/// # Errors
/// Those of the system; `InvalidData` when there is no whole frame any longer.
pub fn read_payload(path: &Path, offset: u64) -> io::Result<Vec<u8>> {
    let file = File::open(path)?;
    let length = file.metadata()?.len();
    let mut header = [0; HEADER_BYTES];
    file.read_exact_at(&mut header, offset)?;
    let header = Header::decode(&header, offset).ok_or(io::ErrorKind::InvalidData)?;
    let start = offset + HEADER_BYTES as u64;
    if start + u64::from(header.length) > length {
        return Err(io::ErrorKind::InvalidData.into());
    }
    let mut payload = vec![0; header.length as usize];
    file.read_exact_at(&mut payload, start)?;
    if crc32c::crc32c(&payload) != header.checksum {
        return Err(io::ErrorKind::InvalidData.into());
    }
    Ok(payload)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_gap_explains_only_as_many_missing_records_as_it_counts() {
        let gap = |records| Gap {
            leg: 1,
            records,
            rows: records,
            first_number: 5,
            last_number: 9,
            first_step: 5,
            last_step: 9,
            first_time: None,
            last_time: None,
            reason: String::new(),
        };
        let mut holes = vec![(1, 2), (4, 6), (9, 12)];
        explain(&mut holes, &gap(2));
        assert_eq!(holes, [(1, 2), (4, 6), (9, 12)]);
        explain(&mut holes, &gap(3));
        assert_eq!(holes, [(1, 2), (4, 4), (10, 12)]);
    }
}
