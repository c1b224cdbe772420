//! The sink's clock against the host's: how long a second of the sink really was.

use journal::{Body, ClockAlignment, Entry, Note};

/// The rate of the sink's clock over the whole run.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct TimeBase {
    /// True seconds in a second of the sink's clock.
    pub(crate) factor: f64,
    /// Standard uncertainty of the factor, the host's own clock taken as true.
    pub(crate) uncertainty: f64,
}

/// What a host's own clock may be off by where nothing disciplines it: 50 parts per million,
/// common practice for the crystals of small computers, no source.
const HOST_CLOCK: f64 = 50e-6;

/// A ceramic resonator's tolerance, common practice, no source: what is believed of a sink's
/// clock that was never aligned.
const UNALIGNED: f64 = 5e-3;

impl TimeBase {
    /// From the first and the last alignment in the record: the longer the run, the better.
    pub(crate) fn of(others: &[Entry]) -> Self {
        let alignments = || {
            others.iter().filter_map(|entry| match &entry.body {
                Body::Note(Note::ClockAligned(alignment)) => Some(alignment),
                Body::Note(_)
                | Body::Event(_)
                | Body::Order { .. }
                | Body::Off
                | Body::Finding(_)
                | Body::Ended(_) => None,
            })
        };
        let Some(last) = alignments().next_back() else {
            return Self {
                factor: 1.0,
                uncertainty: rectangular(UNALIGNED),
            };
        };
        let single = Self::of_one(last);
        let first = alignments().next().unwrap_or(last);
        match Self::between(first, last) {
            Some(between) if between.uncertainty < single.uncertainty => between,
            Some(_) | None => single,
        }
    }

    fn of_one(alignment: &ClockAlignment) -> Self {
        let rate = ppb(alignment.rate_ppb);
        let bound = ppb(i64::try_from(alignment.rate_uncertainty_ppb).unwrap_or(i64::MAX));
        Self {
            factor: 1.0 / (1.0 + rate),
            uncertainty: rectangular(bound).hypot(rectangular(HOST_CLOCK)),
        }
    }

    /// `None` where the sink started anew in between, or where no time passed.
    fn between(first: &ClockAlignment, last: &ClockAlignment) -> Option<Self> {
        let sink = last.sink.checked_since(first.sink)?.seconds();
        let host = last.host.checked_since(first.host)?.seconds();
        if sink <= 0.0 || host <= 0.0 {
            return None;
        }
        let bound = (first.uncertainty.seconds() + last.uncertainty.seconds()) / sink;
        Some(Self {
            factor: host / sink,
            uncertainty: rectangular(bound).hypot(rectangular(HOST_CLOCK)),
        })
    }
}

fn rectangular(bound: f64) -> f64 {
    sink::uncertainty::Stated::Rectangular.standard_uncertainty(bound)
}

fn ppb(parts: i64) -> f64 {
    #[expect(
        clippy::cast_precision_loss,
        reason = "a rate has far fewer than 53 bits"
    )]
    let parts = parts as f64;
    parts * 1e-9
}
