//! Interlocks: each trips, and none trips falsely.

use expect_test::expect;
use quantity::{Charge, Energy, Span, Temperature};
use wire::{Cause, OrderId, ReasonRefused, TemperatureReading};

use super::bench::Bench;
use super::plans::{armed, draw, milliamperes, millis, millivolts, plan, pulses, rest};
use crate::DeadlineReason;
use crate::event::{Ending, Finding, Happening, Interlock, Output};
use crate::replay::Recorded;

fn running() -> Bench {
    let mut bench = Bench::connected(plan(vec![draw(1_000, Span::from_secs(1_000))]));
    bench.run(Span::from_secs(3));
    assert_eq!(bench.ended, None);
    bench
}

/// Runs on and says by what it tripped and how long after; off must be the trip's first output.
fn trips(bench: &mut Bench, interlock: Interlock) -> Span {
    let before = bench.now;
    assert_eq!(
        bench.run(Span::from_secs(20)),
        Some(Ending::Tripped(interlock))
    );
    let outputs: Vec<&Output> = bench
        .record
        .iter()
        .filter_map(|recorded| match recorded {
            Recorded::Output(output) => Some(output),
            Recorded::Event(_) => None,
        })
        .collect();
    let off = outputs
        .iter()
        .position(|output| **output == Output::Off)
        .unwrap();
    let crossed = outputs
        .iter()
        .position(|output| matches!(output, Output::Finding(Finding::Crossed(_))))
        .unwrap();
    assert_eq!(crossed, off + 1);
    assert_eq!(
        outputs.last(),
        Some(&&Output::Ended(Ending::Tripped(interlock)))
    );
    bench.now.saturating_since(before)
}

fn celsius(degrees: i64) -> TemperatureReading {
    TemperatureReading::Value(Temperature::from_whole_degrees_celsius(degrees))
}

#[test]
fn a_hot_heat_sink_trips_after_its_persistence() {
    let mut bench = running();
    bench.temperature = celsius(81);
    let took = trips(&mut bench, Interlock::OverTemperature);
    assert!(took >= millis(400) && took <= millis(600), "{took}");
}

#[test]
fn undervoltage_for_a_whole_interval_trips_although_the_persistence_is_shorter() {
    let mut bench = running();
    bench.emf = millivolts(2_400);
    assert!(trips(&mut bench, Interlock::Undervoltage) <= millis(200));
}

#[test]
fn a_dip_shorter_than_the_persistence_is_left_to_the_sink() {
    let mut bench = running();
    bench.run(millis(10));
    bench.emf = millivolts(2_400);
    bench.run(millis(30));
    bench.emf = millivolts(3_700);
    bench.run(Span::from_secs(2));
    assert_eq!(bench.ended, None);
}

#[test]
fn an_extreme_trips_at_once_where_no_persistence_is_allowed() {
    let mut plan = plan(vec![draw(1_000, Span::from_secs(1_000))]);
    plan.interlocks.undervoltage = armed(millivolts(2_500), Span::ZERO);
    let mut bench = Bench::connected(plan);
    bench.run(Span::from_secs(3));
    bench.run(millis(10));
    bench.emf = millivolts(2_400);
    bench.run(millis(10));
    bench.emf = millivolts(3_700);
    assert!(trips(&mut bench, Interlock::Undervoltage) <= millis(100));
}

#[test]
fn overvoltage_reversed_leads_and_overpower_trip() {
    let mut bench = running();
    bench.emf = millivolts(4_600);
    trips(&mut bench, Interlock::OverVoltage);
    let mut bench = running();
    bench.emf = millivolts(-300);
    trips(&mut bench, Interlock::ReversedPolarity);
    assert!(
        bench
            .chronicle()
            .contains("crossed ReversedPolarity -350000 against -200000")
    );
    let mut plan = plan(vec![draw(2_900, Span::from_secs(1_000))]);
    plan.interlocks.over_power.threshold = quantity::Power::from_milliwatts(9_000);
    let mut bench = Bench::connected(plan);
    trips(&mut bench, Interlock::OverPower);
}

