//! Bytes on their way to a writer thread.

use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};

use crate::session::Urgency;

/// Bytes that may wait to be written; a session with all its orders under way needs a tenth.
const BYTES_MAX: usize = 16 * 1024;

/// Written at once: small, so that `off` need not wait behind much.
const PIECE_BYTES: usize = 256;

#[derive(Debug, Default)]
struct State {
    queue: Vec<u8>,
    /// What has been handed to the operating system and not yet sent is to be thrown away.
    discard: bool,
    ended: bool,
}

/// The queue of one connection.
#[derive(Debug, Default)]
pub(super) struct Outbound {
    state: Mutex<State>,
    arrived: Condvar,
}

/// What a writer does next.
#[derive(Debug, PartialEq, Eq)]
pub(super) enum Piece {
    /// Writes these; before that throws away what is unsent, if so said.
    Write { bytes: Vec<u8>, discard: bool },
    /// Ends.
    End,
}

impl Outbound {
    pub(super) fn new() -> Arc<Self> {
        Arc::new(Self::default())
    }

    fn lock(&self) -> MutexGuard<'_, State> {
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Queues bytes. Without room for all of them none is queued.
    pub(super) fn put(&self, bytes: &[u8], urgency: Urgency) {
        if bytes.is_empty() {
            return;
        }
        let mut state = self.lock();
        if urgency == Urgency::Overtakes {
            state.queue.clear();
            state.discard = true;
        }
        if state.queue.len() + bytes.len() <= BYTES_MAX {
            state.queue.extend_from_slice(bytes);
            self.arrived.notify_one();
        }
    }

    /// Whether what is being written has been overtaken, or the writer is to end.
    pub(super) fn is_overtaken(&self) -> bool {
        let state = self.lock();
        state.discard || state.ended
    }

    /// Ends the writer, now or when it comes back from the operating system.
    pub(super) fn end(&self) {
        self.lock().ended = true;
        self.arrived.notify_one();
    }

    /// Waits for whole lines to write.
    pub(super) fn take(&self) -> Piece {
        let mut state = self
            .arrived
            .wait_while(self.lock(), |state| state.queue.is_empty() && !state.ended)
            .unwrap_or_else(PoisonError::into_inner);
        if state.ended {
            return Piece::End;
        }
        let most = state.queue.len().min(PIECE_BYTES);
        let len = state
            .queue
            .iter()
            .take(most)
            .rposition(|byte| *byte == b'\n')
            .map_or(most, |end| end + 1);
        let bytes = state.queue.drain(..len).collect();
        Piece::Write {
            bytes,
            discard: std::mem::take(&mut state.discard),
        }
    }
}
