//! From a step's number on the wire back to the order that queued it.

use std::collections::VecDeque;

use wire::{OrderId, OrderNumber};

use super::window::place_of;

/// Steps remembered at most: far more than a queue holds. Beyond, the oldest is forgotten.
const STEPS_MAX: usize = 4096;

/// Steps that may still begin, and the one that began last.
///
/// Steps begin in the order in which they were queued, so when one begins, all before it are
/// done with.
#[derive(Debug, Default)]
pub(super) struct Steps {
    /// Place in the session and order, oldest first.
    list: VecDeque<(u64, OrderId)>,
    /// Place of the latest step known to have begun.
    begun: u64,
}

impl Steps {
    pub(super) fn clear(&mut self) {
        self.list.clear();
        self.begun = 0;
    }

    pub(super) fn push(&mut self, place: u64, id: OrderId) {
        if self.list.len() >= STEPS_MAX {
            self.list.pop_front();
        }
        self.list.push_back((place, id));
    }

    /// The order of a step that began, and whether that is news.
    pub(super) fn begun(&mut self, number: OrderNumber, newest: u64) -> Option<(OrderId, bool)> {
        let place = place_of(number, newest)?;
        while let Some((first, _)) = self.list.front() {
            if *first >= place {
                break;
            }
            self.list.pop_front();
        }
        let (first, id) = self.list.front().copied()?;
        if first != place {
            return None;
        }
        let news = place > self.begun;
        self.begun = place;
        Some((id, news))
    }
}
