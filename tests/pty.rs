//! Pseudo-terminals that no child process inherits.
//!
//! `TTYPort::pair` gives descriptors that every process started later keeps open: an unplugged
//! cable would then stay plugged in as far as the daemon can see, since it holds the far side
//! itself. Copies that are closed on `exec` mend that, but for a process that another test
//! starts in between; so pairs are made, and processes started, one at a time.

use std::io;
use std::sync::{Mutex, MutexGuard, PoisonError};

use serialport::TTYPort;

static ALONE: Mutex<()> = Mutex::new(());

/// While this is held no pair is being made; to be held where a process is started.
pub fn alone() -> MutexGuard<'static, ()> {
    ALONE.lock().unwrap_or_else(PoisonError::into_inner)
}

/// A pair, master and slave.
///
/// # Errors
/// The operating system's, if it gives no pseudo-terminal.
pub fn pair() -> io::Result<(TTYPort, TTYPort)> {
    let _alone = alone();
    let (master, slave) = TTYPort::pair().map_err(io::Error::other)?;
    let closing = |port: &TTYPort| port.try_clone_native().map_err(io::Error::other);
    Ok((closing(&master)?, closing(&slave)?))
}
