//! The sequencer against a scripted bench: what it orders, and what it makes of what comes back.

mod bench;
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "the form in which expect-test writes its texts"
)]
mod course;
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "the form in which expect-test writes its texts"
)]
mod hand;
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "the form in which expect-test writes its texts"
)]
mod interlock;
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "the form in which expect-test writes its texts"
)]
mod pause;
mod plans;
mod property;
mod structure;
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "the form in which expect-test writes its texts"
)]
mod until;
