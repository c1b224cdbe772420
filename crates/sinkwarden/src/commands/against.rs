//! `replay --against`: the recorded sequence once more, on a simulated source, beside the record.

use std::path::Path;

use anyhow::{Context as _, Result};
use daemon::view::{CrossingView, EndingView, EndingWord, MarginView};
use figures::{LabelDifference, against};
use journal::{Body, ClockKind, Ended, Entry, JournalError, Manifest, Options, Record, Writer};
use quantity::Span;
use run::KeeperConfig;
use run::rehearse::{Rehearsal, rehearse};
use sequencer::Sequencer;
use sequencer::event::{Crossing, Ending, Finding};
use serde::{Deserialize as _, Serialize};
use serde_json::Value;
use sink::bench::{Link, SinkEntry};
use sink::correction::Correction;
use transport::port::HostClock;
use uuid::Uuid;

use super::keeping::rfc3339;
use super::rehearse::ending_view;
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::print;
use crate::source::{asked_for, with_model};

/// The word for a model fitted to the record itself.
const FITTED: &str = "fitted";

/// Virtual time beyond the plan's own longest: setting up, and the last words.
const BEYOND_PLAN: Span = Span::from_secs(60);
const UNBOUNDED_MAX: Span = Span::from_secs(400 * 24 * 3600);

/// A record beside a rehearsal of its sequence.
#[derive(Debug, Serialize)]
pub(crate) struct AgainstAnswer {
    /// The record's id.
    pub(crate) record: String,
    /// What the sequence was rehearsed on.
    pub(crate) source: String,
    /// What the record has.
    pub(crate) recorded: Side,
    /// What the rehearsal gave.
    pub(crate) simulated: Side,
    /// Whether both ended in the same way, tripped by the same interlocks if at all.
    pub(crate) same_ending: bool,
    /// Label by label; the first of each pair is the record's.
    pub(crate) labels: Vec<LabelDifference>,
}

/// How one of the two went.
#[derive(Debug, Serialize)]
pub(crate) struct Side {
    /// How it ended; `None`: it had not when the record was read.
    pub(crate) ending: Option<EndingView>,
    /// Interlocks that crossed.
    pub(crate) crossings: Vec<CrossingView>,
    /// How near each interlock came, the nearest first.
    pub(crate) margins: Vec<MarginView>,
}

pub(super) fn carry_out(record: &Record, source: &str, output: Output) -> Result<Exit> {
    let manifest = record.manifest();
    let entry = SinkEntry::deserialize(&manifest.bench)
        .context("the bench entry in the record cannot be read")?;
    let (entry, simulated_on) = on_source(record, entry, source)?;
    let folder = tempfile::tempdir().context("no folder for the rehearsal's record")?;
    let path = folder.path().join("record");
    let (rehearsal, crossings) = rehearsed(manifest, &entry, &path)?;
    let other = Record::open(&path)?;
    let compared = against(record, &other)?;
    let recorded = recorded(record)?;
    let end = HostClock::start().now();
    let simulated = Side {
        ending: Some(ending_view(&rehearsal.ending, &crossings, end)),
        crossings: crossings.iter().map(CrossingView::new).collect(),
        margins: worst_first(&rehearsal.status.margins),
    };
    let answer = AgainstAnswer {
        record: manifest.record.clone(),
        source: simulated_on,
        same_ending: same_ending(&recorded, &simulated),
        recorded,
        simulated,
        labels: compared.labels,
    };
    output.give(&answer, print::against)?;
    Ok(Exit::Done)
}

/// The record's sink with the source asked for, and what that is in words.
fn on_source(record: &Record, mut entry: SinkEntry, source: &str) -> Result<(SinkEntry, String)> {
    // Errors and temperature of a simulated sink's own source stay; those of a real one are
    // corrected in what is compared.
    let own = match &entry.link {
        Link::Simulated { source, .. } => Some(source.clone()),
        Link::Serial { .. } | Link::Tcp { .. } => None,
    };
    let own = own.as_ref().map(without_errors);
    let (chosen, words) = if source == FITTED {
        let figures = figures::work_out(record)?;
        let model = figures.cell_model.ok_or_else(|| {
            hinted(
                "the record tells no cell model",
                "a model needs pulses between rests; give --against a label or a file",
            )
        })?;
        let words = format!(
            "a cell model fitted to {} pulses of the record",
            model.points.len()
        );
        (with_model(own.as_ref(), model.to_file()), words)
    } else {
        (asked_for(source, own.as_ref())?, source.to_owned())
    };
    entry.link = Link::Simulated {
        source: chosen,
        time_factor: std::num::NonZeroU32::MIN,
    };
    Ok((entry, words))
}

