//! Ways through the core that no other test takes: values at the end of their range, more at once
//! than there is room for, converters that say what they cannot. `cargo xtask coverage` tells
//! when a branch of the core is taken by no test.

use quantity::{Current, Resistance, SinkTime, Span, Voltage};
use simulator::firmware::{Firmware, FirmwareConfig, Sample};
use wire::{Reset, TemperatureReading};

use crate::bench::{Bench, TICK_US, celsius, config, line};

#[test]
fn a_configuration_out_of_range_is_refused_for_each_of_its_figures() {
    let cases: [fn(&mut FirmwareConfig); 8] = [
        |config| config.fastest_readback = Span::from_micros(TICK_US - 1),
        |config| config.burst = u16::MAX,
        |config| config.drive_bits = 5,
        |config| config.drive_full_scale = Voltage::from_microvolts(100_000_000),
        |config| config.sense_resistor = Resistance::from_microohms(0),
        |config| config.sense_bits = 17,
        |config| config.sense_current = Current::ZERO,
        |config| config.sense_voltage = Voltage::ZERO,
    ];
    for (index, spoil) in cases.iter().enumerate() {
        let mut config = config();
        spoil(&mut config);
        assert!(Firmware::new(config, Reset::Power).is_err(), "case {index}");
    }
}

#[test]
fn before_the_first_tick_no_tick_can_be_skipped() {
    assert_eq!(Bench::cold().firmware.quiet_ticks(), 0);
}

#[test]
fn a_sink_that_captures_nothing_ticks_all_the_same() {
    let mut without = config();
    without.burst = 0;
    without.abilities.burst = false;
    let mut bench = Bench::with(without, Reset::Power);
    bench.tick();
    bench.get_ready();
    bench.must("readback", "20000");
    assert_eq!(bench.state(), "0");
    bench.refused("burst", "9000000 1 1", "ability");
}

#[test]
fn a_readback_due_at_the_very_first_tick_shows_that_sample() {
    let mut bench = Bench::cold();
    bench.say("hello 1 77");
    bench.next = 1;
    bench.must("readback", "20000");
    bench.now = 50_000;
    let (counters, values) = bench.readback();
    assert_eq!(counters[2], 0, "nothing is counted of no time");
    assert_eq!(values[5], "3700000");
}

#[test]
fn two_ticks_at_the_same_time_count_it_once() {
    let mut bench = Bench::on(500_000);
    bench.must("readback", "20000");
    let before = bench.readback().0;
    for _ in 0..3 {
        bench.now -= TICK_US;
        bench.tick();
    }
    let after = bench.readback().0;
    let passed = after[1] - before[1];
    assert_eq!((after[2] - before[2]) * 2, passed, "500 mA for {passed} us");
}

#[test]
fn no_tick_of_a_ramp_and_none_before_an_off_is_answered_can_be_skipped() {
    let mut bench = Bench::ready();
    bench.must("step", "current 0 500000 1000000 60000000");
    bench.ticks(10);
    assert_eq!(bench.firmware.quiet_ticks(), 0);
    bench.ticks(1_200);
    assert!(bench.firmware.quiet_ticks() > 0);
    bench.raw(&line("off 1"));
    assert_eq!(bench.firmware.quiet_ticks(), 0);
}

#[test]
fn where_four_pairs_do_not_fit_a_line_has_three() {
    let mut wide = config();
    wide.burst = 1_100;
    wide.sense_current = Current::from_microamperes(999_999_999);
    wide.sense_voltage = Voltage::from_microvolts(999_999_999);
    let mut bench = Bench::with(wide, Reset::Power);
    bench.plant.leak = 4_000;
    bench.plant.voltage_code = 4_000;
    bench.tick();
    bench.say("hello 1 77");
    bench.next = 1;
    let mut capture = |before: u32| {
        // The ring must have been filled again since the capture before.
        let at = bench.now + u64::from(before + 2) * TICK_US;
        bench.must("burst", &format!("{at} {before} 1"));
        let mut lines = Vec::new();
        while !lines
            .last()
            .is_some_and(|line: &String| line.ends_with("done"))
        {
            bench.tick();
            lines.extend(bench.heard_kind("b"));
        }
        lines.pop();
        lines
    };
    // It takes a number and an index of four digits each beside values of nine.
    for _ in 1..1_000 {
        capture(0);
    }
    let lines = capture(1_050);
    let pairs = |line: &String| (line.split(' ').count() - 3) / 2;
    let index = |line: &String| line.split(' ').nth(2).unwrap().parse::<usize>().unwrap();
    let mut next = 0;
    for line in &lines {
        assert_eq!(index(line), next, "{line}");
        next += pairs(line);
        let fit = if index(line) < 1_000 { 4 } else { 3 };
        assert!(pairs(line) == fit || next == 1_051, "{line}");
    }
    assert_eq!(next, 1_051);
}

