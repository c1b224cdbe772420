//! Every interlock, tripped by its own cause through the whole stack; and how long until the
//! current is off, against what `docs/interlocks.md` works out.
//!
//! There is neither a slow link nor a slow host here, so `L` and `H` of that document are zero:
//! what is measured must keep the bound without them, to the millisecond in which one looks.

use quantity::{Ratio, Span, Temperature, Voltage};
use sequencer::event::{Ending, Interlock};
use serde_json::{Value, json};
use simulator::device::{SimulatedSink, SinkParts};
use simulator::fault::{Fault, Happening};
use simulator::link::{LinkFaults, Outage};
use sink::bench::SinkEntry;
use wire::Reset;

use crate::bench::{on_a_supply, plan, sink, supply_sequence};
use crate::stack::{NO_CURRENT_A, Stack, replays};

const TICK: Span = Span::from_millis(1);

/// The readback intervals at which everything is tripped.
const READBACKS: [&str; 3] = ["20 ms", "100 ms", "1 s"];

fn span(text: &str) -> Span {
    text.parse().unwrap()
}

fn volts(value: f64) -> Voltage {
    Voltage::from_volts(value).unwrap()
}

fn draws(current: &str) -> Value {
    json!([{ "draw": current, "for": "10 min" }])
}

/// A cause and what must come of it.
struct Case {
    steps: Value,
    /// Written over the sequence's head.
    more: Value,
    fault: Option<Happening>,
    /// Only the host judges.
    deaf: bool,
    isolator: bool,
    faults: LinkFaults,
    /// When the crossing begins; without it, with the fault.
    crosses: Option<fn(&SimulatedSink) -> bool>,
    named: Interlock,
    by_sink: bool,
}

impl Case {
    fn of(fault: Happening, named: Interlock) -> Self {
        Self {
            steps: draws("800 mA"),
            more: json!({}),
            fault: Some(fault),
            deaf: false,
            isolator: false,
            faults: LinkFaults::default(),
            crosses: None,
            named,
            by_sink: true,
        }
    }

    /// Only the host judges it.
    fn by_host(self) -> Self {
        Self {
            deaf: true,
            by_sink: false,
            ..self
        }
    }

    fn with(self, more: Value) -> Self {
        Self { more, ..self }
    }

    fn entry(&self) -> SinkEntry {
        let mut entry = sink("left");
        entry.isolator = self.isolator;
        entry
    }

    fn stack(&self, readback: &str, at: Span, change: impl FnOnce(&mut SinkParts)) -> Stack {
        let entry = self.entry();
        let mut parts = on_a_supply(&entry);
        if let Some(what) = self.fault {
            parts.faults = vec![Fault { at, what }];
        }
        change(&mut parts);
        let text = supply_sequence(readback, &self.steps, &self.more);
        let mut stack = Stack::new(&entry, parts, plan(&text, &entry), &self.faults);
        stack.link.device_mut().deaf = self.deaf;
        stack
    }

    /// Trips and says how long it took from the crossing until the sink was off.
    fn trip(&self, readback: &str, at: Span) -> Span {
        let mut stack = self.stack(readback, at, |_| {});
        stack.run_to(at);
        assert_eq!(stack.closed, None, "{}", stack.tale());
        stack.stride = TICK;
        let mut crossed_at = self.crosses.is_none().then_some(at);
        let mut off = None;
        while stack.closed.is_none() && off.is_none() {
            stack.run_to(stack.passed().saturating_add(TICK));
            if self.crosses.is_some_and(|crosses| crosses(stack.sink())) {
                crossed_at.get_or_insert(stack.passed());
            }
            off = crossed_at.and_then(|at| stack.link.device().off_after(at));
            assert!(stack.passed() < Span::from_secs(1800), "{}", stack.tale());
        }
        stack.stride = Span::from_secs(1);
        let ending = stack.run_to_the_end(Span::from_secs(3600));
        assert_eq!(
            ending,
            Ending::Tripped(self.named),
            "{readback}: {}",
            stack.tale()
        );
        let (named, by_sink) = stack.crossed()[0];
        assert_eq!(named, self.named);
        // At a readback as fast as the persistence either may be first.
        let only_sink = self.by_sink && span(readback) == Span::from_secs(1);
        assert!(if only_sink {
            by_sink
        } else {
            self.by_sink || !by_sink
        });
        assert!(stack.sink().current_a() < NO_CURRENT_A);
        replays(&stack.plan, &stack.entries, &ending);
        off.unwrap().saturating_sub(crossed_at.unwrap())
    }

