//! Many equal ticks at once are exactly as many ticks one by one.

use crate::bench::{Bench, TICK_US, celsius, line};
use proptest::prelude::*;
use quantity::SinkTime;
use simulator::firmware::{Firmware, Sample};

/// What a schedule does between two stretches of equal ticks.
#[derive(Debug, Clone)]
enum Act {
    Order(&'static str, String),
    Say(&'static str),
    Read,
}

fn act() -> impl Strategy<Value = Act> {
    let order = |kind: &'static str, fields: BoxedStrategy<String>| {
        fields
            .prop_map(move |fields| Act::Order(kind, fields))
            .boxed()
    };
    let step =
        (0_usize..5, 0_u32..2_000, 0_u64..40, 1_u64..400).prop_map(|(mode, target, ramp, hold)| {
            let mode = ["current", "power", "resistance", "current", "current"][mode];
            let target = if mode == "current" {
                target * 1_000
            } else {
                target * 3_000 + 1
            };
            format!("{mode} @ {target} {} {}", ramp * TICK_US, hold * TICK_US)
        });
    prop_oneof![
        6 => order("step", step.boxed()),
        1 => order("limit", prop_oneof![
            Just("current 1500000 7000".to_owned()),
            Just("voltage-low 3500000 12000".to_owned()),
            Just("temperature 40000 30000".to_owned()),
            Just("excess 20000 3000".to_owned()),
        ].boxed()),
        1 => order("readback", prop_oneof![Just("20000".to_owned()), Just("0".to_owned()),
            Just("33333".to_owned())].boxed()),
        1 => order("burst", (0_u64..50, 0_u16..20, 0_u16..20)
            .prop_map(|(_, b, a)| format!("@ {b} {a}")).boxed()),
        1 => order("deadman", Just("300000".to_owned()).boxed()),
        1 => order("reset", Just(String::new()).boxed()),
        1 => order("isolator", prop_oneof![Just("0".to_owned()), Just("1".to_owned())].boxed()),
        1 => order("clear", Just("0".to_owned()).boxed()),
        3 => Just(Act::Say("clock 1")),
        1 => Just(Act::Say("off 2")),
        3 => Just(Act::Read),
    ]
}

fn sample() -> impl Strategy<Value = Sample> {
    let current = prop_oneof![4 => 0_u16..2_000, 1 => 0_u16..4_096];
    let voltage = prop_oneof![8 => 1_600_u16..2_100, 1 => 0_u16..4_096];
    let degrees = prop_oneof![8 => 20_000_i64..45_000, 1 => 70_000_i64..90_000];
    (current, voltage, degrees).prop_map(|(current_code, voltage_code, degrees)| Sample {
        current_code,
        voltage_code,
        temperature: celsius(degrees),
    })
}

fn output(firmware: &mut Firmware) -> Vec<u8> {
    let mut bytes = Vec::new();
    firmware.transmit(&mut bytes, usize::MAX);
    bytes
}

proptest! {
    #[test]
    fn equal_ticks_at_once_are_equal_ticks_one_by_one(
        schedule in prop::collection::vec(
            (act(), 0_u64..60, sample(), 1_u32..300), 1..40),
    ) {
        let mut bench = Bench::ready();
        bench.must("readback", "20000");
        let mut one_by_one = bench.firmware.clone();
        let mut at_once = bench.firmware;
        let (mut now, mut number) = (bench.now, bench.next);
        for (act, ahead, sample, ticks) in schedule {
            let start = if ahead < 10 { 0 } else { now + ahead * 777 };
            let text = match act {
                Act::Order(kind, fields) => {
                    let fields = fields.replace('@', &start.to_string());
                    number += 1;
                    format!("{kind} {} {fields}", number - 1).trim_end().to_owned()
                }
                Act::Say(text) => text.to_owned(),
                Act::Read => {
                    prop_assert_eq!(output(&mut one_by_one), output(&mut at_once));
                    continue;
                }
            };
            for firmware in [&mut one_by_one, &mut at_once] {
                firmware.receive(&line(&text), SinkTime::from_micros(now));
            }
            let first = SinkTime::from_micros(now + TICK_US);
            let fast = at_once.tick_same(first, ticks, sample);
            let mut slow = fast;
            for _ in 0..ticks {
                now += TICK_US;
                slow = one_by_one.tick(SinkTime::from_micros(now), sample);
            }
            prop_assert_eq!(slow, fast, "after {}", text);
            prop_assert_eq!(one_by_one.quiet_ticks(), at_once.quiet_ticks());
        }
        prop_assert_eq!(output(&mut one_by_one), output(&mut at_once));
    }

    /// While the core calls itself quiet, nothing comes out and the drive stands.
    #[test]
    fn quiet_ticks_are_quiet(
        schedule in prop::collection::vec((act(), 0_u64..60, sample(), 1_u32..50), 1..40),
    ) {
        let mut bench = Bench::ready();
        bench.must("readback", "20000");
        let mut firmware = bench.firmware;
        let (mut now, mut number) = (bench.now, bench.next);
        for (act, ahead, sample, ticks) in schedule {
            if let Act::Order(kind, fields) = act {
                let fields = fields.replace('@', &(now + ahead * 777).to_string());
                let text = format!("{kind} {number} {fields}").trim_end().to_owned();
                number += 1;
                firmware.receive(&line(&text), SinkTime::from_micros(now));
            }
            for _ in 0..ticks {
                now += TICK_US;
                let drive = firmware.tick(SinkTime::from_micros(now), sample);
                output(&mut firmware);
                for _ in 0..firmware.quiet_ticks().min(500) {
                    now += TICK_US;
                    let after = firmware.tick(SinkTime::from_micros(now), sample);
                    prop_assert_eq!(after, drive);
                    prop_assert_eq!(firmware.transmit_waiting(), 0);
                }
            }
        }
    }
}

#[test]
fn a_quiet_hour_is_one_stretch() {
    let mut bench = Bench::ready();
    bench.must("deadman", "10000000");
    bench.must("step", "current 0 1000000 0 3600000000");
    bench.ticks(5);
    // Until the deadman: 10 s less the ticks that have passed, less the one that trips.
    assert_eq!(bench.firmware.quiet_ticks(), 10_000 - 5 - 1);
    bench.firmware.off();
    assert_eq!(bench.firmware.quiet_ticks(), 0);
    bench.ticks(4);
    assert_eq!(bench.firmware.quiet_ticks(), u32::MAX);
}
