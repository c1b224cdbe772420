//! The accept loop: bounded in connections, and in how long a client may take to say something.

use std::sync::Arc;
use std::time::Duration;

use axum::Router;
use hyper::server::conn::http1;
use hyper_util::rt::{TokioIo, TokioTimer};
use hyper_util::service::TowerToHyperService;
use tokio::net::{TcpListener, TcpStream};
use tokio::sync::{Semaphore, watch};
use tokio::time::sleep;

/// Connections at once; further ones wait to be accepted.
const CONNECTIONS_MAX: usize = 256;
/// How long a client may take for the head of a request, and stay idle between two.
const HEAD_WAIT: Duration = Duration::from_secs(20);
/// Pause after a failure to accept: too many open files, most likely.
const ACCEPT_PAUSE: Duration = Duration::from_millis(100);

/// Serves until told to end.
pub(crate) async fn serve(listener: TcpListener, router: Router, ending: watch::Receiver<bool>) {
    let connections = Arc::new(Semaphore::new(CONNECTIONS_MAX));
    let mut ended = ending;
    loop {
        let Ok(permit) = Arc::clone(&connections).acquire_owned().await else {
            return;
        };
        let accepted = tokio::select! {
            accepted = listener.accept() => accepted,
            told = ended.wait_for(|ending| *ending) => {
                drop(told);
                return;
            }
        };
        match accepted {
            Ok((stream, _)) => {
                let router = router.clone();
                tokio::spawn(async move {
                    answer(stream, router).await;
                    drop(permit);
                });
            }
            Err(error) => {
                tracing::warn!("a connection could not be accepted: {error}");
                sleep(ACCEPT_PAUSE).await;
            }
        }
    }
}

async fn answer(stream: TcpStream, router: Router) {
    // Small answers at once; without it they are only a little later.
    let _ = stream.set_nodelay(true);
    let connection = http1::Builder::new()
        .timer(TokioTimer::new())
        .header_read_timeout(HEAD_WAIT)
        .serve_connection(TokioIo::new(stream), TowerToHyperService::new(router));
    if let Err(error) = connection.await {
        tracing::debug!("a connection has ended: {error}");
    }
}
