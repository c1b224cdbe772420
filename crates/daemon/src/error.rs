//! Why a daemon could not start, or did not end well.

use std::io;
use std::net::SocketAddr;
use std::path::PathBuf;

/// Why a daemon could not start, or did not end well.
#[derive(Debug, thiserror::Error)]
pub enum DaemonError {
    /// Something on the network could reach the sinks without a token.
    #[error(
        "{listen} can be reached from other machines and there is no token; give a token file, or listen on 127.0.0.1"
    )]
    NoToken {
        /// The address asked for.
        listen: SocketAddr,
    },
    /// The token file cannot be used.
    #[error(transparent)]
    Tokens(#[from] crate::config::TokensError),
    /// The address cannot be listened on.
    #[error(
        "cannot listen on {listen}: {source}; is another daemon running? choose another address"
    )]
    Listen {
        /// The address asked for.
        listen: SocketAddr,
        /// What the operating system says.
        source: io::Error,
    },
    /// The records folder cannot be used.
    #[error("cannot use the records folder {}: {source}; create it, or make it writable", path.display())]
    Records {
        /// The folder.
        path: PathBuf,
        /// What the operating system says.
        source: io::Error,
    },
    /// Another daemon keeps its records there.
    #[error("another daemon uses the records folder {}; end it, or give another folder", path.display())]
    RecordsInUse {
        /// The folder.
        path: PathBuf,
    },
    /// An entry of the bench file gives no sink.
    #[error("sink `{sink}` cannot be served: {reason}")]
    Sink {
        /// The sink's name.
        sink: String,
        /// Why, and the mend.
        reason: String,
    },
    /// The operating system refuses a thread or a signal handler.
    #[error("the operating system refuses {what}: {source}")]
    System {
        /// What was asked for.
        what: &'static str,
        /// What it says.
        source: io::Error,
    },
}
