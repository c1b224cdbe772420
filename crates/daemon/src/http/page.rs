//! The page: the full one at `/` if it was built in, else the plain one.
//!
//! The full page is made from `web/` and taken in by `build.rs`; its files carry the hash of
//! their content in their names and are compressed already. The plain page needs no build, shows
//! the sinks and turns them off; it is always there, at `/plain`.
//!
//! Neither loads anything from elsewhere, and the policy that goes with them forbids it.

use std::sync::Arc;

use axum::Router;
use axum::body::Body;
use axum::extract::Path;
use axum::http::header;
use axum::http::{HeaderMap, HeaderValue, StatusCode, Uri};
use axum::response::Response;
use axum::routing::get;
use sha2::{Digest as _, Sha256};

use crate::app::App;
use crate::view::{Code, Problem};

/// What a page of ours may do: load from this daemon and talk to it, nothing inline, in no frame.
const POLICY: &str = "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self'; \
     font-src 'self'; connect-src 'self'; frame-ancestors 'none'; base-uri 'none'; \
     form-action 'none'";
/// A file whose name carries its hash never changes.
const FOR_EVER: &str = "public, max-age=31536000, immutable";
/// Anything else is asked for anew, and answered in short if it is the same.
const ASK_AGAIN: &str = "no-cache";

/// A file of the page.
struct File {
    name: &'static str,
    plain: &'static [u8],
    gzip: Option<&'static [u8]>,
    brotli: Option<&'static [u8]>,
}

/// The full page's files; none if it was not built in.
static FULL: &[File] = include!(concat!(env!("OUT_DIR"), "/page.rs"));

/// The plain page's files.
static PLAIN: &[File] = &[
    plain("plain", include_bytes!("page/plain.html")),
    plain("plain.css", include_bytes!("page/plain.css")),
    plain("plain.js", include_bytes!("page/plain.js")),
];

const fn plain(name: &'static str, bytes: &'static [u8]) -> File {
    File {
        name,
        plain: bytes,
        gzip: None,
        brotli: None,
    }
}

/// Where pages are served.
pub(super) fn routes() -> Router<Arc<App>> {
    Router::new()
        .route("/", get(first))
        .route("/page/{name}", get(full))
        .route("/plain", get(plain_page))
        .route("/plain.css", get(plain_page))
        .route("/plain.js", get(plain_page))
}

/// Whether a path is the page's own: it holds nothing worth a token.
pub(super) fn is_page(path: &str) -> bool {
    matches!(path, "/" | "/plain" | "/plain.css" | "/plain.js") || path.starts_with("/page/")
}

async fn first(headers: HeaderMap) -> Result<Response, Problem> {
    let index = FULL.iter().find(|file| file.name == "index.html");
    match index {
        Some(index) => Ok(index.answer(&headers, ASK_AGAIN)),
        None => named(PLAIN, "plain").map(|file| file.answer(&headers, ASK_AGAIN)),
    }
}

async fn full(Path(name): Path<String>, headers: HeaderMap) -> Result<Response, Problem> {
    named(FULL, &name).map(|file| file.answer(&headers, FOR_EVER))
}

async fn plain_page(uri: Uri, headers: HeaderMap) -> Result<Response, Problem> {
    let name = uri.path().trim_start_matches('/');
    named(PLAIN, name).map(|file| file.answer(&headers, ASK_AGAIN))
}

fn named(files: &'static [File], name: &str) -> Result<&'static File, Problem> {
    files.iter().find(|file| file.name == name).ok_or_else(|| {
        let detail = format!("the page has no file `{name}`; load the page anew");
        Problem::new(Code::NoSuchResource, detail)
    })
}

impl File {
    /// The file in the smallest form that the client takes; in short if it has it already.
    fn answer(&self, asked: &HeaderMap, cache: &'static str) -> Response {
        let (bytes, encoding) = self.form(asked);
        let tag = self.tag(encoding);
        let known = asked
            .get(header::IF_NONE_MATCH)
            .and_then(|value| value.to_str().ok())
            .is_some_and(|known| known.split(',').any(|one| one.trim() == tag));
        let body = if known {
            Body::empty()
        } else {
            Body::from(bytes)
        };
        let mut response = Response::new(body);
        if known {
            *response.status_mut() = StatusCode::NOT_MODIFIED;
        }
        let headers = response.headers_mut();
        headers.extend(
            [
                (header::CONTENT_TYPE, self.media()),
                (header::CONTENT_SECURITY_POLICY, POLICY),
                (header::X_CONTENT_TYPE_OPTIONS, "nosniff"),
                (header::REFERRER_POLICY, "no-referrer"),
                (header::CACHE_CONTROL, cache),
                (header::VARY, "Accept-Encoding"),
            ]
            .map(|(name, value)| (name, HeaderValue::from_static(value))),
        );
        headers.extend(HeaderValue::try_from(tag).map(|tag| (header::ETAG, tag)));
        headers.extend(
            encoding.map(|encoding| (header::CONTENT_ENCODING, HeaderValue::from_static(encoding))),
        );
        response
    }

    fn form(&self, asked: &HeaderMap) -> (&'static [u8], Option<&'static str>) {
        let takes = asked
            .get(header::ACCEPT_ENCODING)
            .and_then(|value| value.to_str().ok())
            .unwrap_or_default();
        match (self.brotli, self.gzip) {
            (Some(bytes), _) if accepts(takes, "br") => (bytes, Some("br")),
            (_, Some(bytes)) if accepts(takes, "gzip") => (bytes, Some("gzip")),
            _ => (self.plain, None),
        }
    }

    /// Another form of the same file is another representation, with a tag of its own.
    fn tag(&self, encoding: Option<&str>) -> String {
        let hash = Sha256::digest(self.plain);
        let short = hash.first_chunk().copied().map_or(0, u64::from_be_bytes);
        format!("\"{short:016x}-{}\"", encoding.unwrap_or("plain"))
    }

    fn media(&self) -> &'static str {
        match self.name.rsplit_once('.').map(|(_, kind)| kind) {
            Some("js") => "text/javascript; charset=utf-8",
            Some("css") => "text/css; charset=utf-8",
            Some("svg") => "image/svg+xml",
            Some("woff2") => "font/woff2",
            _ => "text/html; charset=utf-8",
        }
    }
}

/// Whether an encoding is among those accepted (RFC 9110, 12.5.3), and not with a weight of 0.
fn accepts(accepted: &str, encoding: &str) -> bool {
    accepted.split(',').any(|one| {
        let mut parts = one.split(';').map(str::trim);
        let is_it = parts
            .next()
            .is_some_and(|name| name.eq_ignore_ascii_case(encoding));
        let refused = parts
            .filter_map(|part| part.strip_prefix("q="))
            .any(|weight| weight.parse::<f64>().is_ok_and(|weight| weight <= 0.0));
        is_it && !refused
    })
}

#[cfg(test)]
mod tests;
