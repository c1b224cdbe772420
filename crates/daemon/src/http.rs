//! The HTTP interface: what can be asked, by whom, in which form.
//!
//! Every answer is a view of [`crate::view`] as JSON, or problem details. Nothing slow runs on
//! the threads that answer: the disk, compiling and rehearsing have threads of their own, and a
//! bounded number of them. `off` waits for none of it.
//!
//! What it deliberately does not do: touch a sink. It asks workers, and shows what they show.

mod calibrations;
mod events;
mod export;
mod extract;
mod guard;
mod hand;
mod openapi;
mod page;
mod problem;
mod readings;
mod records;
mod runs;
mod sequences;
pub(crate) mod serving;
mod sinks;
mod state;

use std::sync::Arc;

use axum::Router;
use axum::http::Uri;
use axum::middleware;

pub(crate) use problem::aside;

use crate::app::App;
use crate::view::{Code, Problem};

/// The whole interface.
pub(crate) fn router(app: Arc<App>) -> Router {
    let (api, document) = openapi::parts();
    let guarded = api
        .merge(openapi::routes(document))
        .merge(page::routes())
        .fallback(nothing_here)
        .method_not_allowed_fallback(method_not_allowed)
        .layer(middleware::from_fn(guard::bound_time))
        .layer(middleware::from_fn_with_state(
            Arc::clone(&app),
            guard::admit,
        ));
    guarded.with_state(app)
}

async fn nothing_here(uri: Uri) -> Problem {
    let detail = format!(
        "there is nothing under {}; what there is stands in /v1/openapi.json",
        uri.path()
    );
    Problem::new(Code::NoSuchResource, detail)
}

async fn method_not_allowed(method: axum::http::Method, uri: Uri) -> Problem {
    let detail = format!("{} does not take {method}", uri.path());
    Problem::new(Code::MethodNotAllowed, detail)
}
