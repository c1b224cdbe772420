//! The program as a user meets it: a process, its flags, stdout, stderr, exit codes, files.

mod check;
mod document;
mod flags;
mod program;
mod record;
mod rehearse;
mod serve;
