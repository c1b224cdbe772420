//! What the checks need of a port: bytes out, bytes in until a time, and that time.
//!
//! Real ports, TCP and simulated sinks all come through `transport`'s links, which read the
//! clocks; so nothing in this crate does.

use std::convert::Infallible;

use quantity::{HostTime, Span};
use thiserror::Error;
use transport::port::{HostClock, Inbox, Link, LinkError, SerialConfig};

/// How long a port may take to open.
const OPENING: Span = Span::from_secs(5);

/// Why there is nothing to prove.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
pub enum PortError {
    /// The port cannot be opened, or went away.
    #[error(transparent)]
    Link(#[from] LinkError),
    /// It neither opened nor failed in time.
    #[error("port {name} did not open within {OPENING}; unplug it, plug it in and try again")]
    Slow {
        /// The name as given.
        name: String,
    },
}

/// A port with a sink on it.
pub trait Port {
    /// The time on this port: the host's clock, or virtual time.
    fn now(&self) -> HostTime;

    /// Sends bytes, in turn. Does not block.
    ///
    /// # Errors
    /// [`PortError`] if the port is gone.
    fn send(&mut self, bytes: &[u8]) -> Result<(), PortError>;

    /// Appends what comes, at the latest at `until`; may return earlier with nothing.
    ///
    /// # Errors
    /// [`PortError`] if the port is gone.
    fn read(&mut self, until: HostTime, into: &mut Vec<u8>) -> Result<(), PortError>;
}

/// Any of `transport`'s links as a port: serial, TCP, or a simulated sink in virtual time.
#[derive(Debug)]
pub struct LinkPort<L> {
    link: L,
}

impl<L: Link<Infallible>> LinkPort<L> {
    /// Takes a link that was just started.
    pub const fn new(link: L) -> Self {
        Self { link }
    }

    fn await_open(&mut self, name: &str) -> Result<(), PortError> {
        let until = self.link.now() + OPENING;
        while self.link.now() < until {
            match self.link.wait(until) {
                Some(Inbox::LinkBack | Inbox::Bytes(_)) => return Ok(()),
                Some(Inbox::LinkLost(error)) => return Err(error.into()),
                Some(Inbox::Command(never)) => match never {},
                None => {}
            }
        }
        Err(PortError::Slow {
            name: name.to_owned(),
        })
    }
}

impl<L: Link<Infallible>> Port for LinkPort<L> {
    fn now(&self) -> HostTime {
        self.link.now()
    }

    fn send(&mut self, bytes: &[u8]) -> Result<(), PortError> {
        self.link.send(bytes, transport::Urgency::InTurn);
        Ok(())
    }

    fn read(&mut self, until: HostTime, into: &mut Vec<u8>) -> Result<(), PortError> {
        match self.link.wait(until) {
            Some(Inbox::Bytes(bytes)) => into.extend_from_slice(&bytes),
            Some(Inbox::LinkLost(error)) => return Err(error.into()),
            Some(Inbox::Command(never)) => match never {},
            Some(Inbox::LinkBack) | None => {}
        }
        Ok(())
    }
}

/// Opens a serial port by its path, or a network port by `host:port`.
///
/// # Errors
/// [`PortError`] if it cannot be opened.
pub fn open(path_or_address: &str, baud: u32) -> Result<Box<dyn Port>, PortError> {
    let clock = HostClock::start();
    let link = if is_address(path_or_address) {
        transport::port::tcp(path_or_address.to_owned(), clock).0
    } else {
        let config = SerialConfig {
            path: path_or_address.to_owned(),
            baud,
        };
        transport::port::serial(config, clock).0
    };
    let mut port = LinkPort::new(link);
    port.await_open(path_or_address)?;
    Ok(Box::new(port))
}

/// `host:port`; a path has a slash, and `COM3` no colon.
fn is_address(name: &str) -> bool {
    !name.contains('/')
        && name
            .rsplit_once(':')
            .is_some_and(|(host, port)| !host.is_empty() && port.parse::<u16>().is_ok())
}

#[cfg(test)]
mod tests {
    use super::is_address;

    #[test]
    fn a_path_is_told_from_an_address() {
        assert!(is_address("192.0.2.7:4000"));
        assert!(is_address("[::1]:4000"));
        for path in ["/dev/ttyACM0", "/dev/serial/by-path/a:1", "COM3", ":80"] {
            assert!(!is_address(path), "{path}");
        }
    }
}
