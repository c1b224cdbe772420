//! property
