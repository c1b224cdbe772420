//! Outside checks: integrals that other people worked out, of a measured discharge and of one
//! that an independent physics library simulated; and a resistance in closed form.
//!
//! A curve is turned into the record that an ideal sink would have made of it: one readback
//! around each point of the curve, counters that integrate the straight lines between points.

use std::collections::BTreeMap;

use journal::{Body, ClockKind, Ended, Entry, Manifest, Options, Record, SequenceText, Writer};
use quantity::{Charge, Current, Energy, HostTime, SinkTime, Temperature, Voltage};
use sequencer::event::{Ending, Finding, Happening, StepEnd};
use wire::{Counters, OrderNumber, Readback, Reading, SinkState, TemperatureReading};

use super::bench::left;
use crate::{Name, work_out};

const MEASURED: &str = include_str!("../../tests/data/enertech_0.5C_voltage.txt");
const SIMULATED: &str = include_str!("../../tests/data/Chen2020_DFN_1.0C.csv");

/// A point of a discharge at constant current: seconds, volts.
type Point = (f64, f64);

#[test]
fn a_measured_discharge_gives_the_published_capacity_and_energy_to_both_cut_offs() {
    // A pouch cell at 0.5 C, 1.14 A (Ai et al. 2020, doi 10.1149/2.0122001JES), integrated with
    // numpy outside this project: 3.0 V at 7305.30799 s, 2.3133475 Ah, 8.6668399 Wh.
    let curve: Vec<Point> = MEASURED.lines().map(|line| pair(line, '\t')).collect();
    let (capacity_ah, energy_wh) = to_cut_off(&curve, 1.14, "3 V");
    assert_close(capacity_ah, 2.313_347_5, 2e-6);
    assert_close(energy_wh, 8.666_839_9, 5e-6);
    // The same to 3.3 V, at 7121.73188 s.
    let (capacity_ah, _) = to_cut_off(&curve, 1.14, "3.3 V");
    assert_close(capacity_ah, 1.14 * 7_121.731_88 / 3600.0, 2e-6);
}

#[test]
fn a_simulated_discharge_gives_the_librarys_own_capacity_and_energy() {
    // PyBaMM 26.10, Chen2020, DFN, 5 A: 4.938189 Ah and 17.29505 Wh to its last point.
    let curve: Vec<Point> = SIMULATED
        .lines()
        .skip(1)
        .map(|line| {
            let mut fields = line.split(',').map(|field| field.parse::<f64>().unwrap());
            let (seconds, _, volts) = (
                fields.next().unwrap(),
                fields.next().unwrap(),
                fields.next().unwrap(),
            );
            (seconds, volts)
        })
        .collect();
    let folder = tempfile::tempdir().unwrap();
    let record = record_of(&curve, 5.0, "2.4 V", folder.path());
    let figures = work_out(&record).unwrap();
    let value = |name| {
        figures
            .figures
            .iter()
            .find(|figure| figure.name == name)
            .unwrap()
            .value
    };
    assert_close(value(Name::DeliveredCharge), 4.938_189, 1e-6);
    // The library integrates its own solution between the points; straight lines miss a little.
    assert_close(value(Name::DeliveredEnergy), 17.295_05, 2e-4);
}

fn to_cut_off(curve: &[Point], amperes: f64, cut_off: &str) -> (f64, f64) {
    let folder = tempfile::tempdir().unwrap();
    let record = record_of(curve, amperes, cut_off, folder.path());
    let figures = work_out(&record).unwrap();
    let value = |name| {
        let found = figures.figures.iter().find(|figure| figure.name == name);
        found
            .unwrap_or_else(|| panic!("no {name:?}: {:?}", figures.missing))
            .value
    };
    (value(Name::Capacity), value(Name::Energy))
}

fn assert_close(value: f64, expected: f64, relative: f64) {
    let off = (value / expected - 1.0).abs();
    assert!(
        off < relative,
        "{value}, expected {expected}: off by {off:e}"
    );
}

fn pair(line: &str, separator: char) -> Point {
    let (first, second) = line.split_once(separator).unwrap();
    (
        first.trim().parse().unwrap(),
        second.trim().parse().unwrap(),
    )
}

