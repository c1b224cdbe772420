//! Sections 3, 4 and 6: the six limits, the sensors, the deadman; latch and reset with cause.

use crate::bench::{Bench, TICK_US, celsius, line};
use wire::TemperatureReading;

/// One way to cross a limit, and what the trip must say.
struct Crossing {
    limit: &'static str,
    value: i64,
    cross: fn(&mut Bench),
    mend: fn(&mut Bench),
    trip: &'static str,
    state: &'static str,
}

const CROSSINGS: [Crossing; 6] = [
    Crossing {
        limit: "current",
        value: 1_100_000,
        cross: |bench| bench.plant.leak = 1_101,
        mend: |bench| bench.plant.leak = 0,
        trip: "current 1101000",
        state: "17",
    },
    Crossing {
        limit: "power",
        value: 3_999_999,
        cross: |bench| bench.plant.voltage_code = 2_000,
        mend: |bench| bench.plant.voltage_code = 1_850,
        trip: "power 4000000",
        state: "18",
    },
    Crossing {
        limit: "voltage-high",
        value: 4_200_000,
        cross: |bench| bench.plant.voltage_code = 2_101,
        mend: |bench| bench.plant.voltage_code = 2_100,
        trip: "voltage-high 4202000",
        state: "19",
    },
    Crossing {
        limit: "voltage-low",
        value: 3_000_000,
        cross: |bench| bench.plant.voltage_code = 1_499,
        mend: |bench| bench.plant.voltage_code = 1_500,
        trip: "voltage-low 2998000",
        state: "20",
    },
    Crossing {
        limit: "temperature",
        value: 60_000,
        cross: |bench| bench.plant.temperature = celsius(60_001),
        mend: |bench| bench.plant.temperature = celsius(60_000),
        trip: "temperature 60001",
        state: "21",
    },
    Crossing {
        limit: "excess",
        value: 50_000,
        cross: |bench| bench.plant.leak = 1_051,
        mend: |bench| bench.plant.leak = 50,
        trip: "excess 51000",
        state: "22",
    },
];

fn drawing_one_ampere(crossing: &Crossing, persist_us: u64) -> Bench {
    let mut bench = Bench::on(1_000_000);
    bench.host_alive = true;
    bench.must(
        "limit",
        &format!("{} {} {persist_us}", crossing.limit, crossing.value),
    );
    bench.ticks(50);
    assert!(bench.drive.gate, "{}: on before crossing", crossing.limit);
    bench.heard();
    bench
}

#[test]
fn every_limit_trips_at_the_first_crossing_sample() {
    for crossing in &CROSSINGS {
        let mut bench = drawing_one_ampere(crossing, 0);
        (crossing.cross)(&mut bench);
        let drive = bench.tick();
        assert_eq!((drive.gate, drive.code), (false, 0), "{}", crossing.limit);
        assert_eq!(
            bench.heard_kind("trip"),
            [format!("trip 2 {} {}", bench.now, crossing.trip)]
        );
        (crossing.mend)(&mut bench);
        bench.must("readback", "20000");
        assert_eq!(bench.state(), crossing.state);
    }
}

#[test]
fn a_crossing_shorter_than_its_persistence_is_forgiven() {
    for crossing in &CROSSINGS {
        let mut bench = drawing_one_ampere(crossing, 5_000);
        for _ in 0..3 {
            (crossing.cross)(&mut bench);
            bench.ticks(5);
            assert!(bench.drive.gate, "{}", crossing.limit);
            (crossing.mend)(&mut bench);
            bench.tick();
        }
        (crossing.cross)(&mut bench);
        bench.ticks(5);
        assert!(bench.drive.gate, "{}", crossing.limit);
        assert!(
            !bench.tick().gate,
            "{}: every sample of 5 ms crossed",
            crossing.limit
        );
        assert_eq!(bench.heard_kind("trip").len(), 1);
    }
}

#[test]
fn a_latch_stays_until_reset_and_reset_fails_while_the_cause_stands() {
    for crossing in &CROSSINGS {
        let mut bench = drawing_one_ampere(crossing, 0);
        (crossing.cross)(&mut bench);
        bench.ticks(3);
        if crossing.limit != "power" {
            bench.refused("reset", "", "cause");
        }
        (crossing.mend)(&mut bench);
        bench.ticks(3);
        bench.refused("step", "current 0 100000 0 1000000", "latched");
        bench.must("reset", "");
        assert!(
            !bench.tick().gate,
            "{}: a reset does not turn on",
            crossing.limit
        );
        bench.must("step", "current 0 100000 0 1000000");
        assert!(bench.tick().gate);
    }
}

