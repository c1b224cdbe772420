//! How the program ends: exit codes, errors and their hints.

use std::fmt;
use std::io::{self, Write as _};
use std::process::ExitCode;

use daemon::view::EndingWord;

use crate::client::RequestError;

/// The exit codes, as the help has them.
pub(crate) const CODES: &str = "\
Exit codes:
  0  done; a run finished
  1  an error: what, where and the mend are on stderr
  2  the command line itself is wrong
  3  the check refuses the sequence
  4  the run was stopped by a person or a script
  5  the run was tripped by an interlock
  6  the run was interrupted: the host or the link died
  7  the record was altered, or a replay differs from it
  8  the firmware fails a guarantee of the protocol
  9  a verified certificate does not hold";

/// In which of the ways the program ends.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Exit {
    /// Done, or the run finished.
    Done,
    /// An error.
    Failed,
    /// The check refuses the sequence.
    Refused,
    /// A person or a script stopped the run.
    Stopped,
    /// An interlock tripped.
    Tripped,
    /// The host or the link died.
    Interrupted,
    /// The record was altered, or differs from its replay.
    Altered,
    /// The firmware fails a guarantee.
    Unproven,
    /// A certificate does not hold.
    Unverified,
}

impl Exit {
    /// The code; 2 is what the parser of the command line gives.
    const fn code(self) -> u8 {
        match self {
            Self::Done => 0,
            Self::Failed => 1,
            Self::Refused => 3,
            Self::Stopped => 4,
            Self::Tripped => 5,
            Self::Interrupted => 6,
            Self::Altered => 7,
            Self::Unproven => 8,
            Self::Unverified => 9,
        }
    }
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        Self::from(exit.code())
    }
}

impl From<EndingWord> for Exit {
    fn from(ending: EndingWord) -> Self {
        match ending {
            EndingWord::Finished => Self::Done,
            EndingWord::Stopped => Self::Stopped,
            EndingWord::Tripped => Self::Tripped,
            EndingWord::Interrupted => Self::Interrupted,
        }
    }
}

/// An error with what to do about it.
#[derive(Debug)]
pub(crate) struct Hinted {
    message: String,
    hint: String,
}

impl fmt::Display for Hinted {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.message)
    }
}

impl std::error::Error for Hinted {}

/// An error with what to do about it.
pub(crate) fn hinted(message: impl Into<String>, hint: impl Into<String>) -> anyhow::Error {
    Hinted {
        message: message.into(),
        hint: hint.into(),
    }
    .into()
}

/// Tells an error on stderr. A reader of our output that has had enough is none.
pub(crate) fn report(error: &anyhow::Error) -> Exit {
    if is_broken_pipe(error) {
        return Exit::Done;
    }
    let mut stderr = io::stderr().lock();
    // Where stderr takes nothing, the exit code has to do.
    let _ = writeln!(stderr, "error: {error:#}");
    let own = error.chain().find_map(|cause| {
        cause
            .downcast_ref::<Hinted>()
            .map(|hinted| hinted.hint.clone())
    });
    let asked = || {
        error.chain().find_map(|cause| {
            cause
                .downcast_ref::<RequestError>()
                .and_then(RequestError::hint)
        })
    };
    if let Some(hint) = own.or_else(asked) {
        let _ = writeln!(stderr, "hint: {hint}");
    }
    Exit::Failed
}

fn is_broken_pipe(error: &anyhow::Error) -> bool {
    error.chain().any(|cause| {
        cause
            .downcast_ref::<io::Error>()
            .is_some_and(|error| error.kind() == io::ErrorKind::BrokenPipe)
    })
}
