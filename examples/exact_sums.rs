//! Sums lists of doubles exactly, however the library is asked to.
//!
//! Reads lists from the standard input: for each a 64-bit count and so many doubles, all in little-endian bytes.
//! Writes a line for each: the bits, in hexadecimal, of its sum
//!
//! - with its values added one by one,
//! - with all of it added as one slice,
//! - with pieces of growing length added each to a sum of its own, and these merged.
//!
//! To hold them against Python's `math.fsum`: `tests/exact/check_sums_against_fsum.py`.

use limnograph::exact::Accumulator;
use std::io::{self, Read, Write};

fn main() -> io::Result<()> {
    let mut bytes = Vec::new();
    io::stdin().lock().read_to_end(&mut bytes)?;
    let mut words = bytes.chunks_exact(8).map(|word| {
        let mut eight = [0; 8];
        eight.copy_from_slice(word);
        u64::from_le_bytes(eight)
    });
    let mut out = io::BufWriter::new(io::stdout().lock());
    while let Some(count) = words.next() {
        let values: Vec<f64> = words
            .by_ref()
            .take(usize::try_from(count).unwrap_or(usize::MAX))
            .map(f64::from_bits)
            .collect();
        if values.len() as u64 != count {
            return Err(io::Error::new(
                io::ErrorKind::UnexpectedEof,
                format!("a list of {count} doubles ends after {}", values.len()),
            ));
        }
        let sums = [one_by_one(&values), at_once(&values), in_pieces(&values)];
        let sums = sums.map(|sum| format!("{:016x}", sum.total().to_f64().to_bits()));
        writeln!(out, "{}", sums.join(" "))?;
    }
    out.flush()
}

fn one_by_one(values: &[f64]) -> Accumulator {
    let mut sum = Accumulator::default();
    values.iter().for_each(|&value| sum.add(value));
    sum
}

fn at_once(values: &[f64]) -> Accumulator {
    let mut sum = Accumulator::default();
    sum.add_slice(values);
    sum
}

fn in_pieces(values: &[f64]) -> Accumulator {
    let mut sum = Accumulator::default();
    let mut rest = values;
    let mut length = 1;
    while !rest.is_empty() {
        let (piece, after) = rest.split_at(length.min(rest.len()));
        sum.merge(&at_once(piece));
        rest = after;
        length = 2 * length + 1;
    }
    sum
}
