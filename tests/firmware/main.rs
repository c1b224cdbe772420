//! The reference firmware as it is met in the field: a process or an emulated board behind a
//! serial port, proven, driven, disturbed, killed and fuzzed.

#![expect(
    clippy::unwrap_used,
    clippy::indexing_slicing,
    clippy::print_stderr,
    clippy::wildcard_enum_match_arm,
    reason = "helpers of tests stand outside `#[test]`, where a failure is a failed test; a wait picks \
              what it waits for out of all that is heard"
)]

mod board;
mod faults;
mod five_minutes;
mod host;
mod hostile;
mod mishaps;
mod process;
mod proving;
mod reboot;
mod session;
