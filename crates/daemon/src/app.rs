//! Everything that a request may need.

use std::sync::Arc;

use tokio::sync::{Semaphore, watch};
use transport::port::HostClock;

use crate::by_hand::Hands;
use crate::calibrating::Calibrations;
use crate::certificates::Certificates;
use crate::config::Tokens;
use crate::context::Context;
use crate::keys::Keys;
use crate::records::Records;
use crate::sinks::SinkHandle;
use crate::sketch::Sketches;
use crate::view::{Code, Problem};

/// Rehearsals at once: one of two cores stays free for the sinks.
const REHEARSALS_MAX: usize = 1;
/// Reads of records at once.
const READERS_MAX: usize = 2;
/// Event streams at once.
const VIEWERS_MAX: usize = 64;

/// Everything that a request may need.
#[derive(Debug)]
pub(crate) struct App {
    /// The bench's name.
    pub(crate) bench: String,
    /// The name of this host.
    pub(crate) host: String,
    /// The name and version of the program.
    pub(crate) software: String,
    /// The sinks, in the order of the bench file.
    pub(crate) sinks: Vec<SinkHandle>,
    /// The records folder.
    pub(crate) records: Records,
    /// Sketches of records, for plots.
    pub(crate) sketches: Sketches,
    /// The idempotency keys.
    pub(crate) keys: Keys,
    /// What was asked for when each sink's latest run by hand began.
    pub(crate) hands: Hands,
    /// Calibrations under way.
    pub(crate) calibrations: Calibrations,
    /// The certificates beside the bench file.
    pub(crate) certificates: Certificates,
    /// What all share.
    pub(crate) context: Arc<Context>,
    /// The host's clock.
    pub(crate) clock: HostClock,
    /// Who may do what.
    pub(crate) tokens: Option<Tokens>,
    /// Names under which the daemon may be addressed.
    pub(crate) host_names: Vec<String>,
    /// Whether the daemon is ending.
    pub(crate) ending: watch::Receiver<bool>,
    /// What is bounded in number.
    pub(crate) bounds: Bounds,
}

/// What is bounded in number, so that no client takes what the sinks need.
#[derive(Debug)]
pub(crate) struct Bounds {
    /// Rehearsals.
    pub(crate) rehearsals: Arc<Semaphore>,
    /// Reads of records.
    pub(crate) readers: Arc<Semaphore>,
    /// Event streams.
    pub(crate) viewers: Arc<Semaphore>,
}

impl Bounds {
    /// All free.
    pub(crate) fn new() -> Self {
        Self {
            rehearsals: Arc::new(Semaphore::new(REHEARSALS_MAX)),
            readers: Arc::new(Semaphore::new(READERS_MAX)),
            viewers: Arc::new(Semaphore::new(VIEWERS_MAX)),
        }
    }
}

impl App {
    /// The sink of a name.
    pub(crate) fn sink(&self, name: &str) -> Result<&SinkHandle, Problem> {
        self.sinks
            .iter()
            .find(|sink| sink.name() == name)
            .ok_or_else(|| {
                let names: Vec<&str> = self.sinks.iter().map(SinkHandle::name).collect();
                let detail = format!(
                    "the bench `{}` has no sink `{name}`; it has {}",
                    self.bench,
                    names.join(", ")
                );
                Problem::new(Code::NoSuchSink, detail)
            })
    }
}
