//! Serial ports, USB serial ports among them.

use std::io::{self, Read, Write};

use serde::{Deserialize, Serialize};
use serialport::{ClearBuffer, DataBits, ErrorKind, FlowControl, Parity, SerialPort, StopBits};

use super::LinkError;
use super::connection::{Connection, Opener, POLL, PortLink, PortWriter};
use super::host_clock::HostClock;
use super::mailbox::Commands;

/// The rate at which sinks talk unless the bench file says otherwise.
pub const BAUD_DEFAULT: u32 = 115_200;

/// Which serial port, and how fast. The form is always 8 data bits, no parity, 1 stop bit.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SerialConfig {
    /// The port's path, opened as given: one that names the device and not the order of
    /// plugging in (`/dev/serial/by-id/...`) finds it again.
    pub path: String,
    /// Bits a second.
    pub baud: u32,
}

/// Starts a link over a serial port. It is opened exclusively, in the background: a port that
/// is not there yet is waited for.
pub fn serial<C: Send + 'static>(
    config: SerialConfig,
    clock: HostClock,
) -> (PortLink<C>, Commands<C>) {
    PortLink::start(SerialOpener(config), clock)
}

struct SerialOpener(SerialConfig);

impl Opener for SerialOpener {
    fn name(&self) -> String {
        self.0.path.clone()
    }

    fn open(&mut self) -> Result<Connection, LinkError> {
        let mut port = serialport::new(&self.0.path, self.0.baud)
            .data_bits(DataBits::Eight)
            .parity(Parity::None)
            .stop_bits(StopBits::One)
            .flow_control(FlowControl::None)
            .timeout(POLL)
            .open()
            .map_err(|error| self.explain(error))?;
        // Many USB boards are silent until someone raises this line. A port without modem
        // lines, such as a pseudo-terminal, says so, and works all the same.
        if let Err(error) = port.write_data_terminal_ready(true) {
            tracing::debug!("port {} has no DTR line: {error}", self.0.path);
        }
        // What was said before this host listened is of no session of its.
        if let Err(error) = port.clear(ClearBuffer::All) {
            tracing::debug!("port {} keeps its buffers: {error}", self.0.path);
        }
        let writer = port.try_clone().map_err(|error| self.explain(error))?;
        Ok(Connection {
            reader: Box::new(Reader(port)),
            writer: Box::new(Writer(writer)),
        })
    }
}

impl SerialOpener {
    fn explain(&self, error: serialport::Error) -> LinkError {
        let name = self.name();
        let reason = error.description;
        match error.kind {
            ErrorKind::NoDevice => LinkError::InUse { name, reason },
            ErrorKind::Io(io::ErrorKind::NotFound) => LinkError::Absent { name },
            ErrorKind::Io(io::ErrorKind::PermissionDenied) => LinkError::Denied { name },
            ErrorKind::Io(_) | ErrorKind::InvalidInput | ErrorKind::Unknown => {
                LinkError::Open { name, reason }
            }
        }
    }
}

struct Reader(Box<dyn SerialPort>);

impl Read for Reader {
    fn read(&mut self, bytes: &mut [u8]) -> io::Result<usize> {
        self.0.read(bytes)
    }
}

struct Writer(Box<dyn SerialPort>);

impl Write for Writer {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.0.write(bytes)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.0.flush()
    }
}

impl PortWriter for Writer {
    fn discard_unsent(&mut self) {
        if let Err(error) = self.0.clear(ClearBuffer::Output) {
            tracing::debug!("unsent bytes stay: {error}");
        }
    }
}
