//! Whatever a host says: never on before ready, never above a limit, never on after a latch.

use crate::bench::{Bench, celsius, config, line};
use proptest::prelude::*;
use wire::Reset;

/// A host that knows the words and not the meaning.
fn utterance() -> impl Strategy<Value = String> {
    let number = prop_oneof![
        4 => 0_i64..20,
        2 => prop::sample::select(vec![0, 1, 100_000, 300_000, 1_000_000, 2_000_000, 20_000_000]),
        1 => any::<i64>(),
    ];
    let word = prop::sample::select(vec![
        "hello",
        "clock",
        "off",
        "limit",
        "deadman",
        "readback",
        "step",
        "clear",
        "reset",
        "isolator",
        "burst",
        "current",
        "power",
        "resistance",
        "voltage-high",
        "voltage-low",
        "temperature",
        "excess",
        "wobble",
        "",
    ]);
    let field =
        prop_oneof![3 => number.prop_map(|n| n.to_string()), 2 => word.prop_map(str::to_owned)];
    let orders = prop::sample::select(vec![
        "hello 1 5",
        "hello 1 6",
        "step # current 0 900000 0 1000000",
        "step # current 0 300000 20000 50000",
        "step # power 0 2000000 0 1000000",
        "step # resistance 0 2000000 30000 1000000",
        "step # resistance 0 1 0 1000000",
        "limit # current 1000000 0",
        "limit # current 400000 3000",
        "limit # power 4000000 0",
        "limit # voltage-high 5000000 0",
        "limit # voltage-low 3000000 0",
        "limit # temperature 60000 0",
        "limit # excess 100000 0",
        "readback # 20000",
        "reset #",
        "clear # 0",
        "isolator # 1",
        "off 3",
        "clock 4",
    ]);
    prop_oneof![
        1 => prop::collection::vec(field, 1..8).prop_map(|fields| fields.join(" ")),
        6 => orders.prop_map(str::to_owned),
    ]
}

/// The limits as the host was told they are in force, in uA.
#[derive(Default)]
struct Told {
    current: Option<u32>,
    latched: bool,
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]
    #[test]
    fn no_host_can_drive_the_sink_past_its_limits(
        schedule in prop::collection::vec((utterance(), 0_u32..30, 1_000_u16..2_200, 20_i64..62), 1..150),
        damage in prop::collection::vec(any::<u16>(), 150),
    ) {
        let mut bench = Bench::with(config(), Reset::Power);
        let mut told = Told::default();
        let mut number = 1_u16;
        for (i, (text, ticks, voltage, degrees)) in schedule.into_iter().enumerate() {
            let text = text.replace('#', &number.to_string());
            let mut bytes = line(&text);
            if damage[i] % 8 == 0 {
                let at = usize::from(damage[i] / 8) % bytes.len();
                bytes[at] ^= 0x10;
            }
            bench.raw(&bytes);
            let words: Vec<&str> = text.split(' ').collect();
            for answer in bench.heard() {
                let answer: Vec<&str> = answer.split(' ').collect();
                if answer[0] == "ready" {
                    told.current = None;
                    number = 1;
                }
                // Repeated answers, and those that use up no number, change nothing.
                let executed = answer[0] == "ok" && answer.len() == 2;
                let refused = answer[0] == "no" && answer[2] != "gap" && answer[2] != "session";
                if !(executed || refused) || answer[1] != number.to_string() {
                    continue;
                }
                number += 1;
                if executed && words[0] == "limit" && words[2] == "current" {
                    told.current = Some(words[3].parse().unwrap());
                }
                if executed && words[0] == "reset" {
                    told.latched = false;
                }
            }
            bench.plant.voltage_code = voltage;
            bench.plant.temperature = celsius(degrees * 1_000);
            for _ in 0..ticks {
                let drive = bench.tick();
                prop_assert!(drive.gate || drive.code == 0);
                for event in bench.heard() {
                    if event.starts_with("trip ") {
                        told.latched = true;
                    }
                }
                if drive.gate {
                    let limit = told.current.expect("on without a current limit");
                    prop_assert!(u32::from(drive.code) * 1_000 <= limit + 500);
                    prop_assert!(!told.latched, "on while latched");
                }
            }
        }
    }
}
