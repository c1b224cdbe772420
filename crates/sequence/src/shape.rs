//! A small language for the shape of JSON objects: keys, kinds, bounds, words about each.
//!
//! The format of a sequence is written down once in this language (`format`). Three things read
//! it: the judge here (every unknown, missing or ill-typed key at once), the JSON Schema, and the
//! documentation's tables. So none of the three can say anything else than the others.

mod judge;
mod schema;

pub(crate) use judge::{judge, nearest};
pub(crate) use schema::schema;

/// Which quantity a text must be.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Kind {
    Current,
    /// A current, or a multiple of the rated capacity.
    RatedCurrent,
    Voltage,
    Power,
    Resistance,
    Charge,
    Energy,
    Temperature,
    Time,
}

/// What a value may be.
#[derive(Debug, Clone, Copy)]
pub(crate) enum Shape {
    /// A text of one to so many characters.
    Text { longest: usize },
    /// A text with its unit.
    Quantity(Kind),
    /// A whole number within bounds.
    Count { least: u64, most: u64 },
    /// True or false.
    Bool,
    /// One of some words.
    Word(&'static [Word]),
    /// The version of the format.
    Version(u64),
    /// An object.
    Object(&'static Object),
    /// A list of at least so many.
    List { of: &'static Shape, least: usize },
    /// A list of just these.
    Tuple(&'static [Shape]),
    /// One of some words, or an object.
    WordOr(&'static [Word], &'static Object),
}

/// A word of a choice, and what it means.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Word {
    pub(crate) word: &'static str,
    pub(crate) meaning: &'static str,
}

/// An object of the format.
#[derive(Debug)]
pub(crate) struct Object {
    /// Its name in the JSON Schema.
    pub(crate) name: &'static str,
    /// What it is.
    pub(crate) meaning: &'static str,
    /// Its keys.
    pub(crate) fields: &'static [Field],
    /// Keys of which exactly one must stand; empty if there is no such choice.
    pub(crate) one_of: &'static [&'static str],
}

/// A key of an object.
#[derive(Debug)]
pub(crate) struct Field {
    pub(crate) key: &'static str,
    pub(crate) shape: Shape,
    pub(crate) required: bool,
    pub(crate) meaning: &'static str,
}
