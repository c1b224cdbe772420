//! The run as a pure state machine: plan, readings and time in; orders and findings out.

pub mod event;