/// The record that an ideal sink would have made of a curve.
fn record_of(curve: &[Point], amperes: f64, cut_off: &str, folder: &std::path::Path) -> Record {
    let path = folder.join("record");
    let mut writer = Writer::create(&path, manifest(cut_off), Options::default()).unwrap();
    let mut number = 0;
    let mut enter = |seconds: f64, body: Body| {
        number += 1;
        let at = HostTime::from_micros(1_796_155_200_000_000 + micros(seconds));
        writer.append(&Entry { number, at, body }).unwrap();
    };
    let begin = time(0.0);
    let first = reading(0, 0.0, (0.0, curve[0].1), 0.0);
    enter(0.0, Body::Event(Happening::Reading(first)));
    enter(
        0.0,
        Body::Finding(Finding::StepBegan { op: 0, time: begin }),
    );
    let mut energy_j = 0.0;
    for (index, &(seconds, volts)) in curve.iter().enumerate() {
        let (before_s, before_v) = index.checked_sub(1).map_or((seconds, volts), |i| curve[i]);
        let (after_s, after_v) = *curve.get(index + 1).unwrap_or(&(seconds, volts));
        // From the middle before the point to the middle after it, along straight lines.
        energy_j += amperes * 0.5 * (seconds - before_s) * (0.25 * before_v + 0.75 * volts);
        energy_j += amperes * 0.5 * (after_s - seconds) * (0.75 * volts + 0.25 * after_v);
        let until_s = 0.5 * (seconds + after_s);
        let reading = reading(index, until_s, (amperes, volts), energy_j);
        enter(until_s, Body::Event(Happening::Reading(reading)));
    }
    let last = curve.last().unwrap().0;
    let ended = Finding::StepEnded {
        op: 0,
        time: time(last),
        by: StepEnd::Until(0),
    };
    enter(last, Body::Finding(ended));
    enter(last, Body::Ended(Ending::Finished));
    let ended = Ended {
        how: Ending::Finished,
        at: "2026-12-02T02:00:00Z".into(),
        reason: None,
    };
    writer.seal(ended).unwrap();
    Record::open(&path).unwrap()
}

fn reading(index: usize, until_s: f64, (amperes, volts): (f64, f64), energy_j: f64) -> Reading {
    let current = Current::from_amperes(amperes).unwrap();
    let voltage = Voltage::from_volts(volts).unwrap();
    Reading {
        readback: u16::try_from(index % 65_535).unwrap() + 1,
        time: time(until_s),
        values: Readback {
            current,
            current_min: current,
            current_max: current,
            voltage,
            voltage_min: voltage,
            voltage_max: voltage,
            temperature: TemperatureReading::Value(Temperature::from_millidegrees_celsius(23_000)),
            state: SinkState::On,
        },
        counters: Some(Counters {
            time: time(until_s),
            charge: Charge::from_coulombs(amperes * until_s).unwrap(),
            energy: Energy::from_joules(energy_j).unwrap(),
            step: OrderNumber(1),
            queued: 0,
            damaged: 0,
        }),
        lost: 0,
    }
}

/// The curve's zero, one second after the sink's power-up.
fn time(seconds: f64) -> SinkTime {
    SinkTime::from_micros(1_000_000 + u64::try_from(micros(seconds)).unwrap())
}

fn micros(seconds: f64) -> i64 {
    #[expect(
        clippy::cast_possible_truncation,
        reason = "a day in microseconds is small"
    )]
    let micros = (seconds * 1e6).round() as i64;
    micros
}

fn manifest(cut_off: &str) -> Manifest {
    let entry = left();
    let text = format!(
        r#"{{ "sequence": 1, "title": "A curve from elsewhere",
             "dut": {{ "label": "curve", "kind": "cell", "rated_capacity": "2.3 Ah",
                      "voltage_min": "2.3 V", "voltage_max": "4.2 V", "current_max": "5 A" }},
             "interlocks": {{ "undervoltage": {{ "below": "2.3 V" }} }},
             "steps": [ {{ "draw": "1 A", "until": [ {{ "voltage_below": "{cut_off}", "for": "5 s" }} ],
                          "at_most": "3 h", "label": "discharge" }} ] }}"#
    );
    let compiled = sequence::compile(
        &text,
        &entry,
        &BTreeMap::new(),
        &sequence::Options::default(),
    );
    let plan = compiled.unwrap_or_else(|refused| panic!("{refused}")).plan;
    Manifest {
        format: journal::FORMAT,
        record: "curve".into(),
        created: "2026-12-01T20:00:00Z".into(),
        host: "bench".into(),
        software: "test".into(),
        sink: entry.name.clone(),
        clock: ClockKind::Virtual,
        bench: serde_json::to_value(&entry).unwrap(),
        sequence: SequenceText {
            text,
            files: BTreeMap::new(),
        },
        plan,
        certificate: None,
        description: None,
        resumed: Vec::new(),
        ended: None,
    }
}