/// The plan is carried out in true values, so the simulated converters must not err.
fn without_errors(source: &Value) -> Value {
    let mut source = source.clone();
    if let Some(source) = source.as_object_mut() {
        source.remove("errors");
        source.remove("faults");
    }
    source
}

/// Rehearses the record's plan into a record of its own.
fn rehearsed(
    manifest: &Manifest,
    entry: &SinkEntry,
    path: &Path,
) -> Result<(Rehearsal, Vec<Crossing>)> {
    let refused = |error: String| hinted(error, "give --against another source");
    let mut plan = manifest.plan.clone();
    plan.correction = Correction::IDENTITY;
    let mut device =
        simulator::simulated_sink(entry).map_err(|error| refused(error.to_string()))?;
    let config = KeeperConfig::for_sink(entry).map_err(|error| refused(error.to_string()))?;
    let start = HostClock::start().now();
    let at_most = plan
        .duration_at_most()
        .saturating_add(BEYOND_PLAN)
        .min(UNBOUNDED_MAX);
    let copy = Manifest {
        record: Uuid::now_v7().to_string(),
        created: rfc3339(start),
        clock: ClockKind::Virtual,
        bench: serde_json::to_value(entry)?,
        plan: plan.clone(),
        certificate: None,
        description: None,
        resumed: Vec::new(),
        ended: None,
        ..manifest.clone()
    };
    let mut writer = Writer::create(path, copy, Options::default())?;
    let mut failure: Option<JournalError> = None;
    let mut crossings = Vec::new();
    let mut observer = |entry: &Entry| {
        if let Body::Finding(Finding::Crossed(crossing)) = &entry.body {
            crossings.push(*crossing);
        }
        if failure.is_none() {
            failure = writer.append(entry).err();
        }
    };
    let rehearsal = rehearse(
        Sequencer::new(plan)?,
        config,
        &mut device,
        start,
        at_most,
        &mut observer,
    );
    if let Some(failure) = failure {
        return Err(failure).context("the rehearsal's record cannot be written");
    }
    let rehearsal = rehearsal.map_err(|error| refused(error.to_string()))?;
    writer.seal(Ended {
        how: rehearsal.ending.clone(),
        at: rfc3339(start.saturating_add(rehearsal.took)),
        reason: None,
    })?;
    Ok((rehearsal, crossings))
}

/// How the record ended, and how near its interlocks came: recomputed from its events.
fn recorded(record: &Record) -> Result<Side> {
    let manifest = record.manifest();
    let mut sequencer = Sequencer::new(manifest.plan.clone())?;
    let mut crossings = Vec::new();
    for entry in record.entries() {
        let entry = entry?;
        if let Some(event) = entry.event() {
            sequencer.handle(&event);
            while sequencer.poll_output().is_some() {}
        } else if let Body::Finding(Finding::Crossed(crossing)) = &entry.body {
            crossings.push(*crossing);
        }
    }
    let margins: Vec<sequencer::Margin> = sequencer.margins().collect();
    Ok(Side {
        ending: manifest.ended.as_ref().map(|ended| EndingView {
            how: EndingWord::of(&ended.how),
            interlock: match &ended.how {
                Ending::Tripped(interlock) => Some(*interlock),
                Ending::Finished | Ending::Stopped | Ending::Interrupted => None,
            },
            at: ended.at.clone(),
            reason: ended.reason.clone(),
        }),
        crossings: crossings.iter().map(CrossingView::new).collect(),
        margins: worst_first(&margins),
    })
}

fn worst_first(margins: &[sequencer::Margin]) -> Vec<MarginView> {
    let mut margins = MarginView::nearest_first(margins);
    margins.sort_by(|one, other| other.worst_nearness.total_cmp(&one.worst_nearness));
    margins
}

fn same_ending(one: &Side, other: &Side) -> bool {
    let how = |side: &Side| {
        side.ending
            .as_ref()
            .map(|ending| (ending.how, ending.interlock))
    };
    let crossed = |side: &Side| {
        let mut interlocks: Vec<_> = side.crossings.iter().map(|one| one.interlock).collect();
        interlocks.sort_unstable();
        interlocks.dedup();
        interlocks
    };
    how(one) == how(other) && crossed(one) == crossed(other)
}
