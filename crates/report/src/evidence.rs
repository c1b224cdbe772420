//! What the record itself says, gathered in one walk over its entries.
//!
//! The record's events go once more through a fresh sequencer: how near each interlock came is
//! recomputed, and every output is compared with the recorded one on the way.
//!
//! What it deliberately does not do: compute a figure, or lay anything out.

mod charge;
mod course;
mod replay;

use journal::{Body, Bucket, Entry, JournalError, Note, Record, Seal, VerifyReport, thin, verify};
use quantity::{HostTime, Span};
use wire::Description;

pub(crate) use charge::ChargeCurve;
pub(crate) use course::{Course, Stage};
pub(crate) use replay::{Replay, Replayed};

/// Points of a plot: more than a printed page can show apart.
const BUCKETS: u32 = 600;

/// All that the page needs beside the manifest and the figures.
#[derive(Debug)]
pub(crate) struct Evidence {
    /// Host times of the first and the last readback.
    pub(crate) readbacks: Option<(HostTime, HostTime)>,
    /// How many.
    pub(crate) readback_count: u64,
    pub(crate) entries: u64,
    pub(crate) course: Course,
    pub(crate) replayed: Replayed,
    /// The readbacks thinned, extremes kept.
    pub(crate) buckets: Vec<Bucket>,
    pub(crate) charge: ChargeCurve,
    /// How the sink described itself, where the manifest does not say.
    pub(crate) described: Option<Description>,
    pub(crate) totals: Totals,
    /// Why the record could not be read to its end, if so.
    pub(crate) tail: Option<String>,
    pub(crate) verified: VerifyReport,
    pub(crate) seal: Option<Seal>,
}

/// What is counted and not listed.
#[derive(Debug, Default, Clone, Copy)]
pub(crate) struct Totals {
    pub(crate) orders: u64,
    pub(crate) alignments: u64,
    pub(crate) sent_again: u64,
    pub(crate) damaged_lines: u64,
    pub(crate) readbacks_lost: u64,
}

/// Gathers it all.
pub(crate) fn gather(record: &Record) -> Result<Evidence, JournalError> {
    let manifest = record.manifest();
    let mut replay = Replay::new(&manifest.plan);
    let mut course = Course::new(&manifest.plan);
    let mut charge = ChargeCurve::new(manifest.plan.correction);
    let mut totals = Totals::default();
    let mut readbacks: Option<(HostTime, HostTime)> = None;
    let (mut entries, mut readback_count, mut described) = (0, 0, None);
    let mut walk = record.entries();
    for entry in walk.by_ref() {
        let entry = entry?;
        entries = entry.number;
        replay.take(&entry);
        if let Some(reading) = entry.reading() {
            readback_count += 1;
            let first = readbacks.map_or(entry.at, |(first, _)| first);
            readbacks = Some((first, entry.at));
            totals.readbacks_lost += u64::from(reading.lost);
            charge.take(entry.at, reading);
            continue;
        }
        course.take(&entry);
        totals.take(&entry);
        if let (Body::Note(Note::Described(description)), None) = (&entry.body, &described) {
            described = Some(*description);
        }
    }
    let tail = walk.tail().map(ToString::to_string);
    let buckets = match readbacks {
        // The end of the stretch is not in it.
        Some((first, last)) => {
            let end = last.saturating_add(Span::from_micros(1));
            thin(record, first..end, BUCKETS)?
        }
        None => Vec::new(),
    };
    let verified = verify(record.folder())?;
    // A seal that cannot be read is among what `verify` found.
    let seal = record.seal().ok().flatten();
    course.finish(readbacks.map(|(_, last)| last));
    Ok(Evidence {
        readbacks,
        readback_count,
        entries,
        course,
        replayed: replay.finish(),
        buckets,
        charge,
        described: manifest.description.or(described),
        totals,
        tail,
        verified,
        seal,
    })
}

impl Evidence {
    /// Time from the first readback; zero for what came before it.
    pub(crate) fn since_start(&self, at: HostTime) -> Span {
        self.readbacks
            .map_or(Span::ZERO, |(first, _)| at.saturating_since(first))
    }

    /// From the first readback to the last.
    pub(crate) fn length(&self) -> Option<Span> {
        self.readbacks
            .map(|(first, last)| last.saturating_since(first))
    }
}

impl Totals {
    fn take(&mut self, entry: &Entry) {
        if matches!(entry.body, Body::Order { .. }) {
            self.orders += 1;
        }
        let Body::Note(note) = &entry.body else {
            return;
        };
        if let Note::Retransmitted { orders, .. } = note {
            self.sent_again += u64::from(*orders);
        } else if let Note::DamagedLines { lines, .. } = note {
            self.damaged_lines += u64::from(*lines);
        } else if matches!(note, Note::ClockAligned(_)) {
            self.alignments += 1;
        }
    }
}
