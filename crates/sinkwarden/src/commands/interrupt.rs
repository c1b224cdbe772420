//! Ctrl-C while a run is followed: it stops the run, not just the display.
//!
//! The first asks the daemon to stop the run, whose end is then followed as any other. The second
//! leaves. A Ctrl-C before the daemon has answered the start waits for the run's id.

use std::process;
use std::sync::{Arc, Mutex, PoisonError};
use std::thread;

use anyhow::{Context as _, Result};
use daemon::view::{Code, RunView};
use tokio::runtime::Builder;
use uuid::Uuid;

use crate::client::{Client, RequestError};
use crate::output::tell;

/// What is known when Ctrl-C comes.
#[derive(Debug, Default)]
struct State {
    run: Option<Uuid>,
    asked: bool,
}

/// The watch for Ctrl-C.
pub(super) struct Interrupt {
    state: Arc<Mutex<State>>,
    client: Client,
    sink: String,
}

impl Interrupt {
    /// Begins to watch.
    ///
    /// # Errors
    /// What the operating system says.
    pub(super) fn watch(client: &Client, sink: &str) -> Result<Self> {
        let runtime = Builder::new_current_thread()
            .enable_all()
            .build()
            .context("cannot watch for Ctrl-C")?;
        let interrupt = Self {
            state: Arc::default(),
            client: client.clone(),
            sink: sink.to_owned(),
        };
        let (state, client, sink) = (
            Arc::clone(&interrupt.state),
            client.clone(),
            sink.to_owned(),
        );
        thread::Builder::new()
            .name("interrupt".to_owned())
            .spawn(move || {
                while runtime.block_on(tokio::signal::ctrl_c()).is_ok() {
                    interrupted(&state, &client, &sink);
                }
            })
            .context("cannot watch for Ctrl-C")?;
        Ok(interrupt)
    }

    /// The run that Ctrl-C is to stop; stops it now if Ctrl-C has been pressed already.
    pub(super) fn run_is(&self, id: Uuid) {
        let asked = {
            let mut state = self.state.lock().unwrap_or_else(PoisonError::into_inner);
            state.run = Some(id);
            state.asked
        };
        if asked {
            stop(&self.client, &self.sink, id);
        }
    }
}

fn interrupted(state: &Mutex<State>, client: &Client, sink: &str) {
    let (run, again) = {
        let mut state = state.lock().unwrap_or_else(PoisonError::into_inner);
        let again = state.asked;
        state.asked = true;
        (state.run, again)
    };
    if again {
        tell(format_args!(
            "left before the run was seen to end\nhint: sinkwarden off {sink}, and look at the sink"
        ));
        process::exit(1);
    }
    match run {
        Some(id) => stop(client, sink, id),
        None => tell("stopping the run as soon as it has an id; Ctrl-C again leaves"),
    }
}

fn stop(client: &Client, sink: &str, id: Uuid) {
    tell("asking the daemon to stop the run; Ctrl-C again leaves");
    match client.post::<RunView>(&format!("/v1/runs/{id}/stop")) {
        Ok(_) => {}
        // It ended just before: the follower says how.
        Err(RequestError::Refused(problem)) if problem.code == Code::NotRunning => {}
        Err(error) => tell(format_args!(
            "error: the run was not stopped: {error}\nhint: sinkwarden off {sink}, or open the switch in series with the device under test"
        )),
    }
}
