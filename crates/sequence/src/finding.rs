//! What the check found: place, rule, both numbers, the mend.
//!
//! Findings are data for the HTTP interface and text for people; both come from the same value.
//! A finding is raised with a JSON pointer only and gets its line and column from the text, so
//! that a plan read back from a record can be judged by the same rules without its text.

use std::fmt;

use serde::{Deserialize, Serialize};

use crate::json::{Node, Problem, Source, Spot};
use crate::rule::{Rule, Severity};

/// One finding.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, schemars::JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Finding {
    /// Whether it refuses the sequence.
    pub severity: Severity,
    /// The rule that is broken.
    pub rule: Rule,
    /// What is wrong, with the values.
    pub message: String,
    /// What would mend it.
    pub hint: String,
    /// The value found, as text with its unit, where there is one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub found: Option<String>,
    /// The value it was held against, as text with its unit, where there is one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub limit: Option<String>,
    /// Where in the sequence (JSON pointer, RFC 6901).
    pub pointer: String,
    /// Where in the text; absent when there is no text.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub place: Option<Place>,
}

/// A place in the text of a sequence.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, schemars::JsonSchema)]
#[serde(deny_unknown_fields)]
pub struct Place {
    /// Line, from 1.
    pub line: u32,
    /// Column in characters, from 1.
    pub column: u32,
    /// The line, cut around the place if it is long.
    pub excerpt: String,
    /// Characters of the excerpt before the place.
    pub caret: u32,
    /// How many characters the place is wide.
    pub width: u32,
}

impl From<Spot> for Place {
    fn from(spot: Spot) -> Self {
        Self {
            line: spot.line,
            column: spot.column,
            excerpt: spot.excerpt,
            caret: spot.caret,
            width: spot.width,
        }
    }
}

impl Finding {
    /// A finding of a rule at a pointer.
    pub(crate) fn new(
        rule: Rule,
        pointer: impl Into<String>,
        message: impl Into<String>,
        hint: impl Into<String>,
    ) -> Self {
        Self {
            severity: rule.severity(),
            rule,
            message: message.into(),
            hint: hint.into(),
            found: None,
            limit: None,
            pointer: pointer.into(),
            place: None,
        }
    }

    /// The same with both numbers.
    #[must_use]
    pub(crate) fn numbers(mut self, found: impl fmt::Display, limit: impl fmt::Display) -> Self {
        self.found = Some(found.to_string());
        self.limit = Some(limit.to_string());
        self
    }

    pub(crate) fn from_problem(problem: Problem, source: &Source<'_>, root: Option<&Node>) -> Self {
        let pointer = root.map_or_else(String::new, |root| root.pointer_at(problem.extent.start));
        let mut finding = Self::new(problem.rule, pointer, problem.message, problem.hint);
        finding.place = Some(source.locate(problem.extent).into());
        finding
    }

    /// Fills in the place from the text; a key that should not be there is shown itself, any
    /// other finding shows the value.
    pub(crate) fn locate(&mut self, source: &Source<'_>, root: &Node) {
        if self.place.is_some() {
            return;
        }
        let mut pointer = self.pointer.as_str();
        // What the plan has and the text has not (a default) is shown where its parent stands.
        let (node, key) = loop {
            if let Some(found) = root.member_at(pointer) {
                break found;
            }
            pointer = pointer.rsplit_once('/').map_or("", |(parent, _)| parent);
        };
        let at_key = matches!(self.rule, Rule::UnknownKey | Rule::ClashingKeys);
        let extent = match key {
            Some(key) if at_key => key,
            Some(_) | None => node.extent,
        };
        self.place = Some(source.locate(extent).into());
    }

    /// Whether it refuses the sequence.
    pub const fn is_error(&self) -> bool {
        matches!(self.severity, Severity::Error)
    }
}

/// Most errors, and most warnings, in one answer: a profile of a hundred thousand bare numbers
/// would otherwise be as many findings.
const MOST: usize = 200;

