//! What can go wrong with a request, and what to do about it.

use std::fmt;

use daemon::view::{Code, Problem};

/// What went wrong with a request.
#[derive(Debug)]
pub(crate) enum RequestError {
    /// The daemon could not be reached, or the connection broke.
    Unreached {
        /// Where it was looked for.
        base: String,
        /// What the connection said.
        reason: String,
    },
    /// The daemon refuses, and says why.
    Refused(Box<Problem>),
    /// What answered is no daemon of this version.
    Unreadable {
        /// Where.
        base: String,
        /// What could not be read.
        reason: String,
    },
}

impl fmt::Display for RequestError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Unreached { base, reason } => {
                write!(f, "cannot reach the daemon at {base}: {reason}")
            }
            Self::Refused(problem) => write!(f, "{} [{}]", problem.detail, problem.code),
            Self::Unreadable { base, reason } => {
                write!(f, "the answer of {base} cannot be understood: {reason}")
            }
        }
    }
}

impl std::error::Error for RequestError {}

impl RequestError {
    /// What to do about it, as the command line has it.
    pub(crate) fn hint(&self) -> Option<String> {
        let problem = match self {
            Self::Unreached { .. } => {
                return Some(
                    "start one with `sinkwarden serve`, or say where it is with --daemon"
                        .to_owned(),
                );
            }
            Self::Unreadable { .. } => {
                return Some(
                    "is it a Sinkwarden daemon of the same version? see --daemon".to_owned(),
                );
            }
            Self::Refused(problem) => problem,
        };
        let hint = if problem.code == Code::TokenNeeded || problem.code == Code::ScopeTooSmall {
            "give --token-file a file with a token that the daemon lets operate"
        } else if problem.code == Code::NoSuchSink {
            "`sinkwarden status` lists the sinks of the daemon"
        } else if problem.code == Code::SinkBusy {
            "follow it with `sinkwarden watch`, or end it with `sinkwarden off`"
        } else {
            return None;
        };
        Some(hint.to_owned())
    }
}
