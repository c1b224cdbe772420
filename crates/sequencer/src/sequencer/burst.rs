//! Captures around the beginning of steps, armed one at a time.

use std::collections::VecDeque;

use quantity::{SinkTime, Span};
use sequence::plan::BurstRequest;
use wire::{Order, OrderId};

use super::Sequencer;
use crate::event::Finding;
use crate::program::Slot;

/// Captures that are wanted, and the one that is under way.
#[derive(Debug, Clone, Default)]
pub(crate) struct Bursts {
    wanted: VecDeque<Burst>,
    /// The latest ordered, until its samples have come.
    ordered: Option<(OrderId, u32)>,
    busy_until: SinkTime,
    refused: Option<u32>,
}

#[derive(Debug, Clone, Copy)]
struct Burst {
    op: u32,
    at: SinkTime,
    before: u16,
    after: u16,
    /// How long from its edge on the sink can be asked for no other.
    busy: Span,
}

impl Bursts {
    /// The sink has given up all captures.
    pub(crate) fn clear(&mut self) {
        *self = Self::default();
    }

    /// The steps to be captured have been dropped.
    pub(crate) fn forget_wanted(&mut self) {
        self.wanted.clear();
    }

    /// Whether this order was a capture, which the sink has refused.
    pub(crate) fn refused(&mut self, order: OrderId) -> bool {
        match self.ordered {
            Some((ordered, op)) if ordered == order => {
                self.ordered = None;
                self.refused = Some(op);
                true
            }
            Some(_) | None => false,
        }
    }

    /// The step whose capture was refused last.
    pub(crate) fn missed(&mut self) -> Option<u32> {
        self.refused.take()
    }
}

impl Sequencer {
    pub(super) fn want_burst(&mut self, slot: &Slot, request: BurstRequest) {
        let tick = self.plan().tick;
        let (before, after) = request.samples(tick);
        self.bursts.wanted.push_back(Burst {
            op: slot.op,
            at: slot.start,
            before,
            after,
            busy: request.busy(tick),
        });
    }

    /// Arms the next capture when the sink has sent the one before.
    pub(super) fn order_burst(&mut self) {
        let now = self.sink_now();
        while let Some(burst) = self.bursts.wanted.front().copied() {
            let lead = Span::from_micros(self.plan().tick.micros() * u64::from(burst.before));
            if burst.at <= now.saturating_add(lead) {
                self.bursts.wanted.pop_front();
                self.find(Finding::BurstMissed { op: burst.op });
                continue;
            }
            if now < self.bursts.busy_until {
                return;
            }
            self.bursts.wanted.pop_front();
            self.bursts.busy_until = burst.at.saturating_add(burst.busy);
            let order = self.order(Order::Burst {
                at: burst.at,
                before: burst.before,
                after: burst.after,
            });
            self.bursts.ordered = Some((order, burst.op));
        }
    }
}
