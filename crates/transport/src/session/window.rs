//! Orders under way: numbering, answers, go-back.
//!
//! Invariants:
//! - Numbers are given in the order in which orders were given, without gaps; within a session
//!   a number never stands for two orders that the sink could both execute.
//! - At most the window's length of orders is numbered and unanswered, so that the sink still
//!   keeps the answer of the oldest.
//! - An order leaves by exactly one of: acknowledged, refused, withdrawn, abandoned.

use std::collections::VecDeque;

use quantity::SinkTime;
use wire::{HostLine, Order, OrderId, OrderNumber};

/// The numbers of a session: 1 to 65535, then 1 again.
const NUMBERS: u64 = 65_535;

/// The number on the wire of the `place`-th order of a session, counted from 1.
pub(super) fn number_of(place: u64) -> OrderNumber {
    let number = (place.wrapping_sub(1)) % NUMBERS + 1;
    OrderNumber(u16::try_from(number).unwrap_or(u16::MAX))
}

/// The latest place not after `newest` that bears a number; `None` for numbers never given.
pub(super) fn place_of(number: OrderNumber, newest: u64) -> Option<u64> {
    if number.0 == 0 || newest == 0 {
        return None;
    }
    let behind = (u64::from(number_of(newest).0) + NUMBERS - u64::from(number.0)) % NUMBERS;
    newest.checked_sub(behind).filter(|place| *place > 0)
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum SlotState {
    Unanswered,
    /// Overtaken by `off`: under its number goes a `clear`, which turns nothing on.
    Withdrawn,
    Answered,
}

#[derive(Debug, Clone, Copy)]
struct Slot {
    place: u64,
    id: OrderId,
    order: Order,
    state: SlotState,
}

impl Slot {
    fn line(&self) -> HostLine {
        let order = match self.state {
            SlotState::Withdrawn => Order::Clear {
                from: SinkTime::ZERO,
            },
            SlotState::Unanswered | SlotState::Answered => self.order,
        };
        HostLine::Order {
            number: number_of(self.place),
            order,
        }
    }
}

/// What an answer was to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Answered {
    /// This order.
    Order(OrderId, Order),
    /// An order that had been withdrawn before.
    Withdrawn,
    /// Nothing that waits for an answer.
    Nothing,
}

/// What a `gap` tells.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Gap {
    /// Lines were lost on the way: send again.
    GoBack,
    /// Already sent again for that.
    Known,
    /// The sink counts in another session.
    Foreign,
}

/// The window and the orders that wait for room in it.
#[derive(Debug)]
pub(super) struct Window {
    len: usize,
    slots: VecDeque<Slot>,
    waiting: VecDeque<(OrderId, Order)>,
    /// Place of the order numbered last.
    newest: u64,
    /// The place for which a gap has made us go back.
    gone_back_for: Option<u64>,
}

impl Window {
    pub(super) fn new(len: usize) -> Self {
        Self {
            len,
            slots: VecDeque::with_capacity(len),
            waiting: VecDeque::with_capacity(len),
            newest: 0,
            gone_back_for: None,
        }
    }

    /// Place of the order numbered last; 0: none.
    pub(super) fn newest(&self) -> u64 {
        self.newest
    }

    pub(super) fn waiting(&self) -> usize {
        self.waiting.len()
    }

    pub(super) fn push(&mut self, id: OrderId, order: Order) {
        self.waiting.push_back((id, order));
    }

    /// The order that would be numbered next, if there is room.
    pub(super) fn next_waiting(&self) -> Option<(OrderId, Order)> {
        if self.slots.len() >= self.len {
            return None;
        }
        self.waiting.front().copied()
    }

    /// The number that the next order will bear.
    pub(super) fn next_number(&self) -> OrderNumber {
        number_of(self.newest + 1)
    }

    /// Drops the order that would be numbered next.
    pub(super) fn discard_waiting(&mut self) {
        self.waiting.pop_front();
    }

    /// Numbers the next order and returns its place.
    pub(super) fn number_waiting(&mut self) -> u64 {
        if let Some((id, order)) = self.waiting.pop_front() {
            self.newest += 1;
            self.slots.push_back(Slot {
                place: self.newest,
                id,
                order,
                state: SlotState::Unanswered,
            });
        }
        self.newest
    }

    /// Takes the answer to a number.
    pub(super) fn answer(&mut self, number: OrderNumber) -> Answered {
        let Some(slot) = self
            .slots
            .iter_mut()
            .find(|slot| number_of(slot.place) == number)
        else {
            return Answered::Nothing;
        };
        let answered = match slot.state {
            SlotState::Unanswered => Answered::Order(slot.id, slot.order),
            SlotState::Withdrawn => Answered::Withdrawn,
            SlotState::Answered => return Answered::Nothing,
        };
        slot.state = SlotState::Answered;
        while let Some(slot) = self.slots.front() {
            if slot.state != SlotState::Answered {
                break;
            }
            self.slots.pop_front();
        }
        answered
    }

    /// Judges the number that the sink says it expects.
    pub(super) fn gap(&mut self, expected: OrderNumber) -> Gap {
        let first = self
            .slots
            .front()
            .map_or(self.newest + 1, |slot| slot.place);
        let place = (first..=self.newest + 1).find(|place| number_of(*place) == expected);
        match place {
            None => Gap::Foreign,
            Some(_) if self.slots.is_empty() => Gap::Known,
            Some(place) if self.gone_back_for == Some(place) => Gap::Known,
            Some(place) => {
                self.gone_back_for = Some(place);
                Gap::GoBack
            }
        }
    }

    /// Allows a further going back for the same gap, after a time-out.
    pub(super) fn forget_gap(&mut self) {
        self.gone_back_for = None;
    }

    /// The lines of all unanswered orders, oldest first.
    pub(super) fn unanswered(&self) -> impl Iterator<Item = HostLine> + '_ {
        self.slots
            .iter()
            .filter(|slot| slot.state != SlotState::Answered)
            .map(Slot::line)
    }

    pub(super) fn has_unanswered(&self) -> bool {
        !self.slots.is_empty()
    }

    /// Makes every unanswered or waiting step harmless, and yields their numbers.
    pub(super) fn withdraw_steps(&mut self, mut withdrawn: impl FnMut(OrderId)) {
        for slot in &mut self.slots {
            if slot.state == SlotState::Unanswered && matches!(slot.order, Order::Step(_)) {
                slot.state = SlotState::Withdrawn;
                withdrawn(slot.id);
            }
        }
        self.waiting.retain(|(id, order)| {
            let step = matches!(order, Order::Step(_));
            if step {
                withdrawn(*id);
            }
            !step
        });
    }

    /// Begins anew, and yields every order that was never answered.
    pub(super) fn abandon(&mut self, mut abandoned: impl FnMut(OrderId)) {
        for slot in self.slots.drain(..) {
            if slot.state == SlotState::Unanswered {
                abandoned(slot.id);
            }
        }
        for (id, _) in self.waiting.drain(..) {
            abandoned(id);
        }
        self.newest = 0;
        self.gone_back_for = None;
    }
}

#[cfg(test)]
mod tests;
