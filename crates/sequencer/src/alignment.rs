//! The sink's clock against the host's, as far as a run must know.
//!
//! A reading cannot arrive before it was made. So `arrival - sink time` is the true offset of
//! the clocks plus a delay of the link that is never negative, and its least value over a while
//! is the best that can be known without asking. Sound estimates with rate and uncertainty are
//! the transport's; here it is enough to notice a clock that jumps, and to aim a start safely
//! into the future.
//!
//! A change is judged against the least of a whole block, never against single readings: one that
//! was late says nothing about the clock.
//!
//! Limits: nothing is judged during the first block; a rate error below [`RATE_PPM`] passes (a cheap oscillator is allowed its error, the
//! transport measures it); a backward jump is noticed at the end of its block, since until then
//! it looks like a slow link.

use quantity::{HostTime, SinkTime, Span};

/// Length of a block over which the least offset is taken.
const BLOCK: Span = Span::from_secs(5);
/// Rate error that is no fault: 2 %, a microcontroller's internal RC oscillator at its worst.
const RATE_PPM: i128 = 20_000;

/// Follows the offset between the clocks.
#[derive(Debug, Clone, Default)]
pub(crate) struct Alignment {
    block: Option<Block>,
    previous: Option<Block>,
}

#[derive(Debug, Clone, Copy)]
struct Block {
    began: HostTime,
    /// Least `arrival - sink time` in it, in us.
    least: i128,
    /// When that one arrived.
    at: HostTime,
}

impl Alignment {
    /// Takes a reading's two times; returns by how much the sink's clock has moved against the
    /// host's, if that is beyond `bound`.
    pub(crate) fn take(&mut self, time: SinkTime, at: HostTime, bound: Span) -> Option<Span> {
        let offset = i128::from(at.micros()) - i128::from(time.micros());
        let mut beyond = None;
        if let Some(reference) = self.previous {
            // Earlier than the delay allows: the sink's clock has leapt forward.
            beyond = drift(reference, at, reference.least - offset, bound);
        }
        match &mut self.block {
            Some(block) if at.saturating_since(block.began) < BLOCK => {
                if offset < block.least {
                    block.least = offset;
                    block.at = at;
                }
            }
            Some(block) => {
                if let Some(previous) = self.previous {
                    let later = drift(previous, block.at, block.least - previous.least, bound);
                    beyond = beyond.or(later);
                }
                self.previous = Some(*block);
                self.block = Some(Block {
                    began: at,
                    least: offset,
                    at,
                });
            }
            None => {
                self.block = Some(Block {
                    began: at,
                    least: offset,
                    at,
                });
            }
        }
        beyond
    }

    /// What the sink's clock shows at least at `at`; `None` before the first reading.
    pub(crate) fn sink_time(&self, at: HostTime) -> Option<SinkTime> {
        let least = match (self.previous, self.block) {
            (Some(previous), Some(block)) => previous.least.min(block.least),
            (Some(one), None) | (None, Some(one)) => one.least,
            (None, None) => return None,
        };
        let time = i128::from(at.micros()) - least;
        Some(SinkTime::from_micros(u64::try_from(time).unwrap_or(0)))
    }

    /// Forgets all: a new session, perhaps a new clock.
    pub(crate) fn restart(&mut self) {
        *self = Self::default();
    }
}

/// The change, if it is beyond the bound plus what a rate error explains.
fn drift(since: Block, until: HostTime, change: i128, bound: Span) -> Option<Span> {
    let elapsed = i128::from(until.saturating_since(since.at).micros());
    let allowed = i128::from(bound.micros()) + elapsed * RATE_PPM / 1_000_000;
    (change > allowed).then(|| Span::from_micros(u64::try_from(change).unwrap_or(u64::MAX)))
}
