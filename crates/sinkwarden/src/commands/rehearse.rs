//! `rehearse`: the run in virtual time, on the firmware's own logic and a simulated source.

use std::io;
use std::path::{Path, PathBuf};

use anyhow::Result;
use daemon::view::{CheckView, CrossingView, EndingView, EndingWord, MarginView};
use journal::{Body, Entry, JournalError, Note};
use quantity::{HostTime, Span};
use run::KeeperConfig;
use run::rehearse::{Observer, Rehearsal, rehearse};
use sequencer::Sequencer;
use sequencer::event::{Command, Crossing, Ending, Finding, Happening};
use serde::Serialize;
use simulator::device::SimulatedSink;
use transport::port::HostClock;
use wire::TemperatureReading;

use super::check::{check_view, problem_of, tell_refused};
use super::keeping::Keeping;
use crate::arguments::Rehearse;
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::print;
use crate::progress::Progress;
use crate::sequence_file::Submission;
use crate::source::simulated;

/// Virtual time beyond the plan's own longest: setting up, and the last words.
const BEYOND_PLAN: Span = Span::from_secs(60);
/// Virtual time of a plan that nothing bounds.
const UNBOUNDED_MAX: Span = Span::from_secs(400 * 24 * 3600);
/// Readbacks between two updates of the bar.
const UPDATE_EVERY: u64 = 512;

/// How a rehearsal went. The names are those of the HTTP interface.
#[derive(Debug, Serialize)]
pub(crate) struct RehearsalAnswer {
    /// What the check says.
    pub(crate) check: CheckView,
    /// How it ended; `at` is on the rehearsal's own clock.
    pub(crate) ending: EndingView,
    /// Interlocks that crossed.
    pub(crate) crossings: Vec<CrossingView>,
    /// Time under way.
    pub(crate) duration_s: f64,
    /// Charge delivered.
    pub(crate) charge_ah: f64,
    /// Energy delivered.
    pub(crate) energy_wh: f64,
    /// Hottest heat sink seen.
    pub(crate) peak_temperature_degc: Option<f64>,
    /// How near each interlock came.
    pub(crate) margins: Vec<MarginView>,
    /// Readbacks in the rehearsal.
    pub(crate) readbacks: u64,
    /// How long the rehearsal itself took.
    pub(crate) took_s: f64,
    /// The record that was kept.
    pub(crate) kept: Option<PathBuf>,
}

pub(super) fn carry_out(arguments: &Rehearse, output: Output) -> Result<Exit> {
    let on = &arguments.on;
    let submission = Submission::load(on)?;
    let compiled = match submission.compile() {
        Ok(compiled) => compiled,
        Err(refused) => {
            return tell_refused(&problem_of(refused, &on.sink), &on.sequence, output);
        }
    };
    if !compiled.warnings.list.is_empty() && !output.is_json() {
        print::findings(
            &mut io::stderr().lock(),
            &on.sequence,
            &compiled.warnings.list,
        )?;
    }
    let check = check_view(&compiled);
    let plan = compiled.plan;
    let entry = simulated(
        &submission.entry,
        arguments.source.as_deref(),
        on.dut.as_deref(),
        &plan.dut.label,
    )?;
    let refused = |error: String| hinted(error, "mend the source of --source or of the bench file");
    let mut device =
        simulator::simulated_sink(&entry).map_err(|error| refused(error.to_string()))?;
    let config = KeeperConfig::for_sink(&entry).map_err(|error| refused(error.to_string()))?;

    let start = HostClock::start().now();
    let keeping = match &arguments.keep {
        Some(folder) => Some(Keeping::begin(folder, &submission, &entry, &plan, start)?),
        None => None,
    };
    let mut watcher = Watcher::new(start, check.forecast.duration_s, keeping);
    let at_most = plan
        .duration_at_most()
        .saturating_add(BEYOND_PLAN)
        .min(UNBOUNDED_MAX);
    let sequencer = Sequencer::new(plan)?;
    let rehearsal = rehearse(sequencer, config, &mut device, start, at_most, &mut watcher);
    watcher.progress.finish();
    if let Some(failure) = watcher.failure.take() {
        return Err(hinted(
            format!("the record of the rehearsal cannot be kept: {failure}"),
            "give --keep another folder, or rehearse without it",
        ));
    }
    let rehearsal = rehearsal.map_err(|error| {
        hinted(
            format!("the rehearsal came to no end: {error}"),
            "see `sinkwarden check`",
        )
    })?;
    let answer = watcher.answer(check, &rehearsal, start, arguments.keep.as_deref())?;
    output.give(&answer, print::rehearsal)?;
    Ok(answer.ending.how.into())
}

