//! Frames: the checksummed pieces that a journal is made of. `docs/series.md` is the full description.

/// How a journal file begins; 16 bytes, so that the first frame starts at offset 16.
pub const MAGIC: [u8; 16] = *b"limnograph-jrnl\n";
/// Every frame begins with these four bytes, by which a reader finds its feet again after damage.
pub const MARKER: [u8; 4] = [0xF7, b'l', b'o', b'g'];
/// Bytes of a frame before its payload.
pub const HEADER_BYTES: usize = 24;
/// No payload is longer; a length beyond it is damage.
pub const PAYLOAD_LIMIT: usize = 1 << 28;

/// What a frame holds. Numbers from 128 on may be skipped by readers that do not know them.
pub mod kind {
    /// JSON: the leg, its schema and where this journal stands in it.
    pub const HEAD: u32 = 1;
    /// Binary: everything one step entered.
    pub const RECORD: u32 = 2;
    /// JSON: rows that the host entered and that never reached the disk.
    pub const GAP: u32 = 3;
    /// JSON: the host closed the series; nothing follows.
    pub const END: u32 = 4;
    /// The first kind that an older reader may pass over.
    pub const FIRST_OPTIONAL: u32 = 128;
}

/// The fixed part of a frame.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Header {
    /// Counts the frames of one journal from 0.
    pub number: u32,
    /// One of [`kind`].
    pub kind: u32,
    /// Bytes of payload.
    pub length: u32,
    /// CRC-32C of the payload.
    pub checksum: u32,
}

impl Header {
    /// The header of a frame with this payload.
    pub fn new(number: u32, kind: u32, payload: &[u8]) -> Header {
        Header {
            number,
            kind,
            length: payload.len() as u32,
            checksum: crc32c::crc32c(payload),
        }
    }

    /// The header's bytes for a frame that stands at `offset` of its file. The offset goes into the
    /// checksum, so that a frame copied into a text cell is never taken for one of the journal's own.
    pub fn encode(&self, offset: u64) -> [u8; HEADER_BYTES] {
        let mut bytes = [0; HEADER_BYTES];
        bytes[0..4].copy_from_slice(&MARKER);
        bytes[4..8].copy_from_slice(&self.number.to_le_bytes());
        bytes[8..12].copy_from_slice(&self.kind.to_le_bytes());
        bytes[12..16].copy_from_slice(&self.length.to_le_bytes());
        bytes[16..20].copy_from_slice(&self.checksum.to_le_bytes());
        let sum = header_checksum(&bytes[..20], offset);
        bytes[20..24].copy_from_slice(&sum.to_le_bytes());
        bytes
    }

    /// Reads a header that stands at `offset` of its file; `None` unless every bit of it is right.
    pub fn decode(bytes: &[u8], offset: u64) -> Option<Header> {
        let bytes = bytes.get(..HEADER_BYTES)?;
        if bytes[0..4] != MARKER || word(bytes, 20) != header_checksum(&bytes[..20], offset) {
            return None;
        }
        let header = Header {
            number: word(bytes, 4),
            kind: word(bytes, 8),
            length: word(bytes, 12),
            checksum: word(bytes, 16),
        };
        (header.length as usize <= PAYLOAD_LIMIT).then_some(header)
    }
}

fn header_checksum(first_twenty: &[u8], offset: u64) -> u32 {
    crc32c::crc32c_append(crc32c::crc32c(first_twenty), &offset.to_le_bytes())
}

fn word(bytes: &[u8], at: usize) -> u32 {
    u32::from_le_bytes([bytes[at], bytes[at + 1], bytes[at + 2], bytes[at + 3]])
}

/// Replaces `into` with a whole frame for `offset` of its file.
pub fn build(into: &mut Vec<u8>, offset: u64, number: u32, kind: u32, payload: &[u8]) {
    into.clear();
    into.extend_from_slice(&Header::new(number, kind, payload).encode(offset));
    into.extend_from_slice(payload);
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_flipped_bit_and_every_other_place_makes_a_header_invalid() {
        let mut frame = Vec::new();
        build(&mut frame, 4711, 3, kind::RECORD, b"123456789");
        let header = Header::decode(&frame, 4711).expect("as written");
        assert_eq!(
            (header.number, header.kind, header.length),
            (3, kind::RECORD, 9)
        );
        // The check value of CRC-32C for "123456789" (Castagnoli), from the catalogue of CRC algorithms, by memory.
        assert_eq!(header.checksum, 0xE306_9283);
        assert_eq!(Header::decode(&frame, 4712), None);
        for bit in 0..HEADER_BYTES * 8 {
            let mut flipped = frame.clone();
            flipped[bit / 8] ^= 1 << (bit % 8);
            assert_eq!(Header::decode(&flipped, 4711), None, "bit {bit}");
        }
    }
}
