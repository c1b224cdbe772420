//! What of the sink's clock is worth telling.

use std::collections::VecDeque;

use quantity::{HostTime, SinkTime};

use super::heard::Heard;
use crate::clock::{ClockAlignment, ClockBounds, ClockEstimate, ClockFault};

/// The clock alignment, and what has been told of it.
#[derive(Debug)]
pub(super) struct ClockWatch {
    alignment: ClockAlignment,
    told: Option<ClockEstimate>,
    rate_off: bool,
}

impl ClockWatch {
    pub(super) fn new(bounds: ClockBounds) -> Self {
        Self {
            alignment: ClockAlignment::new(bounds),
            told: None,
            rate_off: false,
        }
    }

    pub(super) fn clear(&mut self) {
        self.alignment.clear();
        self.told = None;
        self.rate_off = false;
    }

    pub(super) const fn estimate(&self) -> Option<ClockEstimate> {
        self.alignment.estimate()
    }

    /// Takes a round trip and tells what is new.
    pub(super) fn add(
        &mut self,
        sent: HostTime,
        received: HostTime,
        time: SinkTime,
        heard: &mut VecDeque<Heard>,
    ) {
        let fault = self.alignment.add(sent, received, time);
        let rate_off = matches!(fault, Some(ClockFault::Rate { .. }));
        // A rate out of bounds stays so for a while: told once.
        let known = rate_off && self.rate_off;
        self.rate_off = rate_off;
        if let Some(fault) = fault.filter(|_| !known) {
            heard.push_back(Heard::ClockOff {
                by: fault.by(),
                fault,
            });
        }
        let Some(estimate) = self.estimate() else {
            return;
        };
        let news = self
            .told
            .is_none_or(|told| told.materially_differs(&estimate));
        if news {
            self.told = Some(estimate);
            heard.push_back(Heard::ClockEstimate(estimate));
        }
    }
}
