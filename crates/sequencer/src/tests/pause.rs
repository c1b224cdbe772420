//! pause
