//! Sections 3 and 6: off at power-up, edges, ramps, holds, rests, clearing, regulated steps.

use crate::bench::{Bench, TICK_US, config};
use wire::Reset;

#[test]
fn off_at_power_up_until_a_step_begins() {
    for reset in [
        Reset::Power,
        Reset::Pin,
        Reset::Watchdog,
        Reset::Software,
        Reset::Unknown,
    ] {
        let mut bench = Bench::with(config(), reset);
        for _ in 0..2_000 {
            let drive = bench.tick();
            assert_eq!(
                (drive.code, drive.gate, drive.isolator_closed),
                (0, false, false)
            );
        }
    }
}

#[test]
fn an_edge_begins_at_the_first_tick_at_or_after_its_start() {
    for offset in [0, 1, TICK_US - 1] {
        let mut bench = Bench::ready();
        let start = bench.now + 10 * TICK_US + offset;
        bench.must("step", &format!("current {start} 500000 0 1000000"));
        let expected = start.div_ceil(TICK_US) * TICK_US;
        while bench.now < expected - TICK_US {
            assert!(!bench.tick().gate, "early at {}", bench.now);
        }
        let drive = bench.tick();
        assert_eq!((drive.gate, drive.code), (true, 500));
        assert_eq!(bench.heard(), [format!("edge 1 {expected} 7")]);
    }
}

#[test]
fn edges_far_beyond_32_bits_of_time_are_kept() {
    let mut bench = Bench::cold();
    bench.now = (1 << 32) - 5 * TICK_US;
    bench.tick();
    bench.get_ready();
    let start = (1_u64 << 32) + 3 * TICK_US;
    bench.must("step", &format!("current {start} 500000 0 1000000"));
    while bench.now + TICK_US < start {
        assert!(!bench.tick().gate);
    }
    assert!(bench.tick().gate);
}

#[test]
fn steps_begin_in_order_each_with_its_event() {
    let mut bench = Bench::on(100_000);
    let start = bench.now + 5 * TICK_US;
    for i in 1..4 {
        bench.must(
            "step",
            &format!("current {} {} 0 1000000", start + i * TICK_US, i * 200_000),
        );
    }
    bench.ticks(5);
    let codes: Vec<u16> = (0..4).map(|_| bench.tick().code).collect();
    assert_eq!(codes, [200, 400, 600, 600]);
    let edges: Vec<String> = (1..4)
        .map(|i| format!("edge {} {} {}", i + 1, start + i * TICK_US, 7 + i))
        .collect();
    assert_eq!(bench.heard_kind("edge"), edges);
}

#[test]
fn two_steps_due_at_one_tick_both_begin_and_the_later_stays() {
    let mut bench = Bench::on(100_000);
    bench.must("step", "current 0 200000 0 1000000");
    bench.must("step", "current 0 300000 0 1000000");
    assert_eq!(bench.tick().code, 300);
    assert_eq!(bench.heard_kind("edge").len(), 2);
}

#[test]
fn the_last_step_ends_with_its_hold_and_is_not_latched() {
    let mut bench = Bench::ready();
    let start = bench.now + 10 * TICK_US;
    bench.must("step", &format!("current {start} 500000 0 4500"));
    bench.ticks(10);
    for _ in 0..4 {
        assert!(bench.tick().gate);
    }
    let drive = bench.tick();
    assert_eq!((drive.gate, drive.code), (false, 0));
    assert_eq!(
        bench.heard_kind("end"),
        [format!("end 2 {}", start + 5 * TICK_US)]
    );
    bench.must("step", "current 0 100000 0 1000000");
}

#[test]
fn with_a_step_queued_the_one_in_progress_outlasts_its_hold() {
    let mut bench = Bench::ready();
    let start = bench.now + 2 * TICK_US;
    bench.must("step", &format!("current {start} 500000 0 1000"));
    bench.must(
        "step",
        &format!("current {} 100000 0 1000000", start + 20 * TICK_US),
    );
    bench.ticks(2);
    for _ in 0..19 {
        assert_eq!(bench.tick().code, 500);
    }
    assert_eq!(bench.tick().code, 100);
    // Cleared instead, it ends at once: its hold is over.
    let mut bench = Bench::ready();
    bench.must("step", "current 0 500000 0 1000");
    bench.must(
        "step",
        &format!("current {} 100000 0 1000000", bench.now + 20 * TICK_US),
    );
    bench.ticks(5);
    bench.must("clear", "0");
    assert!(!bench.tick().gate);
    assert_eq!(bench.heard_kind("end").len(), 1);
}

