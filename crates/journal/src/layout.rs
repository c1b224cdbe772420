//! The names in a record's folder.

use std::path::{Path, PathBuf};

/// The manifest.
pub(crate) const MANIFEST: &str = "manifest.json";
/// The seal.
pub(crate) const SEAL: &str = "seal.json";
/// The folder of the segments.
pub(crate) const JOURNAL: &str = "journal";
/// The file the writer's lock stands on, in the journal's folder; always empty.
pub(crate) const LOCK: &str = "lock";
/// What the name of a file ends in until the file is whole.
pub(crate) const UNFINISHED: &str = ".part";
/// A plain segment.
pub(crate) const PLAIN: &str = ".jsonl";
/// A compressed segment.
pub(crate) const COMPRESSED: &str = ".jsonl.zst";
/// What the name of a torn end that was set aside begins with.
pub(crate) const TORN: &str = "torn-";

pub(crate) fn journal(record: &Path) -> PathBuf {
    record.join(JOURNAL)
}

pub(crate) fn plain_name(segment: u32) -> String {
    format!("{segment:06}{PLAIN}")
}

pub(crate) fn compressed_name(segment: u32) -> String {
    format!("{segment:06}{COMPRESSED}")
}

/// What a name in the journal's folder stands for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Named {
    Plain(u32),
    Compressed(u32),
    Torn,
    Unfinished,
    Lock,
    Foreign,
}

/// Reads a name in the journal's folder.
pub(crate) fn named(name: &str) -> Named {
    let digits = |rest: &str| {
        let all_digits = rest.len() >= 6 && rest.bytes().all(|byte| byte.is_ascii_digit());
        all_digits.then(|| rest.parse().ok()).flatten()
    };
    if name == LOCK {
        Named::Lock
    } else if name.ends_with(UNFINISHED) {
        Named::Unfinished
    } else if name.starts_with(TORN) {
        Named::Torn
    } else if let Some(segment) = name.strip_suffix(COMPRESSED).and_then(digits) {
        Named::Compressed(segment)
    } else if let Some(segment) = name.strip_suffix(PLAIN).and_then(digits) {
        Named::Plain(segment)
    } else {
        Named::Foreign
    }
}
