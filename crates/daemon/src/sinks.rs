//! The sinks of the bench, as everyone but their workers sees them.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicI64, Ordering};
use std::time::Duration;

use quantity::HostTime;
use sequence::{Calibration, Facts};
use serde_json::Value;
use sink::bench::SinkEntry;
use sink::calibration::Certificate;
use sink::correction::Correction;
use tokio::sync::{oneshot, watch};
use tokio::time::timeout;
use transport::port::{CommandRefused, Commands, HostClock};
use wire::Description;

use crate::view::{Code, LinkState, OffView, Problem, SinkView};
use crate::worker::{Ask, Reservation, Snapshot};

/// How long `off` waits for the sink's word before it answers with what is known.
const OFF_WAIT: Duration = Duration::from_secs(1);

/// A sink, as everyone but its worker sees it.
#[derive(Debug)]
pub(crate) struct SinkHandle {
    /// Its entry in the bench file.
    pub(crate) entry: SinkEntry,
    /// Its calibration.
    pub(crate) correction: Correction,
    /// Its certificate, for the record.
    pub(crate) certificate: Option<Value>,
    /// The same.
    pub(crate) certified: Option<Arc<Certificate>>,
    /// The way to its worker.
    pub(crate) commands: Commands<Ask>,
    /// What its worker shows.
    pub(crate) snapshot: watch::Receiver<Arc<Snapshot>>,
    /// Whether someone has the right to run on it.
    pub(crate) reserved: Arc<AtomicBool>,
    /// The time of a simulated sink's link.
    pub(crate) virtual_time: Arc<AtomicI64>,
    /// The host's clock.
    pub(crate) clock: HostClock,
}

impl SinkHandle {
    /// Its name.
    pub(crate) fn name(&self) -> &str {
        &self.entry.name
    }

    /// What its worker last showed.
    pub(crate) fn view(&self) -> SinkView {
        self.snapshot.borrow().view.clone()
    }

    /// The time on its link.
    pub(crate) fn now(&self) -> HostTime {
        if self.entry.link.is_simulated() {
            HostTime::from_micros(self.virtual_time.load(Ordering::Relaxed))
        } else {
            self.clock.now()
        }
    }

    /// The right to run on it, if nobody has it.
    pub(crate) fn reserve(&self) -> Option<Reservation> {
        Reservation::take(&self.reserved)
    }

    /// What the compiler must know of it: the bench file's words, and over them its own.
    pub(crate) fn facts(&self) -> Facts {
        let facts = Facts::of(&self.entry, self.correction);
        match self.snapshot.borrow().description {
            Some(description) => with_own_words(facts, &description),
            None => facts,
        }
    }

    /// What stands behind its readings now.
    pub(crate) fn calibration(&self) -> Calibration {
        let now_unix_s = self.now().micros().div_euclid(1_000_000);
        Calibration::of(self.certified.as_deref(), now_unix_s)
    }

    /// Waits until a session stands, but no longer than that.
    pub(crate) async fn wait_for_session(&self, most: Duration) -> bool {
        let mut snapshot = self.snapshot.clone();
        let stands = snapshot.wait_for(|now| now.view.link.state == LinkState::Connected);
        matches!(timeout(most, stands).await, Ok(Ok(_)))
    }

    /// Gives the worker something to do.
    pub(crate) fn give(&self, ask: Ask) -> Result<(), Problem> {
        self.commands.give(ask).map_err(|refused| {
            let detail = format!("sink `{}`: {refused}", self.name());
            match refused {
                CommandRefused::Ended => Problem::new(Code::WorkerEnded, detail),
                CommandRefused::Full => Problem::new(Code::SinkBusy, detail),
            }
        })
    }

    /// Turns it off and tells what became of it.
    pub(crate) async fn off(&self) -> OffView {
        let asked = self.clock.now();
        let (answer, answered) = oneshot::channel();
        let trouble = match self.commands.give(Ask::Off(answer)) {
            Err(refused) => Some(refused.to_string()),
            Ok(()) => match timeout(OFF_WAIT, answered).await {
                Ok(Ok(())) => None,
                Ok(Err(_)) => Some("the sink's worker has ended".to_owned()),
                Err(_) => Some("the sink has not answered within 1 s".to_owned()),
            },
        };
        OffView {
            sink: self.name().to_owned(),
            acknowledged: trouble.is_none(),
            took_s: self.clock.now().saturating_since(asked).seconds(),
            detail: trouble.map(|trouble| self.off_detail(&trouble)),
        }
    }

    /// What is known of a sink that has not said that it is off.
    fn off_detail(&self, trouble: &str) -> String {
        let link = self.view().link;
        let state = match link.state {
            LinkState::Connected | LinkState::Greeting => "the link is open and `off` is repeated",
            LinkState::Lost => "the link is lost, and `off` is sent as soon as it is back",
            LinkState::Refused => "another sink than the one described is on the link",
        };
        let deadman = self.entry.deadman;
        format!(
            "{trouble}; {state}; a sink that hears nothing turns itself off, within {deadman} in a run; if in doubt, cut the circuit by hand"
        )
    }
}

fn with_own_words(mut facts: Facts, own: &Description) -> Facts {
    facts.tick = own.tick;
    facts.queue = own.queue;
    facts.readback_fastest = facts.readback_fastest.max(own.fastest_readback);
    facts.holds_power = own.abilities.power;
    facts.holds_resistance = own.abilities.resistance;
    facts.burst_samples = if own.abilities.burst { own.burst } else { 0 };
    facts
}
