//! A real daemon process and a sink on a real pseudo-terminal.

mod death;
mod disk;
mod port;
