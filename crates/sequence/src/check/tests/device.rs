//! The DUT, the sink, its converter, its port.

use quantity::{Current, Power, Resistance, Span, Voltage};
use serde_json::json;
use sink::bench::Bench;
use sink::envelope::{Duration, Envelope};

use super::{Bed, Case, case, profile, remove};
use crate::rule::Rule;

fn short_steps(bed: &mut Bed, micros: u64) {
    bed.facts.queue = 4;
    bed.steps(json!([{ "repeat": { "times": 100, "steps": [
        { "draw": "100 mA", "for": format!("{micros} us") },
        { "rest": format!("{micros} us") },
    ] } }]));
}

/// A pulse so often, its beginning captured each time.
fn captured_pulses(bed: &mut Bed, millis: u64) {
    bed.steps(json!([{ "repeat": { "times": 3, "steps": [
        { "draw": "1 A", "for": "50 ms", "burst": { "before": "10 ms", "after": "10 ms" } },
        { "rest": format!("{} ms", millis - 50) },
    ] } }]));
}

/// A sink whose heat sink can get rid of 2.5 W, and one step of ten hours.
fn small_heat_sink(bed: &mut Bed, above: i64) {
    let bench = Bench::from_toml(include_str!("../../../../sink/src/bench/weir.toml")).unwrap();
    let mut entry = bench.sink("left").unwrap().clone();
    entry.heat_sink.to_ambient = "20 K/W".parse().unwrap();
    let envelope = Envelope::of(&entry).unwrap();
    let ten_hours = Duration::Pulse(Span::from_secs(36_000));
    let voltage = Voltage::from_millivolts(4_200);
    let most = envelope
        .ceiling(voltage, Resistance::ZERO, ten_hours)
        .current;
    let current = most + Current::from_microamperes(above);
    bed.facts.envelope = Ok(envelope);
    // Without a rated capacity nothing is said about the charge of ten hours.
    remove(&mut bed.sequence["dut"], "rated_capacity");
    bed.interlock("undervoltage", json!({ "below": "2.5 V" }));
    bed.steps(json!([{ "draw": current.to_string(), "for": "10 h" }]));
}