    /// Trips at several places within the readback interval; none may take longer than `bound`.
    fn within(&self, bound: impl Fn(Span) -> Span) {
        for readback in READBACKS {
            let interval = span(readback);
            for part in [0_u64, 3, 7] {
                let phase = Span::from_micros(interval.micros() * part / 10);
                let at = Span::from_secs(4).saturating_add(phase);
                let took = self.trip(readback, at);
                let bound = bound(interval).saturating_add(TICK);
                assert!(
                    took <= bound,
                    "{:?} at {readback} took {took}, not at most {bound}",
                    self.named
                );
            }
        }
    }
}

/// The sink's own copy: the persistence and a tick.
fn by_the_sink(persistence: &str) -> impl Fn(Span) -> Span {
    let persistence = span(persistence);
    move |_| persistence.saturating_add(TICK)
}

/// The host's: whole readback intervals for the persistence, two at least where the sink could
/// have judged a shorter one.
fn by_the_host(persistence: &str, sink_could: bool) -> impl Fn(Span) -> Span {
    let persistence = span(persistence).micros();
    move |interval| {
        let interval = interval.micros();
        let least = if sink_could && persistence > 0 && persistence < interval {
            2
        } else {
            1
        };
        let intervals = persistence.div_ceil(interval).max(least);
        Span::from_micros(intervals * interval).saturating_add(TICK)
    }
}

#[test]
fn undervoltage() {
    let case = || {
        Case::of(
            Happening::SupplyVoltage(volts(2.8)),
            Interlock::Undervoltage,
        )
    };
    case().within(by_the_sink("20 ms"));
    case().by_host().within(by_the_host("20 ms", true));
    let more = json!({ "interlocks": { "undervoltage": { "below": "3 V", "for": "0 s" } } });
    let at_once = || case().with(more.clone());
    at_once().within(by_the_sink("0 s"));
    at_once().by_host().within(by_the_host("0 s", true));
}

#[test]
fn over_voltage() {
    let case = || Case::of(Happening::SupplyVoltage(volts(4.6)), Interlock::OverVoltage);
    case().within(by_the_sink("20 ms"));
    case().by_host().within(by_the_host("20 ms", true));
}

#[test]
fn over_power() {
    let more = json!({ "interlocks": { "over_power": { "above": "3 W" } } });
    let case = || Case::of(Happening::SupplyVoltage(volts(4.3)), Interlock::OverPower);
    case().with(more.clone()).within(by_the_sink("20 ms"));
    let by_host = case().with(more).by_host();
    by_host.within(by_the_host("20 ms", true));
}

#[test]
fn over_current() {
    let more = json!({ "interlocks": { "over_current": { "above": "1 A" } } });
    let case = || Case::of(Happening::FeedbackLost, Interlock::OverCurrent);
    case().with(more).within(by_the_sink("10 ms"));
    // With a persistence, not releasing is as fast on the host.
    let more = json!({ "interlocks": { "over_current": { "above": "1 A", "for": "0 s" } } });
    let by_host = case().with(more).by_host();
    by_host.within(by_the_host("0 s", true));
}

#[test]
fn a_loop_that_lost_its_feedback_does_not_release() {
    let case = || Case::of(Happening::FeedbackLost, Interlock::NotReleasing);
    case().within(by_the_sink("100 ms"));
    case().by_host().within(by_the_host("100 ms", true));
}

#[test]
fn over_temperature() {
    let ambient = Temperature::from_degrees_celsius(120.0).unwrap();
    let more = json!({
        "interlocks": { "over_temperature": { "above": "40 degC", "for": "500 ms" } }
    });
    for deaf in [false, true] {
        let mut case = Case::of(Happening::Ambient(ambient), Interlock::OverTemperature);
        case.crosses = Some(|sink| sink.heat_sink_degc() > 40.0);
        case.more = more.clone();
        case.deaf = deaf;
        for readback in READBACKS {
            // At slow readbacks the host may be first: a reading speaks for its whole interval.
            case.by_sink = !deaf && span(readback) < Span::from_secs(1);
            if !deaf && !case.by_sink {
                continue;
            }
            let took = case.trip(readback, Span::from_secs(4));
            let bound = if deaf {
                by_the_host("500 ms", false)(span(readback))
            } else {
                by_the_sink("500 ms")(span(readback))
            };
            // Heat moves slowly: the crossing may show in thousandths of a degree a little later.
            let bound = bound.saturating_add(Span::from_millis(10));
            assert!(took <= bound, "{readback}: {took}, not at most {bound}");
        }
    }
}

