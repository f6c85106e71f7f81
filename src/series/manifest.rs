//! Manifests: what a leg says of itself when it begins. Text, so that a person can read it in an editor.

use super::layout::FORMAT;
use super::schema::Schema;
use serde::{Deserialize, Serialize};
use sha2::{Digest, Sha256};

/// No manifest is longer; a file beyond it is damage.
pub const MANIFEST_LIMIT: u64 = 1 << 26;

/// One leg as later manifests remember it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct LegNote {
    /// The leg's number: that of the manifest that opened it.
    pub leg: u32,
    /// When it was opened, in milliseconds since 1970-01-01 UTC.
    pub opened: u64,
    /// The version of this library that wrote it.
    pub library_version: String,
    /// SHA-256 of the config it ran with, in hexadecimal digits.
    pub config_sha256: String,
}

/// What stands in a manifest.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Manifest {
    /// The format of this file and of the leg's journals.
    pub format: u32,
    /// The leg that this manifest opens.
    pub leg: u32,
    /// When, in milliseconds since 1970-01-01 UTC.
    pub opened: u64,
    /// The version of this library.
    pub library_version: String,
    /// What the host says of itself.
    pub host: serde_json::Value,
    /// Units, volume and cosmology as the config states them.
    pub setting: serde_json::Value,
    /// The column of the run table that holds the declared time coordinate; empty when none does.
    pub time_column: String,
    /// The config, word for word.
    pub config_text: String,
    /// SHA-256 of the config text, in hexadecimal digits.
    pub config_sha256: String,
    /// All tables and their columns.
    pub schema: Schema,
    /// This leg and all before it, as far as their manifests could be read.
    pub legs: Vec<LegNote>,
}

/// Why a manifest cannot be used.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum ManifestFault {
    /// Whole, but of a format that this version does not know.
    Newer(u32),
    /// The file ends before the length that it states; perhaps it is being written.
    Torn,
    /// Anything else, in words.
    Damaged(String),
}

/// The SHA-256 of a text in hexadecimal digits, as `sha256sum` prints it.
pub fn sha256(text: &str) -> String {
    let mut digits = String::with_capacity(64);
    for byte in Sha256::digest(text.as_bytes()) {
        for nibble in [byte >> 4, byte & 15] {
            digits.push(char::from_digit(u32::from(nibble), 16).unwrap_or('0'));
        }
    }
    digits
}

impl Manifest {
    /// The file's bytes.
    ///
    /// # Errors
    /// When the host's description cannot be written as JSON.
    pub fn encode(&self) -> Result<Vec<u8>, serde_json::Error> {
        let mut body = serde_json::to_vec_pretty(self)?;
        body.push(b'\n');
        let sum = checksum(self.format, &body);
        let mut bytes = first_line(self.format, body.len() as u64, sum).into_bytes();
        bytes.append(&mut body);
        Ok(bytes)
    }

    /// Reads a manifest; every bit of the file is checked.
    ///
    /// # Errors
    /// Says which of the three ways of being unusable it is.
    pub fn decode(bytes: &[u8]) -> Result<Manifest, ManifestFault> {
        let damaged = |text: &str| ManifestFault::Damaged(text.to_string());
        let Some(end) = bytes
            .iter()
            .take(FIRST_LINE_LIMIT)
            .position(|&byte| byte == b'\n')
        else {
            return Err(if bytes.len() < FIRST_LINE_LIMIT {
                ManifestFault::Torn
            } else {
                damaged("its first line is not that of a manifest")
            });
        };
        let (line, body) = bytes.split_at(end + 1);
        let Some((format, length, sum)) = parse_first_line(line) else {
            return Err(damaged("its first line is not that of a manifest"));
        };
        if (body.len() as u64) < length {
            return Err(ManifestFault::Torn);
        }
        if body.len() as u64 > length {
            return Err(damaged("it is longer than its first line says"));
        }
        if checksum(format, body) != sum {
            return Err(damaged("its checksum does not match"));
        }
        if format > FORMAT {
            return Err(ManifestFault::Newer(format));
        }
        serde_json::from_slice(body).map_err(|error| {
            ManifestFault::Damaged(format!("its JSON is not a manifest's: {error}"))
        })
    }
}

const FIRST_LINE_LIMIT: usize = 128;

fn first_line(format: u32, length: u64, sum: u32) -> String {
    format!("limnograph manifest, format {format}, {length} bytes follow, CRC-32C {sum:08x}\n")
}

/// The checksum covers the format as well, so that a flipped digit never looks like a newer version.
fn checksum(format: u32, body: &[u8]) -> u32 {
    crc32c::crc32c_append(crc32c::crc32c(&format.to_le_bytes()), body)
}

fn parse_first_line(line: &[u8]) -> Option<(u32, u64, u32)> {
    let line = std::str::from_utf8(line).ok()?;
    let rest = line.strip_prefix("limnograph manifest, format ")?;
    let (format, rest) = rest.split_once(", ")?;
    let (length, rest) = rest.split_once(" bytes follow, CRC-32C ")?;
    let sum = u32::from_str_radix(rest.strip_suffix('\n')?, 16).ok()?;
    let parsed = (format.parse().ok()?, length.parse().ok()?, sum);
    // Written back it must be the same to the letter: one spelling, so no flipped bit goes unseen.
    (first_line(parsed.0, parsed.1, parsed.2) == line).then_some(parsed)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_config_hash_is_what_sha256sum_prints() {
        // FIPS 180-4 example "abc".
        assert_eq!(
            sha256("abc"),
            "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
        );
    }

    #[test]
    fn a_newer_manifest_is_told_from_a_damaged_one() {
        let body = b"{\"anything\": 1}\n";
        let mut bytes =
            first_line(FORMAT + 1, body.len() as u64, checksum(FORMAT + 1, body)).into_bytes();
        bytes.extend_from_slice(body);
        assert_eq!(
            Manifest::decode(&bytes),
            Err(ManifestFault::Newer(FORMAT + 1))
        );
        let line = String::from_utf8(bytes)
            .expect("text")
            .replace("format 2", "format 3");
        assert!(matches!(
            Manifest::decode(line.as_bytes()),
            Err(ManifestFault::Damaged(_))
        ));
    }
}
