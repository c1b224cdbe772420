//! What a daemon is told before it starts.

use std::net::{IpAddr, SocketAddr};
use std::num::NonZeroU32;
use std::path::PathBuf;

use sink::bench::Bench;
use subtle::{Choice, ConstantTimeEq as _};

use crate::error::DaemonError;

/// Shortest token that is taken: 128 bits in hexadecimal.
const TOKEN_CHARS_MIN: usize = 32;

/// What a daemon is told before it starts.
#[derive(Debug, Clone)]
pub struct Config {
    /// The bench, checked.
    pub bench: Bench,
    /// The bench file; paths in it are relative to its folder.
    pub bench_path: PathBuf,
    /// The folder that holds the records.
    pub records: PathBuf,
    /// Where to listen; port 0 takes any free one.
    pub listen: SocketAddr,
    /// Who may do what; without tokens only this machine is listened to, and may do everything.
    pub tokens: Option<Tokens>,
    /// Names under which this machine is addressed, beside the loopback names.
    pub host_names: Vec<String>,
    /// How much faster than real time simulated sinks run; `None`: as the bench file says.
    pub time_factor: Option<NonZeroU32>,
    /// A program and its arguments, started with an event as JSON on its standard input when a
    /// run ends or a person is needed.
    pub notify: Option<Vec<String>>,
}

impl Config {
    /// A daemon for a bench that listens on this machine alone.
    pub fn new(bench: Bench, bench_path: PathBuf, records: PathBuf) -> Self {
        Self {
            bench,
            bench_path,
            records,
            listen: SocketAddr::from(([127, 0, 0, 1], 7070)),
            tokens: None,
            host_names: Vec::new(),
            time_factor: None,
            notify: None,
        }
    }

    /// Refuses to let anyone on the network drive a sink unasked.
    pub(crate) fn check(&self) -> Result<(), DaemonError> {
        let listen = self.listen;
        if self.tokens.is_none() && !is_loopback(listen.ip()) {
            return Err(DaemonError::NoToken { listen });
        }
        Ok(())
    }
}

fn is_loopback(address: IpAddr) -> bool {
    address.to_canonical().is_loopback()
}

/// What a token allows.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Scope {
    /// To look on.
    Read,
    /// To look on, start, stop and reset.
    Operate,
}

/// Who may do what.
///
/// Written as a file of lines `read TOKEN` and `operate TOKEN`; `#` begins a comment.
#[derive(Clone)]
pub struct Tokens {
    list: Vec<(Scope, String)>,
}

/// Why a token file cannot be used. Tokens themselves are never shown.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum TokensError {
    /// A line that says something else.
    #[error("line {line} of the token file is not `read TOKEN` or `operate TOKEN`")]
    Line {
        /// The line, from 1.
        line: usize,
    },
    /// A token that could be guessed.
    #[error(
        "the token on line {line} of the token file has {chars} characters, {TOKEN_CHARS_MIN} are the fewest; make one with `openssl rand -hex 16`"
    )]
    Short {
        /// The line, from 1.
        line: usize,
        /// How many characters it has.
        chars: usize,
    },
    /// No token at all.
    #[error("the token file holds no token; write a line `operate TOKEN`")]
    Empty,
}

impl Tokens {
    /// Reads a token file's text.
    ///
    /// # Errors
    /// [`TokensError`] with the line.
    pub fn parse(text: &str) -> Result<Self, TokensError> {
        let mut list = Vec::new();
        for (line, content) in (1..).zip(text.lines()) {
            let content = content.split('#').next().unwrap_or_default();
            let mut words = content.split_whitespace();
            let Some(word) = words.next() else { continue };
            let scope = match word {
                "read" => Scope::Read,
                "operate" => Scope::Operate,
                _ => return Err(TokensError::Line { line }),
            };
            let (Some(token), None) = (words.next(), words.next()) else {
                return Err(TokensError::Line { line });
            };
            let chars = token.chars().count();
            if chars < TOKEN_CHARS_MIN {
                return Err(TokensError::Short { line, chars });
            }
            list.push((scope, token.to_owned()));
        }
        if list.is_empty() {
            return Err(TokensError::Empty);
        }
        Ok(Self { list })
    }

    /// What a token allows; takes as long for any token of the same length, right or wrong.
    pub(crate) fn scope_of(&self, token: &str) -> Option<Scope> {
        let mut found = None;
        for (scope, known) in &self.list {
            let same: Choice = known.as_bytes().ct_eq(token.as_bytes());
            if bool::from(same) {
                found = found.max(Some(*scope));
            }
        }
        found
    }
}

/// Shows how many, never which.
impl std::fmt::Debug for Tokens {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "{} tokens", self.list.len())
    }
}

#[cfg(test)]
mod tests;
