//! A cable for tests: a pseudo-terminal on one side, a sink on the other, and whatever can happen
//! to a cable in between.
//!
//! The host opens [`Bridge::path`] like any serial port. The sink is a process or an emulator
//! behind a socket. Bytes are paced to a baud rate; a seed decides which are lost, damaged,
//! repeated or late. The cable can be pulled and plugged again under the same path, and the sink
//! can be taken away and another put in its place while the host goes on writing.
//!
//! Invariants:
//! - Bytes keep their order, as on any wire.
//! - Unplugging loses what was under way; taking the sink away does not: the pseudo-terminal
//!   keeps what the host writes, and the next sink gets it.
//! - All chance comes from the seed. When bytes come is the operating system's affair, so a run
//!   is alike and not the same.
//!
//! What it deliberately does not do: know the protocol.

use std::fs;
use std::io::{self, ErrorKind, Read, Write};
use std::net::TcpStream;
use std::os::unix::fs::symlink;
use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread::{self, JoinHandle};
use std::time::{Duration, Instant};

use serialport::{SerialPort, TTYPort};

use crate::pty;

/// How long a pump waits for bytes before it looks whether it should end.
const GLANCE: Duration = Duration::from_millis(20);

/// How far a pump that was not woken in time may catch up.
const LAG: Duration = Duration::from_millis(500);

/// Bits on the line for each byte: start, eight, stop.
const BITS_A_BYTE: u64 = 10;

/// Bytes moved at once: some ten milliseconds at 115200 baud.
const PIECE: usize = 128;

/// What happens to bytes in either direction, in parts of a million of the bytes.
#[derive(Debug, Clone, Copy, Default)]
pub struct Faults {
    /// Bytes lost.
    pub drop_ppm: u32,
    /// Bytes with a bit turned.
    pub corrupt_ppm: u32,
    /// Bytes that come twice.
    pub duplicate_ppm: u32,
    /// Bytes before which the line stands still.
    pub stall_ppm: u32,
    /// The longest such stall.
    pub stall_most: Duration,
}

/// The sink's end.
#[derive(Debug)]
pub enum Far {
    /// A process or emulator behind a local socket.
    Local(UnixStream),
    /// One behind a network port.
    Network(TcpStream),
}

impl Far {
    fn try_clone(&self) -> io::Result<Self> {
        Ok(match self {
            Self::Local(stream) => Self::Local(stream.try_clone()?),
            Self::Network(stream) => Self::Network(stream.try_clone()?),
        })
    }

    fn set_read_timeout(&self, timeout: Duration) -> io::Result<()> {
        match self {
            Self::Local(stream) => stream.set_read_timeout(Some(timeout)),
            Self::Network(stream) => stream.set_read_timeout(Some(timeout)),
        }
    }
}

impl Read for Far {
    fn read(&mut self, bytes: &mut [u8]) -> io::Result<usize> {
        match self {
            Self::Local(stream) => stream.read(bytes),
            Self::Network(stream) => stream.read(bytes),
        }
    }
}

impl Write for Far {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        match self {
            Self::Local(stream) => stream.write(bytes),
            Self::Network(stream) => stream.write(bytes),
        }
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

/// Two threads that move bytes until told to stop.
#[derive(Debug)]
struct Pumps {
    stop: Arc<AtomicBool>,
    threads: [JoinHandle<()>; 2],
}

impl Pumps {
    fn end(self) {
        self.stop.store(true, Ordering::Relaxed);
        for thread in self.threads {
            let _ = thread.join();
        }
    }
}

/// The near end: both sides of a pseudo-terminal. Its slave side is held open here as well, so
/// that a host that closes it finds it as it was.
#[derive(Debug)]
struct Near {
    master: TTYPort,
    slave: TTYPort,
}

/// The cable.
#[derive(Debug)]
pub struct Bridge {
    path: PathBuf,
    near: Option<Near>,
    far: Option<Far>,
    pumps: Option<Pumps>,
    baud: u32,
    faults: Faults,
    seed: u64,
}

impl Bridge {
    /// A cable whose near end appears under `path`, with nothing at its far end yet.
    ///
    /// # Errors
    /// The operating system's, if it gives no pseudo-terminal.
    pub fn new(path: &Path, baud: u32, faults: Faults, seed: u64) -> io::Result<Self> {
        let mut bridge = Self {
            path: path.to_owned(),
            near: None,
            far: None,
            pumps: None,
            baud,
            faults,
            seed,
        };
        bridge.plug()?;
        Ok(bridge)
    }

    /// What the host opens.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// Puts a sink at the far end, in place of any that was there.
    ///
    /// # Errors
    /// The operating system's.
    pub fn attach(&mut self, far: Far) -> io::Result<()> {
        self.detach();
        far.set_read_timeout(GLANCE)?;
        self.far = Some(far);
        self.start()
    }

    /// Takes the sink away; the near end stays, and takes what the host writes.
    pub fn detach(&mut self) {
        self.rest();
        self.far = None;
    }

    /// From here on the bytes fare differently.
    ///
    /// # Errors
    /// The operating system's.
    pub fn set_faults(&mut self, faults: Faults) -> io::Result<()> {
        self.rest();
        self.faults = faults;
        self.start()
    }

    /// Pulls the cable on the host's side.
    pub fn unplug(&mut self) {
        self.rest();
        let _ = fs::remove_file(&self.path);
        self.near = None;
    }