#[test]
fn a_temperature_below_its_field_is_sent_as_the_end_of_the_range() {
    let mut bench = Bench::ready();
    bench.plant.temperature = celsius(-120_000);
    bench.must("readback", "20000");
    assert_eq!(bench.readback().1[8], "-99999");
}

#[test]
fn a_code_beyond_the_converter_counts_as_its_stop() {
    for (current, voltage, trip) in [(5_000, 1_850, "excess 4095000"), (100, 5_000, "sensor 4")] {
        let mut bench = Bench::ready();
        let sample = Sample {
            current_code: current,
            voltage_code: voltage,
            temperature: celsius(25_000),
        };
        bench.must("step", "current 0 100000 0 1000000");
        for _ in 0..2 {
            bench.now += TICK_US;
            bench
                .firmware
                .tick(SinkTime::from_micros(bench.now), sample);
        }
        let trips = bench.heard_kind("trip");
        assert_eq!(trips.len(), 1, "{trips:?}");
        assert!(trips[0].ends_with(trip), "{trips:?}");
    }
}

#[test]
fn a_sensor_that_broke_after_a_trip_by_temperature_is_a_cause_that_stands() {
    let mut bench = Bench::ready();
    bench.plant.temperature = celsius(90_000);
    bench.ticks(2);
    assert!(bench.heard_kind("trip")[0].contains(" temperature "));
    // Cooler than the limit, were it not for the sensor.
    bench.plant.temperature = TemperatureReading::Open;
    bench.ticks(2);
    bench.refused("reset", "", "cause");
    bench.plant.temperature = celsius(25_000);
    bench.ticks(2);
    bench.must("reset", "");
}

#[test]
fn a_sign_without_digits_and_a_negative_zero_are_no_numbers() {
    let mut bench = Bench::ready();
    for value in ["-", "-0", "-x", "-99999999999999999999"] {
        bench.refused("limit", &format!("voltage-low {value} 0"), "range");
    }
}

#[test]
fn a_capture_of_more_samples_than_a_number_holds_is_out_of_range() {
    let mut bench = Bench::ready();
    for fields in ["x 1 1", "9000000 65536 1", "9000000 1 65536"] {
        bench.refused("burst", fields, "range");
    }
}

#[test]
fn a_sensor_that_breaks_while_off_trips_and_leaves_the_temperature_unjudged() {
    let mut bench = Bench::ready();
    bench.plant.temperature = TemperatureReading::Short;
    bench.ticks(3);
    let trips = bench.heard_kind("trip");
    assert_eq!(trips.len(), 1, "{trips:?}");
    assert!(trips[0].ends_with(" sensor 2"), "{trips:?}");
}

#[test]
fn a_line_of_nothing_but_damage_is_counted() {
    let mut bench = Bench::ready();
    bench.must("readback", "20000");
    let before = bench.readback().0[6];
    bench.raw(b"\r\r\n");
    bench.raw(&[0x01, b'\n']);
    assert_eq!(bench.readback().0[6], before + 2);
}

#[test]
fn a_power_limit_set_below_a_step_that_runs_bounds_it_before_it_trips() {
    let mut bench = Bench::ready();
    bench.host_alive = true;
    bench.must("step", "power 0 2000000 0 60000000");
    bench.ticks(5);
    let before = bench.drive.code;
    bench.must("limit", "power 1000000 1000000");
    bench.ticks(5);
    let halved = i32::from(bench.drive.code) - i32::from(before) / 2;
    assert!(halved.abs() <= 1, "{} after {before}", bench.drive.code);
    assert_eq!(bench.heard_kind("trip"), Vec::<String>::new());
}

#[test]
fn more_offs_within_a_tick_than_can_be_answered_turn_off_all_the_same() {
    let mut bench = Bench::on(500_000);
    for token in 1..=6 {
        bench.raw(&line(&format!("off {token}")));
    }
    bench.tick();
    assert!(!bench.drive.gate);
    let answers: Vec<String> = (1..=4).map(|token| format!("ok {token} off")).collect();
    let heard = bench.heard_kind("ok");
    assert_eq!(heard, answers);
}

#[test]
fn without_room_for_a_whole_description_none_of_it_is_sent() {
    let mut bench = Bench::cold();
    bench.tick();
    while bench.firmware.transmit_waiting() < 1_000 {
        bench.raw(&line("clock 1"));
    }
    bench.raw(&line("hello 5 77"));
    let heard = bench.heard();
    assert!(
        heard.iter().all(|line| line.starts_with("clock ")),
        "{heard:?}"
    );
    assert_eq!(bench.say("hello 6 77").len(), 5);
}

#[test]
fn a_hold_that_would_end_beyond_the_clock_never_ends_and_does_not_wrap() {
    let mut bench = Bench::cold();
    bench.now = u64::MAX - 10_000_000;
    bench.tick();
    bench.get_ready();
    bench.must("step", "current 0 500000 0 2678400000000");
    bench.ticks(50);
    assert!(bench.drive.gate);
    assert_eq!(bench.heard_kind("end"), Vec::<String>::new());
}
