//! Crashes.