#[test]
fn a_new_session_cannot_forget_the_cause() {
    let mut bench = Bench::on(100_000);
    bench.plant.temperature = celsius(85_000);
    bench.ticks(2);
    bench.say("hello 2 1234");
    bench.next = 1;
    bench.refused("reset", "", "cause");
    bench.plant.temperature = celsius(79_000);
    bench.tick();
    bench.must("reset", "");
}

#[test]
fn temperature_and_sensor_are_judged_while_off() {
    let mut bench = Bench::ready();
    bench.plant.temperature = celsius(80_001);
    bench.tick();
    assert_eq!(
        bench.heard(),
        [format!("trip 1 {} temperature 80001", bench.now)]
    );
    let mut bench = Bench::cold();
    bench.plant.temperature = TemperatureReading::Open;
    bench.tick();
    assert_eq!(bench.heard(), ["trip 1 1000 sensor 1"]);
}

#[test]
fn current_power_and_voltage_are_not_judged_while_off() {
    let mut bench = Bench::ready();
    bench.plant.voltage_code = 0;
    bench.ticks(10);
    bench.plant.voltage_code = 4_095;
    bench.ticks(10);
    assert!(bench.heard().is_empty());
}

/// How a sensor fails, and the VALUE of the trip.
type Fault = (fn(&mut Bench), u8);

#[test]
fn faulty_sensors_trip_and_are_named() {
    let faults: [Fault; 4] = [
        (
            |bench| bench.plant.temperature = TemperatureReading::Open,
            1,
        ),
        (
            |bench| bench.plant.temperature = TemperatureReading::Short,
            2,
        ),
        (|bench| bench.plant.leak = 4_095, 3),
        (|bench| bench.plant.voltage_code = 4_095, 4),
    ];
    for (fault, value) in faults {
        let mut bench = Bench::on(1_000_000);
        let sound = bench.plant;
        fault(&mut bench);
        assert!(!bench.tick().gate);
        assert_eq!(
            bench.heard_kind("trip"),
            [format!("trip 2 {} sensor {value}", bench.now)]
        );
        bench.refused("reset", "", "cause");
        bench.plant = sound;
        bench.tick();
        bench.must("reset", "");
    }
}

#[test]
fn the_readback_names_a_faulty_temperature_sensor() {
    let mut bench = Bench::ready();
    bench.must("readback", "20000");
    for (reading, word) in [
        (TemperatureReading::Open, "open"),
        (TemperatureReading::Short, "short"),
        (celsius(-12_345), "-12345"),
    ] {
        bench.plant.temperature = reading;
        assert_eq!(bench.readback().1[8], word);
    }
}

#[test]
fn an_edge_down_is_no_excess_though_the_sample_still_shows_the_old_current() {
    let mut bench = Bench::on(1_000_000);
    bench.must("limit", "excess 1000 0");
    for target in [10_000, 900_000, 0, 500_000, 20_000] {
        bench.must("step", &format!("current 0 {target} 0 3600000000"));
        bench.ticks(10);
        assert!(bench.heard_kind("trip").is_empty(), "{target} uA");
    }
    // A loop that needs one tick to follow downwards is forgiven, one that needs two is not.
    bench.must("step", "current 0 500000 0 3600000000");
    bench.ticks(5);
    bench.must("step", "current 0 100000 0 3600000000");
    bench.tick();
    bench.plant.leak = 500;
    bench.tick();
    assert!(bench.heard_kind("trip").is_empty());
    bench.tick();
    assert_eq!(bench.heard_kind("trip").len(), 1);
}

#[test]
fn current_that_does_not_let_go_opens_the_isolator() {
    let mut bench = Bench::ready();
    bench.host_alive = true;
    bench.must("isolator", "1");
    bench.must("step", "current 0 1000000 0 3600000000");
    bench.ticks(5);
    assert!(bench.drive.isolator_closed);
    bench.plant.leak = 1_201;
    let drive = bench.tick();
    assert_eq!((drive.gate, drive.isolator_closed), (false, false));
    bench.refused("isolator", "1", "latched");
}

