//! One entry as one line, and back.
//!
//! Two forms, told apart by their first byte: a JSON object for everything, and the compact
//! array for readbacks. Either ends in its checksum, taken over the bytes before it. Format
//! version 1 is frozen: the expected texts in the tests do not change.

use quantity::HostTime;
use sequencer::event::{Ending, Finding, Happening};
use serde::{Deserialize, Serialize};
use wire::{Order, OrderId};

use crate::checksum::{crc32c, hex8};
use crate::{Body, Entry, Note, compact};

/// What comes between an object's content and its checksum's digits.
const OBJECT_SEAM: &[u8] = b",\"crc\":\"";
/// What follows an object's checksum.
const OBJECT_END: &[u8] = b"\"}";
/// What comes between an array's content and its checksum's digits.
const ARRAY_SEAM: &[u8] = b",\"";
/// What follows an array's checksum.
const ARRAY_END: &[u8] = b"\"]";

/// Why a line is not believed.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum LineFault {
    /// The line does not end in a checksum.
    #[error("the line does not end in a checksum")]
    Unfinished,
    /// The checksum is not that of the bytes before it.
    #[error("the checksum says {written} but the bytes before it give {computed}")]
    Checksum {
        /// What stands in the line.
        written: String,
        /// What its bytes give.
        computed: String,
    },
    /// The checksum holds, but the content is no entry of this format.
    #[error("the checksum holds but the content is no entry of this format: {0}")]
    Form(String),
    /// The checksum holds, but the running number is not the one that must come here.
    #[error("the line's number is {found} where {expected} must come")]
    Number {
        /// The number that must come.
        expected: u64,
        /// The number in the line.
        found: u64,
    },
    /// The lines of a compressed segment hold, but its extract is not what they give.
    #[error("the extract in front of the text is not what its lines give")]
    Extract,
}

/// Appends an entry as a line with its line end. `base` is the segment's own time.
pub(crate) fn encode(buffer: &mut Vec<u8>, base: HostTime, entry: &Entry) {
    let start = buffer.len();
    if let Some(reading) = entry.reading()
        && compact::encode(buffer, base, entry.number, entry.at, reading)
    {
        finish(buffer, start, ARRAY_SEAM, ARRAY_END);
        return;
    }
    let mut digits = itoa::Buffer::new();
    buffer.extend_from_slice(b"{\"n\":");
    buffer.extend_from_slice(digits.format(entry.number).as_bytes());
    buffer.extend_from_slice(b",\"at\":");
    buffer.extend_from_slice(digits.format(entry.at.micros()).as_bytes());
    let content = match &entry.body {
        Body::Event(event) => ObjectBody::Event(event),
        Body::Order { id, order } => ObjectBody::Order(Numbered {
            id: *id,
            order: *order,
        }),
        Body::Off => ObjectBody::Off(true),
        Body::Finding(finding) => ObjectBody::Finding(finding),
        Body::Ended(ending) => ObjectBody::Ended(ending),
        Body::Note(note) => ObjectBody::Note(note),
    };
    // The body serialises as an object of one member; its braces give way to the line's.
    let brace = buffer.len();
    serde_json::to_writer(&mut *buffer, &content)
        .expect("entries hold only strings, integers and sequences, which always serialise");
    if let Some(first) = buffer.get_mut(brace) {
        *first = b',';
    }
    buffer.pop();
    finish(buffer, start, OBJECT_SEAM, OBJECT_END);
}

/// Appends any serialisable object as a line with its checksum and line end.
pub(crate) fn encode_object<T: Serialize>(buffer: &mut Vec<u8>, object: &T) {
    let start = buffer.len();
    serde_json::to_writer(&mut *buffer, object)
        .expect("headers hold only strings, integers and sequences, which always serialise");
    buffer.pop();
    finish(buffer, start, OBJECT_SEAM, OBJECT_END);
}

fn finish(buffer: &mut Vec<u8>, start: usize, seam: &[u8], end: &[u8]) {
    let sum = crc32c(buffer.get(start..).unwrap_or_default());
    buffer.extend_from_slice(seam);
    buffer.extend_from_slice(&hex8(sum));
    buffer.extend_from_slice(end);
    buffer.push(b'\n');
}

/// Checks a line (without its line end) and returns the content before its checksum.
pub(crate) fn check(line: &[u8]) -> Result<&[u8], LineFault> {
    let (seam, end) = match line.first() {
        Some(b'[') => (ARRAY_SEAM, ARRAY_END),
        _ => (OBJECT_SEAM, OBJECT_END),
    };
    let (content, digits) = line
        .strip_suffix(end)
        .and_then(|rest| rest.split_last_chunk::<8>())
        .and_then(|(rest, digits)| Some((rest.strip_suffix(seam)?, digits)))
        .ok_or(LineFault::Unfinished)?;
    let computed = hex8(crc32c(content));
    if computed == *digits {
        Ok(content)
    } else {
        Err(LineFault::Checksum {
            written: String::from_utf8_lossy(digits).into_owned(),
            computed: String::from_utf8_lossy(&computed).into_owned(),
        })
    }
}

/// Reads a line (without its line end) back into the entry.
pub(crate) fn decode(line: &[u8], base: HostTime) -> Result<Entry, LineFault> {
    let content = check(line)?;
    if content.first() == Some(&b'[') {
        let (number, at, reading) = compact::decode(content, base)
            .ok_or_else(|| LineFault::Form("the array is no readback".into()))?;
        return Ok(Entry {
            number,
            at,
            body: Body::Event(Happening::Reading(reading)),
        });
    }
    let object: ObjectLine =
        serde_json::from_slice(line).map_err(|error| LineFault::Form(error.to_string()))?;
    let (number, at) = (object.n, object.at);
    let body = object.body().ok_or_else(|| {
        LineFault::Form(
            "an entry has exactly one of event, order, off, finding, ended, note".into(),
        )
    })?;
    Ok(Entry { number, at, body })
}

/// Reads a checked object, such as a segment's first line.
pub(crate) fn decode_object<'de, T: Deserialize<'de>>(line: &'de [u8]) -> Result<T, LineFault> {
    check(line)?;
    serde_json::from_slice(line).map_err(|error| LineFault::Form(error.to_string()))
}

#[derive(Serialize)]
#[serde(rename_all = "snake_case")]
enum ObjectBody<'a> {
    Event(&'a Happening),
    Order(Numbered),
    Off(bool),
    Finding(&'a Finding),
    Ended(&'a Ending),
    Note(&'a Note),
}

#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct Numbered {
    id: OrderId,
    order: Order,
}

/// An object line as it is read: exactly one of the optional members is there.
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct ObjectLine {
    n: u64,
    at: HostTime,
    event: Option<Happening>,
    order: Option<Numbered>,
    off: Option<bool>,
    finding: Option<Finding>,
    ended: Option<Ending>,
    note: Option<Note>,
    #[serde(rename = "crc")]
    _crc: String,
}

impl ObjectLine {
    fn body(self) -> Option<Body> {
        let mut bodies = [
            self.event.map(Body::Event),
            self.order.map(|numbered| Body::Order {
                id: numbered.id,
                order: numbered.order,
            }),
            self.off.and_then(|off| off.then_some(Body::Off)),
            self.finding.map(Body::Finding),
            self.ended.map(Body::Ended),
            self.note.map(Body::Note),
        ]
        .into_iter()
        .flatten();
        let body = bodies.next()?;
        bodies.next().is_none().then_some(body)
    }
}

#[cfg(test)]
mod tests;
