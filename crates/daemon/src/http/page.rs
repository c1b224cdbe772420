//! The page at `/`: the sinks, how they stand, and a way to turn them off.

use std::sync::Arc;

use axum::Router;
use axum::http::header;
use axum::response::IntoResponse;
use axum::routing::get;

use crate::app::App;

const PAGE: &str = include_str!("page.html");

/// What a page of ours may do: nothing from elsewhere, in no frame.
const POLICY: &str = "default-src 'self'; script-src 'self' 'unsafe-inline'; style-src 'self' 'unsafe-inline'; img-src 'self' data:; frame-ancestors 'none'; base-uri 'none'; form-action 'none'";

/// Where pages are served.
pub(super) fn routes() -> Router<Arc<App>> {
    Router::new().route("/", get(page))
}

async fn page() -> impl IntoResponse {
    let headers = [
        (header::CONTENT_TYPE, "text/html; charset=utf-8"),
        (header::CONTENT_SECURITY_POLICY, POLICY),
        (header::X_CONTENT_TYPE_OPTIONS, "nosniff"),
        (header::REFERRER_POLICY, "no-referrer"),
        (header::CACHE_CONTROL, "no-cache"),
    ];
    (headers, PAGE)
}
