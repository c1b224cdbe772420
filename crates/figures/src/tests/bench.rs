//! Records of rehearsals on the invented bench, for figures to be worked out from.

use std::collections::BTreeMap;

use journal::{
    Body, ClockKind, Ended, Entry, Manifest, Options as WriterOptions, Record, SequenceText, Writer,
};
use quantity::{Current, HostTime, Resistance, SinkTime, Span, Voltage};
use run::KeeperConfig;
use run::rehearse::{Rehearsal, rehearse};
use sequence::{Options, compile};
use sequencer::Sequencer;
use sequencer::event::Finding;
use simulator::bench_source::sink_parts;
use simulator::cell::{Cell, Model, Spread, Start};
use simulator::device::{SimulatedSink, SinkParts};
use simulator::front_end::Errors;
use simulator::source::{Source, Truth};
use sink::bench::{Bench, SinkEntry};
use sink::calibration::Certificate;
use sink::correction::Correction;
use tempfile::TempDir;

use crate::{Figure, Figures, Name};

const EVENING: HostTime = HostTime::from_micros(1_796_155_200_000_000);

pub(crate) struct Night {
    /// Keeps the record's folder.
    _folder: TempDir,
    pub(crate) record: Record,
    pub(crate) rehearsal: Rehearsal,
    pub(crate) truth: Truth,
    pub(crate) device: SimulatedSink,
}

impl Night {
    /// When the step at this place of the plan began, seconds of the sink's clock.
    pub(crate) fn step_began_s(&self, place: u32) -> f64 {
        let began = self.record.others().unwrap().into_iter().find_map(|entry| {
            if let Body::Finding(Finding::StepBegan { op, time }) = entry.body {
                (op == place).then_some(time)
            } else {
                None
            }
        });
        began.unwrap().saturating_since(SinkTime::ZERO).seconds()
    }
}

pub(crate) fn left() -> SinkEntry {
    sink("left")
}

pub(crate) fn right() -> SinkEntry {
    sink("right")
}

fn sink(name: &str) -> SinkEntry {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    bench.sink(name).unwrap().clone()
}

/// A sink like `left` whose codes are whole microamperes and microvolts, so that nothing is lost
/// in rounding: 16 bits, 62.5 uA and 125 uV a code rounded up to whole ones.
pub(crate) fn exact() -> SinkEntry {
    let mut entry = left();
    entry.front_end.dac.bits = 12;
    entry.front_end.dac.full_scale = Voltage::from_microvolts(409_600);
    entry.front_end.sense_resistor.resistance = Resistance::from_microohms(100_000);
    entry.front_end.adc.bits = 16;
    entry.front_end.adc.current_full_scale = Current::from_microamperes(6_553_600);
    entry.front_end.adc.voltage_full_scale = Voltage::from_microvolts(6_553_600);
    entry
}

/// A rehearsal to be recorded.
pub(crate) struct Setup<'a> {
    pub(crate) text: &'a str,
    pub(crate) entry: &'a SinkEntry,
    pub(crate) parts: SinkParts,
    pub(crate) certificate: Option<Certificate>,
    /// A voltage whose crossing the simulated source writes down.
    pub(crate) watched_v: f64,
}

impl<'a> Setup<'a> {
    /// The sink as its bench entry simulates it.
    pub(crate) fn new(text: &'a str, entry: &'a SinkEntry) -> Self {
        Self {
            text,
            entry,
            parts: sink_parts(entry).unwrap(),
            certificate: None,
            watched_v: 2.75,
        }
    }

    /// On a cell, without errors of the front end.
    pub(crate) fn on_cell(
        text: &'a str,
        entry: &'a SinkEntry,
        model: &Model,
        state_of_charge: f64,
    ) -> Self {
        let mut setup = Self::new(text, entry);
        setup.parts.errors = Errors::default();
        setup.parts.source = cell(model, state_of_charge);
        setup
    }

    /// Rehearses into a record.
    pub(crate) fn night(self) -> Night {
        let correction = self
            .certificate
            .as_ref()
            .map_or(Correction::IDENTITY, |certificate| certificate.correction);
        let options = Options {
            correction,
            ..Options::default()
        };
        let plan = match compile(self.text, self.entry, &BTreeMap::new(), &options) {
            Ok(compiled) => compiled.plan,
            Err(refused) => panic!("{refused}"),
        };
        let mut device = SimulatedSink::new(self.parts).unwrap();
        device.watch_voltage(self.watched_v);
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("record");
        let manifest = Manifest {
            format: journal::FORMAT,
            record: "rehearsal".to_owned(),
            created: "2026-12-01T20:00:00Z".to_owned(),
            host: "bench".to_owned(),
            software: "test".to_owned(),
            sink: self.entry.name.clone(),
            clock: ClockKind::Virtual,
            bench: serde_json::to_value(self.entry).unwrap(),
            sequence: SequenceText {
                text: self.text.to_owned(),
                files: BTreeMap::new(),
            },
            plan: plan.clone(),
            certificate: self
                .certificate
                .map(|certificate| serde_json::to_value(certificate).unwrap()),
            description: None,
            resumed: Vec::new(),
            ended: None,
        };
        let mut writer = Writer::create(&path, manifest, WriterOptions::default()).unwrap();
        let mut observer = |entry: &Entry| {
            writer.append(entry).unwrap();
        };
        let rehearsal = rehearse(
            Sequencer::new(plan).unwrap(),
            KeeperConfig::for_sink(self.entry).unwrap(),
            &mut device,
            EVENING,
            Span::from_secs(48 * 3600),
            &mut observer,
        )
        .unwrap();
        let ended = Ended {
            how: rehearsal.ending.clone(),
            at: "2026-12-02T02:00:00Z".to_owned(),
            reason: None,
        };
        writer.seal(ended).unwrap();
        Night {
            record: Record::open(&path).unwrap(),
            _folder: folder,
            rehearsal,
            truth: device.truth(),
            device,
        }
    }
}

/// A cell at rest at 23 degrees Celsius.
pub(crate) fn cell(model: &Model, state_of_charge: f64) -> Source {
    let start = Start {
        state_of_charge,
        temperature_degc: 23.0,
        ambient_degc: 23.0,
    };
    Source::Cell(Box::new(
        Cell::new(model, Spread::default(), start).unwrap(),
    ))
}

/// The only figure of this name.
pub(crate) fn only(figures: &Figures, name: Name) -> &Figure {
    let found: Vec<&Figure> = figures
        .figures
        .iter()
        .filter(|figure| figure.name == name)
        .collect();
    let [figure] = found[..] else {
        panic!("{} of {name:?}: {:#?}", found.len(), figures.missing)
    };
    figure
}

/// The figure is within so many standard uncertainties of the truth.
pub(crate) fn assert_covers(figure: &Figure, truth: f64, times: f64) {
    let standard = figure.uncertainty.unwrap().standard_uncertainty;
    assert!(
        (figure.value - truth).abs() < times * standard,
        "{:?}: {} with u = {standard}, truth {truth}",
        figure.name,
        figure.value
    );
}

/// Rehearses a sequence into a record; without errors of the front end if asked.
pub(crate) fn night(text: &str, entry: &SinkEntry, error_free: bool, seed: u64) -> Night {
    let mut setup = Setup::new(text, entry);
    setup.parts.seed = seed;
    if error_free {
        setup.parts.errors = Errors::default();
    }
    setup.night()
}
