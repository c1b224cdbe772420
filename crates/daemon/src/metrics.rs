//! Metrics in the Prometheus text format.
//!
//! Counted where things happen, read when asked; nothing here waits or decides.

use std::sync::atomic::AtomicU64;
use std::time::Duration;

use prometheus_client::encoding::{EncodeLabelSet, text};
use prometheus_client::metrics::counter::Counter;
use prometheus_client::metrics::family::Family;
use prometheus_client::metrics::gauge::Gauge;
use prometheus_client::metrics::histogram::{Histogram, exponential_buckets};
use prometheus_client::registry::{Registry, Unit};
use sequencer::event::Interlock;

use crate::view::{EndingWord, LinkState, MarginView, SinkView};

/// Bounds of the histogram of commits: 0.5 ms to 4 s.
const COMMIT_FIRST_S: f64 = 0.0005;
const COMMIT_BUCKETS: u16 = 14;

#[derive(Debug, Clone, PartialEq, Eq, Hash, EncodeLabelSet)]
struct OfSink {
    sink: String,
}

#[derive(Debug, Clone, PartialEq, Eq, Hash, EncodeLabelSet)]
struct OfInterlock {
    sink: String,
    interlock: String,
}

#[derive(Debug, Clone, PartialEq, Eq, Hash, EncodeLabelSet)]
struct OfEnding {
    sink: String,
    ending: &'static str,
}

type FloatGauge = Gauge<f64, AtomicU64>;

/// Every metric of a daemon.
#[derive(Debug)]
pub(crate) struct Metrics {
    registry: Registry,
    readbacks: Family<OfSink, Counter>,
    readbacks_lost: Family<OfSink, Counter>,
    retransmissions: Family<OfSink, Counter>,
    damaged_lines: Family<OfSink, Counter>,
    link_losses: Family<OfSink, Counter>,
    trips: Family<OfInterlock, Counter>,
    runs: Family<OfEnding, Counter>,
    commits: Family<OfSink, Histogram>,
    link_up: Family<OfSink, Gauge>,
    running: Family<OfSink, Gauge>,
    voltage: Family<OfSink, FloatGauge>,
    current: Family<OfSink, FloatGauge>,
    temperature: Family<OfSink, FloatGauge>,
    nearness: Family<OfInterlock, FloatGauge>,
}

impl Metrics {
    /// All at zero.
    pub(crate) fn new() -> Self {
        let mut metrics = Self {
            registry: Registry::with_prefix("sinkwarden"),
            readbacks: Family::default(),
            readbacks_lost: Family::default(),
            retransmissions: Family::default(),
            damaged_lines: Family::default(),
            link_losses: Family::default(),
            trips: Family::default(),
            runs: Family::default(),
            commits: Family::new_with_constructor(|| {
                Histogram::new(exponential_buckets(COMMIT_FIRST_S, 2.0, COMMIT_BUCKETS))
            }),
            link_up: Family::default(),
            running: Family::default(),
            voltage: Family::default(),
            current: Family::default(),
            temperature: Family::default(),
            nearness: Family::default(),
        };
        metrics.register();
        metrics
    }

    fn register(&mut self) {
        let all = &mut self.registry;
        all.register("readbacks", "Readbacks received", self.readbacks.clone());
        all.register(
            "readbacks_lost",
            "Readbacks lost on the way",
            self.readbacks_lost.clone(),
        );
        all.register(
            "retransmissions",
            "Orders sent again during runs",
            self.retransmissions.clone(),
        );
        all.register(
            "damaged_lines",
            "Lines that arrived damaged during runs",
            self.damaged_lines.clone(),
        );
        all.register(
            "link_losses",
            "Losses of the link",
            self.link_losses.clone(),
        );
        all.register("trips", "Interlocks that crossed", self.trips.clone());
        all.register("runs", "Runs that have ended", self.runs.clone());
        all.register_with_unit(
            "record_commit",
            "Time from an order's entry to its being on stable storage",
            Unit::Seconds,
            self.commits.clone(),
        );
        all.register(
            "link_up",
            "1 while a session stands with the sink",
            self.link_up.clone(),
        );
        all.register(
            "running",
            "1 while a run is in progress",
            self.running.clone(),
        );
        all.register_with_unit(
            "voltage",
            "Mean voltage of the latest readback",
            Unit::Volts,
            self.voltage.clone(),
        );
        all.register_with_unit(
            "current",
            "Mean current of the latest readback",
            Unit::Amperes,
            self.current.clone(),
        );
        all.register_with_unit(
            "heat_sink_temperature",
            "Heat sink temperature of the latest readback",
            Unit::Celsius,
            self.temperature.clone(),
        );
        all.register(
            "interlock_nearness",
            "How near an interlock is: 1 at its threshold",
            self.nearness.clone(),
        );
    }

