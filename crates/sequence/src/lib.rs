//! The sequence file: parsing with positions, checks, compiling to a plan, profile import.
//!
//! A sequence says what to draw, until when, and what must stop it. [`compile`] turns its text
//! into a [`Plan`](plan::Plan) for one sink, or refuses it with every finding at once, each with
//! its place, its rule, both numbers and the mend.
//!
//! The stages, each a module: text to a tree with places (`json`), the tree against the format
//! (`format`, `shape`), the tree to a typed draft (`draft`, `profile`), the draft and the plan
//! against the rules (`check`), the draft to the plan (`lower`).
//!
//! Invariants:
//! - The same text, files, facts and options give the same plan and the same findings.
//! - A plan that comes out of [`compile`] passes [`Plan::validate`](plan::Plan::validate).
//! - No text makes anything here panic.
//!
//! What this crate deliberately does not do: it opens no file (profiles are handed in as text),
//! knows no wire and no clock, and starts nothing.

mod calibration;
mod check;
mod compile;
mod draft;
mod facts;
mod finding;
mod format;
pub mod import;
mod json;
mod lower;
pub mod plan;
mod profile;
mod rule;
mod shape;

use std::collections::BTreeMap;

pub use calibration::Calibration;
pub use compile::{Compiled, Options, Refused, compile, compile_with, files_wanted};
pub use facts::{Facts, Thresholds};
pub use finding::{Finding, Findings, Place};
pub use rule::{Rule, Severity};

/// Files that a sequence refers to: name to text.
pub type Files = BTreeMap<String, String>;

/// The JSON Schema (draft 2020-12) of a sequence file.
pub fn schema() -> serde_json::Value {
    shape::schema(&format::SEQUENCE)
}

#[cfg(test)]
mod tests;
