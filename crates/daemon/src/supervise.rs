//! The process: everything started in order, everything ended in order.
//!
//! Start: the records folder is taken, open records are dealt with, then each sink gets its
//! worker, then the interface is opened. End: every sink is told `off` first; then runs are
//! closed, records sealed, the interface closed. None of it takes longer than five seconds.

use std::net::SocketAddr;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicI64};
use std::thread::{self, JoinHandle};
use std::time::Duration;

use quantity::{HostTime, Span};
use run::KeeperConfig;
use run::keeper::Keeper;
use sequencer::event::Interlock;
use sink::bench::SinkEntry;
use sink::leads::two_wire_resistance;
use tokio::net::TcpListener;
use tokio::runtime::{Builder, Runtime};
use tokio::sync::watch;
use transport::port::HostClock;

use crate::app::{App, Bounds};
use crate::by_hand::Hands;
use crate::calibrating::Calibrations;
use crate::calibration::{self, Calibration};
use crate::certificates::Certificates;
use crate::config::Config;
use crate::context::Context;
use crate::error::DaemonError;
use crate::http;
use crate::keys::Keys;
use crate::latches;
use crate::notify::Notifier;
use crate::records::Records;
use crate::recovery::{Resumption, recover};
use crate::sinks::SinkHandle;
use crate::sketch::Sketches;
use crate::worker::{self, Ask, Begin, Face, Snapshot, Worker, WorkerParts};

/// How long workers may take to end.
const WORKERS_MAX: Span = Span::from_millis(3_000);
/// How long records may take to be sealed after that.
const SEALING_MAX: Span = Span::from_millis(1_500);
/// How long requests may take to end after that.
const REQUESTS_MAX: Duration = Duration::from_millis(200);
/// How often it is looked whether something has ended.
const LOOK: Duration = Duration::from_millis(5);
/// Threads that answer requests; none of them does anything slow.
const ANSWERING_THREADS: usize = 2;
/// Threads for what is slow.
const SLOW_THREADS: usize = 16;

/// A daemon that is at work.
///
/// Dropped without [`Daemon::stop`], its workers go on until the process ends.
#[derive(Debug)]
pub struct Daemon {
    address: SocketAddr,
    app: Arc<App>,
    workers: Vec<JoinHandle<()>>,
    ending: watch::Sender<bool>,
    runtime: Runtime,
}

/// Serves a bench until the process is told to end (SIGINT or SIGTERM); `ready` is told the
/// address once it can be asked.
///
/// # Errors
/// [`DaemonError`] if it cannot start.
pub fn serve(config: Config, ready: impl FnOnce(SocketAddr)) -> Result<(), DaemonError> {
    let daemon = Daemon::start(config)?;
    ready(daemon.address());
    daemon.wait_for_signal()?;
    daemon.stop();
    Ok(())
}