    /// All of them as text.
    pub(crate) fn text(&self) -> String {
        let mut out = String::new();
        // Writing into a string fails only if a metric is broken, which a test would show.
        if let Err(error) = text::encode(&mut out, &self.registry) {
            tracing::error!("the metrics cannot be written: {error}");
        }
        out
    }

    /// The metrics of one sink.
    pub(crate) fn of_sink(&self, sink: &str) -> SinkMetrics {
        let label = OfSink {
            sink: sink.to_owned(),
        };
        SinkMetrics {
            readbacks: self.readbacks.get_or_create_owned(&label),
            readbacks_lost: self.readbacks_lost.get_or_create_owned(&label),
            retransmissions: self.retransmissions.get_or_create_owned(&label),
            damaged_lines: self.damaged_lines.get_or_create_owned(&label),
            link_losses: self.link_losses.get_or_create_owned(&label),
            commits: self.commits.get_or_create_owned(&label),
            link_up: self.link_up.get_or_create_owned(&label),
            running: self.running.get_or_create_owned(&label),
            trips: self.trips.clone(),
            runs: self.runs.clone(),
            voltage: self.voltage.clone(),
            current: self.current.clone(),
            temperature: self.temperature.clone(),
            nearness: self.nearness.clone(),
            sink: label.sink,
        }
    }
}

/// The metrics of one sink, for its worker.
#[derive(Debug)]
pub(crate) struct SinkMetrics {
    sink: String,
    pub(crate) readbacks: Counter,
    pub(crate) readbacks_lost: Counter,
    pub(crate) retransmissions: Counter,
    pub(crate) damaged_lines: Counter,
    pub(crate) link_losses: Counter,
    commits: Histogram,
    link_up: Gauge,
    running: Gauge,
    trips: Family<OfInterlock, Counter>,
    runs: Family<OfEnding, Counter>,
    voltage: Family<OfSink, FloatGauge>,
    current: Family<OfSink, FloatGauge>,
    temperature: Family<OfSink, FloatGauge>,
    nearness: Family<OfInterlock, FloatGauge>,
}

impl SinkMetrics {
    /// An order has reached the disk.
    pub(crate) fn committed(&self, took: Duration) {
        self.commits.observe(took.as_secs_f64());
    }

    /// An interlock has crossed.
    pub(crate) fn crossed(&self, interlock: Interlock) {
        self.trips
            .get_or_create(&self.of_interlock(interlock))
            .inc();
    }

    /// A run has ended.
    pub(crate) fn ended(&self, how: EndingWord) {
        let label = OfEnding {
            sink: self.sink.clone(),
            ending: how.text(),
        };
        self.runs.get_or_create(&label).inc();
    }

    /// How the sink stands.
    pub(crate) fn stands(&self, view: &SinkView) {
        let label = OfSink {
            sink: self.sink.clone(),
        };
        self.link_up
            .set(i64::from(view.link.state == LinkState::Connected));
        self.running.set(i64::from(view.run.is_some()));
        if let Some(reading) = &view.reading {
            self.voltage.get_or_create(&label).set(reading.voltage_v);
            self.current.get_or_create(&label).set(reading.current_a);
            match reading.temperature_degc {
                Some(value) => {
                    self.temperature.get_or_create(&label).set(value);
                }
                // A sensor that gives nothing must not go on showing its last value.
                None => {
                    self.temperature.remove(&label);
                }
            }
        }
        match &view.run {
            Some(run) => self.margins(&run.margins),
            None => {
                for interlock in Interlock::ALL {
                    self.nearness.remove(&self.of_interlock(interlock));
                }
            }
        }
    }

    fn of_interlock(&self, interlock: Interlock) -> OfInterlock {
        OfInterlock {
            sink: self.sink.clone(),
            interlock: word(&interlock),
        }
    }

    fn margins(&self, margins: &[MarginView]) {
        for margin in margins {
            let label = self.of_interlock(margin.interlock);
            self.nearness.get_or_create(&label).set(margin.nearness);
        }
    }
}

/// The word by which a value of an enumeration stands in JSON.
pub(crate) fn word(value: &impl serde::Serialize) -> String {
    match serde_json::to_value(value) {
        Ok(serde_json::Value::String(word)) => word,
        Ok(other) => other.to_string(),
        Err(_) => String::new(),
    }
}
