use quantity::Span;
use wire::Reset;

use super::bench::{HeldBack, Lent, Lumped, figures, prove, sink, with_source};
use crate::{Options, Report, Verdict, time_at_most};

fn not_shown(report: &Report) -> Vec<&'static str> {
    report
        .shown
        .iter()
        .filter(|shown| matches!(shown.verdict, Verdict::NotShown { .. }))
        .map(|shown| shown.guarantee.name)
        .collect()
}

#[test]
fn the_reference_firmware_holds_everything_with_a_source() {
    let report = prove(sink(figures(), Reset::Power), &with_source());
    assert!(report.holds(), "{report}");
    assert_eq!(not_shown(&report), ["off-after-reset"], "{report}");
}

#[test]
fn without_a_source_what_needs_a_current_is_not_shown_and_none_flows() {
    let options = Options::default();
    let mut device = sink(figures(), Reset::Power);
    let report = prove(Lent(&mut device), &options);
    assert!(report.holds(), "{report}");
    assert_eq!(
        not_shown(&report),
        [
            "off-after-reset",
            "draws",
            "charge",
            "limit-current",
            "limit-power",
            "ramp",
            "regulated-power",
            "regulated-resistance",
            "deadman-current"
        ],
        "{report}"
    );
    assert!(device.truth().charge_c.abs() < 1e-12);
    assert!(report.took < time_at_most(&options));
}

#[test]
fn a_watchdog_reset_is_seen_latched() {
    let report = prove(sink(figures(), Reset::Watchdog), &Options::default());
    assert!(report.holds(), "{report}");
    assert!(!not_shown(&report).contains(&"off-after-reset"), "{report}");
}

#[test]
fn a_sink_with_other_abilities_holds_as_well() {
    let mut other = figures();
    other.abilities = wire::Abilities {
        isolator: true,
        ..wire::Abilities::default()
    };
    other.burst = 0;
    other.queue = 40;
    let report = prove(sink(other, Reset::Pin), &Options::default());
    assert!(report.holds(), "{report}");
}

#[test]
fn a_port_that_sends_in_lumps_loses_no_readback() {
    let lumped = Lumped {
        device: sink(figures(), Reset::Power),
        every: Span::from_millis(60),
        waiting: Vec::new(),
    };
    let report = prove(lumped, &with_source());
    assert!(report.holds(), "{report}");
}

#[test]
fn a_port_that_held_lines_back_once_does_not_fail_a_sound_sink() {
    let sink = sink(figures(), Reset::Power);
    // The answer to the first `limit` comes after the check's patience is over.
    let once = HeldBack::new(sink, "limit ", Span::from_millis(1_500), 1);
    let report = prove(once, &Options::default());
    assert!(report.holds(), "{report}");
}

#[test]
fn a_port_that_always_holds_lines_back_is_named_beside_what_fails() {
    let sink = sink(figures(), Reset::Power);
    let always = HeldBack::new(sink, "clock ", Span::from_millis(700), u32::MAX);
    let report = prove(always, &Options::default());
    assert!(!report.holds());
    for (name, wrong) in report.failed() {
        assert!(
            wrong.contains("meanwhile an answer took"),
            "{name}: {wrong}"
        );
    }
}

#[test]
fn the_report_is_json_with_every_line_and_its_time() {
    let report = prove(sink(figures(), Reset::Power), &Options::default());
    let json = serde_json::to_value(&report).unwrap();
    let first = &json["shown"][0];
    assert_eq!(first["name"], "session-first");
    assert_eq!(first["verdict"], "holds");
    assert_eq!(first["evidence"][1]["direction"], "sent");
    assert!(first["evidence"][2]["at"].as_u64().is_some());
    assert!(json["description"]["serial"] == 4711);
}