#[test]
fn all_that_cross_at_once_are_recorded_and_the_first_in_the_table_names_the_trip() {
    let mut plan = plan(vec![draw(1_000, Span::from_secs(1_000))]);
    plan.interlocks.undervoltage = armed(millivolts(2_500), Span::ZERO);
    plan.interlocks.not_following = armed(milliamperes(50), Span::ZERO);
    let mut bench = Bench::connected(plan);
    bench.run(Span::from_secs(3));
    bench.emf = millivolts(-300);
    bench.limit = milliamperes(500);
    trips(&mut bench, Interlock::Undervoltage);
    expect![[r#"
          crossed Undervoltage -325000 against 2500000
          crossed ReversedPolarity -325000 against -200000
          crossed NotFollowing 500000 against 50000
          ended 0 at 2.600 by Run
        Tripped(Undervoltage)
    "#]]
    .assert_eq(bench.chronicle().split_once("off\n").unwrap().1);
}

#[test]
fn a_current_above_what_was_asked_for_trips_as_not_releasing() {
    let mut bench = running();
    bench.leak = milliamperes(60);
    assert!(trips(&mut bench, Interlock::NotReleasing) <= millis(300));
}

#[test]
fn a_current_in_a_rest_trips_as_not_releasing() {
    let mut bench = Bench::connected(plan(vec![
        draw(500, millis(500)),
        rest(Span::from_secs(100)),
    ]));
    bench.run(Span::from_secs(3));
    bench.leak = milliamperes(80);
    assert!(trips(&mut bench, Interlock::NotReleasing) <= millis(300));
}

#[test]
fn a_source_that_gives_up_trips_as_not_following() {
    let mut bench = running();
    bench.limit = milliamperes(900);
    let took = trips(&mut bench, Interlock::NotFollowing);
    assert!(took >= millis(400) && took <= millis(700), "{took}");
}

#[test]
fn what_no_reading_shows_is_not_asked_of_one() {
    // The draw ends in an interval of which the sink gathers the extremes anew, since the rest
    // is read back more slowly; then in one whose pair is lost.
    let draws = |readback| {
        let mut resting = rest(millis(20_000));
        if let sequence::plan::Op::Step(step) = &mut resting {
            step.readback = readback;
        }
        let mut plan = plan(vec![draw(500, millis(10_050)), resting]);
        plan.interlocks.not_following = armed(milliamperes(10), Span::ZERO);
        plan
    };
    let mut bench = Bench::connected(draws(Some(Span::from_secs(1))));
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    assert!(bench.readbacks.len() > 1, "the interval was changed");

    let mut bench = Bench::connected(draws(None));
    bench.run(millis(10_250));
    bench.lose_readings = true;
    bench.run(millis(300));
    bench.lose_readings = false;
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    assert!(bench.chronicle().contains("ReadbacksLost"));
}

#[test]
fn pulses_shorter_than_a_readback_that_are_not_reached_trip_as_not_following() {
    let mut bench = Bench::connected(plan(pulses(1_000)));
    bench.run(Span::from_secs(3));
    bench.limit = milliamperes(200);
    // A pulse in every sixth interval: the persistence must be that of single intervals.
    bench.run(Span::from_secs(20));
    assert_eq!(
        bench.ended, None,
        "a short persistence is needed for short pulses"
    );
    let mut plan = plan(pulses(1_000));
    plan.interlocks.not_following = armed(milliamperes(50), Span::ZERO);
    let mut bench = Bench::connected(plan);
    bench.run(Span::from_secs(3));
    bench.limit = milliamperes(200);
    trips(&mut bench, Interlock::NotFollowing);
}

#[test]
fn a_faulty_temperature_sensor_trips() {
    for (fault, value) in [
        (TemperatureReading::Open, 1),
        (TemperatureReading::Short, 2),
    ] {
        let mut bench = running();
        bench.temperature = fault;
        trips(&mut bench, Interlock::SensorFault);
        assert!(
            bench
                .chronicle()
                .contains(&format!("crossed SensorFault {value} against 0"))
        );
    }
}

#[test]
fn a_converter_at_its_stop_is_impossible_rather_than_large() {
    let mut plan = plan(vec![draw(1_000, Span::from_secs(1_000))]);
    plan.ranges.voltage = millivolts(4_000);
    let mut bench = Bench::connected(plan);
    bench.run(Span::from_secs(3));
    bench.emf = millivolts(4_060);
    trips(&mut bench, Interlock::SensorFault);
}

#[test]
fn equal_readings_for_hours_are_no_fault() {
    let mut bench = Bench::connected(plan(vec![draw(1_000, Span::from_secs(20_000))]));
    bench.sequencer = crate::Sequencer::new({
        let mut plan = bench.sequencer.plan().clone();
        plan.interlocks.charge = None;
        plan.interlocks.energy = None;
        plan
    })
    .unwrap();
    bench.connect();
    assert_eq!(bench.run(Span::from_secs(20_010)), Some(Ending::Finished));
}

#[test]
fn silence_is_a_deadline_and_trips() {
    let mut bench = running();
    bench.lose_readings = true;
    assert_eq!(bench.deadline_reason(), Some(DeadlineReason::Silence));
    let took = trips(&mut bench, Interlock::Silence);
    assert!(took >= millis(1_890) && took <= millis(2_000), "{took}");
}

#[test]
fn charge_energy_and_time_have_their_limits() {
    let mut limited = plan(vec![draw(1_000, Span::from_secs(1_000))]);
    limited.interlocks.charge = Some(Charge::from_millicoulombs(5_000));
    trips(&mut Bench::connected(limited.clone()), Interlock::Charge);
    limited.interlocks.charge = None;
    limited.interlocks.energy = Some(Energy::from_millijoules(5_000));
    trips(&mut Bench::connected(limited.clone()), Interlock::Energy);
    limited.interlocks.energy = None;
    limited.interlocks.time = Some(Span::from_secs(5));
    let mut bench = Bench::connected(limited);
    let took = trips(&mut bench, Interlock::Time);
    assert!(took < Span::from_secs(6), "{took}");
}

#[test]
fn a_record_that_cannot_be_written_trips() {
    let mut bench = running();
    bench.happen(Happening::RecordFailed);
    trips(&mut bench, Interlock::Record);
}

#[test]
fn a_clock_that_goes_back_or_leaps_trips() {
    for shift in [-5_000_000, -300_000, 900_000] {
        let mut bench = running();
        bench.run(Span::from_secs(6));
        bench.clock_shift = shift;
        trips(&mut bench, Interlock::Clock);
    }
}

#[test]
fn a_clock_that_falls_behind_by_less_than_a_readback_is_noticed_within_two_blocks() {
    let mut plan = plan(vec![draw(1_000, Span::from_secs(1_000))]);
    plan.readback = Span::from_millis(1_500);
    let mut bench = Bench::connected(plan);
    bench.run(Span::from_secs(7));
    bench.clock_shift = -900_000;
    assert!(trips(&mut bench, Interlock::Clock) <= Span::from_secs(12));
}

#[test]
fn a_clock_with_a_rate_error_of_one_percent_does_not_trip() {
    let mut bench = running();
    for _ in 0..600 {
        bench.clock_shift += 10_000;
        bench.run(Span::from_secs(1));
    }
    assert_eq!(bench.ended, None);
}

#[test]
fn a_reading_that_is_late_is_no_clock_that_leaps() {
    let mut bench = running();
    for _ in 0..20 {
        // Late by 800 ms, and the next one in time.
        bench.host_shift += 800_000;
        bench.run(millis(100));
        bench.host_shift -= 800_000;
        bench.run(millis(2_000));
    }
    assert_eq!(bench.ended, None);
}

/// The host's share of the worst times in `docs/interlocks.md`: from the crossing to the order
/// off, for every place of the crossing within a readback interval.
#[test]
fn off_is_ordered_within_the_documented_number_of_readback_intervals() {
    type Fault = fn(&mut Bench);
    let cases: [(Interlock, u64, Fault); 6] = [
        (Interlock::OverTemperature, 500, |bench| {
            bench.temperature = celsius(81);
        }),
        (Interlock::SensorFault, 500, |bench| {
            bench.temperature = TemperatureReading::Open;
        }),
        (Interlock::NotFollowing, 500, |bench| {
            bench.limit = milliamperes(800);
        }),
        (Interlock::NotReleasing, 100, |bench| {
            bench.leak = milliamperes(100);
        }),
        (Interlock::Undervoltage, 50, |bench| {
            bench.emf = millivolts(2_400);
        }),
        (Interlock::OverVoltage, 50, |bench| {
            bench.emf = millivolts(4_800);
        }),
    ];
    for readback in [20, 100, 250] {
        for (interlock, persistence, fault) in cases {
            let mut worst = 0;
            for phase in 0..10 {
                let mut plan = plan(vec![draw(1_000, Span::from_secs(1_000))]);
                plan.readback = millis(readback);
                let mut bench = Bench::connected(plan);
                bench.run(Span::from_secs(3) + millis(phase * readback / 10));
                assert_eq!(bench.ended, None);
                let crossed = bench.now;
                fault(&mut bench);
                assert_eq!(
                    bench.run(Span::from_secs(5)),
                    Some(Ending::Tripped(interlock))
                );
                worst = worst.max(bench.now.saturating_since(crossed).micros() / 1000);
            }
            // Where the sink judges too and knows better, only whole intervals count.
            let sink_knows = persistence < readback;
            let intervals = if sink_knows {
                2
            } else {
                persistence.div_ceil(readback)
            };
            assert!(
                worst <= intervals * readback,
                "{interlock:?} every {readback} ms: {worst} ms"
            );
        }
    }
}

#[test]
fn a_clock_out_of_bounds_by_the_transports_word_trips() {
    let mut bench = running();
    bench.happen(Happening::ClockOff { by: millis(700) });
    trips(&mut bench, Interlock::Clock);
    assert!(
        bench
            .chronicle()
            .contains("crossed Clock 700000 against 500000")
    );
}

#[test]
fn what_the_sink_trips_by_is_named_as_the_interlock() {
    for (cause, interlock) in [
        (Cause::Current, Interlock::OverCurrent),
        (Cause::Power, Interlock::OverPower),
        (Cause::VoltageHigh, Interlock::OverVoltage),
        (Cause::VoltageLow, Interlock::Undervoltage),
        (Cause::Temperature, Interlock::OverTemperature),
        (Cause::Excess, Interlock::NotReleasing),
        (Cause::Sensor, Interlock::SensorFault),
        (Cause::Deadman, Interlock::Silence),
        (Cause::Watchdog, Interlock::Clock),
    ] {
        let mut bench = running();
        bench.happen(Happening::SinkTripped {
            time: bench.now,
            cause,
            value: 1,
        });
        trips(&mut bench, interlock);
        assert!(bench.chronicle().contains("by the sink"));
        // The event was lost; the readings say it.
        let mut bench = running();
        bench.latched = Some(cause);
        trips(&mut bench, interlock);
        assert!(bench.chronicle().contains("by the sink"));
    }
}

#[test]
fn a_current_at_its_converters_stop_is_named_not_releasing() {
    let tripped = |value, full_scale| {
        let mut plan = plan(vec![draw(1_000, Span::from_secs(1_000))]);
        plan.ranges.current = milliamperes(full_scale);
        let mut bench = Bench::connected(plan);
        bench.run(Span::from_secs(3));
        bench.happen(Happening::SinkTripped {
            time: bench.now,
            cause: Cause::Sensor,
            value,
        });
        bench.run(Span::from_secs(1));
        bench.ended.clone()
    };
    let not_releasing = Some(Ending::Tripped(Interlock::NotReleasing));
    let sensor_fault = Some(Ending::Tripped(Interlock::SensorFault));
    assert_eq!(tripped(3, 10_000), not_releasing);
    // The voltage's converter says nothing of the gate.
    assert_eq!(tripped(4, 10_000), sensor_fault);
    // A limit as high as the stop leaves open whether it is too much.
    let limit = plan(vec![]).interlocks.over_current.threshold;
    assert_eq!(tripped(3, limit.microamperes() / 1_000), sensor_fault);
}

#[test]
fn another_sink_than_the_one_described_trips() {
    let mut bench = running();
    bench.happen(Happening::AnotherSink);
    trips(&mut bench, Interlock::Refusal);
    let mut bench = Bench::new(plan(vec![draw(1_000, millis(1_000))]));
    bench.happen(Happening::AnotherSink);
    assert_eq!(bench.ended, Some(Ending::Tripped(Interlock::Refusal)));
    assert!(bench.starts.is_empty());
}

#[test]
fn a_sink_that_is_latched_is_not_started() {
    let mut bench = Bench::new(plan(vec![draw(1_000, millis(1_000))]));
    bench.latched = Some(Cause::Temperature);
    bench.connect();
    trips(&mut bench, Interlock::Refusal);
    assert!(bench.starts.is_empty());
}

#[test]
fn a_device_that_is_wrong_before_the_start_is_not_loaded() {
    let mut bench = Bench::new(plan(vec![draw(1_000, millis(1_000))]));
    bench.emf = millivolts(2_000);
    bench.connect();
    trips(&mut bench, Interlock::Undervoltage);
    assert!(bench.starts.is_empty());
}

#[test]
fn a_refused_order_trips() {
    let mut bench = running();
    bench.happen(Happening::Refused {
        order: OrderId(9),
        reason: ReasonRefused::Limit,
    });
    trips(&mut bench, Interlock::Refusal);
}

#[test]
fn a_sink_that_starts_anew_in_the_middle_trips() {
    let mut bench = running();
    bench.happen(Happening::SinkRebooted);
    trips(&mut bench, Interlock::Clock);
}

#[test]
fn margins_tell_how_near_each_interlock_came() {
    let mut bench = running();
    bench.temperature = celsius(60);
    bench.run(Span::from_secs(1));
    bench.temperature = celsius(40);
    bench.run(Span::from_secs(1));
    let margins: Vec<_> = bench.sequencer.margins().collect();
    let heat = margins
        .iter()
        .find(|m| m.interlock == Interlock::OverTemperature)
        .unwrap();
    assert_eq!((heat.permille, heat.worst_permille), (500, 750));
    assert_eq!(
        (heat.value, heat.worst_value, heat.threshold),
        (40_000, 60_000, 80_000)
    );
    let low = margins
        .iter()
        .find(|m| m.interlock == Interlock::Undervoltage)
        .unwrap();
    assert_eq!(low.permille, 684);
    // Every armed interlock but those that no value comes near: record and refusal.
    assert_eq!(margins.len(), 14);
}

#[test]
fn after_the_end_only_off_is_said_and_said_again_if_the_sink_goes_on() {
    let mut bench = running();
    bench.happen(Happening::RecordFailed);
    let mut reading = bench.latest_reading();
    let offs = bench.offs.len();
    reading.time += Span::from_secs(1);
    bench.happen(Happening::Reading(reading));
    assert_eq!(bench.offs.len(), offs);
    bench.now += Span::from_secs(1);
    bench.happen(Happening::Reading(reading));
    assert_eq!(bench.offs.len(), offs + 1);
}