/// All that a check found, in the order of the text.
#[derive(Debug, Clone, PartialEq, Eq, Default, Serialize, Deserialize, schemars::JsonSchema)]
#[serde(transparent)]
pub struct Findings {
    /// The findings.
    pub list: Vec<Finding>,
    /// How many errors and warnings did not fit.
    #[serde(skip)]
    omitted: (usize, usize),
}

impl Findings {
    /// Whether the sequence is refused.
    pub fn refuse(&self) -> bool {
        self.list.iter().any(Finding::is_error)
    }

    /// How many refuse, and how many only warn.
    pub fn count(&self) -> (usize, usize) {
        let errors = self
            .list
            .iter()
            .filter(|finding| finding.is_error())
            .count();
        (errors, self.list.len() - errors)
    }

    /// The codes of the broken rules, in the findings' order.
    pub fn rules(&self) -> Vec<Rule> {
        self.list.iter().map(|finding| finding.rule).collect()
    }

    pub(crate) fn push(&mut self, finding: Finding) {
        let (errors, warnings) = self.count();
        if finding.is_error() && errors >= MOST {
            self.omitted.0 += 1;
        } else if !finding.is_error() && warnings >= MOST {
            self.omitted.1 += 1;
        } else {
            self.list.push(finding);
        }
    }

    /// Says how many findings did not fit, as a finding of its own.
    fn tell_omitted(&mut self) {
        let (errors, warnings) = std::mem::take(&mut self.omitted);
        if errors + warnings == 0 {
            return;
        }
        let mut finding = Finding::new(
            Rule::TooLarge,
            "",
            format!("{errors} more errors and {warnings} more warnings are not shown"),
            "mend the ones that are shown first",
        );
        // Errors that do not fit were preceded by errors that do; warnings alone refuse nothing.
        if errors == 0 {
            finding.severity = Severity::Warning;
        }
        self.list.push(finding);
    }

    /// Locates every finding in the text and puts them into its order.
    pub(crate) fn settle(&mut self, source: &Source<'_>, root: Option<&Node>) {
        if let Some(root) = root {
            for finding in &mut self.list {
                finding.locate(source, root);
            }
        }
        self.tell_omitted();
        self.list.sort_by_key(|finding| {
            let place = finding.place.as_ref();
            (
                place.map_or((u32::MAX, 0), |place| (place.line, place.column)),
                finding.rule,
            )
        });
    }
}

impl fmt::Display for Finding {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        writeln!(f, "{}[{}]: {}", self.severity, self.rule, self.message)?;
        let pointer = if self.pointer.is_empty() {
            "the whole sequence"
        } else {
            &self.pointer
        };
        let Some(place) = &self.place else {
            writeln!(f, "  at {pointer}")?;
            return writeln!(f, "  hint: {}", self.hint);
        };
        let number = place.line.to_string();
        let gutter = number.len();
        writeln!(
            f,
            "{:gutter$}  at line {}, column {} ({pointer})",
            "", place.line, place.column
        )?;
        writeln!(f, "{number}: {}", place.excerpt)?;
        writeln!(
            f,
            "{:gutter$}  {:caret$}{}",
            "",
            "",
            "^".repeat(place.width as usize),
            caret = place.caret as usize
        )?;
        writeln!(f, "{:gutter$}  hint: {}", "", self.hint)
    }
}

/// The findings one after the other with a blank line between, and a line that counts them.
impl fmt::Display for Findings {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for finding in &self.list {
            writeln!(f, "{finding}")?;
        }
        let (errors, warnings) = self.count();
        let plural = |count: usize| if count == 1 { "" } else { "s" };
        writeln!(
            f,
            "{errors} error{}, {warnings} warning{}",
            plural(errors),
            plural(warnings)
        )
    }
}

#[cfg(test)]
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "expect-test writes its texts with hashes"
)]
mod tests;
