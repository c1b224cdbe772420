//! A whole record as a table, handed over as fast as the client takes it.

use std::io::{self, Write};
use std::sync::Arc;
use std::time::Duration;

use axum::body::{Body, Bytes};
use axum::http::header;
use axum::response::{IntoResponse, Response};
use columnar::export_parquet;
use journal::{Record, export_csv};
use tokio::runtime::Handle;
use tokio::sync::{OwnedSemaphorePermit, mpsc};
use tokio::time::timeout;

use super::records::open;
use crate::app::App;
use crate::view::Problem;

/// What a table of comma-separated values is called.
pub(super) const CSV: &str = "text/csv; charset=utf-8; header=present";
/// Blocks that may wait for a slow client.
const BLOCKS: usize = 8;
/// Bytes of a block.
const BLOCK_BYTES: usize = 64 << 10;
/// How long a client that takes nothing is waited for.
const WAIT: Duration = Duration::from_secs(30);

/// The forms in which a whole record is given.
#[derive(Debug, Clone, Copy)]
pub(super) enum Table {
    Csv,
    Parquet,
}

impl Table {
    fn media_type(self) -> &'static str {
        match self {
            Self::Csv => CSV,
            Self::Parquet => columnar::MEDIA_TYPE,
        }
    }

    fn write(self, record: &Record, out: &mut Blocks) -> io::Result<()> {
        match self {
            Self::Csv => export_csv(record, out, |_| {}).map_err(io::Error::other)?,
            Self::Parquet => export_parquet(record, &mut *out, |_| {}).map_err(io::Error::other)?,
        };
        out.flush()
    }
}

/// The whole record as a table, as fast as the client takes it.
pub(super) async fn export(app: &Arc<App>, id: &str, table: Table) -> Result<Response, Problem> {
    let (record, permit) = open(app, id).await?;
    let (blocks, taken) = mpsc::channel(BLOCKS);
    let runtime = Handle::current();
    tokio::task::spawn_blocking(move || {
        let _permit: OwnedSemaphorePermit = permit;
        let mut out = Blocks {
            filling: Vec::with_capacity(BLOCK_BYTES),
            client: blocks.clone(),
            runtime,
        };
        if let Err(error) = table.write(&record, &mut out) {
            tracing::warn!("an export was cut off: {error}");
            // The client sees a body that is cut off, not one that seems whole.
            let _ = blocks.try_send(Err(error));
        }
    });
    let stream = tokio_stream::wrappers::ReceiverStream::new(taken);
    let media_type = [(header::CONTENT_TYPE, table.media_type())];
    Ok((media_type, Body::from_stream(stream)).into_response())
}

/// Hands an export over in blocks; waits for the client, but not for ever.
struct Blocks {
    filling: Vec<u8>,
    client: mpsc::Sender<io::Result<Bytes>>,
    runtime: Handle,
}

impl Write for Blocks {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.filling.extend_from_slice(bytes);
        if self.filling.len() >= BLOCK_BYTES {
            self.flush()?;
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        if self.filling.is_empty() {
            return Ok(());
        }
        let block = Bytes::from(std::mem::take(&mut self.filling));
        let sending = timeout(WAIT, self.client.send(Ok(block)));
        match self.runtime.block_on(sending) {
            Ok(Ok(())) => Ok(()),
            Ok(Err(_)) => Err(io::Error::other("the client has gone")),
            Err(_) => Err(io::Error::other("the client takes nothing")),
        }
    }
}
