//! What is taken out of a request, and how what cannot be is refused.

use std::time::Duration;

use axum::body::{Bytes, to_bytes};
use axum::extract::{FromRequest, FromRequestParts, Query, Request};
use axum::http::request::Parts;
use axum::http::{HeaderMap, header};
use serde::de::DeserializeOwned;
use tokio::time::timeout;
use uuid::Uuid;

use crate::view::{Code, Problem};

/// Largest body: a sequence with measured profiles.
const BODY_BYTES_MAX: usize = 64 << 20;
/// How long a body may take to come in.
const BODY_WAIT: Duration = Duration::from_secs(60);

/// A body declared as JSON, not parsed yet: parsing megabytes is for a thread of its own.
pub(super) struct JsonBytes(pub(super) Bytes);

impl<S: Send + Sync> FromRequest<S> for JsonBytes {
    type Rejection = Problem;

    async fn from_request(request: Request, _state: &S) -> Result<Self, Problem> {
        let (parts, body) = request.into_parts();
        if !is_json(&parts.headers) {
            let detail = "send Content-Type: application/json; a form on a web page cannot";
            return Err(Problem::new(Code::NotJson, detail));
        }
        match timeout(BODY_WAIT, to_bytes(body, BODY_BYTES_MAX)).await {
            Ok(Ok(bytes)) => Ok(Self(bytes)),
            Ok(Err(error)) => {
                let detail = format!("{error}; {BODY_BYTES_MAX} bytes are the most");
                Err(Problem::new(Code::TooLarge, detail))
            }
            Err(_) => {
                let most = BODY_WAIT.as_secs();
                let detail = format!("the body had not come in after {most} s");
                Err(Problem::new(Code::TooSlow, detail))
            }
        }
    }
}

impl JsonBytes {
    /// Parses the body. Not for a thread that answers others.
    pub(super) fn parse<T: DeserializeOwned>(&self) -> Result<T, Problem> {
        serde_json::from_slice(&self.0)
            .map_err(|error| Problem::new(Code::BodyUnreadable, error.to_string()))
    }
}

fn is_json(headers: &HeaderMap) -> bool {
    let declared = headers
        .get(header::CONTENT_TYPE)
        .and_then(|value| value.to_str().ok())
        .unwrap_or_default();
    let media_type = declared.split(';').next().unwrap_or_default().trim();
    media_type.eq_ignore_ascii_case("application/json")
}

/// The query.
pub(super) struct Params<T>(pub(super) T);

impl<T: DeserializeOwned, S: Send + Sync> FromRequestParts<S> for Params<T> {
    type Rejection = Problem;

    async fn from_request_parts(parts: &mut Parts, _state: &S) -> Result<Self, Problem> {
        Query::try_from_uri(&parts.uri)
            .map(|Query(params)| Self(params))
            .map_err(|error| Problem::new(Code::QueryUnreadable, error.body_text()))
    }
}

/// An id from a path.
pub(super) fn id_of(text: &str, code: Code) -> Result<Uuid, Problem> {
    Uuid::parse_str(text).map_err(|_| Problem::new(code, format!("`{text}` is no id")))
}

/// What a client would rather have.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Media {
    /// JSON.
    Json,
    /// Comma-separated values.
    Csv,
    /// A Parquet file.
    Parquet,
}

/// The best of what a client accepts (RFC 9110, 12.5.1); JSON where it does not say.
pub(super) fn accepted(headers: &HeaderMap) -> Result<Media, Problem> {
    let Some(value) = headers.get(header::ACCEPT) else {
        return Ok(Media::Json);
    };
    let text = value.to_str().unwrap_or_default();
    let mut best: Option<(u32, Media)> = None;
    for range in text.split(',') {
        let mut parts = range.split(';').map(str::trim);
        let media = match parts
            .next()
            .unwrap_or_default()
            .to_ascii_lowercase()
            .as_str()
        {
            "application/json" | "application/*" | "*/*" => Media::Json,
            "text/csv" | "text/*" => Media::Csv,
            columnar::MEDIA_TYPE => Media::Parquet,
            _ => continue,
        };
        let weight = parts
            .find_map(|part| part.strip_prefix("q="))
            .map_or(Some(1.0), |q| q.parse::<f64>().ok());
        let weight = thousandths(weight.unwrap_or(0.0));
        if weight > 0 && best.is_none_or(|(most, _)| weight > most) {
            best = Some((weight, media));
        }
    }
    best.map(|(_, media)| media).ok_or_else(|| {
        let detail = format!(
            "`{text}` is accepted; application/json, text/csv and {} can be given",
            columnar::MEDIA_TYPE
        );
        Problem::new(Code::NotAcceptable, detail)
    })
}

#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "held between 0 and 1000 before the cast"
)]
fn thousandths(weight: f64) -> u32 {
    (weight.clamp(0.0, 1.0) * 1000.0) as u32
}

#[cfg(test)]
mod tests;