impl Daemon {
    /// Starts to serve a bench.
    ///
    /// # Errors
    /// [`DaemonError`] if something it needs is not there.
    pub fn start(config: Config) -> Result<Self, DaemonError> {
        config.check()?;
        let clock = HostClock::start();
        let now = clock.now();
        let records = Records::take(&config.records)?;
        let keys = Keys::open(&config.records, std::time::UNIX_EPOCH + since_1970(now)).map_err(
            |source| DaemonError::Records {
                path: config.records.clone(),
                source,
            },
        )?;
        let notifier = Notifier::start(config.notify.clone())?;
        let context = Arc::new(Context::new(since_1970(now).as_secs(), notifier));
        let is_ours = |name: &str| config.bench.sink(name).is_some();
        let mut resumptions = recover(&records, is_ours, &context, now);

        let runtime = runtime()?;
        let listener = listen(&runtime, config.listen)?;
        let address = listener
            .local_addr()
            .map_err(|source| DaemonError::Listen {
                listen: config.listen,
                source,
            })?;
        let mut sinks = Vec::new();
        let mut workers = Vec::new();
        for entry in &config.bench.sinks {
            let place = resumptions.iter().position(|one| one.sink == entry.name);
            let resumption = place.map(|place| resumptions.swap_remove(place));
            let tripped_by = latches::latched_by(&records, &entry.name);
            let (handle, worker) =
                start_sink(entry, &config, &context, clock, resumption, tripped_by)?;
            sinks.push(handle);
            workers.push(worker);
        }
        let (ending, ended) = watch::channel(false);
        let app = Arc::new(App {
            bench: config.bench.name.clone(),
            host: host_name(),
            software: format!("sinkwarden {}", env!("CARGO_PKG_VERSION")),
            sinks,
            records,
            sketches: Sketches::default(),
            keys,
            hands: Hands::default(),
            calibrations: Calibrations::default(),
            certificates: Certificates::beside(&config.bench_path),
            context,
            clock,
            tokens: config.tokens,
            host_names: config.host_names,
            ending: ended.clone(),
            bounds: Bounds::new(),
        });
        let router = http::router(Arc::clone(&app));
        runtime.spawn(http::serving::serve(listener, router, ended));
        tracing::info!("listening on http://{address}");
        Ok(Self {
            address,
            app,
            workers,
            ending,
            runtime,
        })
    }

    /// Where it listens.
    pub fn address(&self) -> SocketAddr {
        self.address
    }

    /// Turns every sink off, ends runs as stopped, seals their records, and ends.
    pub fn stop(self) {
        for sink in &self.app.sinks {
            if let Err(refused) = sink.commands.give(Ask::End) {
                tracing::error!("sink `{}`: {refused}", sink.name());
            }
        }
        self.ending.send_replace(true);
        let all_ended = || self.workers.iter().all(JoinHandle::is_finished);
        if !self.wait_until(all_ended, WORKERS_MAX) {
            tracing::error!("a sink's worker has not ended; its sink's deadman turns it off");
        }
        let sealed = || !self.app.context.is_finishing();
        if !self.wait_until(sealed, SEALING_MAX) {
            tracing::warn!("a record is not sealed yet; it is when the daemon starts again");
        }
        self.runtime.shutdown_timeout(REQUESTS_MAX);
    }

    fn wait_for_signal(&self) -> Result<(), DaemonError> {
        let told = self.runtime.block_on(told_to_end());
        told.map_err(|source| DaemonError::System {
            what: "a signal handler",
            source,
        })
    }

    #[expect(
        clippy::disallowed_methods,
        reason = "the thread that ends the process has nothing else to do"
    )]
    fn wait_until(&self, is_so: impl Fn() -> bool, most: Span) -> bool {
        let latest = self.app.clock.now().saturating_add(most);
        while !is_so() {
            if self.app.clock.now() >= latest {
                return false;
            }
            thread::sleep(LOOK);
        }
        true
    }
}

#[cfg(unix)]
async fn told_to_end() -> std::io::Result<()> {
    use tokio::signal::unix::{SignalKind, signal};
    let mut terminate = signal(SignalKind::terminate())?;
    let mut interrupt = signal(SignalKind::interrupt())?;
    let mut hang_up = signal(SignalKind::hangup())?;
    tokio::select! {
        _ = terminate.recv() => {}
        _ = interrupt.recv() => {}
        _ = hang_up.recv() => {}
    }
    Ok(())
}

#[cfg(not(unix))]
async fn told_to_end() -> std::io::Result<()> {
    tokio::signal::ctrl_c().await
}

fn runtime() -> Result<Runtime, DaemonError> {
    Builder::new_multi_thread()
        .worker_threads(ANSWERING_THREADS)
        .max_blocking_threads(SLOW_THREADS)
        .thread_name("http")
        .enable_all()
        .build()
        .map_err(|source| DaemonError::System {
            what: "threads to answer requests",
            source,
        })
}

fn listen(runtime: &Runtime, listen: SocketAddr) -> Result<TcpListener, DaemonError> {
    runtime
        .block_on(TcpListener::bind(listen))
        .map_err(|source| DaemonError::Listen { listen, source })
}

