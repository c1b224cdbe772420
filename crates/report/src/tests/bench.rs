//! Records for reports: rehearsed on the invented bench, or written by hand.

use std::collections::BTreeMap;
use std::path::Path;

use figures::{Figures, work_out};
use journal::{ClockKind, Ended, Entry, Manifest, Options, Record, SequenceText, Writer};
use quantity::{HostTime, Span};
use run::KeeperConfig;
use run::rehearse::{Observer, Rehearsal, rehearse};
use sequence::compile;
use sequence::plan::Plan;
use sequencer::Sequencer;
use sequencer::event::Ending;
use simulator::bench_source::sink_parts;
use simulator::device::SimulatedSink;
use sink::bench::{Bench, SinkEntry};
use tempfile::TempDir;

/// 2026-12-01T20:00:00Z.
pub(crate) const EVENING: HostTime = HostTime::from_micros(1_796_155_200_000_000);

/// A minute at 640 mA between two rests.
pub(crate) const MINUTE: &str = r#"{
  "sequence": 1,
  "title": "A minute at 0.2 It (invented)",
  "dut": { "label": "K-01", "kind": "cell", "rated_capacity": "3.2 Ah",
           "voltage_min": "2.5 V", "voltage_max": "4.25 V", "current_max": "6.4 A" },
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" } },
  "steps": [
    { "rest": "5 s", "label": "settle" },
    { "draw": "0.2 It", "for": "60 s", "label": "discharge" },
    { "rest": "5 s", "label": "recovery" }
  ]
}"#;

/// The same, with an interlock that must trip.
pub(crate) fn tripping() -> String {
    MINUTE.replace(r#""below": "2.5 V""#, r#""below": "4.15 V""#)
}

pub(crate) fn left() -> SinkEntry {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    bench.sink("left").unwrap().clone()
}

pub(crate) fn plan(text: &str) -> Plan {
    match compile(
        text,
        &left(),
        &BTreeMap::new(),
        &sequence::Options::default(),
    ) {
        Ok(compiled) => compiled.plan,
        Err(refused) => panic!("{refused}"),
    }
}

pub(crate) fn manifest(text: &str) -> Manifest {
    Manifest {
        format: journal::FORMAT,
        record: "weir-left-0001".to_owned(),
        created: "2026-12-01T20:00:00Z".to_owned(),
        host: "weir".to_owned(),
        software: "sinkwarden 0.1.0".to_owned(),
        sink: "left".to_owned(),
        clock: ClockKind::Virtual,
        bench: serde_json::to_value(left()).unwrap(),
        sequence: SequenceText {
            text: text.to_owned(),
            files: BTreeMap::new(),
        },
        plan: plan(text),
        certificate: None,
        description: None,
        resumed: Vec::new(),
        ended: None,
    }
}

/// A record in a folder of its own.
pub(crate) struct Kept {
    folder: TempDir,
    pub(crate) record: Record,
    pub(crate) rehearsal: Option<Rehearsal>,
}

impl Kept {
    pub(crate) fn figures(&self) -> Figures {
        work_out(&self.record).unwrap()
    }

    pub(crate) fn page(&self) -> String {
        page_of(&self.record, &self.figures())
    }

    pub(crate) fn path(&self) -> std::path::PathBuf {
        self.folder.path().join("record")
    }
}

pub(crate) fn page_of(record: &Record, figures: &Figures) -> String {
    let options = crate::Options {
        made: Some("2026-12-02T07:00:00Z".to_owned()),
    };
    crate::render(record, figures, &options).unwrap()
}

struct Keeping(Writer);

impl Observer for Keeping {
    fn entry(&mut self, entry: &Entry) {
        self.0.append(entry).unwrap();
    }
}

/// Rehearses a sequence into a record, sealed or as a host would leave it that died at the end.
pub(crate) fn rehearsed(text: &str, sealed: bool) -> Kept {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("record");
    let manifest = manifest(text);
    let plan = manifest.plan.clone();
    let mut device = SimulatedSink::new(sink_parts(&left()).unwrap()).unwrap();
    let mut keeping = Keeping(Writer::create(&path, manifest, Options::default()).unwrap());
    let rehearsal = rehearse(
        Sequencer::new(plan).unwrap(),
        KeeperConfig::for_sink(&left()).unwrap(),
        &mut device,
        EVENING,
        Span::from_secs(3600),
        &mut keeping,
    )
    .unwrap();
    if sealed {
        keeping.0.seal(ended(rehearsal.ending.clone())).unwrap();
    } else {
        keeping.0.commit().unwrap();
    }
    Kept {
        record: Record::open(&path).unwrap(),
        folder,
        rehearsal: Some(rehearsal),
    }
}

/// A record of these entries, never sealed.
pub(crate) fn written(manifest: Manifest, entries: &[Entry]) -> Kept {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("record");
    write(&path, manifest, entries);
    Kept {
        record: Record::open(&path).unwrap(),
        folder,
        rehearsal: None,
    }
}

fn write(path: &Path, manifest: Manifest, entries: &[Entry]) {
    let mut writer = Writer::create(path, manifest, Options::default()).unwrap();
    for entry in entries {
        writer.append(entry).unwrap();
    }
    writer.commit().unwrap();
}

pub(crate) fn ended(how: Ending) -> Ended {
    Ended {
        how,
        at: "2026-12-01T20:01:10Z".to_owned(),
        reason: None,
    }
}