    /// Plugs it in again, under the same path. What the sink said meanwhile is lost.
    ///
    /// # Errors
    /// The operating system's, if it gives no pseudo-terminal.
    pub fn plug(&mut self) -> io::Result<()> {
        self.rest();
        let (mut master, slave) = pty::pair()?;
        master.set_timeout(GLANCE).map_err(io::Error::other)?;
        let name = slave
            .name()
            .ok_or_else(|| io::Error::other("a pseudo-terminal without a name"))?;
        let _ = fs::remove_file(&self.path);
        symlink(name, &self.path)?;
        self.near = Some(Near { master, slave });
        if let Some(far) = &mut self.far {
            let mut lost = [0; 4096];
            while matches!(far.read(&mut lost), Ok(1..)) {}
        }
        self.start()
    }

    /// Lets another host open the port that one has opened for itself alone and closed.
    ///
    /// # Errors
    /// The operating system's.
    pub fn let_go(&mut self) -> io::Result<()> {
        match &mut self.near {
            Some(near) => near.slave.set_exclusive(false).map_err(io::Error::other),
            None => Ok(()),
        }
    }

    fn rest(&mut self) {
        if let Some(pumps) = self.pumps.take() {
            pumps.end();
        }
    }

    fn start(&mut self) -> io::Result<()> {
        let (Some(near), Some(far)) = (&self.near, &self.far) else {
            return Ok(());
        };
        let clone = || near.master.try_clone_native().map_err(io::Error::other);
        let stop = Arc::new(AtomicBool::new(false));
        self.seed = self.seed.wrapping_add(1);
        let pump = |chance: u64| Pump {
            stop: Arc::clone(&stop),
            baud: self.baud,
            faults: self.faults,
            free_at: now(),
            chance: Chance(self.seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) ^ chance | 1),
        };
        let (outward, inward) = (pump(1), pump(1 << 33));
        let (near_in, near_out) = (clone()?, clone()?);
        let (far_in, far_out) = (far.try_clone()?, far.try_clone()?);
        self.pumps = Some(Pumps {
            stop,
            threads: [
                thread::spawn(move || outward.run(near_in, far_out)),
                thread::spawn(move || inward.run(far_in, near_out)),
            ],
        });
        Ok(())
    }
}

impl Drop for Bridge {
    fn drop(&mut self) {
        self.rest();
        let _ = fs::remove_file(&self.path);
    }
}

/// Moves bytes one way.
struct Pump {
    stop: Arc<AtomicBool>,
    baud: u32,
    faults: Faults,
    /// When the last byte taken has passed.
    free_at: Instant,
    chance: Chance,
}

impl Pump {
    fn run(mut self, mut from: impl Read, mut to: impl Write) {
        let mut piece = [0; PIECE];
        while !self.stop.load(Ordering::Relaxed) {
            match from.read(&mut piece) {
                Ok(0) => wait(GLANCE),
                Ok(length) => {
                    let bytes = piece.get(..length).unwrap_or_default();
                    if !self.carry(bytes, &mut to) {
                        return;
                    }
                }
                Err(error) if idle(&error) => {}
                // A terminal that nobody has open, or a sink that died: there may be another.
                Err(_) => wait(GLANCE),
            }
        }
    }

    /// Takes the time that the bytes take on the line. False when the far side is gone.
    fn carry(&mut self, bytes: &[u8], to: &mut impl Write) -> bool {
        let micros = bytes.len() as u64 * BITS_A_BYTE * 1_000_000 / u64::from(self.baud.max(1));
        let now = now();
        // A pump that was not woken in time catches up: the line itself did not stand still.
        self.free_at = self.free_at.max(now.checked_sub(LAG).unwrap_or(now));
        self.free_at += Duration::from_micros(micros);
        wait(self.free_at.saturating_duration_since(now));
        let mut out = Vec::with_capacity(bytes.len() + 2);
        for byte in bytes {
            self.pass(*byte, &mut out);
        }
        let mut rest = out.as_slice();
        while !rest.is_empty() && !self.stop.load(Ordering::Relaxed) {
            match to.write(rest) {
                Ok(written) => rest = rest.get(written..).unwrap_or_default(),
                Err(error) if idle(&error) => {}
                Err(_) => return false,
            }
        }
        true
    }

    fn pass(&mut self, byte: u8, out: &mut Vec<u8>) {
        let faults = self.faults;
        if self.chance.falls(faults.stall_ppm) {
            let most = u64::try_from(faults.stall_most.as_micros()).unwrap_or(u64::MAX);
            wait(Duration::from_micros(self.chance.below(most)));
        }
        if self.chance.falls(faults.drop_ppm) {
            return;
        }
        let byte = if self.chance.falls(faults.corrupt_ppm) {
            byte ^ (1 << self.chance.below(8))
        } else {
            byte
        };
        out.push(byte);
        if self.chance.falls(faults.duplicate_ppm) {
            out.push(byte);
        }
    }
}

fn idle(error: &io::Error) -> bool {
    matches!(
        error.kind(),
        ErrorKind::TimedOut | ErrorKind::WouldBlock | ErrorKind::Interrupted
    )
}

#[expect(
    clippy::disallowed_methods,
    reason = "a cable takes the time that bytes take"
)]
fn wait(span: Duration) {
    thread::sleep(span);
}

#[expect(clippy::disallowed_methods, reason = "pacing is by the clock")]
fn now() -> Instant {
    Instant::now()
}

/// Marsaglia's xorshift64: small, seeded, good enough to choose bytes (Journal of Statistical
/// Software 8(14), 2003).
struct Chance(u64);

impl Chance {
    fn next(&mut self) -> u64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        self.0
    }

    fn below(&mut self, most: u64) -> u64 {
        (self.next() >> 11) % most.max(1)
    }

    fn falls(&mut self, ppm: u32) -> bool {
        ppm > 0 && self.below(1_000_000) < u64::from(ppm)
    }
}
