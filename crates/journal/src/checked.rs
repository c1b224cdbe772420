//! A JSON file that ends in its own checksum.
//!
//! The manifest and the seal are such files. The checksum is the last member of the object and
//! covers every byte before it, so any damage shows, white space included; the file stays plain
//! JSON for whoever reads it.

use serde::Serialize;
use serde::de::DeserializeOwned;

use crate::checksum::{crc32c, hex8};

/// What stands between the content and its checksum's digits.
const SEAM: &str = ",\n  \"crc\": \"";
/// What follows the checksum.
const END: &str = "\"\n}\n";

/// The file's bytes.
pub(crate) fn to_bytes<T: Serialize>(value: &T) -> Vec<u8> {
    let mut text = serde_json::to_string_pretty(value)
        .expect("manifests and seals hold only strings, finite numbers and sequences");
    text.truncate(text.trim_end_matches('}').trim_end().len());
    let sum = hex8(crc32c(text.as_bytes()));
    text.push_str(SEAM);
    text.extend(sum.map(char::from));
    text.push_str(END);
    text.into_bytes()
}

/// The object's text without its checksum, once that held.
pub(crate) fn content(bytes: &[u8]) -> Result<Vec<u8>, String> {
    let (content, digits) = bytes
        .strip_suffix(END.as_bytes())
        .and_then(|rest| rest.split_last_chunk::<8>())
        .and_then(|(rest, digits)| Some((rest.strip_suffix(SEAM.as_bytes())?, digits)))
        .ok_or_else(|| "it does not end in a checksum: restore it from a copy".to_owned())?;
    let computed = hex8(crc32c(content));
    if computed != *digits {
        return Err(format!(
            "its checksum says {} but its bytes give {}: restore it from a copy",
            String::from_utf8_lossy(digits),
            String::from_utf8_lossy(&computed)
        ));
    }
    let mut text = content.to_vec();
    text.extend_from_slice(b"\n}");
    Ok(text)
}

/// Reads a file's bytes; the checksum comes first.
pub(crate) fn from_bytes<T: DeserializeOwned>(bytes: &[u8]) -> Result<T, String> {
    serde_json::from_slice(&content(bytes)?).map_err(|error| error.to_string())
}
