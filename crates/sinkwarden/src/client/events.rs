//! The event stream, followed over breaks: after each it is resumed where it stood.

use std::io::BufReader;
use std::thread;
use std::time::Duration;

use daemon::view::EventBody;
use serde_json::{Value, json};
use ureq::BodyReader;

use super::stream::{Received, Stream};
use super::{Client, RequestError};

/// How long after a break the daemon is tried again.
const TRY_AGAIN: Duration = Duration::from_secs(1);

/// What is heard from the stream.
#[derive(Debug)]
pub(crate) enum Heard {
    /// The stream stands, from the beginning or again; what happened before it is to be asked
    /// for.
    Standing,
    /// The daemon cannot be reached for now.
    Broken(RequestError),
    /// Something happened.
    Event(Box<EventBody>),
}

/// The events of a daemon.
pub(crate) struct Events {
    client: Client,
    stream: Option<Stream<BufReader<BodyReader<'static>>>>,
    last: Option<String>,
    told_broken: bool,
}

impl Events {
    /// Opens the stream.
    ///
    /// # Errors
    /// [`RequestError`] if the daemon cannot be reached or refuses.
    pub(crate) fn open(client: &Client) -> Result<Self, RequestError> {
        let mut events = Self {
            client: client.clone(),
            stream: None,
            last: None,
            told_broken: false,
        };
        events.connect()?;
        Ok(events)
    }

    fn connect(&mut self) -> Result<(), RequestError> {
        let response = self.client.open_stream(self.last.as_deref())?;
        let reader = BufReader::new(response.into_body().into_reader());
        self.stream = Some(Stream::new(reader));
        self.told_broken = false;
        Ok(())
    }

    /// Waits for what is next. Never ends: a daemon that is gone is tried again and again, and
    /// that it is gone is told once.
    pub(crate) fn next(&mut self) -> Heard {
        loop {
            let Some(stream) = &mut self.stream else {
                match self.connect() {
                    Ok(()) => return Heard::Standing,
                    Err(error) if !self.told_broken => {
                        self.told_broken = true;
                        return Heard::Broken(error);
                    }
                    Err(_) => {
                        pause();
                        continue;
                    }
                }
            };
            match stream.next() {
                Ok(Some(received)) => {
                    if received.id.is_some() {
                        self.last.clone_from(&received.id);
                    }
                    if let Some(event) = event_of(&received) {
                        return Heard::Event(Box::new(event));
                    }
                }
                // Ended, timed out, broken: all of these are resumed in the same way.
                Ok(None) | Err(_) => self.stream = None,
            }
        }
    }
}

/// The event, if its kind is known; newer daemons may tell more.
fn event_of(received: &Received) -> Option<EventBody> {
    let data: Value = serde_json::from_str(&received.data).ok()?;
    serde_json::from_value(json!({ "event": received.name, "data": data })).ok()
}

#[expect(
    clippy::disallowed_methods,
    reason = "the command line waits for a daemon to come back and has nothing else to do"
)]
fn pause() {
    thread::sleep(TRY_AGAIN);
}