/// Starts the worker of a sink, with the run to be taken up, if there is one.
fn start_sink(
    entry: &SinkEntry,
    config: &Config,
    context: &Arc<Context>,
    clock: HostClock,
    resumption: Option<Resumption>,
    tripped_by: Option<Interlock>,
) -> Result<(SinkHandle, JoinHandle<()>), DaemonError> {
    let Calibration {
        correction,
        value: certificate,
        certificate: certified,
    } = calibration::load(entry, &config.bench_path)?;
    // Leads in no table are told by the check of every sequence.
    let leads = two_wire_resistance(entry).unwrap_or_default();
    let correction = correction.with_leads(leads);
    let keeper_config = KeeperConfig::for_sink(entry).map_err(|error| DaemonError::Sink {
        sink: entry.name.clone(),
        reason: error.to_string(),
    })?;
    let not_before = resumption.as_ref().map(|run| run.at);
    let link = worker::open(entry, config.time_factor, not_before)?;
    let face = Face::new(entry, link.time_factor, certificate.is_some());
    let begun = link.link.now();
    let (view, snapshot) = watch::channel(Arc::new(Snapshot {
        view: face.view(begun),
        description: None,
    }));
    let virtual_time = Arc::new(AtomicI64::new(begun.micros()));
    let reserved = Arc::new(AtomicBool::new(false));
    let handle = SinkHandle {
        entry: entry.clone(),
        correction,
        certificate,
        certified,
        commands: link.commands.clone(),
        snapshot,
        reserved,
        virtual_time: Arc::clone(&virtual_time),
        clock,
    };
    if let Some(resumption) = resumption {
        take_up(&handle, resumption);
    }
    let worker = Worker::new(WorkerParts {
        face,
        keeper: Keeper::new(keeper_config, session_number(begun)),
        link,
        correction,
        free_bytes_min: entry
            .interlocks
            .record
            .free_space_mb
            .saturating_mul(1_000_000),
        tripped_by,
        view,
        time: virtual_time,
        context: Arc::clone(context),
    });
    let thread = thread::Builder::new()
        .name(format!("sink-{}", entry.name))
        .spawn(move || worker.run())
        .map_err(|source| DaemonError::System {
            what: "a thread for a sink",
            source,
        })?;
    Ok((handle, thread))
}

/// The worker's first command: to go on with a run.
fn take_up(sink: &SinkHandle, resumption: Resumption) {
    let Some(reservation) = sink.reserve() else {
        return;
    };
    let begin = Begin {
        id: resumption.id,
        folder: resumption.folder,
        plan: resumption.plan,
        sequencer: resumption.sequencer,
        writer: resumption.writer,
        started: resumption.started,
        resumed: true,
        reservation,
        answer: None,
    };
    if let Err(refused) = sink.commands.give(Ask::Begin(Box::new(begin))) {
        tracing::error!("sink `{}`: the run is not taken up: {refused}", sink.name());
    }
}

/// A session number that the sink has not met before: tenths of a second on the calendar, which
/// come round after thirteen years.
fn session_number(now: HostTime) -> u32 {
    let tenths = now
        .micros()
        .div_euclid(100_000)
        .rem_euclid(i64::from(u32::MAX));
    u32::try_from(tenths).unwrap_or(1).max(1)
}

fn since_1970(now: HostTime) -> Duration {
    Duration::from_micros(now.saturating_since(HostTime::ZERO).micros())
}

/// The name of this host, as records have it; `unknown` where the system does not say.
pub fn host_name() -> String {
    std::fs::read_to_string("/proc/sys/kernel/hostname")
        .ok()
        .map(|name| name.trim().to_owned())
        .or_else(|| std::env::var("COMPUTERNAME").ok())
        .or_else(|| std::env::var("HOSTNAME").ok())
        .filter(|name| !name.is_empty())
        .unwrap_or_else(|| "unknown".to_owned())
}
