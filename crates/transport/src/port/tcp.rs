//! Sinks behind a network: a serial device server, or a sink with a network port of its own.

use std::io::{self, Write};
use std::net::{TcpStream, ToSocketAddrs};
use std::time::Duration;

use socket2::{SockRef, TcpKeepalive};

use super::LinkError;
use super::connection::{Connection, Opener, POLL, PortLink, PortWriter};
use super::host_clock::HostClock;
use super::mailbox::Commands;

/// How long to wait for a connection.
const CONNECT: Duration = Duration::from_secs(3);

/// A connection on which nothing comes back for so long is given up: the longest deadman.
#[cfg(target_os = "linux")]
const DEAD_AFTER: Duration = Duration::from_secs(10);
const PROBE_AFTER: Duration = Duration::from_secs(4);
const PROBE_EVERY: Duration = Duration::from_secs(2);

/// Starts a link over TCP to `address` (`host:port`), connected in the background.
///
/// The line protocol has no authentication: only a network on which everyone may turn the sink
/// on is fit for it.
pub fn tcp<C: Send + 'static>(address: String, clock: HostClock) -> (PortLink<C>, Commands<C>) {
    PortLink::start(TcpOpener { address }, clock)
}

struct TcpOpener {
    address: String,
}

impl Opener for TcpOpener {
    fn name(&self) -> String {
        self.address.clone()
    }

    fn open(&mut self) -> Result<Connection, LinkError> {
        self.connect().map_err(|error| {
            let name = self.name();
            let reason = error.to_string();
            LinkError::Open { name, reason }
        })
    }
}

impl TcpOpener {
    fn connect(&self) -> io::Result<Connection> {
        let mut last = io::Error::new(io::ErrorKind::NotFound, "the name has no address");
        for address in self.address.to_socket_addrs()? {
            match TcpStream::connect_timeout(&address, CONNECT) {
                Ok(stream) => return prepare(stream),
                Err(error) => last = error,
            }
        }
        Err(last)
    }
}

fn prepare(stream: TcpStream) -> io::Result<Connection> {
    stream.set_nodelay(true)?;
    stream.set_read_timeout(Some(POLL))?;
    stream.set_write_timeout(Some(POLL))?;
    let socket = SockRef::from(&stream);
    socket.set_tcp_keepalive(
        &TcpKeepalive::new()
            .with_time(PROBE_AFTER)
            .with_interval(PROBE_EVERY)
            .with_retries(3),
    )?;
    // Keepalive probes only an idle connection; this bounds one with bytes under way.
    #[cfg(target_os = "linux")]
    socket.set_tcp_user_timeout(Some(DEAD_AFTER))?;
    let writer = stream.try_clone()?;
    Ok(Connection {
        reader: Box::new(stream),
        writer: Box::new(Writer(writer)),
    })
}

struct Writer(TcpStream);

impl Write for Writer {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.0.write(bytes)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.0.flush()
    }
}

impl PortWriter for Writer {
    /// What TCP has taken it delivers.
    fn discard_unsent(&mut self) {}
}
