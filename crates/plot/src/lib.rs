//! Plots as in a printed paper: thin ink lines, ticks inside the frame, units on the axes, names
//! at the lines, no legend. Numbers in, scalable vector graphics out.
//!
//! A [`Drawing`] is made mark by mark: a frame over two [`Scale`]s, then regions, curves, limits,
//! words. It ends either as part of a page, which brings [`STYLE`] and may draw it once more for
//! a narrow screen ([`Drawing::finish`]), or as a file of its own, styled within
//! ([`Drawing::finish_alone`]).
//!
//! Invariants:
//! - Text reaches a drawing through [`Markup::text`] alone, which escapes it; only literals of
//!   the program are written as they are.
//! - A drawing fetches nothing, runs nothing, and says in words what it shows.
//! - Same input, same output, to the byte.
//!
//! What it deliberately does not do: measure a font (widths are estimated on the wide side),
//! write a file, know what is drawn.

mod drawing;
mod label;
mod markup;
mod scale;
mod sheet;
mod trace;

pub use drawing::{Anchor, Drawing, Field};
pub use label::{Area, Drawn, Shelf, width};
pub use markup::Markup;
pub use scale::{Scale, Ticks};
pub use sheet::{NARROW, Sheet, WIDE};
pub use trace::{Limit, Sample, Trace, thinned};

/// How the marks of a drawing look on a page: rules for `.plot`, with the page's custom
/// properties `--paper`, `--ink`, `--faint`, `--rule`, `--accent` and `--shade` for colours.
pub const STYLE: &str = include_str!("style.css");

#[cfg(test)]
mod tests;
