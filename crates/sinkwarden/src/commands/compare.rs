//! `compare`: groups of records, figure by figure.

use std::path::Path;

use anyhow::Result;
use figures::{Comparison, Figures, Name, Peukert, PeukertError, compare, peukert};
use serde::Serialize;
use serde_json::Value;

use crate::arguments::{Compare, RecordOf};
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::print;
use crate::progress::Progress;
use crate::record_folder;

/// What groups of records show.
#[derive(Debug, Serialize)]
pub(crate) struct ComparisonAnswer {
    /// Figure by figure.
    #[serde(flatten)]
    pub(crate) comparison: Comparison,
    /// Peukert's exponent of every group whose discharges are at different rates.
    pub(crate) peukert: Vec<PeukertOf>,
}

/// Peukert's exponent of a group.
#[derive(Debug, Serialize)]
pub(crate) struct PeukertOf {
    /// The group's name.
    pub(crate) group: String,
    /// What its discharges show.
    #[serde(flatten)]
    pub(crate) law: Peukert,
}

pub(super) fn carry_out(arguments: &Compare, output: Output) -> Result<Exit> {
    let wanted = arguments
        .figures
        .iter()
        .map(|word| name_of(word))
        .collect::<Result<Vec<Name>>>()?;
    let mut progress = Progress::open_ended();
    let groups = arguments
        .groups
        .iter()
        .map(|text| group(text, &arguments.records, &mut progress))
        .collect::<Result<Vec<(&str, Vec<Figures>)>>>()?;
    progress.finish();
    let mut comparison = compare(&groups);
    if !wanted.is_empty() {
        comparison
            .figures
            .retain(|figure| wanted.contains(&figure.name));
    }
    let mut exponents = Vec::new();
    for (name, records) in &groups {
        match peukert(records) {
            Ok(law) => exponents.push(PeukertOf {
                group: (*name).to_owned(),
                law,
            }),
            // Records at one rate are the rule, and records without a cut-off no fault.
            Err(PeukertError::TooNear { .. } | PeukertError::NoCapacity { .. }) => {}
            Err(error @ PeukertError::Fit(_)) => return Err(error.into()),
        }
    }
    let answer = ComparisonAnswer {
        comparison,
        peukert: exponents,
    };
    output.give(&answer, print::comparison)?;
    Ok(Exit::Done)
}

/// A group's name and the figures of its records.
fn group<'a>(
    text: &'a str,
    folder: &Path,
    progress: &mut Progress,
) -> Result<(&'a str, Vec<Figures>)> {
    let parts = text.split_once('=').filter(|(name, _)| !name.is_empty());
    let (name, records) = parts.ok_or_else(|| {
        hinted(
            format!("`{text}` is no group"),
            "give each group as NAME=RECORD,RECORD,... such as K=night-1,night-2,night-3",
        )
    })?;
    let figures = records
        .split(',')
        .filter(|record| !record.is_empty())
        .map(|record| {
            let record = record_folder::open(&RecordOf {
                record: record.to_owned(),
                records: folder.to_owned(),
            })?;
            progress.at(0, format!("figures of {}", record.folder().display()));
            Ok(figures::work_out(&record)?)
        })
        .collect::<Result<Vec<Figures>>>()?;
    if figures.is_empty() {
        return Err(hinted(
            format!("group `{name}` has no record"),
            "name its records after `=`, commas between them",
        ));
    }
    Ok((name, figures))
}

fn name_of(word: &str) -> Result<Name> {
    let key = word.trim().to_lowercase().replace([' ', '-'], "_");
    serde_json::from_value(Value::String(key)).map_err(|_| {
        hinted(
            format!("there is no figure `{word}`"),
            "figures are named as `sinkwarden figures` prints them, such as capacity or \"dc resistance\"",
        )
    })
}
