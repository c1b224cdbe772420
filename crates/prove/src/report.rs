//! What a run of all checks has shown.

use quantity::Span;
use serde::Serialize;
use wire::Description;

use crate::evidence::Exchange;
use crate::guarantees::Guarantee;

/// What a check found.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case", tag = "verdict")]
pub enum Verdict {
    /// The firmware does what the protocol says.
    Holds {
        /// What was measured on the way.
        measured: String,
    },
    /// It does not.
    Fails {
        /// What is wrong.
        wrong: String,
    },
    /// This run cannot tell.
    NotShown {
        /// Why not, and what would show it.
        why: String,
    },
}

/// One guarantee and what became of it.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Shown {
    /// The guarantee.
    #[serde(flatten)]
    pub guarantee: Guarantee,
    /// What the check found.
    #[serde(flatten)]
    pub verdict: Verdict,
    /// How long it took.
    pub took: Span,
    /// All that was said meanwhile.
    pub evidence: Vec<Exchange>,
}

/// All of it.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Report {
    /// The sink's description of itself, once it gave one.
    pub description: Option<Description>,
    /// Each guarantee, in the order of the checks.
    pub shown: Vec<Shown>,
    /// How long all of it took.
    pub took: Span,
}

impl Report {
    /// Whether nothing failed. What is not shown does not fail.
    pub fn holds(&self) -> bool {
        self.failed().next().is_none()
    }

    /// The guarantees that fail, with what is wrong.
    pub fn failed(&self) -> impl Iterator<Item = (&'static str, &str)> {
        self.shown.iter().filter_map(|shown| match &shown.verdict {
            Verdict::Fails { wrong } => Some((shown.guarantee.name, wrong.as_str())),
            Verdict::Holds { .. } | Verdict::NotShown { .. } => None,
        })
    }

    /// How many hold, fail, and are not shown.
    pub fn counts(&self) -> (usize, usize, usize) {
        let count = |wanted: fn(&Verdict) -> bool| {
            self.shown
                .iter()
                .filter(|shown| wanted(&shown.verdict))
                .count()
        };
        (
            count(|verdict| matches!(verdict, Verdict::Holds { .. })),
            count(|verdict| matches!(verdict, Verdict::Fails { .. })),
            count(|verdict| matches!(verdict, Verdict::NotShown { .. })),
        )
    }
}
