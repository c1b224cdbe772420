//! Sections 4 and 6: charge and energy to the last picocoulomb, readbacks, wrapping numbers.

use crate::bench::{Bench, TICK_US, celsius, config};
use proptest::prelude::*;
use quantity::SinkTime;
use simulator::firmware::{Firmware, Sample};
use wire::Reset;

/// The counters as 128-bit integers would have them, beside the core's.
#[derive(Default)]
struct Reference {
    /// pC.
    charge: i128,
    /// uA * uV * us.
    energy: i128,
    last: Option<u64>,
}

impl Reference {
    fn sample(&mut self, now: u64, current: i128, voltage: i128) {
        let elapsed = i128::from(now - self.last.unwrap_or(now));
        self.charge += current * elapsed;
        self.energy += current * voltage * elapsed;
        self.last = Some(now);
    }

    fn whole(&self) -> (i128, i128) {
        (self.charge / 1_000_000, self.energy / 1_000_000_000_000)
    }
}

/// The nominal value of a code, as `core.h` defines it.
fn nominal(code: u16, full_scale: i64, bits: u32) -> i128 {
    let full_scale = i128::from(full_scale);
    (i128::from(code) * full_scale + (1 << (bits - 1))) >> bits
}

proptest! {
    /// Whatever the converters, codes and intervals, no remainder is ever lost.
    #[test]
    fn counters_agree_with_128_bit_arithmetic(
        bits in 6_u8..=16,
        current_full in 1_i64..=999_999_999,
        voltage_full in 1_i64..=999_999_999,
        samples in prop::collection::vec((any::<u16>(), any::<u16>(), prop_oneof![
            1_u64..2_000, 1_u64..2_000_000, Just(1_u64 << 30)
        ]), 1..200),
    ) {
        let mut config = config();
        config.sense_bits = bits;
        config.sense_current = quantity::Current::from_microamperes(current_full);
        config.sense_voltage = quantity::Voltage::from_microvolts(voltage_full);
        let mut bench = Bench::with(config, Reset::Power);
        bench.say("hello 1 1");
        bench.must("readback", "3600000000");
        let mut reference = Reference::default();
        let mask = u16::MAX >> (16 - bits);
        let mut now = 0;
        for (current_code, voltage_code, elapsed) in samples {
            now += elapsed;
            let (current_code, voltage_code) = (current_code & mask, voltage_code & mask);
            let temperature = celsius(20_000);
            bench.firmware.tick(
                SinkTime::from_micros(now),
                Sample { current_code, voltage_code, temperature },
            );
            reference.sample(
                now,
                nominal(current_code, current_full, u32::from(bits)),
                nominal(voltage_code, voltage_full, u32::from(bits)),
            );
        }
        bench.heard();
        bench.now = now;
        bench.must("readback", "20000");
        bench.now += 20_000 - TICK_US;
        bench.plant.voltage_code = 0;
        let (counters, _) = bench.readback();
        prop_assert_eq!((counters[2], counters[3]), reference.whole());
    }
}

#[test]
fn a_month_at_full_power_is_counted_exactly() {
    let config = config();
    let mut firmware = Firmware::new(config, Reset::Power).unwrap();
    let sample = Sample {
        current_code: 3_333,
        voltage_code: 4_001,
        temperature: celsius(30_000),
    };
    firmware.tick(SinkTime::from_micros(TICK_US), sample);
    let month = 30 * 86_400_000_u32;
    firmware.tick_same(SinkTime::from_micros(2 * TICK_US), month, sample);
    let mut bench = Bench::cold();
    bench.firmware = firmware;
    bench.now = u64::from(month + 1) * TICK_US;
    bench.plant.voltage_code = 0;
    bench.say("hello 1 1");
    bench.must("readback", "20000");
    let (counters, _) = bench.readback();
    let us = i128::from(month) * 1_000;
    assert_eq!(counters[2], 3_333_000 * us / 1_000_000);
    assert_eq!(counters[3], 3_333_000 * 8_002_000 * us / 1_000_000_000_000);
}

