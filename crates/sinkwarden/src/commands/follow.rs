//! A run followed to its end over the event stream, through breaks of it.

use anyhow::Result;
use daemon::view::{
    Code, EventBody, RecordSummary, RecordView, RunEvent, RunNews, RunState, RunView,
};
use quantity::{HostTime, Span};
use transport::port::HostClock;

use crate::client::{Client, Events, Heard, RequestError};
use crate::print;
use crate::progress::Progress;

/// How long after its end the record is waited for.
const SEALING_MAX: Span = Span::from_secs(20);

/// What became of a run.
pub(super) enum Followed {
    /// It ended while the daemon looked on.
    Ended(Box<RunView>),
    /// The daemon was started anew and knows only the record.
    RecordOnly(Box<RecordSummary>),
}

/// Follows a run until it has ended and its record is complete.
///
/// # Errors
/// [`RequestError`] that does not pass.
pub(super) fn follow(client: &Client, run: &RunView) -> Result<Followed> {
    let mut progress = Progress::towards(seconds(run.expected_s));
    let mut events = Events::open(client)?;
    let clock = HostClock::start();
    let mut ended_at: Option<HostTime> = None;
    // The stream stands: whatever happened before it is in the answer to this.
    let mut must_ask = true;
    loop {
        let is_late =
            ended_at.is_some_and(|ended| clock.now().saturating_since(ended) >= SEALING_MAX);
        if must_ask || is_late {
            match ask(client, run)? {
                Some(Followed::Ended(view)) if view.state != RunState::Ended => {}
                Some(Followed::Ended(view)) if !view.sealed && !is_late => {
                    ended_at.get_or_insert(clock.now());
                }
                Some(followed) => {
                    progress.finish();
                    return Ok(followed);
                }
                None => {}
            }
            must_ask = false;
        }
        match events.next() {
            Heard::Standing => must_ask = true,
            Heard::Broken(error) => progress.note(format_args!(
                "{error}; the run goes on without us, trying again"
            )),
            Heard::Event(event) => match *event {
                EventBody::Sink(view) => {
                    if let Some(now) = view.run.filter(|now| now.id == run.id) {
                        progress.at(seconds(now.elapsed_s), print::progress_of(&now));
                    }
                }
                EventBody::Run(news) if news.run == run.id => {
                    tell_news(&progress, &news);
                    match news.news {
                        RunNews::Ended(_) => {
                            ended_at.get_or_insert(clock.now());
                        }
                        RunNews::Recorded { .. } => must_ask = true,
                        RunNews::Began
                        | RunNews::Resumed
                        | RunNews::Step { .. }
                        | RunNews::Crossed(_)
                        | RunNews::Held
                        | RunNews::Continued
                        | RunNews::Finding => {}
                    }
                }
                EventBody::Gone(_) => must_ask = true,
                EventBody::Run(_) | EventBody::Link(_) => {}
            },
        }
    }
}

/// Asks how the run stands; `None` if the daemon cannot be reached just now.
fn ask(client: &Client, run: &RunView) -> Result<Option<Followed>> {
    match client.get::<RunView>(&format!("/v1/runs/{}", run.id)) {
        Ok(view) => Ok(Some(Followed::Ended(Box::new(view)))),
        Err(RequestError::Unreached { .. }) => Ok(None),
        Err(RequestError::Refused(problem)) if problem.code == Code::NoSuchRun => {
            let record: RecordView = client.get(&format!("/v1/records/{}", run.id))?;
            Ok(Some(Followed::RecordOnly(Box::new(record.summary))))
        }
        Err(error) => Err(error.into()),
    }
}

/// Tells what a person wants to know at once; steps show in the line that is kept up to date.
fn tell_news(progress: &Progress, event: &RunEvent) {
    let is_worth_a_line = match &event.news {
        RunNews::Resumed | RunNews::Crossed(_) | RunNews::Held | RunNews::Continued => true,
        RunNews::Began
        | RunNews::Step { .. }
        | RunNews::Finding
        | RunNews::Ended(_)
        | RunNews::Recorded { .. } => false,
    };
    if is_worth_a_line || event.calls_for_person {
        progress.note(format_args!("{}  {}", event.at, event.message));
    }
}

#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "a float cast saturates, and a bar is no measurement"
)]
fn seconds(seconds: f64) -> u64 {
    seconds.max(0.0).round() as u64
}