#[test]
fn a_temperature_sensor_open_or_shorted() {
    for fault in [Happening::TemperatureOpen, Happening::TemperatureShort] {
        Case::of(fault, Interlock::SensorFault).within(by_the_sink("0 s"));
    }
}

#[test]
fn a_lost_voltage_sense_wire_reads_as_too_little() {
    let case = || Case::of(Happening::VoltageSenseLost, Interlock::Undervoltage);
    case().within(by_the_sink("20 ms"));
    case().by_host().within(by_the_host("20 ms", true));
}

#[test]
fn a_reversed_supply_reads_as_too_little_where_the_converter_shows_nothing_below_zero() {
    let case = || {
        Case::of(
            Happening::SupplyVoltage(volts(-1.0)),
            Interlock::Undervoltage,
        )
    };
    case().within(by_the_sink("20 ms"));
    let more = json!({ "interlocks": { "undervoltage": { "below": "3 V", "for": "0 s" } } });
    let by_host = case().with(more).by_host();
    by_host.within(by_the_host("0 s", true));
}

#[test]
fn a_voltage_at_its_converters_stop_is_a_sensor_fault() {
    Case::of(
        Happening::SupplyVoltage(volts(12.0)),
        Interlock::SensorFault,
    )
    .within(by_the_sink("0 s"));
}

#[test]
fn not_following() {
    let mut case = Case::of(Happening::MosfetOpen, Interlock::NotFollowing);
    case.by_sink = false;
    case.within(by_the_host("1 s", false));
}

#[test]
fn a_reading_that_freezes_shows_at_the_next_change_of_setpoint() {
    let steps = |then: Value| json!([{ "draw": "500 mA", "for": "6 s" }, then]);
    let mut up = Case::of(Happening::CurrentStuck, Interlock::NotFollowing);
    up.by_sink = false;
    up.steps = steps(json!({ "draw": "1 A", "for": "1 min" }));
    let mut down = Case::of(Happening::CurrentStuck, Interlock::NotReleasing);
    down.steps = steps(json!({ "rest": "1 min" }));
    for case in [up, down] {
        for readback in READBACKS {
            // The first step begins within a second; the change six seconds later.
            let took = case.trip(readback, Span::from_secs(3));
            assert!(took <= Span::from_secs(7), "{took}");
        }
    }
}

#[test]
fn a_silent_link_is_cut_short_by_the_sinks_deadman() {
    let from = Span::from_secs(5);
    let mut case = Case::of(Happening::Mended, Interlock::Silence);
    case.by_sink = false;
    case.faults.unplugged = vec![Outage {
        from,
        lasts: Span::from_secs(60),
    }];
    // From the last line of the host; it says something at least every third of the deadman.
    case.within(|_| Span::from_secs(2 + 5));
    for readback in READBACKS {
        let mut stack = case.stack(readback, from, |_| {});
        stack.run_to(Span::from_micros(7_001_000));
        assert!(stack.sink().current_a() < NO_CURRENT_A, "{}", stack.tale());
    }
}

#[test]
fn charge_energy_and_time() {
    let mut charge = Case::of(Happening::Mended, Interlock::Charge)
        .with(json!({ "interlocks": { "charge": "2 mAh" } }));
    charge.crosses = Some(|sink| sink.truth().charge_c > 7.2);
    let mut energy = Case::of(Happening::Mended, Interlock::Energy)
        .with(json!({ "interlocks": { "energy": "7 mWh" } }));
    energy.crosses = Some(|sink| sink.truth().terminal_j > 25.2);
    for mut case in [charge, energy] {
        case.by_sink = false;
        // What is counted is what the converter shows: up to half a code from the truth.
        let quantised = Span::from_millis(50);
        case.within(|interval| by_the_host("0 s", false)(interval).saturating_add(quantised));
    }
    let mut time = Case::of(Happening::Mended, Interlock::Time)
        .with(json!({ "interlocks": { "time": "8 s" } }));
    time.by_sink = false;
    for readback in READBACKS {
        // The run begins within a second after the greeting.
        let took = time.trip(readback, Span::from_secs(4));
        assert!(took <= Span::from_secs(5 + 1), "{took}");
    }
}

