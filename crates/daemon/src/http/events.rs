//! The event stream (server-sent events).
//!
//! A viewer has its own place in the log and takes what comes after it as fast as it reads: a
//! slow one lags, a dead one ends with its connection, and neither is waited for.

use std::collections::VecDeque;
use std::convert::Infallible;
use std::sync::Arc;
use std::time::Duration;

use axum::extract::State;
use axum::http::HeaderMap;
use axum::response::sse::{Event, KeepAlive, Sse};
use futures_util::stream::{self, Stream};
use serde::Deserialize;
use tokio::sync::{OwnedSemaphorePermit, watch};
use utoipa::IntoParams;

use super::extract::Params;
use crate::app::App;
use crate::events::{EventLog, Place, Written};
use crate::view::{Code, EventBody, Problem};

/// Events that a viewer takes at once.
const BATCH: usize = 64;
/// A comment keeps an idle stream open through whatever is in between.
const KEEP_ALIVE: Duration = Duration::from_secs(15);
/// How long a browser waits before it connects again.
const RETRY: Duration = Duration::from_secs(1);

/// From where on.
#[derive(Debug, Deserialize, IntoParams)]
#[serde(deny_unknown_fields)]
#[into_params(parameter_in = Query)]
pub(super) struct From {
    /// As the `Last-Event-ID` header, for clients that cannot send one.
    last_event_id: Option<u64>,
}

/// What happens on the bench, as server-sent events: `sink` (a state and readback, some five a
/// second), `run`, `link`. With `Last-Event-ID` the stream goes on after that event; if some are
/// no longer held, the first event is `gone`. Without, it begins with every sink as it is now.
#[utoipa::path(
    get, path = "/v1/events", tag = "events",
    params(From, ("Last-Event-ID" = Option<u64>, Header, description = "The last event received")),
    responses(
        (status = 200, content_type = "text/event-stream", body = String),
        (status = 503, body = Problem),
    ),
)]
pub(super) async fn stream(
    State(app): State<Arc<App>>,
    Params(from): Params<From>,
    headers: HeaderMap,
) -> Result<Sse<impl Stream<Item = Result<Event, Infallible>>>, Problem> {
    let Ok(permit) = Arc::clone(&app.bounds.viewers).try_acquire_owned() else {
        let detail = "close other pages, or try again later";
        return Err(Problem::new(Code::TooManyViewers, detail));
    };
    let last = match headers.get("last-event-id") {
        None => from.last_event_id,
        Some(value) => {
            let number = value.to_str().ok().and_then(|text| text.parse().ok());
            Some(number.ok_or_else(|| {
                let detail = "Last-Event-ID is the number of an event";
                Problem::new(Code::QueryUnreadable, detail)
            })?)
        }
    };
    let viewer = Viewer::new(&app, last, permit);
    let events = stream::unfold(viewer, |mut viewer| async move {
        let event = viewer.next().await?;
        Some((Ok(event), viewer))
    });
    Ok(Sse::new(events).keep_alive(KeepAlive::new().interval(KEEP_ALIVE)))
}

/// One viewer of the log.
struct Viewer {
    log: EventLog,
    latest: watch::Receiver<u64>,
    ending: watch::Receiver<bool>,
    place: Place,
    waiting: VecDeque<Written>,
    told_retry: bool,
    _permit: OwnedSemaphorePermit,
}

impl Viewer {
    fn new(app: &App, last: Option<u64>, permit: OwnedSemaphorePermit) -> Self {
        let log = app.context.events.clone();
        let latest = log.watch();
        let after = last.unwrap_or_else(|| log.latest());
        let waiting = match last {
            Some(_) => VecDeque::new(),
            None => now(app, after),
        };
        Self {
            latest,
            ending: app.ending.clone(),
            place: Place::after(after),
            log,
            waiting,
            told_retry: false,
            _permit: permit,
        }
    }

    /// The next event, when there is one; `None` when the daemon ends.
    async fn next(&mut self) -> Option<Event> {
        loop {
            if let Some(event) = self.waiting.pop_front() {
                return Some(self.sent(&event));
            }
            self.latest.mark_unchanged();
            self.waiting = self.log.take(&mut self.place, BATCH).into();
            if !self.waiting.is_empty() {
                continue;
            }
            tokio::select! {
                changed = self.latest.changed() => changed.ok()?,
                ended = self.ending.wait_for(|ending| *ending) => {
                    // Whether told or because nobody can tell any more.
                    drop(ended);
                    return None;
                }
            }
        }
    }

    fn sent(&mut self, event: &Written) -> Event {
        let sent = Event::default()
            .id(event.id.to_string())
            .event(event.name)
            .data(&event.data);
        if self.told_retry {
            return sent;
        }
        self.told_retry = true;
        sent.retry(RETRY)
    }
}

/// Every sink as it is now, as events at the viewer's place.
fn now(app: &App, at: u64) -> VecDeque<Written> {
    let views = app
        .sinks
        .iter()
        .map(|sink| EventBody::Sink(Box::new(sink.view())));
    views.filter_map(|body| Written::new(at, &body)).collect()
}
