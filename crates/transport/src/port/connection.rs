//! The threads of a real link: open, read, write, and open again when it is gone.

use std::io::{ErrorKind, Read, Write};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, PoisonError};
use std::thread;
use std::time::Duration;

use quantity::HostTime;

use super::host_clock::HostClock;
use super::mailbox::{Commands, Mailbox};
use super::outbound::{Outbound, Piece};
use super::{Inbox, Link, LinkError};
use crate::session::Urgency;

/// How long a read or a write waits before the thread looks whether it should end.
pub(super) const POLL: Duration = Duration::from_millis(100);

/// The first pause before a port is opened again, and the longest.
const PAUSE_FIRST: Duration = Duration::from_millis(100);
const PAUSE_LAST: Duration = Duration::from_secs(2);

/// Opens a port, again and again.
pub(super) trait Opener: Send + 'static {
    /// The name as the user gave it.
    fn name(&self) -> String;

    /// Opens it.
    fn open(&mut self) -> Result<Connection, LinkError>;
}

/// An open port, as two ends for two threads.
pub(super) struct Connection {
    pub(super) reader: Box<dyn Read + Send>,
    pub(super) writer: Box<dyn PortWriter>,
}

/// The writing end.
pub(super) trait PortWriter: Write + Send {
    /// Throws away what has been written and not yet sent, where that is possible.
    fn discard_unsent(&mut self);
}

/// A real link: its worker's end.
#[derive(Debug)]
pub struct PortLink<C> {
    clock: HostClock,
    mailbox: Arc<Mailbox<C>>,
    outbound: Arc<CurrentOutbound>,
}

/// The queue of the connection that is open, if one is.
#[derive(Debug, Default)]
struct CurrentOutbound(Mutex<Option<Arc<Outbound>>>);

impl CurrentOutbound {
    fn set(&self, outbound: Option<Arc<Outbound>>) {
        let mut current = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some(before) = current.take() {
            before.end();
        }
        *current = outbound;
    }

    fn put(&self, bytes: &[u8], urgency: Urgency) {
        let current = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some(outbound) = current.as_ref() {
            outbound.put(bytes, urgency);
        }
    }
}

impl<C: Send + 'static> PortLink<C> {
    /// Starts the threads of a link.
    pub(super) fn start(opener: impl Opener, clock: HostClock) -> (Self, Commands<C>) {
        let mailbox = Mailbox::new();
        let outbound = Arc::new(CurrentOutbound::default());
        let commands = Commands::new(&mailbox);
        let keeper = Keeper {
            mailbox: Arc::clone(&mailbox),
            outbound: Arc::clone(&outbound),
        };
        thread::spawn(move || keeper.run(opener));
        let link = Self {
            clock,
            mailbox,
            outbound,
        };
        (link, commands)
    }
}

impl<C> Link<C> for PortLink<C> {
    fn now(&self) -> HostTime {
        self.clock.now()
    }

    fn wait(&mut self, until: HostTime) -> Option<Inbox<C>> {
        self.mailbox.wait(self.clock.until(until))
    }

    fn send(&mut self, bytes: &[u8], urgency: Urgency) {
        self.outbound.put(bytes, urgency);
    }

    fn hold_time(&mut self, _held: bool) {}
}

impl<C> Drop for PortLink<C> {
    /// The threads end by themselves within [`POLL`], or when the operating system lets go of
    /// them; nothing here waits for that.
    fn drop(&mut self) {
        self.mailbox.end();
        self.outbound.set(None);
    }
}

/// The thread that opens and reads.
struct Keeper<C> {
    mailbox: Arc<Mailbox<C>>,
    outbound: Arc<CurrentOutbound>,
}

impl<C> Keeper<C> {
    fn run(&self, mut opener: impl Opener) {
        let mut pause = PAUSE_FIRST;
        let mut told: Option<LinkError> = None;
        while !self.mailbox.ended() {
            let reason = match opener.open() {
                Ok(connection) => {
                    pause = PAUSE_FIRST;
                    told = None;
                    match self.serve(connection, &opener.name()) {
                        Some(reason) => reason,
                        None => return,
                    }
                }
                Err(reason) => reason,
            };
            if told.as_ref() != Some(&reason) {
                tracing::warn!("{reason}");
                self.mailbox.put_lost(reason.clone());
                told = Some(reason);
            }
            self.pause(pause);
            pause = (pause * 2).min(PAUSE_LAST);
        }
    }

    /// Reads until the port is gone; `None` if the worker is.
    fn serve(&self, connection: Connection, name: &str) -> Option<LinkError> {
        let Connection { mut reader, writer } = connection;
        let outbound = Outbound::new();
        let write_failed = Arc::new(AtomicBool::new(false));
        {
            let (outbound, failed) = (Arc::clone(&outbound), Arc::clone(&write_failed));
            thread::spawn(move || write(writer, &outbound, &failed));
        }
        self.outbound.set(Some(outbound));
        tracing::info!("port {name} is open");
        self.mailbox.put_back();
        let gone = |reason: String| {
            Some(LinkError::Gone {
                name: name.to_owned(),
                reason,
            })
        };
        let mut bytes = [0; 4096];
        let result = loop {
            match reader.read(&mut bytes) {
                Ok(0) => break gone("the other side has closed it".to_owned()),
                Ok(len) => {
                    if !self.mailbox.put_bytes(bytes.get(..len).unwrap_or_default()) {
                        break None;
                    }
                }
                Err(error) if is_idle(error.kind()) => {
                    if self.mailbox.ended() {
                        break None;
                    }
                }
                Err(error) => break gone(error.to_string()),
            }
            if write_failed.load(Ordering::Acquire) {
                break gone("writing failed".to_owned());
            }
        };
        self.outbound.set(None);
        result
    }

    /// Waits between attempts.
    #[expect(
        clippy::disallowed_methods,
        reason = "a thread of its own waits for the operating system here, and for nothing else"
    )]
    fn pause(&self, pause: Duration) {
        let mut left = pause;
        while !left.is_zero() && !self.mailbox.ended() {
            let nap = left.min(POLL);
            thread::sleep(nap);
            left -= nap;
        }
    }
}

/// The thread that writes.
fn write(mut writer: Box<dyn PortWriter>, outbound: &Outbound, failed: &AtomicBool) {
    while let Piece::Write { bytes, discard } = outbound.take() {
        if discard {
            writer.discard_unsent();
        }
        if let Err(error) = write_all(&mut *writer, &bytes, outbound) {
            tracing::debug!("writing ends: {error}");
            failed.store(true, Ordering::Release);
            return;
        }
    }
}

/// Writes everything, unless something more urgent or the end comes meanwhile.
fn write_all(
    writer: &mut dyn PortWriter,
    bytes: &[u8],
    outbound: &Outbound,
) -> std::io::Result<()> {
    let mut rest = bytes;
    while !rest.is_empty() && !outbound.is_overtaken() {
        match writer.write(rest) {
            Ok(0) => return Err(ErrorKind::WriteZero.into()),
            Ok(len) => rest = rest.get(len..).unwrap_or_default(),
            // A port that does not take bytes now: the session sends again what it must.
            Err(error) if is_idle(error.kind()) => {}
            Err(error) => return Err(error),
        }
    }
    Ok(())
}

fn is_idle(kind: ErrorKind) -> bool {
    matches!(
        kind,
        ErrorKind::TimedOut | ErrorKind::WouldBlock | ErrorKind::Interrupted
    )
}
