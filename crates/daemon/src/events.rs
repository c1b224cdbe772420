//! The log of events that viewers follow.
//!
//! Bounded, with ascending numbers. A viewer keeps its own place and asks for what comes after
//! it, so a slow or dead viewer holds nothing up and costs nothing. What is pushed out of the log
//! before a viewer came for it is told as gone, never left out silently.
//!
//! Invariants:
//! - Numbers ascend over the life of the log, and over restarts of the daemon: the first number
//!   comes from the calendar.
//! - Sinks' states are many and supersede each other; they have a ring of their own and never
//!   push out what happened to a run.
//!
//! What it deliberately does not do: wait for anyone, or keep anything that is not in a record.

use std::collections::VecDeque;
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};

use tokio::sync::watch;

use crate::view::{EventBody, GoneEvent};

/// States of sinks that are held: some minutes of a bench with a few sinks.
const STATES_MAX: usize = 2048;
/// Other events that are held.
const HAPPENINGS_MAX: usize = 8192;
/// Numbers for each second of the calendar; more events than that do not come in a second.
const NUMBERS_PER_SECOND: u64 = 1 << 20;

/// An event, ready to be sent.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Written {
    /// Its number.
    pub(crate) id: u64,
    /// The name of its kind.
    pub(crate) name: &'static str,
    /// Its data as JSON on one line.
    pub(crate) data: Arc<str>,
}

impl Written {
    /// An event under a number; `None` if it cannot be written, which the log of the daemon tells.
    pub(crate) fn new(id: u64, body: &EventBody) -> Option<Self> {
        Some(Self {
            id,
            name: body.name(),
            data: data_of(body)?,
        })
    }
}

/// A viewer's place in the log.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Place {
    /// The last event it has.
    after: u64,
    /// It has been told that events up to here may be missing.
    told: u64,
}

impl Place {
    /// The place of a viewer whose last event was `after`.
    pub(crate) const fn after(after: u64) -> Self {
        Self { after, told: 0 }
    }
}

/// The log of events. Clones share it.
#[derive(Debug, Clone)]
pub(crate) struct EventLog {
    shared: Arc<Shared>,
}

#[derive(Debug)]
struct Shared {
    rings: Mutex<Rings>,
    latest: watch::Sender<u64>,
}

#[derive(Debug)]
struct Rings {
    latest: u64,
    states: Ring,
    happenings: Ring,
}

#[derive(Debug)]
struct Ring {
    held: VecDeque<Written>,
    most: usize,
    /// The number of the last event pushed out.
    dropped: u64,
}

impl Ring {
    fn new(most: usize, before: u64) -> Self {
        Self {
            held: VecDeque::new(),
            most,
            dropped: before,
        }
    }

    fn push(&mut self, event: Written) {
        if self.held.len() >= self.most
            && let Some(oldest) = self.held.pop_front()
        {
            self.dropped = oldest.id;
        }
        self.held.push_back(event);
    }

    fn after(&self, id: u64) -> impl Iterator<Item = &Written> {
        let from = self.held.partition_point(|event| event.id <= id);
        self.held.range(from..)
    }
}

impl EventLog {
    /// An empty log of a daemon started so many seconds after 1970.
    pub(crate) fn new(started_s: u64) -> Self {
        Self::with_room(started_s, STATES_MAX, HAPPENINGS_MAX)
    }

    fn with_room(started_s: u64, states: usize, happenings: usize) -> Self {
        let before = started_s.saturating_mul(NUMBERS_PER_SECOND);
        let rings = Rings {
            latest: before,
            states: Ring::new(states, before),
            happenings: Ring::new(happenings, before),
        };
        Self {
            shared: Arc::new(Shared {
                rings: Mutex::new(rings),
                latest: watch::Sender::new(before),
            }),
        }
    }

    fn rings(&self) -> MutexGuard<'_, Rings> {
        // Nobody panics while holding it; were it so, its contents would still be sound.
        self.shared
            .rings
            .lock()
            .unwrap_or_else(PoisonError::into_inner)
    }

    /// Enters an event. Never waits for a viewer.
    pub(crate) fn push(&self, body: &EventBody) {
        let Some(data) = data_of(body) else { return };
        let mut rings = self.rings();
        rings.latest += 1;
        let id = rings.latest;
        let event = Written {
            id,
            name: body.name(),
            data,
        };
        match body {
            EventBody::Sink(_) => rings.states.push(event),
            EventBody::Run(_) | EventBody::Link(_) | EventBody::Gone(_) => {
                rings.happenings.push(event);
            }
        }
        drop(rings);
        self.shared.latest.send_replace(id);
    }

    /// The number of the latest event.
    pub(crate) fn latest(&self) -> u64 {
        self.rings().latest
    }

    /// Tells the number of the latest event whenever it changes.
    pub(crate) fn watch(&self) -> watch::Receiver<u64> {
        self.shared.latest.subscribe()
    }

    /// At most `most` events after the viewer's place, oldest first; moves the place on. If some
    /// are no longer held, the first says so, once.
    pub(crate) fn take(&self, place: &mut Place, most: usize) -> Vec<Written> {
        let rings = self.rings();
        let mut events = Vec::new();
        let dropped = rings.states.dropped.max(rings.happenings.dropped);
        if place.after < dropped && place.told < dropped {
            place.told = dropped;
            let gone = EventBody::Gone(GoneEvent {
                after: place.after,
                oldest: dropped + 1,
            });
            events.extend(Written::new(place.after, &gone));
        }
        let mut states = rings.states.after(place.after).peekable();
        let mut happenings = rings.happenings.after(place.after).peekable();
        while events.len() < most {
            let next = match (states.peek(), happenings.peek()) {
                (Some(state), Some(happening)) if state.id < happening.id => states.next(),
                (_, Some(_)) => happenings.next(),
                (Some(_), None) => states.next(),
                (None, None) => None,
            };
            let Some(next) = next else { break };
            place.after = next.id;
            events.push(next.clone());
        }
        events
    }
}

/// The event's data as JSON; every view can be written as such.
fn data_of(body: &EventBody) -> Option<Arc<str>> {
    let written = match body {
        EventBody::Sink(view) => serde_json::to_string(view),
        EventBody::Run(event) => serde_json::to_string(event),
        EventBody::Link(event) => serde_json::to_string(event),
        EventBody::Gone(event) => serde_json::to_string(event),
    };
    match written {
        Ok(data) => Some(data.into()),
        Err(error) => {
            tracing::error!("an event cannot be written as JSON: {error}");
            None
        }
    }
}

#[cfg(test)]
mod tests;
