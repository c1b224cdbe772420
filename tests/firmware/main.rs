//! The reference firmware as it is met in the field: a process or an emulated board behind a
//! serial port, proven, driven, disturbed, killed and fuzzed.

#![expect(
    clippy::unwrap_used,
    clippy::indexing_slicing,
    clippy::print_stderr,
    reason = "helpers of tests stand outside `#[test]`: a failure there is a failed test"
)]

mod board;
mod faults;
mod host;
mod hostile;
mod process;
mod proving;
mod reboot;
mod session;
