//! Where in a bench file a problem lies, and how it is told.

use std::fmt;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// A bench file that cannot be used, with everything that is wrong with it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct BenchError {
    /// What is wrong, in the order found; never empty.
    pub problems: Vec<Problem>,
}

/// One thing that is wrong with a bench file.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Problem {
    /// Line in the file, from 1.
    pub line: usize,
    /// Column in the line, in characters, from 1.
    pub column: usize,
    /// The field, such as `sink[0].front_end.dac.bits`; empty if the text is
    /// no TOML.
    pub path: String,
    /// What is wrong, with the values, and how to mend it.
    pub message: String,
}

/// A problem as the check finds it: it knows the field, not the line.
#[derive(Debug, Clone)]
pub(crate) struct Finding {
    pub(crate) path: Vec<Step>,
    pub(crate) message: String,
}

/// One step on the way to a field.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum Step {
    Key(&'static str),
    Index(usize),
}

impl BenchError {
    pub(crate) fn from_toml(error: &toml::de::Error, text: &str) -> Self {
        let start = error.span().map_or(0, |span| span.start);
        let (line, column) = line_and_column(text, start);
        let problem = Problem {
            line,
            column,
            path: String::new(),
            message: error.message().to_owned(),
        };
        Self {
            problems: vec![problem],
        }
    }

    pub(crate) fn located(findings: Vec<Finding>, text: &str) -> Self {
        let document = DeTable::parse(text).ok();
        let problems = findings
            .into_iter()
            .map(|finding| {
                let start = document
                    .as_ref()
                    .map_or(0, |table| offset(table, &finding.path));
                let (line, column) = line_and_column(text, start);
                Problem {
                    line,
                    column,
                    path: written(&finding.path),
                    message: finding.message,
                }
            })
            .collect();
        Self { problems }
    }
}

impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "line {}, column {}: ", self.line, self.column)?;
        if !self.path.is_empty() {
            write!(f, "{}: ", self.path)?;
        }
        f.write_str(&self.message)
    }
}

impl fmt::Display for BenchError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (index, problem) in self.problems.iter().enumerate() {
            if index > 0 {
                f.write_str("\n")?;
            }
            problem.fmt(f)?;
        }
        Ok(())
    }
}

impl std::error::Error for BenchError {}

fn written(path: &[Step]) -> String {
    let mut text = String::new();
    for step in path {
        match step {
            Step::Key(key) => {
                if !text.is_empty() {
                    text.push('.');
                }
                text.push_str(key);
            }
            Step::Index(index) => text.extend(["[", &index.to_string(), "]"]),
        }
    }
    text
}

/// The byte where the deepest part of the path that the file has begins: a
/// missing field is best shown at the table that lacks it.
fn offset(document: &Spanned<DeTable<'_>>, path: &[Step]) -> usize {
    let mut found = document.span().start;
    let mut table = Some(document.get_ref());
    let mut array: Option<&[Spanned<DeValue<'_>>]> = None;
    for step in path {
        let next = match step {
            Step::Key(key) => table.and_then(|table| table.get(*key)),
            Step::Index(index) => array.and_then(|array| array.get(*index)),
        };
        let Some(value) = next else { break };
        found = value.span().start;
        table = value.get_ref().as_table();
        array = value.get_ref().as_array().map(|array| &**array);
    }
    found
}

fn line_and_column(text: &str, offset: usize) -> (usize, usize) {
    let before = text.get(..offset).unwrap_or(text);
    let line = before.matches('\n').count() + 1;
    let column = before
        .rsplit('\n')
        .next()
        .map_or(0, |tail| tail.chars().count())
        + 1;
    (line, column)
}
