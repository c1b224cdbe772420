//! until