#[test]
fn clear_drops_what_has_not_begun_from_a_time_on() {
    let mut bench = Bench::on(100_000);
    let start = bench.now + 5 * TICK_US;
    for i in 0..4 {
        bench.must(
            "step",
            &format!("current {} 200000 0 1000000", start + i * TICK_US),
        );
    }
    bench.must("clear", &format!("{}", start + 2 * TICK_US));
    bench.ticks(20);
    assert_eq!(bench.heard_kind("edge").len(), 2);
    assert_eq!(bench.drive.code, 200);
    bench.must("clear", "0");
    assert!(bench.tick().gate);
}

#[test]
fn a_rest_has_the_gate_off_and_the_converter_at_zero() {
    let mut bench = Bench::on(100_000);
    bench.must("readback", "20000");
    bench.must("step", "current 0 0 0 100000");
    let drive = bench.tick();
    assert_eq!((drive.gate, drive.code), (false, 0));
    assert_eq!(bench.state(), "1");
    bench.ticks(100);
    assert_eq!(bench.heard_kind("end").len(), 1);
    assert_eq!(bench.state(), "0");
}

#[test]
fn off_acts_at_the_next_tick_and_says_so_only_then() {
    let mut bench = Bench::on(100_000);
    let later = bench.now + 3 * TICK_US;
    bench.must("step", &format!("current {later} 200000 0 1000000"));
    assert!(bench.say("off 9").is_empty());
    // Even a step that overtakes the answer waits until the zero was put out.
    bench.must("step", "current 0 300000 0 1000000");
    let drive = bench.tick();
    assert_eq!((drive.gate, drive.code), (false, 0));
    assert_eq!(bench.heard(), ["ok 9 off"]);
    assert_eq!(bench.tick().code, 300);
    bench.heard();
    bench.raw(&crate::bench::line("off 10"));
    assert!(!bench.ticks(50).gate);
    assert!(
        !bench
            .heard_kind("edge")
            .iter()
            .any(|edge| edge.ends_with(" 8"))
    );
}

#[test]
fn off_answers_at_once_when_already_off() {
    let mut bench = Bench::cold();
    assert_eq!(bench.say("off 3"), ["ok 3 off"]);
    assert_eq!(bench.say("off 3"), ["ok 3 off"]);
}

#[test]
fn the_ports_own_off_empties_the_queue_too() {
    let mut bench = Bench::on(100_000);
    let later = bench.now + 5 * TICK_US;
    bench.must("step", &format!("current {later} 200000 0 1000000"));
    bench.firmware.off();
    assert!(!bench.tick().gate);
    assert!(!bench.ticks(20).gate);
}

#[test]
fn a_ramp_is_a_straight_line_from_where_the_setpoint_is() {
    let mut bench = Bench::on(100_000);
    let start = bench.now + TICK_US;
    bench.must("step", &format!("current {start} 500000 8000 1000000"));
    let codes: Vec<u16> = (0..10).map(|_| bench.tick().code).collect();
    assert_eq!(codes, [100, 150, 200, 250, 300, 350, 400, 450, 500, 500]);
    // Down again, and taken over half way by another.
    let start = bench.now + TICK_US;
    bench.must("step", &format!("current {start} 100000 8000 1000000"));
    bench.must(
        "step",
        &format!("current {} 310000 1000 1000000", start + 4 * TICK_US),
    );
    let codes: Vec<u16> = (0..6).map(|_| bench.tick().code).collect();
    assert_eq!(codes, [500, 450, 400, 350, 300, 310]);
}

#[test]
fn a_ramp_from_off_begins_at_zero() {
    let mut bench = Bench::ready();
    let start = bench.now + TICK_US;
    bench.must("step", &format!("current {start} 400000 4000 1000000"));
    let codes: Vec<u16> = (0..5).map(|_| bench.tick().code).collect();
    assert_eq!(codes, [0, 100, 200, 300, 400]);
}

#[test]
fn a_ramp_of_days_moves_as_straight_as_one_of_seconds() {
    let mut bench = Bench::ready();
    bench.host_alive = true;
    let start = bench.now + TICK_US;
    let ramp = 86_400_000_000_u64;
    bench.must(
        "step",
        &format!("current {start} 2000000 {ramp} 604800000000"),
    );
    bench.tick();
    bench.now = start + ramp / 2 - TICK_US;
    bench.raw(&crate::bench::line("clock 1"));
    assert_eq!(bench.tick().code, 1_000);
}

