//! What stands between a sink that is held by hand and a program that may die.
//!
//! The setpoint is asked for again as long as this program lives and waits for its user; Ctrl-C
//! turns the sink off and ends the program. A program that is killed asks no more, and the sink
//! goes off by itself when its interval is over.

use std::process;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread;
use std::time::Duration;

use anyhow::{Context as _, Result};
use daemon::view::{Code, OffView, RunView};
use quantity::Span;
use tokio::runtime::Builder;
use uuid::Uuid;

use crate::client::{Client, RequestError};
use crate::output::tell;

/// The exit code of a run that was stopped.
const STOPPED: i32 = 4;

/// Asks for the setpoint again until it is dropped.
pub(super) struct Guard {
    over: Arc<AtomicBool>,
    renewing: Option<thread::JoinHandle<()>>,
}

/// Begins to watch for Ctrl-C, before anything flows.
///
/// # Errors
/// What the operating system says.
pub(super) fn off_on_interrupt(client: &Client, sink: &str) -> Result<()> {
    let runtime = Builder::new_current_thread()
        .enable_all()
        .build()
        .context("cannot watch for Ctrl-C")?;
    let (client, sink) = (client.clone(), sink.to_owned());
    thread::Builder::new()
        .name("interrupt".to_owned())
        .spawn(move || {
            if runtime.block_on(tokio::signal::ctrl_c()).is_err() {
                return;
            }
            process::exit(turn_off(&client, &sink, STOPPED));
        })
        .context("cannot watch for Ctrl-C")?;
    Ok(())
}

/// Turns the sink off and tells; the exit code to end with.
pub(super) fn turn_off(client: &Client, sink: &str, code: i32) -> i32 {
    match client.post::<OffView>(&format!("/v1/sinks/{sink}/off")) {
        Ok(off) if off.acknowledged => {
            tell(format_args!("\n{sink} is off; nothing was written"));
            code
        }
        Ok(off) => {
            tell(format_args!(
                "\nerror: {}",
                off.detail
                    .unwrap_or_else(|| format!("{sink} did not say that it is off"))
            ));
            1
        }
        Err(error) => {
            tell(format_args!(
                "\nerror: {error}\nhint: open the switch in series with the source by hand, then look at the sink"
            ));
            1
        }
    }
}

impl Guard {
    /// Begins to ask for the setpoint of a run again, three times within its interval.
    ///
    /// # Errors
    /// What the operating system says.
    pub(super) fn begin(client: &Client, id: Uuid, interval: Span) -> Result<Self> {
        let over = Arc::new(AtomicBool::new(false));
        let (client, told) = (client.clone(), Arc::clone(&over));
        let pause = Duration::from_micros(interval.micros() / 3);
        let renewing = thread::Builder::new()
            .name("renew".to_owned())
            .spawn(move || {
                while !told.load(Ordering::Relaxed) {
                    thread::park_timeout(pause);
                    if told.load(Ordering::Relaxed) {
                        return;
                    }
                    match client.post::<RunView>(&format!("/v1/runs/{id}/renew")) {
                        Ok(_) => {}
                        // Whoever works with it says so.
                        Err(RequestError::Refused(problem)) if problem.code == Code::NotRunning => {
                            return;
                        }
                        Err(error) => tell(format_args!("warning: not asked for again: {error}")),
                    }
                }
            })
            .context("cannot ask for the setpoint again")?;
        Ok(Self {
            over,
            renewing: Some(renewing),
        })
    }
}

impl Drop for Guard {
    fn drop(&mut self) {
        self.over.store(true, Ordering::Relaxed);
        if let Some(renewing) = self.renewing.take() {
            renewing.thread().unpark();
            // It had nothing else to do.
            let _ = renewing.join();
        }
    }
}
