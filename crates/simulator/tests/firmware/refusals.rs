//! Section 3: every reason to refuse an order.

use crate::bench::{Bench, TICK_US, celsius, config};
use wire::{Abilities, Reset};

#[test]
fn a_step_needs_all_six_limits_of_this_session() {
    let limits = [
        "current 3000000 0",
        "power 12000000 0",
        "voltage-high 5000000 0",
        "voltage-low 2000000 0",
        "temperature 80000 0",
        "excess 200000 0",
    ];
    for missing in 0..limits.len() {
        let mut bench = Bench::cold();
        bench.say("hello 1 1");
        for (i, limit) in limits.iter().enumerate() {
            if i != missing {
                bench.must("limit", limit);
            }
        }
        bench.refused("step", "current 0 1000 0 1000000", "unready");
        bench.refused("step", "current 0 0 0 1000000", "unready");
        bench.must("limit", limits[missing]);
        bench.must("step", "current 0 1000 0 1000000");
    }
}

#[test]
fn a_target_above_its_limit_is_refused_and_at_it_taken() {
    let mut bench = Bench::ready();
    bench.refused("step", "current 0 3000001 0 1000000", "limit");
    bench.must("step", "current 0 3000000 0 1000000");
    bench.refused("step", "power 0 12000001 0 1000000", "limit");
    bench.must("step", "power 0 12000000 0 1000000");
    bench.must("step", "resistance 0 1 0 1000000");
}

#[test]
fn a_start_in_the_past_is_late_and_now_is_not() {
    let mut bench = Bench::ready();
    let now = bench.now;
    bench.refused(
        "step",
        &format!("current {} 1000 0 1000000", now - 1),
        "late",
    );
    bench.must("step", &format!("current {now} 1000 0 1000000"));
}

#[test]
fn a_start_before_the_last_queued_is_out_of_range() {
    let mut bench = Bench::ready();
    let at = bench.now + 50_000;
    bench.must("step", &format!("current {at} 1000 0 1000000"));
    bench.refused(
        "step",
        &format!("current {} 1000 0 1000000", at - 1),
        "range",
    );
    bench.refused("step", "current 0 1000 0 1000000", "range");
    bench.must("step", &format!("current {at} 2000 0 1000000"));
}

#[test]
fn a_full_queue_refuses_and_takes_again_once_there_is_room() {
    let mut bench = Bench::ready();
    let start = bench.now + 10 * TICK_US;
    for i in 0..16 {
        bench.must(
            "step",
            &format!("current {} 1000 0 1000000", start + i * TICK_US),
        );
    }
    bench.refused(
        "step",
        &format!("current {} 1000 0 1", start + 16 * TICK_US),
        "full",
    );
    bench.ticks(10);
    bench.must(
        "step",
        &format!("current {} 1000 0 1", start + 16 * TICK_US),
    );
    bench.refused(
        "step",
        &format!("current {} 1000 0 1", start + 17 * TICK_US),
        "full",
    );
}

#[test]
fn values_out_of_range_are_refused_and_their_ends_are_taken() {
    let mut bench = Bench::ready();
    for (kind, bad) in [
        ("deadman", "99999"),
        ("deadman", "10000001"),
        ("deadman", ""),
        ("deadman", "1000000 1"),
        ("readback", "19999"),
        ("readback", "3600000001"),
        ("readback", "-1"),
        ("limit", "current -1 0"),
        ("limit", "current 1000000000 0"),
        ("limit", "power 1 60000001"),
        ("limit", "temperature 1000000 0"),
        ("limit", "current 1"),
        ("step", "current 0 -1 0 1"),
        ("step", "current 0 1 0 0"),
        ("step", "resistance 0 0 0 1"),
        ("step", "current 0 1 2678400000001 1"),
        ("step", "current 9223372036854775808 1 0 1"),
        ("step", "current 99999999999999999999 1 0 1"),
        ("step", "current 0 1 0"),
        ("clear", "99999999999999999999999"),
        ("isolator", "2"),
        ("burst", "900000 65536 0"),
        ("reset", "1"),
    ] {
        bench.refused(kind, bad, "range");
    }
    for (kind, good) in [
        ("deadman", "100000"),
        ("deadman", "10000000"),
        ("readback", "20000"),
        ("readback", "3600000000"),
        ("readback", "0"),
        ("limit", "voltage-low -99999999 60000000"),
        ("limit", "temperature -99999 0"),
        ("limit", "current 999999999 0"),
    ] {
        bench.must(kind, good);
    }
}

#[test]
fn what_the_sink_cannot_do_is_refused_as_ability() {
    let mut config = config();
    config.abilities = Abilities::default();
    config.burst = 0;
    let mut bench = Bench::with(config, Reset::Power);
    bench.get_ready();
    bench.refused("step", "power 0 1000 0 1000", "ability");
    bench.refused("step", "resistance 0 1000 0 1000", "ability");
    bench.refused("burst", "900000 1 1", "ability");
    bench.refused("isolator", "1", "ability");
    bench.refused("isolator", "0", "ability");
    bench.must("step", "current 0 1000 0 1000");
}

#[test]
fn a_latched_sink_takes_no_step_but_all_the_rest() {
    let mut bench = Bench::on(100_000);
    bench.plant.temperature = celsius(90_000);
    bench.tick();
    bench.heard();
    bench.refused("step", "current 0 1000 0 1000", "latched");
    bench.refused("step", "current 0 0 0 1000", "latched");
    bench.refused("isolator", "1", "latched");
    bench.refused("reset", "", "cause");
    bench.must("isolator", "0");
    bench.must("limit", "current 1000000 0");
    bench.must("readback", "20000");
    bench.must("clear", "0");
    bench.plant.temperature = celsius(70_000);
    bench.tick();
    bench.must("reset", "");
    bench.must("step", "current 0 1000 0 1000");
}

#[test]
fn impossible_configurations_make_no_core() {
    let wrong: [fn(&mut simulator::firmware::FirmwareConfig); 8] = [
        |c| c.queue = 15,
        |c| c.queue = 65,
        |c| c.tick = quantity::Span::from_micros(9),
        |c| c.burst = 0,
        |c| c.drive_bits = 17,
        |c| c.sense_bits = 5,
        |c| c.sense_current = quantity::Current::from_microamperes(1_000_000_000),
        |c| c.sense_resistor = quantity::Resistance::from_microohms(-1),
    ];
    for change in wrong {
        let mut config = config();
        change(&mut config);
        let refused = simulator::firmware::Firmware::new(config, Reset::Power).unwrap_err();
        assert_eq!(refused.config, config);
    }
}