#[test]
fn changing_the_mode_begins_at_the_target() {
    let mut bench = Bench::on(100_000);
    // 3.7 V: 1.85 W is 500 mA, whatever the ramp.
    bench.must("step", "power 0 1850000 100000 1000000");
    assert_eq!(bench.tick().code, 500);
    bench.must("step", "resistance 0 3700000 100000 1000000");
    assert_eq!(bench.tick().code, 1_000);
}

#[test]
fn a_resistance_ramp_from_off_never_passes_through_a_short() {
    let mut bench = Bench::ready();
    bench.must("step", "resistance 0 3700000 100000 1000000");
    for _ in 0..110 {
        assert!(bench.tick().code <= 1_000);
    }
}

#[test]
fn regulated_steps_answer_the_voltage_of_the_same_tick() {
    let mut bench = Bench::ready();
    bench.host_alive = true;
    bench.must("step", "power 0 3000000 0 100000000");
    for voltage in [1_850, 1_500, 2_000, 1_201] {
        bench.plant.voltage_code = voltage;
        let drive = bench.tick();
        let expected = 3_000_000_000_000_u64 / (u64::from(voltage) * 2_000);
        assert_eq!(u64::from(drive.code), (expected + 500) / 1_000);
    }
    bench.must("step", "resistance 0 10000000 0 100000000");
    for voltage in [1_850, 1_500, 2_000, 1_201] {
        bench.plant.voltage_code = voltage;
        let expected = u64::from(voltage) * 2_000 / 10;
        assert_eq!(u64::from(bench.tick().code), (expected + 500) / 1_000);
    }
}

#[test]
fn regulated_steps_are_bounded_by_the_current_limit_and_zero_without_voltage() {
    let mut bench = Bench::cold();
    bench.get_ready();
    bench.must("limit", "voltage-low -1 0");
    bench.must("limit", "current 400000 0");
    for mode in ["power 0 12000000", "resistance 0 1"] {
        bench.plant.voltage_code = 1_850;
        bench.must("step", &format!("{mode} 0 1000000"));
        assert_eq!(bench.tick().code, 400);
        bench.plant.voltage_code = 1;
        assert_eq!(bench.tick().code, 400);
        bench.plant.voltage_code = 0;
        let drive = bench.tick();
        assert_eq!((drive.gate, drive.code), (false, 0));
    }
}

#[test]
fn the_code_is_the_nearest_and_stops_at_the_converters_end() {
    let mut config = config();
    config.drive_full_scale = quantity::Voltage::from_microvolts(3_300_000);
    config.drive_bits = 10;
    config.sense_resistor = quantity::Resistance::from_microohms(5_000_000);
    // Common practice, no source: 10 bits, 3.3 V and 5 ohm make code 310 200.0 mA, code 16
    // 10.3 mA, and 2 mA code 3.
    for (current, code) in [
        (200_000, 310),
        (10_300, 16),
        (2_000, 3),
        (659_000, 1_022),
        (2_000_000, 1_023),
    ] {
        let mut bench = Bench::with(config, Reset::Power);
        bench.get_ready();
        bench.must("step", &format!("current 0 {current} 0 1000000"));
        assert_eq!(bench.tick().code, code, "{current} uA");
    }
    config.drive_spans_full_scale = true;
    let mut bench = Bench::with(config, Reset::Power);
    bench.get_ready();
    bench.must("step", "current 0 330000 0 1000000");
    assert_eq!(bench.tick().code, 512, "half of 1023 steps, rounded up");
}

#[test]
fn a_sink_out_of_headroom_says_so() {
    let mut bench = Bench::on(1_000_000);
    bench.must("readback", "20000");
    assert_eq!(bench.state(), "1");
    bench.plant.most = 700;
    bench.ticks(2);
    assert_eq!(bench.state(), "2");
    bench.plant.most = 4_000;
    bench.ticks(2);
    assert_eq!(bench.state(), "1");
}

#[test]
fn the_isolator_opens_with_the_current_off() {
    let mut bench = Bench::ready();
    bench.must("isolator", "1");
    assert!(bench.tick().isolator_closed);
    bench.must("step", "current 0 100000 0 1000000");
    assert!(bench.tick().gate);
    bench.must("isolator", "0");
    let drive = bench.tick();
    assert_eq!(
        (drive.gate, drive.code, drive.isolator_closed),
        (false, 0, false)
    );
}
