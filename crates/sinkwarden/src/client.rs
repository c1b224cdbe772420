//! The daemon's HTTP interface, as the commands use it.
//!
//! Blocking, one request at a time. Answers are the daemon's own view types; a refusal is its
//! problem details with their stable code.

mod events;
mod request_error;
mod stream;

use std::fs;
use std::path::Path;
use std::time::Duration;

use anyhow::Result;
use serde::Serialize;
use serde::de::DeserializeOwned;
use ureq::http::Response;
use ureq::{Agent, Body};

use crate::arguments::DaemonAt;
use crate::exit::hinted;

pub(crate) use events::{Events, Heard};
pub(crate) use request_error::RequestError;

/// How long a connection may take to stand.
const CONNECT_MAX: Duration = Duration::from_secs(5);
/// How long an answer may take; a check of a large sequence takes a while on a small host.
const ANSWER_MAX: Duration = Duration::from_secs(60);
/// How long one reading of the event stream lasts before it is resumed: so a host that vanished
/// without a word is noticed, and nothing is missed.
const STREAM_MAX: Duration = Duration::from_secs(60);
/// Longest answer that is taken.
const ANSWER_BYTES_MAX: u64 = 64_000_000;

/// A daemon that can be asked.
#[derive(Debug, Clone)]
pub(crate) struct Client {
    agent: Agent,
    base: String,
    token: Option<String>,
}

impl DaemonAt {
    /// The daemon of these flags. Nothing is asked yet.
    ///
    /// # Errors
    /// An address that is none, a token file that cannot be read.
    pub(crate) fn client(&self) -> Result<Client> {
        let base = self.daemon.trim_end_matches('/');
        if !base.starts_with("http://") {
            return Err(hinted(
                format!("`{}` is no address of a daemon", self.daemon),
                "give --daemon as http://HOST:PORT",
            ));
        }
        let token = self.token_file.as_deref().map(read_token).transpose()?;
        let config = Agent::config_builder()
            .http_status_as_error(false)
            .timeout_connect(Some(CONNECT_MAX))
            // A bench is on this machine or beside it, never behind a proxy.
            .proxy(None)
            .build();
        Ok(Client {
            agent: config.into(),
            base: base.to_owned(),
            token,
        })
    }
}

/// The token of a file: the file's only word, or that of its `operate` line, or of its `read`.
fn read_token(path: &Path) -> Result<String> {
    let text = fs::read_to_string(path).map_err(|error| {
        hinted(
            format!("cannot read the token file {}: {error}", path.display()),
            "give --token-file a file with the daemon's token",
        )
    })?;
    token_of(&text).ok_or_else(|| {
        hinted(
            format!("the token file {} holds no token", path.display()),
            "write the token alone, or a line `operate TOKEN`",
        )
    })
}

fn token_of(text: &str) -> Option<String> {
    let lines = || {
        text.lines().map(|line| {
            let line = line.split('#').next().unwrap_or_default();
            line.split_whitespace().collect::<Vec<&str>>()
        })
    };
    let of_scope = |wanted: &str| {
        lines().find_map(|words| match words.as_slice() {
            [scope, token] if *scope == wanted => Some((*token).to_owned()),
            _ => None,
        })
    };
    let alone = || {
        lines().find_map(|words| match words.as_slice() {
            [token] => Some((*token).to_owned()),
            _ => None,
        })
    };
    of_scope("operate")
        .or_else(|| of_scope("read"))
        .or_else(alone)
}

impl Client {
    /// Where the daemon is.
    pub(crate) fn base(&self) -> &str {
        &self.base
    }

    /// Asks for a resource.
    ///
    /// # Errors
    /// [`RequestError`].
    pub(crate) fn get<T: DeserializeOwned>(&self, path: &str) -> Result<T, RequestError> {
        let mut request = self.agent.get(self.url(path));
        if let Some(bearer) = self.bearer() {
            request = request.header("Authorization", bearer);
        }
        let request = request.config().timeout_global(Some(ANSWER_MAX)).build();
        self.answer(request.call())
    }

    /// Asks for something to be done that needs no body.
    ///
    /// # Errors
    /// [`RequestError`].
    pub(crate) fn post<T: DeserializeOwned>(&self, path: &str) -> Result<T, RequestError> {
        let mut request = self.agent.post(self.url(path));
        if let Some(bearer) = self.bearer() {
            request = request.header("Authorization", bearer);
        }
        let request = request.config().timeout_global(Some(ANSWER_MAX)).build();
        self.answer(request.send_empty())
    }

    /// Starts something; the key makes repeating the request harmless.
    ///
    /// # Errors
    /// [`RequestError`].
    pub(crate) fn start<B: Serialize, T: DeserializeOwned>(
        &self,
        path: &str,
        body: &B,
        key: &str,
    ) -> Result<T, RequestError> {
        let mut request = self
            .agent
            .post(self.url(path))
            .header("Idempotency-Key", key);
        if let Some(bearer) = self.bearer() {
            request = request.header("Authorization", bearer);
        }
        let request = request.config().timeout_global(Some(ANSWER_MAX)).build();
        self.answer(request.send_json(body))
    }

    /// Opens the event stream, after the event with that number if one is given.
    fn open_stream(&self, last: Option<&str>) -> Result<Response<Body>, RequestError> {
        let mut request = self
            .agent
            .get(self.url("/v1/events"))
            .header("Accept", "text/event-stream");
        if let Some(last) = last {
            request = request.header("Last-Event-ID", last);
        }
        if let Some(bearer) = self.bearer() {
            request = request.header("Authorization", bearer);
        }
        let request = request.config().timeout_recv_body(Some(STREAM_MAX)).build();
        let response = self.reached(request.call())?;
        if response.status().is_success() {
            return Ok(response);
        }
        Err(self.refusal(response))
    }

    fn url(&self, path: &str) -> String {
        format!("{}{path}", self.base)
    }

    fn bearer(&self) -> Option<String> {
        self.token.as_ref().map(|token| format!("Bearer {token}"))
    }

    fn answer<T: DeserializeOwned>(
        &self,
        response: Result<Response<Body>, ureq::Error>,
    ) -> Result<T, RequestError> {
        let mut response = self.reached(response)?;
        if !response.status().is_success() {
            return Err(self.refusal(response));
        }
        let body = response.body_mut().with_config().limit(ANSWER_BYTES_MAX);
        body.read_json().map_err(|error| RequestError::Unreadable {
            base: self.base.clone(),
            reason: error.to_string(),
        })
    }

    fn reached(
        &self,
        response: Result<Response<Body>, ureq::Error>,
    ) -> Result<Response<Body>, RequestError> {
        response.map_err(|error| RequestError::Unreached {
            base: self.base.clone(),
            reason: error.to_string(),
        })
    }

    fn refusal(&self, mut response: Response<Body>) -> RequestError {
        let status = response.status();
        match response.body_mut().read_json() {
            Ok(problem) => RequestError::Refused(Box::new(problem)),
            Err(error) => RequestError::Unreadable {
                base: self.base.clone(),
                reason: format!("status {status}, {error}"),
            },
        }
    }
}

#[cfg(test)]
mod tests;
