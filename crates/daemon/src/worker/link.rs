//! From a bench entry to a link.

use std::num::NonZeroU32;

use quantity::{HostTime, Span};
use simulator::device::SimulatedSink;
use sink::bench::{self, SinkEntry};
use transport::port::{
    Commands, HostClock, Link, Pace, SerialConfig, VirtualDevice, VirtualLink, serial, tcp,
};

use super::Ask;
use crate::error::DaemonError;

/// A link and the way to command its worker.
pub(crate) struct LinkParts {
    /// The link.
    pub(crate) link: Box<dyn Link<Ask> + Send>,
    /// The way to command its worker.
    pub(crate) commands: Commands<Ask>,
    /// How much faster than real time it runs, if it is simulated.
    pub(crate) time_factor: Option<u32>,
}

/// Opens the link of a bench entry, in the background. A simulated sink's time begins no earlier
/// than `not_before`, so that a record that is taken up again does not go back in time.
pub(crate) fn open(
    entry: &SinkEntry,
    time_factor: Option<NonZeroU32>,
    not_before: Option<HostTime>,
) -> Result<LinkParts, DaemonError> {
    let clock = HostClock::start();
    match &entry.link {
        bench::Link::Serial { path, baud } => {
            let config = SerialConfig {
                path: path.display().to_string(),
                baud: *baud,
            };
            let (link, commands) = serial(config, clock);
            Ok(real(link, commands))
        }
        bench::Link::Tcp { address } => {
            let (link, commands) = tcp(address.clone(), clock);
            Ok(real(link, commands))
        }
        bench::Link::Simulated {
            time_factor: usual, ..
        } => {
            let factor = time_factor.unwrap_or(*usual).get();
            let device = simulator::simulated_sink(entry).map_err(|error| DaemonError::Sink {
                sink: entry.name.clone(),
                reason: error.to_string(),
            })?;
            let (link, commands) = VirtualLink::new(Simulated(device), Pace::Times(factor), clock);
            let link = match not_before {
                Some(earliest) => link.not_before(earliest),
                None => link,
            };
            Ok(LinkParts {
                link: Box::new(link),
                commands,
                time_factor: Some(factor),
            })
        }
    }
}

fn real(link: impl Link<Ask> + Send + 'static, commands: Commands<Ask>) -> LinkParts {
    LinkParts {
        link: Box::new(link),
        commands,
        time_factor: None,
    }
}

/// A simulated sink as what a virtual link drives.
struct Simulated(SimulatedSink);

impl VirtualDevice for Simulated {
    fn now(&self) -> Span {
        self.0.now()
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        self.0.advance_to_output(until, out);
    }

    fn receive(&mut self, bytes: &[u8]) {
        self.0.receive(bytes);
    }
}
