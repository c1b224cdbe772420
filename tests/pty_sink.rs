//! A sink on a pseudo-terminal: the firmware's own logic before a simulated source, in real time.

use std::io::{ErrorKind, Read as _, Write as _};
use std::path::PathBuf;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, MutexGuard};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

use quantity::Span;
use serialport::{SerialPort as _, TTYPort};
use simulator::device::{SimulatedSink, SinkParts};

use crate::pty;

/// How long the sink's thread waits for bytes before it moves time on.
const STRIDE: Duration = Duration::from_millis(1);

/// A running sink. Dropping it pulls the cable.
pub struct PtySink {
    path: PathBuf,
    shared: Arc<Shared>,
    thread: Option<JoinHandle<()>>,
}

struct Shared {
    device: Mutex<SimulatedSink>,
    /// Everything the host ever sent, as lines.
    heard: Mutex<Vec<u8>>,
    stop: AtomicBool,
}

impl PtySink {
    /// Powers a sink and puts it on a new pseudo-terminal.
    ///
    /// # Panics
    /// If the system has no pseudo-terminal or the parts make no sink: a test cannot go on.
    #[expect(
        clippy::unwrap_used,
        reason = "a test that cannot set up its sink has failed"
    )]
    pub fn start(parts: SinkParts) -> Self {
        let (mut master, slave) = pty::pair().unwrap();
        let path = PathBuf::from(slave.name().unwrap());
        drop(slave);
        master.set_timeout(STRIDE).unwrap();
        let shared = Arc::new(Shared {
            device: Mutex::new(SimulatedSink::new(parts).unwrap()),
            heard: Mutex::default(),
            stop: AtomicBool::new(false),
        });
        let for_thread = Arc::clone(&shared);
        let thread = std::thread::spawn(move || run(master, &for_thread));
        Self {
            path,
            shared,
            thread: Some(thread),
        }
    }

    /// The terminal's path, as a bench file names it.
    pub fn path(&self) -> &std::path::Path {
        &self.path
    }

    /// The true current now, ampere.
    pub fn current_a(&self) -> f64 {
        lock(&self.shared.device).current_a()
    }

    /// What the source truly gave so far, coulomb.
    pub fn charge_c(&self) -> f64 {
        lock(&self.shared.device).truth().charge_c
    }

    /// Every whole line the host ever sent.
    pub fn heard(&self) -> Vec<String> {
        let heard = lock(&self.shared.heard);
        let text = String::from_utf8_lossy(&heard);
        text.lines().map(str::to_owned).collect()
    }

    /// Waits until the true current meets a condition; says how long it took.
    ///
    /// # Panics
    /// If it does not within `at_most`.
    pub fn wait_for_current(&self, at_most: Duration, meets: impl Fn(f64) -> bool) -> Duration {
        self.wait_for(at_most, |sink| meets(sink.current_a()))
    }

    /// Waits until the source has given so much charge.
    ///
    /// # Panics
    /// If it does not within `at_most`.
    pub fn wait_for_charge(&self, at_most: Duration, coulombs: f64) {
        self.wait_for(at_most, |sink| sink.charge_c() >= coulombs);
    }

    #[expect(
        clippy::disallowed_methods,
        reason = "real time is what is tested here"
    )]
    fn wait_for(&self, at_most: Duration, meets: impl Fn(&Self) -> bool) -> Duration {
        let begun = Instant::now();
        while !meets(self) {
            assert!(
                begun.elapsed() < at_most,
                "after {at_most:?} the current is {} A and the charge {} C",
                self.current_a(),
                self.charge_c()
            );
            std::thread::sleep(STRIDE);
        }
        begun.elapsed()
    }
}

impl Drop for PtySink {
    fn drop(&mut self) {
        self.shared.stop.store(true, Ordering::Relaxed);
        if let Some(thread) = self.thread.take() {
            let _ = thread.join();
        }
    }
}

/// Moves the sink's time along with real time; carries bytes both ways.
#[expect(
    clippy::disallowed_methods,
    reason = "real time is what is tested here"
)]
fn run(mut master: TTYPort, shared: &Shared) {
    let begun = Instant::now();
    let mut inbound = [0_u8; 1024];
    let mut outbound = Vec::new();
    while !shared.stop.load(Ordering::Relaxed) {
        let received = match master.read(&mut inbound) {
            Ok(count) => count,
            Err(error) if error.kind() == ErrorKind::TimedOut => 0,
            // Nobody has the terminal open: a real sink would not notice.
            Err(_) => {
                std::thread::sleep(STRIDE);
                0
            }
        };
        let elapsed = u64::try_from(begun.elapsed().as_micros()).unwrap_or(u64::MAX);
        outbound.clear();
        {
            let mut device = lock(&shared.device);
            device.advance(Span::from_micros(elapsed), &mut outbound);
            if let Some(bytes) = inbound.get(..received)
                && received > 0
            {
                lock(&shared.heard).extend_from_slice(bytes);
                device.receive(bytes);
            }
        }
        let _ = master.write_all(&outbound);
    }
}

fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    mutex
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner)
}