/// What is seen of a rehearsal while it goes on.
struct Watcher {
    start: HostTime,
    progress: Progress,
    keeping: Option<Keeping>,
    failure: Option<JournalError>,
    crossings: Vec<Crossing>,
    peak: Option<quantity::Temperature>,
    readbacks: u64,
}

impl Watcher {
    fn new(start: HostTime, expected_s: f64, keeping: Option<Keeping>) -> Self {
        Self {
            start,
            progress: Progress::towards(whole_seconds(expected_s)),
            keeping,
            failure: None,
            crossings: Vec::new(),
            peak: None,
            readbacks: 0,
        }
    }

    fn saw_reading(&mut self, at: HostTime, reading: &wire::Reading) {
        self.readbacks += 1;
        if let TemperatureReading::Value(value) = reading.values.temperature {
            self.peak = self.peak.max(Some(value));
        }
        if self.readbacks.is_multiple_of(UPDATE_EVERY) {
            let passed_s = at.saturating_since(self.start).seconds();
            self.progress.at(
                whole_seconds(passed_s),
                format!("{} rehearsed", print::duration(passed_s)),
            );
        }
    }

    fn answer(
        mut self,
        check: CheckView,
        rehearsal: &Rehearsal,
        start: HostTime,
        kept: Option<&Path>,
    ) -> Result<RehearsalAnswer> {
        let end = start.saturating_add(rehearsal.took);
        let ending = ending_view(&rehearsal.ending, &self.crossings, end);
        if let Some(keeping) = self.keeping.take() {
            keeping.seal(&rehearsal.ending, &ending)?;
        }
        let status = &rehearsal.status;
        let mut margins = MarginView::nearest_first(&status.margins);
        margins.sort_by(|a, b| b.worst_nearness.total_cmp(&a.worst_nearness));
        Ok(RehearsalAnswer {
            check,
            ending,
            crossings: self.crossings.iter().map(CrossingView::new).collect(),
            duration_s: status.elapsed.seconds(),
            charge_ah: status.charge.ampere_hours(),
            energy_wh: status.energy.watt_hours(),
            peak_temperature_degc: self.peak.map(quantity::Temperature::degrees_celsius),
            margins,
            readbacks: self.readbacks,
            took_s: self.progress.took().seconds(),
            kept: kept.map(Path::to_owned),
        })
    }
}

impl Observer for Watcher {
    fn entry(&mut self, entry: &Entry) {
        match &entry.body {
            Body::Event(Happening::Reading(reading)) => self.saw_reading(entry.at, reading),
            Body::Finding(Finding::Crossed(crossing)) => self.crossings.push(*crossing),
            Body::Note(Note::Described(description)) => {
                if let Some(keeping) = &mut self.keeping {
                    keeping.describe(*description);
                }
            }
            Body::Event(_)
            | Body::Order { .. }
            | Body::Off
            | Body::Finding(_)
            | Body::Ended(_)
            | Body::Note(_) => {}
        }
        if let Some(keeping) = &mut self.keeping
            && let Err(failure) = keeping.take(entry)
        {
            self.failure = Some(failure);
            self.keeping = None;
        }
    }

    fn intervene(&mut self, _passed: Span, _device: &mut SimulatedSink) -> Option<Command> {
        self.failure.is_some().then_some(Command::Stop)
    }
}

pub(super) fn ending_view(ending: &Ending, crossings: &[Crossing], at: HostTime) -> EndingView {
    let tripped = match ending {
        Ending::Tripped(interlock) => Some(*interlock),
        Ending::Finished | Ending::Stopped | Ending::Interrupted => None,
    };
    let crossing = tripped
        .and_then(|interlock| {
            crossings
                .iter()
                .find(|crossing| crossing.interlock == interlock)
        })
        .map(CrossingView::new);
    EndingView {
        how: EndingWord::of(ending),
        interlock: tripped,
        at: super::keeping::rfc3339(at),
        reason: crossing.map(|crossing| {
            format!(
                "{}: {} {}, limit {} {}",
                print::words(&crossing.interlock),
                crossing.value,
                crossing.unit,
                crossing.threshold,
                crossing.unit
            )
        }),
    }
}

#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "a float cast saturates, and a bar is no measurement"
)]
fn whole_seconds(seconds: f64) -> u64 {
    seconds.max(0.0).round() as u64
}
