//! Walking over the frames of a journal, past damage, in memory bounded by the longest frame that is there.

use super::error::DamageKind;
use crate::series::frame::{HEADER_BYTES, Header, MAGIC, MARKER};
use std::fs::File;
use std::io;
use std::os::unix::fs::FileExt;

/// Bytes read at a time; a longer frame takes its own length, which never exceeds the file's.
const WINDOW: usize = 1 << 18;

/// What a scan comes across, in the order of the file.
#[derive(Debug, PartialEq)]
pub enum Found<'a> {
    /// A frame with both checksums right.
    Frame {
        /// Where it begins.
        offset: u64,
        /// Its header.
        header: Header,
        /// Its payload.
        payload: &'a [u8],
    },
    /// A frame whose header is right and whose payload is not.
    Garbled {
        /// Where it begins.
        offset: u64,
        /// Where it ends.
        end: u64,
        /// Its header.
        header: Header,
    },
    /// Bytes that are no frame, up to the next frame or to the end of the file.
    Noise {
        /// Where they begin.
        offset: u64,
        /// Where they end.
        end: u64,
        /// Torn when the file ends within a frame that may still be completed.
        kind: DamageKind,
    },
}

/// A journal of a given length, read from a given place on.
pub struct Scan<'a> {
    file: &'a File,
    length: u64,
    next: u64,
    has_ended: bool,
    window: Vec<u8>,
    window_start: u64,
}

impl<'a> Scan<'a> {
    /// Scans `file` from `next`; 0 includes the magic. Bytes beyond `length` are not looked at.
    pub fn new(file: &'a File, next: u64, length: u64) -> Scan<'a> {
        let has_ended = next >= length && next > 0;
        Scan {
            file,
            length,
            next,
            has_ended,
            window: Vec::new(),
            window_start: 0,
        }
    }

    /// The next thing in the file; `None` at its end.
    ///
    /// # Errors
    /// Those of the system.
    pub fn advance(&mut self) -> io::Result<Option<Found<'_>>> {
        if self.next == 0
            && !self.has_ended
            && let Some(found) = self.read_magic()?
        {
            return Ok(Some(found));
        }
        if self.has_ended || self.next >= self.length {
            return Ok(None);
        }
        let offset = self.next;
        let Some(header) = self.header_at(offset)? else {
            return self.regain().map(Some);
        };
        let start = offset + HEADER_BYTES as u64;
        let end = start + u64::from(header.length);
        if end > self.length || !self.load(start, header.length as usize)? {
            self.has_ended = true;
            return Ok(Some(Found::Noise {
                offset,
                end: self.length,
                kind: DamageKind::Torn,
            }));
        }
        self.next = end;
        let payload = self.loaded(start, header.length as usize);
        Ok(Some(if crc32c::crc32c(payload) == header.checksum {
            Found::Frame {
                offset,
                header,
                payload,
            }
        } else {
            Found::Garbled {
                offset,
                end,
                header,
            }
        }))
    }

    /// Passes over the magic; tells when it is not what it should be.
    fn read_magic(&mut self) -> io::Result<Option<Found<'static>>> {
        let count = self.length.min(MAGIC.len() as u64) as usize;
        let is_there = self.load(0, count)?;
        if is_there && self.loaded(0, count) == &MAGIC[..count] && count == MAGIC.len() {
            self.next = MAGIC.len() as u64;
            return Ok(None);
        }
        let is_torn = !is_there || self.loaded(0, count) == &MAGIC[..count];
        if is_torn || count < MAGIC.len() {
            self.has_ended = true;
            let kind = if is_torn {
                DamageKind::Torn
            } else {
                DamageKind::Corrupted
            };
            return Ok(Some(Found::Noise {
                offset: 0,
                end: self.length,
                kind,
            }));
        }
        self.next = MAGIC.len() as u64;
        Ok(Some(Found::Noise {
            offset: 0,
            end: self.next,
            kind: DamageKind::Corrupted,
        }))
    }

    /// Looks for the next frame behind bytes that are none. Headers carry a checksum that includes their
    /// place, so one look at each byte is enough.
    fn regain(&mut self) -> io::Result<Found<'static>> {
        let offset = self.next;
        let mut place = offset + 1;
        while place + HEADER_BYTES as u64 <= self.length {
            let count = (self.length - place).min(WINDOW as u64) as usize;
            if !self.load(place, count)? {
                break;
            }
            let bytes = self.loaded(place, count);
            let last = count - HEADER_BYTES;
            let hit = (0..=last).find(|&at| {
                bytes[at] == MARKER[0] && Header::decode(&bytes[at..], place + at as u64).is_some()
            });
            if let Some(at) = hit {
                self.next = place + at as u64;
                return Ok(Found::Noise {
                    offset,
                    end: self.next,
                    kind: DamageKind::Corrupted,
                });
            }
            place += last as u64 + 1;
        }
        self.has_ended = true;
        let is_torn = self.length - offset < HEADER_BYTES as u64;
        let kind = if is_torn {
            DamageKind::Torn
        } else {
            DamageKind::Corrupted
        };
        Ok(Found::Noise {
            offset,
            end: self.length,
            kind,
        })
    }

    fn header_at(&mut self, offset: u64) -> io::Result<Option<Header>> {
        if offset + HEADER_BYTES as u64 > self.length || !self.load(offset, HEADER_BYTES)? {
            return Ok(None);
        }
        Ok(Header::decode(self.loaded(offset, HEADER_BYTES), offset))
    }

    /// Has `count` bytes from `offset` in the window; `false` when the file has become shorter meanwhile.
    fn load(&mut self, offset: u64, count: usize) -> io::Result<bool> {
        let from = offset
            .checked_sub(self.window_start)
            .map(|from| from as usize);
        if from.is_some_and(|from| from + count <= self.window.len()) {
            return Ok(true);
        }
        let wanted = (self.length - offset).min(count.max(WINDOW) as u64) as usize;
        self.window.resize(wanted, 0);
        self.window_start = offset;
        let mut filled = 0;
        while filled < wanted {
            match self
                .file
                .read_at(&mut self.window[filled..], offset + filled as u64)
            {
                Ok(0) => break,
                Ok(read) => filled += read,
                Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
                Err(error) => return Err(error),
            }
        }
        self.window.truncate(filled);
        if filled < wanted {
            self.length = offset + filled as u64;
        }
        Ok(filled >= count)
    }

    fn loaded(&self, offset: u64, count: usize) -> &[u8] {
        let from = (offset - self.window_start) as usize;
        self.window.get(from..from + count).unwrap_or_default()
    }
}
