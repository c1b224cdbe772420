//! Telling a person: a program of the user's, started with an event on its standard input.
//!
//! One at a time, bounded in number and in time; a program that fails or hangs is logged and
//! ended, and nothing waits for it.

use std::io::Write as _;
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::mpsc::{self, Receiver, SyncSender, TrySendError};
use std::thread;
use std::time::Duration;

use crate::error::DaemonError;
use crate::view::RunEvent;

/// Messages that may wait.
const WAITING_MAX: usize = 32;
/// How long the program may take.
const PROGRAM_MAX: Duration = Duration::from_secs(20);
/// How often it is looked whether it has ended.
const LOOK: Duration = Duration::from_millis(50);

/// The way to a person.
#[derive(Debug, Clone)]
pub(crate) struct Notifier {
    waiting: Option<SyncSender<RunEvent>>,
}

impl Notifier {
    /// Starts the thread that starts the program; without a program nothing is done.
    pub(crate) fn start(command: Option<Vec<String>>) -> Result<Self, DaemonError> {
        let Some(command) = command.filter(|command| !command.is_empty()) else {
            return Ok(Self { waiting: None });
        };
        let (waiting, inbox) = mpsc::sync_channel(WAITING_MAX);
        thread::Builder::new()
            .name("notify".into())
            .spawn(move || run(&command, &inbox))
            .map_err(|source| DaemonError::System {
                what: "a thread to notify people",
                source,
            })?;
        Ok(Self {
            waiting: Some(waiting),
        })
    }

    /// Tells of an event. Never waits; more than can wait are dropped and logged.
    pub(crate) fn tell(&self, event: &RunEvent) {
        let Some(waiting) = &self.waiting else { return };
        match waiting.try_send(event.clone()) {
            Ok(()) => {}
            Err(TrySendError::Full(_)) => {
                tracing::error!(
                    "{WAITING_MAX} notifications wait already, this one is dropped: {}",
                    event.message
                );
            }
            Err(TrySendError::Disconnected(_)) => {
                tracing::error!("nobody can be notified any more: {}", event.message);
            }
        }
    }
}

fn run(command: &[String], inbox: &Receiver<RunEvent>) {
    for event in inbox {
        if let Err(trouble) = tell(command, &event) {
            tracing::error!("notifying of \"{}\" failed: {trouble}", event.message);
        }
    }
}

fn tell(command: &[String], event: &RunEvent) -> Result<(), String> {
    let (program, arguments) = command.split_first().ok_or("there is no program")?;
    let mut text = serde_json::to_string(event).map_err(|error| error.to_string())?;
    text.push('\n');
    let mut child = Command::new(program)
        .args(arguments)
        .stdin(Stdio::piped())
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .spawn()
        .map_err(|error| format!("cannot start {program}: {error}"))?;
    if let Some(mut input) = child.stdin.take() {
        // A pipe holds far more than one event: this does not wait for the program. One that
        // reads nothing need not.
        let _ = input.write_all(text.as_bytes());
    }
    match wait(&mut child) {
        Some(status) if status.success() => Ok(()),
        Some(status) => Err(format!("{program} says {status}")),
        None => {
            // It has had its time; whether it can be ended is for the operating system to say.
            let _ = child.kill();
            let _ = child.wait();
            let most = PROGRAM_MAX.as_secs();
            Err(format!(
                "{program} had not ended after {most} s and was ended"
            ))
        }
    }
}

/// How the program ended; `None` if it has not in time.
#[expect(
    clippy::disallowed_methods,
    reason = "a thread of its own waits for the program here, and for nothing else"
)]
fn wait(child: &mut Child) -> Option<ExitStatus> {
    let mut left = PROGRAM_MAX;
    loop {
        match child.try_wait() {
            Ok(Some(status)) => return Some(status),
            // What cannot be asked cannot be waited for.
            Err(_) => return None,
            Ok(None) if left.is_zero() => return None,
            Ok(None) => {
                thread::sleep(LOOK);
                left = left.saturating_sub(LOOK);
            }
        }
    }
}