#[test]
fn a_record_that_cannot_be_written() {
    for readback in READBACKS {
        let mut case = Case::of(Happening::Mended, Interlock::Record);
        case.by_sink = false;
        let mut stack = case.stack(readback, Span::from_secs(5), |_| {});
        stack.run_to(Span::from_secs(5));
        let at = stack.passed();
        // The disk takes nothing any more, and says so.
        stack.disk = None;
        stack.act(run::Keeper::record_failed);
        stack.run_to(at.saturating_add(TICK).saturating_add(TICK));
        assert!(stack.sink().current_a() < NO_CURRENT_A);
        let ending = stack.run_to_the_end(Span::from_secs(60));
        assert_eq!(ending, Ending::Tripped(Interlock::Record));
        replays(&stack.plan, &stack.entries, &ending);
    }
}

#[test]
fn a_clock_that_jumps_or_runs_away() {
    let jump = Happening::OscillatorJump(Span::from_millis(400));
    let rate = Happening::OscillatorRate(50_000_000);
    for fault in [jump, rate] {
        let mut case = Case::of(fault, Interlock::Clock);
        case.by_sink = false;
        for readback in READBACKS {
            let took = case.trip(readback, Span::from_secs(8));
            let bound = Span::from_secs(10).saturating_add(span(readback));
            assert!(took <= bound, "{fault:?} at {readback}: {took}");
        }
    }
}

#[test]
fn a_sink_that_starts_anew_in_mid_run() {
    for readback in READBACKS {
        let mut case = Case::of(Happening::Restart(Reset::Watchdog), Interlock::Clock);
        case.by_sink = false;
        let mut stack = case.stack(readback, Span::from_secs(5), |_| {});
        let ending = stack.run_to_the_end(Span::from_secs(60));
        assert_eq!(ending, Ending::Tripped(Interlock::Clock));
        assert!(stack.sink().current_a() < NO_CURRENT_A);
        replays(&stack.plan, &stack.entries, &ending);
    }
}

#[test]
fn a_sink_that_is_latched_before_the_start_is_refused() {
    let case = Case::of(Happening::TemperatureOpen, Interlock::SensorFault);
    let mut stack = case.stack("100 ms", Span::from_secs(3), |parts| {
        parts.faults.push(Fault {
            at: Span::from_secs(6),
            what: Happening::Mended,
        });
    });
    let ending = stack.run_to_the_end(Span::from_secs(60));
    assert_eq!(ending, Ending::Tripped(Interlock::SensorFault));
    stack.stand_idle(Span::from_secs(8));
    stack.take_another_run();
    let ending = stack.run_to_the_end(Span::from_secs(120));
    assert_eq!(ending, Ending::Tripped(Interlock::Refusal));
    replays(&stack.plan, &stack.entries, &ending);
    // Once its cause is gone, a person may reset it; then a run begins.
    stack.act(|keeper, now| assert!(keeper.reset(now)));
    let asked = stack.passed();
    stack.stand_idle(asked.saturating_add(Span::from_secs(5)));
    stack.take_another_run();
    let begun = stack.passed();
    stack.run_to(begun.saturating_add(Span::from_secs(5)));
    assert!(stack.sink().current_a() > 0.7, "{}", stack.tale());
}

#[test]
fn a_sink_that_is_not_the_one_described_is_never_driven() {
    let case = Case::of(Happening::Mended, Interlock::Refusal);
    let mut stack = case.stack("100 ms", Span::ZERO, |parts| parts.figures.serial = 9);
    stack.currents = Some(Vec::new());
    let ending = stack.run_to_the_end(Span::from_secs(60));
    assert_eq!(ending, Ending::Tripped(Interlock::Refusal));
    assert_eq!(stack.crossed(), [(Interlock::Refusal, false)]);
    let told = &stack.link.device().told;
    let orders = told
        .iter()
        .filter(|(_, line)| matches!(line, wire::HostLine::Order { .. }));
    assert_eq!(orders.count(), 0);
    replays(&stack.plan, &stack.entries, &ending);
}