#[test]
fn current_in_a_rest_or_while_off_is_excess() {
    let mut bench = Bench::on(1_000_000);
    bench.must("step", "current 0 0 0 3600000000");
    bench.ticks(5);
    bench.plant.leak = 201;
    bench.tick();
    assert_eq!(
        bench.heard_kind("trip"),
        [format!("trip 3 {} excess 201000", bench.now)]
    );

    let mut bench = Bench::ready();
    bench.must("isolator", "1");
    assert!(bench.tick().isolator_closed);
    bench.plant.leak = 201;
    assert!(!bench.tick().isolator_closed);
    assert_eq!(bench.heard_kind("trip").len(), 1);
}

#[test]
fn a_lesser_latch_gives_way_to_excess() {
    let mut bench = Bench::ready();
    bench.must("isolator", "1");
    bench.must("step", "current 0 1000000 0 3600000000");
    bench.ticks(5);
    bench.plant.temperature = celsius(90_000);
    bench.ticks(5);
    assert!(bench.drive.isolator_closed);
    bench.heard();
    bench.plant.leak = 1_000;
    bench.tick();
    assert!(!bench.drive.isolator_closed);
    assert_eq!(
        bench.heard_kind("trip"),
        [format!("trip 3 {} excess 1000000", bench.now)]
    );
    bench.ticks(100);
    assert!(bench.heard_kind("trip").is_empty());
}

#[test]
fn a_limit_lowered_below_the_current_in_progress_trips() {
    let mut bench = Bench::on(1_000_000);
    bench.must("limit", "current 500000 0");
    assert!(!bench.tick().gate);
}

#[test]
fn a_limit_lowered_before_a_queued_step_bounds_it() {
    let mut bench = Bench::on(100_000);
    let start = bench.now + 5 * TICK_US;
    bench.must("step", &format!("current {start} 1000000 0 3600000000"));
    bench.must("limit", "current 500000 0");
    bench.ticks(10);
    assert_eq!(bench.drive.code, 500);
}

#[test]
fn silence_turns_off_and_latches_at_the_agreed_interval() {
    for interval in [100_000_u64, 2_000_000, 10_000_000] {
        let mut bench = Bench::on(100_000);
        bench.host_alive = false;
        bench.must("deadman", &interval.to_string());
        let heard_at = bench.now;
        while bench.now < heard_at + interval - TICK_US {
            assert!(bench.tick().gate);
        }
        assert!(!bench.tick().gate);
        assert_eq!(
            bench.heard_kind("trip"),
            [format!("trip 2 {} deadman {interval}", heard_at + interval)]
        );
        bench.refused("step", "current 0 100000 0 1000000", "latched");
        bench.must("reset", "");
        bench.must("step", "current 0 100000 0 1000000");
    }
}

#[test]
fn without_an_order_the_deadman_is_two_seconds() {
    let mut bench = Bench::on(100_000);
    bench.host_alive = false;
    bench.raw(&line("clock 1"));
    let heard_at = bench.now;
    while bench.drive.gate && bench.now < heard_at + 20_000_000 {
        bench.tick();
    }
    assert_eq!(bench.now, heard_at + 2_000_000);
}

#[test]
fn only_whole_host_lines_keep_the_deadman_quiet() {
    let mut bench = Bench::on(100_000);
    bench.host_alive = false;
    bench.must("deadman", "100000");
    bench.must("readback", "20000");
    let heard_at = bench.now;
    let mut echo = Vec::new();
    while bench.drive.gate && bench.now < heard_at + 1_000_000 {
        bench.tick();
        // Noise, damaged lines, and the sink's own voice on a shorted cable.
        bench.raw(b"clock 1 FFFF\n");
        bench.raw(&line("clock 1 1000"));
        echo.clear();
        bench.firmware.transmit(&mut echo, usize::MAX);
        bench.raw(&echo);
    }
    assert_eq!(bench.now, heard_at + 100_000);
}

#[test]
fn the_deadman_also_watches_a_rest_and_a_queue_and_nothing_when_off() {
    let mut bench = Bench::on(0);
    bench.host_alive = false;
    bench.ticks(2_100);
    assert_eq!(bench.heard_kind("trip").len(), 1);

    let mut bench = Bench::ready();
    bench.must(
        "step",
        &format!("current {} 100000 0 1000000", bench.now + 60_000_000),
    );
    bench.ticks(2_100);
    assert_eq!(bench.heard_kind("trip").len(), 1);
    bench.ticks(60_000);
    assert!(bench.heard().is_empty());

    let mut bench = Bench::ready();
    bench.ticks(20_000);
    assert!(bench.heard().is_empty());
}
