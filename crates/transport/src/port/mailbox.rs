//! The one place where a worker waits: commands first, then what the link brings, in order.
//!
//! Not a channel, because a flood of bytes must neither grow without bound nor hold up a
//! command: bytes have their own bound, at which the reader waits.

use std::collections::VecDeque;
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::time::Duration;

use thiserror::Error;

use super::{Inbox, LinkError};

/// Bytes that may wait for the worker; about 20 s of a port at 115200 baud.
const BYTES_MAX: usize = 256 * 1024;

/// Commands that may wait for the worker.
const COMMANDS_MAX: usize = 1024;

/// The longest a reader waits for room before it looks whether the worker is still there.
const ROOM_WAIT: Duration = Duration::from_millis(100);

/// A command that was not taken.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
pub enum CommandRefused {
    /// The worker has ended.
    #[error("the sink's worker has ended; restart the daemon")]
    Ended,
    /// The worker does not keep up.
    #[error("{COMMANDS_MAX} commands wait for the sink's worker already; try again later")]
    Full,
}

#[derive(Debug)]
struct State<C> {
    commands: VecDeque<C>,
    events: VecDeque<Event>,
    bytes: usize,
    ended: bool,
}

#[derive(Debug)]
enum Event {
    Bytes(Vec<u8>),
    Back,
    Lost(LinkError),
}

#[derive(Debug)]
pub(super) struct Mailbox<C> {
    state: Mutex<State<C>>,
    arrived: Condvar,
    room: Condvar,
}

impl<C> Mailbox<C> {
    pub(super) fn new() -> Arc<Self> {
        Arc::new(Self {
            state: Mutex::new(State {
                commands: VecDeque::new(),
                events: VecDeque::new(),
                bytes: 0,
                ended: false,
            }),
            arrived: Condvar::new(),
            room: Condvar::new(),
        })
    }

    /// No code panics while it holds the lock, so its contents are sound whatever happened.
    fn lock(&self) -> MutexGuard<'_, State<C>> {
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Waits for something, but no longer than `limit`.
    pub(super) fn wait(&self, limit: Duration) -> Option<Inbox<C>> {
        let (mut state, _) = self
            .arrived
            .wait_timeout_while(self.lock(), limit, |state| {
                state.commands.is_empty() && state.events.is_empty()
            })
            .unwrap_or_else(PoisonError::into_inner);
        if let Some(command) = state.commands.pop_front() {
            return Some(Inbox::Command(command));
        }
        Some(match state.events.pop_front()? {
            Event::Back => Inbox::LinkBack,
            Event::Lost(reason) => Inbox::LinkLost(reason),
            Event::Bytes(bytes) => {
                state.bytes -= bytes.len();
                self.room.notify_one();
                Inbox::Bytes(bytes)
            }
        })
    }

    /// Puts bytes in, waiting for room. False if the worker has ended.
    pub(super) fn put_bytes(&self, bytes: &[u8]) -> bool {
        let mut state = self.lock();
        while state.bytes + bytes.len() > BYTES_MAX && !state.ended {
            (state, _) = self
                .room
                .wait_timeout(state, ROOM_WAIT)
                .unwrap_or_else(PoisonError::into_inner);
        }
        if state.ended {
            return false;
        }
        state.bytes += bytes.len();
        if let Some(Event::Bytes(last)) = state.events.back_mut() {
            last.extend_from_slice(bytes);
        } else {
            state.events.push_back(Event::Bytes(bytes.to_vec()));
        }
        self.arrived.notify_one();
        true
    }

    pub(super) fn put_back(&self) {
        self.put_event(Event::Back);
    }

    pub(super) fn put_lost(&self, reason: LinkError) {
        self.put_event(Event::Lost(reason));
    }

    /// Changes of the link are few: they come with the pauses between attempts to open it.
    fn put_event(&self, event: Event) {
        self.lock().events.push_back(event);
        self.arrived.notify_one();
    }

    /// The worker is gone.
    pub(super) fn end(&self) {
        self.lock().ended = true;
        self.room.notify_all();
    }

    pub(super) fn ended(&self) -> bool {
        self.lock().ended
    }
}

/// The way to command a worker; as many copies as wanted.
#[derive(Debug)]
pub struct Commands<C>(Arc<Mailbox<C>>);

impl<C> Clone for Commands<C> {
    fn clone(&self) -> Self {
        Self(Arc::clone(&self.0))
    }
}

impl<C> Commands<C> {
    pub(super) fn new(mailbox: &Arc<Mailbox<C>>) -> Self {
        Self(Arc::clone(mailbox))
    }

    /// Gives a command. Never blocks.
    ///
    /// # Errors
    /// [`CommandRefused`] if the worker has ended or does not keep up; the command is dropped.
    pub fn give(&self, command: C) -> Result<(), CommandRefused> {
        let mut state = self.0.lock();
        if state.ended {
            return Err(CommandRefused::Ended);
        }
        if state.commands.len() >= COMMANDS_MAX {
            return Err(CommandRefused::Full);
        }
        state.commands.push_back(command);
        self.0.arrived.notify_one();
        Ok(())
    }
}