pub(super) const CASES: &[Case] = &[
    case(
        Rule::DutVoltages,
        |bed| bed.dut("voltage_min", json!("4.2 V")),
        |bed| bed.dut("voltage_min", json!("2.499999 V")),
    ),
    case(
        Rule::DutCurrent,
        |bed| bed.dut("current_max", json!("0 A")),
        |bed| bed.dut("current_max", json!("640 mA")),
    ),
    case(
        Rule::DutCellCount,
        |bed| bed.dut("series", json!(2)),
        |bed| {
            bed.dut("series", json!(2));
            bed.dut("kind", json!("pack"));
        },
    ),
    case(
        Rule::DutLabel,
        |bed| remove(&mut bed.sequence["dut"], "label"),
        |bed| {
            remove(&mut bed.sequence["dut"], "label");
            bed.options.dut_label = Some("K-03".to_owned());
        },
    ),
    case(
        Rule::DutVoltageRange,
        |bed| bed.facts.voltage_max = Voltage::from_microvolts(4_199_999),
        |bed| bed.facts.voltage_max = Voltage::from_microvolts(4_200_000),
    ),
    case(
        Rule::RatedCapacityMissing,
        |bed| remove(&mut bed.sequence["dut"], "rated_capacity"),
        |bed| {
            remove(&mut bed.sequence["dut"], "rated_capacity");
            bed.sequence["steps"][1]["draw"] = json!("640 mA");
        },
    ),
    case(
        Rule::CurrentNegative,
        |bed| bed.step(json!({ "draw": "-1 mA", "for": "1 s" })),
        |bed| bed.step(json!({ "draw": "0 mA", "for": "1 s" })),
    ),
    case(
        Rule::CurrentAboveSink,
        |bed| {
            bed.facts.current_max = Current::from_milliamperes(1000);
            bed.step(json!({ "draw": "1.000001 A", "for": "1 s" }));
        },
        |bed| {
            bed.facts.current_max = Current::from_milliamperes(1000);
            bed.step(json!({ "draw": "1 A", "for": "1 s" }));
        },
    ),
    case(
        // At the least voltage, where the undervoltage interlock acts: 5 W / 2.5 V.
        Rule::CurrentAboveDut,
        |bed| {
            bed.dut("current_max", json!("2 A"));
            bed.step(json!({ "draw_power": "5.00001 W", "for": "1 s" }));
        },
        |bed| {
            bed.dut("current_max", json!("2 A"));
            bed.step(json!({ "draw_power": "5 W", "for": "1 s" }));
        },
    ),
    case(
        // At the largest voltage: 4.2 V / 2.1 ohm is 2 A.
        Rule::CurrentAboveDut,
        |bed| {
            bed.dut("current_max", json!("2 A"));
            bed.step(json!({ "draw_resistance": "2.09999 ohm", "for": "1 s" }));
        },
        |bed| {
            bed.dut("current_max", json!("2 A"));
            bed.step(json!({ "draw_resistance": "2.1 ohm", "for": "1 s" }));
        },
    ),
    case(
        // 4.2 V times 2 A.
        Rule::PowerAboveSink,
        |bed| {
            bed.facts.power_max = Power::from_milliwatts(8_399);
            bed.step(json!({ "draw": "2 A", "for": "1 s" }));
        },
        |bed| {
            bed.facts.power_max = Power::from_milliwatts(8_400);
            bed.step(json!({ "draw": "2 A", "for": "1 s" }));
        },
    ),
    case(
        Rule::AboveEnvelope,
        |bed| small_heat_sink(bed, 1),
        |bed| small_heat_sink(bed, 0),
    ),
    case(
        // (200 uV + 50 uV) / 0.1 ohm.
        Rule::CurrentBelowFloor,
        |bed| bed.step(json!({ "draw": "2.499 mA", "for": "1 s" })),
        |bed| bed.step(json!({ "draw": "2.5 mA", "for": "1 s" })),
    ),
    case(
        // 330 mV / 2^12 / 0.1 ohm is 806 uA; half of it is 2 % of 20.15 mA.
        Rule::CoarseStep,
        |bed| bed.step(json!({ "draw": "20.14 mA", "for": "1 s" })),
        |bed| bed.step(json!({ "draw": "20.15 mA", "for": "1 s" })),
    ),
    case(
        Rule::AbilityMissing,
        |bed| {
            bed.facts.holds_power = false;
            bed.step(json!({ "draw_power": "1 W", "for": "1 s" }));
        },
        |bed| {
            bed.facts.holds_power = false;
            bed.step(json!({ "draw_resistance": "3 ohm", "for": "1 s" }));
        },
    ),
    case(
        Rule::ShorterThanTick,
        |bed| bed.step(json!({ "rest": "999 us" })),
        |bed| bed.step(json!({ "rest": "1 ms" })),
    ),
    case(
        // The jump to 1 A takes one tick, the slope another.
        Rule::ShorterThanTick,
        |bed| {
            bed.step(profile(
                &json!([["0 s", "1 A"], ["1999 us", "2 A"]]),
                "linear",
            ));
        },
        |bed| bed.step(profile(&json!([["0 s", "1 A"], ["2 ms", "2 A"]]), "linear")),
    ),
    case(
        Rule::OffTick,
        |bed| bed.step(json!({ "rest": "1500 us" })),
        |bed| bed.step(json!({ "rest": "2 ms" })),
    ),
    case(
        // 512 samples of 1 ms.
        Rule::BurstTooLong,
        |bed| {
            bed.step(json!({ "draw": "1 A", "for": "1 s",
                "burst": { "before": "13 ms", "after": "500 ms" } }));
        },
        |bed| {
            bed.step(json!({ "draw": "1 A", "for": "1 s",
                "burst": { "before": "12 ms", "after": "500 ms" } }));
        },
    ),
    case(
        // 20 samples of 1 ms, 4 ms each to send, from 10 ms after the edge; the next begins 10 ms
        // before its own: 100 ms.
        Rule::BurstMissed,
        |bed| captured_pulses(bed, 99),
        |bed| captured_pulses(bed, 100),
    ),
    case(
        // Four steps of 96 bytes at 86.8 us a byte, slowed by readbacks, and 100 ms: 136.2 ms.
        Rule::QueueRunsDry,
        |bed| short_steps(bed, 34_000),
        |bed| short_steps(bed, 35_000),
    ),
    case(
        Rule::ReadbackTooFast,
        |bed| {
            bed.facts.baud = None;
            bed.sequence["readback"] = json!("19.999 ms");
        },
        |bed| {
            bed.facts.baud = None;
            bed.sequence["readback"] = json!("20 ms");
        },
    ),
    case(
        Rule::ReadbackTooSlow,
        |bed| {
            bed.facts.interlocks.silence = Some(Span::from_secs(60));
            bed.sequence["readback"] = json!("10001 ms");
        },
        |bed| {
            bed.facts.interlocks.silence = Some(Span::from_secs(60));
            bed.sequence["readback"] = json!("10 s");
        },
    ),
    case(
        // 180 bytes of 10 bits at 115200 baud, over two thirds: 23.4375 ms.
        Rule::ReadbackAbovePort,
        |bed| bed.sequence["readback"] = json!("23437 us"),
        |bed| bed.sequence["readback"] = json!("23438 us"),
    ),
];