#[test]
fn the_first_sample_ends_no_interval() {
    let mut bench = Bench::cold();
    bench.plant.leak = 1_000;
    bench.now = 1_000_000;
    bench.tick();
    bench.say("hello 1 1");
    bench.must("readback", "20000");
    let (counters, _) = bench.readback();
    // Twenty ticks of 1 A at 3.7 V, and not the second before them.
    assert_eq!((counters[2], counters[3]), (20_000, 74_000));
}

#[test]
fn what_is_measured_counts_and_not_what_is_asked() {
    let mut bench = Bench::on(1_000_000);
    bench.plant.most = 600;
    bench.must("readback", "20000");
    let before = bench.readback().0[2];
    let after = bench.readback().0[2];
    assert_eq!(after - before, 12_000);
}

#[test]
fn readbacks_keep_their_pace_and_carry_mean_least_and_largest() {
    let mut bench = Bench::on(100_000);
    bench.must("readback", "20000");
    let ordered = bench.now;
    bench.ticks(9);
    // One dip of a single sample between two readbacks.
    bench.plant.voltage_code = 1_700;
    bench.tick();
    bench.plant.voltage_code = 1_850;
    let (counters, readback) = bench.readback();
    assert_eq!(counters[1], i128::from(ordered + 20_000));
    assert_eq!(readback[1], (ordered + 20_000).to_string());
    assert_eq!(readback[2..5], ["100000", "100000", "100000"]);
    assert_eq!(readback[5..8], ["3685000", "3400000", "3700000"]);
    assert_eq!(readback[8..], ["25000", "1"]);
    let (counters, readback) = bench.readback();
    assert_eq!(counters[1], i128::from(ordered + 40_000));
    assert_eq!(readback[5..8], ["3700000", "3700000", "3700000"]);
}

#[test]
fn a_pair_has_one_number_and_names_the_step_and_the_queue() {
    let mut bench = Bench::on(100_000);
    let later = bench.now + 1_000_000;
    bench.must("step", &format!("current {later} 100000 0 1000000"));
    bench.must("step", &format!("current {later} 100000 0 1000000"));
    bench.must("readback", "20000");
    for k in 1..4 {
        let (counters, readback) = bench.readback();
        assert_eq!(counters[0], k);
        assert_eq!(readback[0], k.to_string());
        assert_eq!(counters[4..6], [7, 2]);
    }
    bench.must("readback", "0");
    bench.ticks(100);
    assert!(bench.heard_kind("c").is_empty());
}

#[test]
fn readback_numbers_wrap_from_65535_to_1_and_times_from_32_bits() {
    let mut bench = Bench::cold();
    bench.now = (1 << 32) - 65_540 * 20_000;
    bench.tick();
    bench.get_ready();
    bench.must("readback", "20000");
    for k in 1..=65_535 {
        bench.ticks(19);
        assert_eq!(bench.readback().0[0], k);
    }
    for k in 1..20 {
        let (counters, readback) = bench.readback();
        assert_eq!(counters[0], k);
        assert_eq!(
            readback[1].parse::<i128>().unwrap(),
            counters[1] & 0xFFFF_FFFF
        );
    }
    assert!(bench.now > 1 << 32);
}

#[test]
fn event_numbers_wrap_likewise() {
    let mut bench = Bench::on(100_000);
    let mut last = 1;
    for _ in 0..65_536 {
        bench.must("step", "current 0 100000 0 3600000000");
        bench.tick();
        let edge = bench.heard_kind("edge").remove(0);
        let number: u32 = edge.split(' ').nth(1).unwrap().parse().unwrap();
        assert_eq!(number, if last == 65_535 { 1 } else { last + 1 });
        last = number;
    }
}

#[test]
fn late_ticks_lose_no_charge() {
    let mut bench = Bench::on(1_000_000);
    bench.must("readback", "20000");
    let (before, _) = bench.readback();
    for late in [7, 250, 3_333, 90_000] {
        bench.now += late;
        bench.tick();
    }
    let (after, _) = bench.readback();
    assert_eq!(after[2] - before[2], after[1] - before[1]);
}
