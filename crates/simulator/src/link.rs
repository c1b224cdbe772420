//! A link that loses, damages, repeats and delays bytes, without any I/O.
//!
//! It stands between a session and a simulated sink, one [`Link`] for each direction. Bytes go
//! in with the time they are sent, and come out with the time they arrive. Order is kept, as on
//! any wire. All chance comes from the seed.
//!
//! Invariants:
//! - With [`LinkFaults::default`] bytes come out as they went in, at once.
//! - What comes out hangs only on the faults, the seed and the bytes with their times.
//!
//! What it deliberately does not do: it knows no protocol beyond `\n` ending a line, and takes
//! no time for the bytes themselves (the sink's own line rate does).

mod faulty;
#[cfg(test)]
mod tests;

pub use faulty::FaultyDevice;

use std::collections::VecDeque;

use quantity::{Ratio, Span};
use serde::{Deserialize, Serialize};

use crate::noise::Noise;

/// What a link does to what passes it. Chances are shares of one.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct LinkFaults {
    /// Chance that a byte is lost.
    #[serde(with = "quantity::text")]
    pub drop_byte: Ratio,
    /// Chance that one of a byte's bits is turned.
    #[serde(with = "quantity::text")]
    pub corrupt_byte: Ratio,
    /// Chance that a byte comes twice.
    #[serde(with = "quantity::text")]
    pub duplicate_byte: Ratio,
    /// Chance that a whole line is lost.
    #[serde(with = "quantity::text")]
    pub drop_line: Ratio,
    /// Chance that a whole line comes twice.
    #[serde(with = "quantity::text")]
    pub duplicate_line: Ratio,
    /// Shortest delay of a line.
    #[serde(with = "quantity::text")]
    pub delay_min: Span,
    /// Longest delay of a line; drawn evenly between the two, and never overtaking.
    #[serde(with = "quantity::text")]
    pub delay_max: Span,
    /// Spans in which bytes wait; they arrive at the end of the span.
    pub stalls: Vec<Outage>,
    /// Spans in which the cable is off: what is sent or would arrive in them is lost.
    pub unplugged: Vec<Outage>,
}

/// A span of time on a link.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Outage {
    /// When it begins.
    #[serde(with = "quantity::text")]
    pub from: Span,
    /// How long it lasts.
    #[serde(with = "quantity::text", rename = "for")]
    pub lasts: Span,
}

impl Outage {
    fn end(&self) -> Span {
        self.from.saturating_add(self.lasts)
    }

    fn holds(&self, time: Span) -> bool {
        self.from <= time && time < self.end()
    }
}

/// What became of the bytes that went in.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct LinkCounts {
    /// Bytes lost, alone, with their line or with the cable off.
    pub dropped: u64,
    /// Bytes with a bit turned.
    pub corrupted: u64,
    /// Bytes that came once more than sent.
    pub duplicated: u64,
}

/// One direction of a link.
#[derive(Debug, Clone)]
pub struct Link {
    faults: LinkFaults,
    noise: Noise,
    /// What is under way: when it arrives, and its bytes; never falling.
    under_way: VecDeque<(Span, Vec<u8>)>,
    /// Fate of the line being sent: whether it is lost, and its copy if it comes twice.
    line_lost: bool,
    line_copy: Option<Vec<u8>>,
    line_delay: Span,
    in_line: bool,
    counts: LinkCounts,
}

impl Link {
    /// A link with these faults, its chance drawn from a seed.
    pub fn new(faults: LinkFaults, seed: u64) -> Self {
        Self {
            faults,
            noise: Noise::new(seed),
            under_way: VecDeque::new(),
            line_lost: false,
            line_copy: None,
            line_delay: Span::ZERO,
            in_line: false,
            counts: LinkCounts::default(),
        }
    }

    /// Bytes sent at a time, which must not go back.
    pub fn send(&mut self, now: Span, bytes: &[u8]) {
        if self.is_unplugged(now) {
            self.counts.dropped += count(bytes.len());
            return;
        }
        let mut passed = Vec::with_capacity(bytes.len());
        for byte in bytes {
            if !self.in_line {
                self.begin_line();
            }
            self.pass(*byte, &mut passed);
            if *byte == b'\n' {
                self.in_line = false;
                if let Some(copy) = self.line_copy.take() {
                    self.counts.duplicated += count(copy.len());
                    passed.extend_from_slice(&copy);
                }
                self.dispatch(now, &mut passed);
            }
        }
        self.dispatch(now, &mut passed);
    }

    /// Appends what has arrived by a time.
    pub fn receive(&mut self, now: Span, out: &mut Vec<u8>) {
        while let Some((at, _)) = self.under_way.front()
            && *at <= now
        {
            if let Some((at, bytes)) = self.under_way.pop_front() {
                if self.is_unplugged(at) {
                    self.counts.dropped += count(bytes.len());
                } else {
                    out.extend_from_slice(&bytes);
                }
            }
        }
    }

    /// When the next bytes arrive, if any are under way.
    pub fn next_arrival(&self) -> Option<Span> {
        self.under_way.front().map(|(at, _)| *at)
    }

    /// Whether the cable is off at a time.
    pub fn is_unplugged(&self, time: Span) -> bool {
        self.faults
            .unplugged
            .iter()
            .any(|outage| outage.holds(time))
    }

    /// What became of the bytes so far.
    pub fn counts(&self) -> LinkCounts {
        self.counts
    }

    fn begin_line(&mut self) {
        self.in_line = true;
        self.line_lost = self.happens(self.faults.drop_line);
        let twice = self.happens(self.faults.duplicate_line);
        self.line_copy = (twice && !self.line_lost).then(Vec::new);
        let (least, most) = (self.faults.delay_min, self.faults.delay_max);
        let spread = most.saturating_sub(least).micros();
        let extra = if spread > 0 {
            self.noise.below(spread.saturating_add(1))
        } else {
            0
        };
        self.line_delay = least.saturating_add(Span::from_micros(extra));
    }

    fn pass(&mut self, byte: u8, passed: &mut Vec<u8>) {
        if self.line_lost || self.happens(self.faults.drop_byte) {
            self.counts.dropped += 1;
            return;
        }
        let mut byte = byte;
        if self.happens(self.faults.corrupt_byte) {
            byte ^= 1 << self.noise.below(8);
            self.counts.corrupted += 1;
        }
        passed.push(byte);
        if let Some(copy) = &mut self.line_copy {
            copy.push(byte);
        }
        if self.happens(self.faults.duplicate_byte) {
            passed.push(byte);
            self.counts.duplicated += 1;
        }
    }

    fn dispatch(&mut self, now: Span, passed: &mut Vec<u8>) {
        if passed.is_empty() {
            return;
        }
        let mut at = now.saturating_add(self.line_delay);
        if let Some((last, _)) = self.under_way.back() {
            at = at.max(*last);
        }
        for stall in &self.faults.stalls {
            if stall.holds(at) {
                at = stall.end();
            }
        }
        self.under_way.push_back((at, core::mem::take(passed)));
    }

    fn happens(&mut self, chance: Ratio) -> bool {
        let chance = chance.fraction();
        chance > 0.0 && self.noise.uniform() < chance
    }
}

fn count(bytes: usize) -> u64 {
    u64::try_from(bytes).unwrap_or(u64::MAX)
}
