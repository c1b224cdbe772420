//! structure
