//! Who is let in.
//!
//! - The `Host` must be a name of this machine: a page that has its own name point here (DNS
//!   rebinding) is refused.
//! - An `Origin`, which browsers send with everything that has an effect, must be the daemon's
//!   own: no other page in the user's browser drives a sink.
//! - Where there are tokens, one is needed; what only looks on needs less than what acts.
//!
//! The page and the health check hold nothing worth protecting and need no token, so that a
//! phone can load the page and then ask for one.

use std::net::IpAddr;
use std::sync::Arc;
use std::time::Duration;

use axum::extract::{Request, State};
use axum::http::{HeaderMap, Method, header};
use axum::middleware::Next;
use axum::response::Response;
use tokio::time::timeout;

use super::page;
use crate::app::App;
use crate::config::Scope;
use crate::view::{Code, Problem};

/// How long a request may take, bar the event stream.
const REQUEST_MAX: Duration = Duration::from_secs(120);

/// Lets a request in, or not.
pub(super) async fn admit(
    State(app): State<Arc<App>>,
    request: Request,
    next: Next,
) -> Result<Response, Problem> {
    let headers = request.headers();
    let host = host_of(&request)?;
    is_ours(&app, host)?;
    is_same_origin(headers, host)?;
    has_token(&app, &request)?;
    Ok(next.run(request).await)
}

/// Ends a request that takes too long.
pub(super) async fn bound_time(request: Request, next: Next) -> Result<Response, Problem> {
    // The response of the event stream comes at once; its body has its own bounds.
    timeout(REQUEST_MAX, next.run(request)).await.map_err(|_| {
        let most = REQUEST_MAX.as_secs();
        Problem::new(Code::TooSlow, format!("no answer after {most} s"))
    })
}

/// The host that a request is meant for, with its port.
fn host_of(request: &Request) -> Result<&str, Problem> {
    let from_header = request
        .headers()
        .get(header::HOST)
        .and_then(|value| value.to_str().ok());
    from_header
        .or_else(|| {
            request
                .uri()
                .authority()
                .map(axum::http::uri::Authority::as_str)
        })
        .ok_or_else(|| Problem::new(Code::HostRefused, "the request names no Host"))
}

fn is_ours(app: &App, host: &str) -> Result<(), Problem> {
    let name = without_port(host);
    let is_loopback = name.eq_ignore_ascii_case("localhost")
        || name
            .parse::<IpAddr>()
            .is_ok_and(|address| address.to_canonical().is_loopback());
    let is_named = app
        .host_names
        .iter()
        .any(|known| known.eq_ignore_ascii_case(name));
    if is_loopback || is_named {
        return Ok(());
    }
    let detail = format!(
        "`{name}` is no name of this daemon; use 127.0.0.1, or name it when the daemon is started"
    );
    Err(Problem::new(Code::HostRefused, detail))
}

/// The name or address of a host, without its port and without an IPv6 address's brackets.
fn without_port(host: &str) -> &str {
    if let Some(rest) = host.strip_prefix('[') {
        return rest.split(']').next().unwrap_or_default();
    }
    match host.rsplit_once(':') {
        // More than one colon without brackets: an IPv6 address without a port.
        Some((name, _)) if !name.contains(':') => name,
        Some(_) | None => host,
    }
}

fn is_same_origin(headers: &HeaderMap, host: &str) -> Result<(), Problem> {
    let refuse = |what: String| Err(Problem::new(Code::OriginRefused, what));
    if let Some(origin) = headers.get(header::ORIGIN) {
        let origin = origin.to_str().unwrap_or_default();
        let authority = origin
            .strip_prefix("http://")
            .or_else(|| origin.strip_prefix("https://"));
        if !authority.is_some_and(|authority| authority.eq_ignore_ascii_case(host)) {
            return refuse(format!("the page is of `{origin}`, not of this daemon"));
        }
    }
    let site = headers
        .get("sec-fetch-site")
        .map(|value| value.to_str().unwrap_or_default());
    match site {
        None | Some("same-origin" | "none") => Ok(()),
        Some(other) => refuse(format!("the request is {other}, not of this daemon's page")),
    }
}

fn has_token(app: &App, request: &Request) -> Result<(), Problem> {
    let Some(tokens) = &app.tokens else {
        return Ok(());
    };
    let path = request.uri().path();
    if page::is_page(path) || path == "/health" {
        return Ok(());
    }
    let token = request
        .headers()
        .get(header::AUTHORIZATION)
        .and_then(|value| value.to_str().ok())
        .and_then(|value| value.strip_prefix("Bearer "))
        .unwrap_or_default();
    let needed = match *request.method() {
        Method::GET | Method::HEAD | Method::OPTIONS => Scope::Read,
        _ => Scope::Operate,
    };
    match tokens.scope_of(token) {
        Some(scope) if scope >= needed => Ok(()),
        Some(_) => {
            let detail = "the token allows to look on; use one of the scope `operate`";
            Err(Problem::new(Code::ScopeTooSmall, detail))
        }
        None => {
            let detail =
                "send Authorization: Bearer TOKEN, with a token of the daemon's token file";
            Err(Problem::new(Code::TokenNeeded, detail))
        }
    }
}

#[cfg(test)]
mod tests;
