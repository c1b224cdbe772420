//! The program as a user meets it: a process, its flags, stdout, stderr, exit codes, files.
#![expect(
    clippy::unwrap_used,
    clippy::needless_raw_string_hashes,
    reason = "a test that meets what it does not expect has failed; expected texts are written so"
)]

mod calibrate;
mod check;
mod deciding;
mod document;
mod flags;
mod program;
mod record;
mod rehearse;
mod serve;