#[test]
fn a_shorted_mosfet_is_cut_by_the_isolator_and_named_not_releasing() {
    // Over short leads the current is beyond what the converter shows; over long ones it is not.
    for lead_ohm in [0.0, 1.0] {
        let mut case = Case::of(Happening::MosfetShorted, Interlock::NotReleasing);
        case.isolator = true;
        for readback in READBACKS {
            let at = Span::from_secs(4);
            let mut stack = case.stack(readback, at, |parts| parts.path.lead_ohm = lead_ohm);
            stack.run_to(at);
            assert!(stack.sink().current_a() > 0.7, "{}", stack.tale());
            // The isolator is open after the persistence at the latest, and the current zero.
            stack.run_to(at.saturating_add(Span::from_millis(103)));
            assert!(stack.sink().current_a() < NO_CURRENT_A, "{}", stack.tale());
            let ending = stack.run_to_the_end(Span::from_secs(60));
            assert_eq!(ending, Ending::Tripped(Interlock::NotReleasing));
            replays(&stack.plan, &stack.entries, &ending);
        }
    }
}

#[test]
fn a_shorted_mosfet_without_an_isolator_calls_for_a_person() {
    for lead_ohm in [0.0, 1.0] {
        for deaf in [false, true] {
            let mut case = Case::of(Happening::MosfetShorted, Interlock::NotReleasing);
            case.deaf = deaf;
            let mut stack = case.stack("100 ms", Span::from_secs(4), |parts| {
                parts.path.lead_ohm = lead_ohm;
            });
            let ending = stack.run_to_the_end(Span::from_secs(60));
            let named = stack.crossed();
            assert!(
                named
                    .iter()
                    .any(|(which, _)| *which == Interlock::NotReleasing),
                "{named:?}"
            );
            if !deaf {
                assert_eq!(ending, Ending::Tripped(Interlock::NotReleasing));
            }
            assert!(stack.sink().current_a() > 1.0, "nothing but a person can");
            replays(&stack.plan, &stack.entries, &ending);
        }
    }
}

#[test]
fn a_dip_of_forty_milliseconds_between_slow_readbacks_trips() {
    for deaf in [false, true] {
        let more = json!({
            "interlocks": { "undervoltage": {
                "below": "3 V",
                "for": if deaf { "0 s" } else { "20 ms" }
            } }
        });
        let mut case = Case::of(
            Happening::SupplyVoltage(volts(2.8)),
            Interlock::Undervoltage,
        );
        case.deaf = deaf;
        let case = case.with(more);
        for phase in [5, 25, 55] {
            let at = Span::from_millis(4_000 + phase);
            let mut stack = case.stack("100 ms", at, |parts| {
                parts.faults.push(Fault {
                    at: at.saturating_add(Span::from_millis(40)),
                    what: Happening::SupplyVoltage(volts(3.5)),
                });
            });
            let ending = stack.run_to_the_end(Span::from_secs(60));
            assert_eq!(ending, Ending::Tripped(Interlock::Undervoltage));
            replays(&stack.plan, &stack.entries, &ending);
        }
    }
}

#[test]
fn noise_alone_trips_nothing() {
    let entry = sink("left");
    let mut parts = simulator::bench_source::sink_parts(&entry).unwrap();
    parts.errors.set_gain = 0.0;
    parts.errors.current_gain = 0.0;
    parts.source = on_a_supply(&entry).source;
    let steps = json!([{ "repeat": { "times": 60, "steps": [
        { "draw": "800 mA", "for": "1 s" }, { "draw": "50 mA", "for": "500 ms" }, { "rest": "500 ms" }
    ] } }]);
    let text = supply_sequence("20 ms", &steps, &json!({}));
    let faults = LinkFaults {
        drop_line: Ratio::from_fraction(0.01).unwrap(),
        ..LinkFaults::default()
    };
    let mut stack = Stack::new(&entry, parts, plan(&text, &entry), &faults);
    let ending = stack.run_to_the_end(Span::from_secs(600));
    assert_eq!(ending, Ending::Finished, "{}", stack.tale());
    replays(&stack.plan, &stack.entries, &ending);
}
