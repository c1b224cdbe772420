//! Records of rehearsals on the invented bench, for figures to be worked out from.

use std::collections::BTreeMap;

use journal::{Body, Record};
use quantity::{Current, HostTime, Resistance, SinkTime, Span, Voltage};
use run::KeeperConfig;
use run::recording::{About, Recording};
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
use tempfile::TempDir;

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
        let began = self.record.entries_without_readings().find_map(|entry| {
            if let Body::Finding(Finding::StepBegan { op, time }) = entry.unwrap().body {
                (op == place).then_some(time)
            } else {
                None
            }
        });
        began.unwrap().saturating_since(SinkTime::ZERO).seconds()
    }
}

pub(crate) fn left() -> SinkEntry {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    bench.sink("left").unwrap().clone()
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

/// Rehearses a sequence into a record; without errors of the front end if asked.
pub(crate) fn night(text: &str, entry: &SinkEntry, error_free: bool, seed: u64) -> Night {
    let mut parts = sink_parts(entry).unwrap();
    parts.seed = seed;
    if error_free {
        parts.errors = Errors::default();
    }
    rehearsed(text, entry, parts)
}

/// Rehearses a sequence on a cell of a given model, without errors of the front end.
pub(crate) fn night_on(text: &str, entry: &SinkEntry, model: &Model) -> Night {
    let mut parts = sink_parts(entry).unwrap();
    parts.errors = Errors::default();
    let start = Start {
        state_of_charge: 0.9,
        temperature_degc: 23.0,
        ambient_degc: 23.0,
    };
    let cell = Cell::new(model, Spread::default(), start).unwrap();
    parts.source = Source::Cell(Box::new(cell));
    rehearsed(text, entry, parts)
}

fn rehearsed(text: &str, entry: &SinkEntry, parts: SinkParts) -> Night {
    let plan = match compile(text, entry, &BTreeMap::new(), &Options::default()) {
        Ok(compiled) => compiled.plan,
        Err(refused) => panic!("{refused}"),
    };
    let mut device = SimulatedSink::new(parts).unwrap();
    device.watch_voltage(2.75);
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("record");
    let about = About {
        record: "rehearsal".to_owned(),
        created: "2026-12-01T20:00:00Z".to_owned(),
        host: "bench".to_owned(),
        sequence: text.to_owned(),
        files: BTreeMap::new(),
    };
    let mut recording = Recording::create(&path, about, &plan, entry).unwrap();
    let rehearsal = rehearse(
        Sequencer::new(plan).unwrap(),
        KeeperConfig::for_sink(entry).unwrap(),
        &mut device,
        EVENING,
        Span::from_secs(48 * 3600),
        &mut recording,
    )
    .unwrap();
    recording
        .seal(rehearsal.ending.clone(), "2026-12-02T02:00:00Z".to_owned())
        .unwrap();
    Night {
        record: Record::open(&path).unwrap(),
        _folder: folder,
        rehearsal,
        truth: device.truth(),
        device,
    }
}
