//! Reading the journals of a directory, each from where the last look at it ended.

use super::error::{Damage, DamageKind, ReadError};
use super::scan::{Found, Scan};
use crate::series::frame::{HEADER_BYTES, Header, kind};
use crate::series::layout::FileKind;
use std::fs::File;
use std::io;
use std::path::{Path, PathBuf};

/// A frame that arrived whole.
pub struct Arrival<'a> {
    /// The number of its journal.
    pub journal: u32,
    /// Where it begins.
    pub offset: u64,
    /// Its kind.
    pub kind: u32,
    /// Its payload.
    pub payload: &'a [u8],
}

/// One journal file and how far it has been read.
pub struct JournalFile {
    /// The number in its name.
    pub number: u32,
    path: PathBuf,
    position: u64,
    seen_length: Option<u64>,
    next_frame: u32,
    /// What was wrong before `position`; it stays wrong.
    settled: Vec<Damage>,
    /// What is wrong from `position` to the end; the writer may still put it right.
    open: Option<Damage>,
}

impl JournalFile {
    /// A journal of which nothing has been read.
    pub fn new(directory: &Path, number: u32) -> JournalFile {
        JournalFile {
            number,
            path: FileKind::Journal.path(directory, number),
            position: 0,
            seen_length: None,
            next_frame: 0,
            settled: Vec::new(),
            open: None,
        }
    }

    /// The file's name without its directory.
    pub fn name(&self) -> String {
        FileKind::Journal.name(self.number)
    }

    /// All damage known of it.
    pub fn damage(&self) -> impl Iterator<Item = &Damage> {
        self.settled.iter().chain(&self.open)
    }

    /// Bytes of the file when it was last looked at.
    pub fn length(&self) -> u64 {
        self.seen_length.unwrap_or(0)
    }

    /// Reads what has been added since the last time. `take` returns what is wrong with a frame's content.
    ///
    /// # Errors
    /// What `take` refuses to go on with. What the system refuses counts as damage.
    pub fn read(
        &mut self,
        take: &mut dyn FnMut(Arrival<'_>) -> Result<Option<String>, ReadError>,
    ) -> Result<(), ReadError> {
        let opened = File::open(&self.path).and_then(|file| Ok((file.metadata()?.len(), file)));
        let (length, file) = match opened {
            Ok(opened) => opened,
            Err(error) => {
                self.open = Some(self.unreadable(&error));
                return Ok(());
            }
        };
        if self.seen_length == Some(length) && self.open.is_none() {
            return Ok(());
        }
        self.open = None;
        let mut scan = Scan::new(&file, self.position, length);
        let mut settled_to = self.position;
        loop {
            let found = match scan.advance() {
                Ok(Some(found)) => found,
                Ok(None) => break,
                Err(error) => {
                    self.open = Some(self.unreadable(&error));
                    break;
                }
            };
            let damage = match found {
                Found::Frame {
                    offset,
                    header,
                    payload,
                } => {
                    self.note_jump(offset, header);
                    settled_to = offset + (HEADER_BYTES + payload.len()) as u64;
                    let arrival = Arrival {
                        journal: self.number,
                        offset,
                        kind: header.kind,
                        payload,
                    };
                    take(arrival)?
                        .map(|text| self.damage_at(offset, settled_to, DamageKind::Malformed, text))
                }
                Found::Garbled {
                    offset,
                    end,
                    header,
                } => {
                    self.note_jump(offset, header);
                    let text = format!("the checksum of {} does not match", name_of(header.kind));
                    Some(self.damage_at(offset, end, DamageKind::Corrupted, text))
                }
                Found::Noise { offset, end, kind } => {
                    let text = match kind {
                        DamageKind::Torn => format!(
                            "the file ends within a frame, of which {} bytes are there",
                            end.saturating_sub(offset)
                        ),
                        _ => format!("{} bytes are not those of any frame", end - offset),
                    };
                    Some(self.damage_at(offset, end, kind, text))
                }
            };
            match damage {
                // At the very end the writer may be at work, or another node may see half of what it wrote:
                // a later look begins here once more.
                Some(damage) if damage.to >= length && damage.kind != DamageKind::Malformed => {
                    self.open = Some(damage);
                }
                Some(damage) => {
                    settled_to = damage.to;
                    self.settled.push(damage);
                }
                None => {}
            }
        }
        self.position = settled_to;
        self.seen_length = Some(length);
        Ok(())
    }

    /// Frames are numbered, so what follows damage tells how many were in it.
    fn note_jump(&mut self, offset: u64, header: Header) {
        let lost = header.number.saturating_sub(self.next_frame);
        if let Some(damage) = self
            .settled
            .last_mut()
            .filter(|damage| damage.to == offset && lost > 0)
        {
            damage.text.push_str(&format!(
                "; {lost} {} lost",
                if lost == 1 { "frame is" } else { "frames are" }
            ));
        }
        self.next_frame = header.number.saturating_add(1);
    }

    fn damage_at(&self, from: u64, to: u64, kind: DamageKind, text: String) -> Damage {
        Damage {
            file: self.name(),
            from,
            to,
            kind,
            text,
        }
    }

    fn unreadable(&self, error: &io::Error) -> Damage {
        let text = format!("the file cannot be read from here on: {error}");
        self.damage_at(
            self.position,
            self.length().max(self.position),
            DamageKind::Unreadable,
            text,
        )
    }
}

fn name_of(frame_kind: u32) -> &'static str {
    match frame_kind {
        kind::HEAD => "the head frame",
        kind::RECORD => "a record",
        kind::GAP => "a note of a gap",
        kind::END => "the end frame",
        _ => "a frame of a kind unknown here",
    }
}
