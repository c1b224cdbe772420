//! Of a supply: a sweep, a limit that folds back, captured edges.

use sink::bench::{Bench, SinkEntry};

use super::super::bench::left;
use super::{BOTH, Behind, assert_stands, erring, nights, stating, supply};
use crate::{Name, work_out};

const SWEEP: &str = r#"{ "sequence": 1, "title": "Sweep and knee",
  "dut": { "label": "supply", "kind": "supply", "voltage_min": "100 mV", "voltage_max": "3.6 V",
           "current_max": "1 A" },
  "readback": "100 ms",
  "interlocks": { "undervoltage": { "below": "100 mV", "for": "1 s" } },
  "steps": [ { "rest": "1 s" },
             { "draw": "50 mA", "for": "1 s" }, { "draw": "150 mA", "for": "1 s" },
             { "draw": "250 mA", "for": "1 s" }, { "draw": "350 mA", "for": "1 s" },
             { "draw": "450 mA", "for": "1 s" },
             { "ramp": { "from": "450 mA", "to": "650 mA", "over": "4 s" },
               "until": [ { "voltage_below": "1.5 V", "for": "FOLDED" } ],
               "may_give_up": true, "label": "up" },
             { "rest": "1 s" } ] }"#;

const PULSES: &str = r#"{ "sequence": 1, "title": "Pulses",
  "dut": { "label": "supply", "kind": "supply", "voltage_min": "2.9 V", "voltage_max": "3.6 V",
           "current_max": "500 mA" },
  "readback": "50 ms",
  "interlocks": { "undervoltage": { "below": "2.9 V", "for": "20 ms" } },
  "steps": [ { "draw": "35 mA", "for": "1 s" },
             { "draw": "420 mA", "for": "300 ms", "label": "pulse",
               "burst": { "before": "10 ms", "after": "150 ms" } },
             { "draw": "35 mA", "for": "1 s" },
             { "draw": "420 mA", "for": "300 ms" },
             { "draw": "35 mA", "for": "1 s", "label": "after",
               "burst": { "before": "10 ms", "after": "150 ms" } } ] }"#;

/// A bench that lets a supply's voltage fall.
fn lenient() -> SinkEntry {
    let bench = include_str!("../../../../sink/src/bench/weir.toml").replace(
        r#"{ below = "2.3 V", for = "20 ms" }"#,
        r#"{ below = "100 mV", for = "1 s" }"#,
    );
    let entry = Bench::from_toml(&bench)
        .unwrap()
        .sink("left")
        .unwrap()
        .clone();
    stating(entry)
}

/// How a supply limits its current.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Limit {
    /// To what it is.
    Plain,
    /// Back to less, and the sink asks on for a while.
    FoldsBack,
    /// Back to less, and the step ends as soon as that is seen.
    FoldsBackAndEnds,
}

fn sweep(behind: Behind, kind: Limit) {
    let entry = lenient();
    let asks_on = match kind {
        Limit::Plain | Limit::FoldsBack => "300 ms",
        Limit::FoldsBackAndEnds => "0 s",
    };
    let text = SWEEP.replace("FOLDED", asks_on);
    nights(&format!("{behind:?}, {kind:?}"), |seed, claims| {
        let (mut setup, mut random) = erring(behind, &text, &entry, seed);
        // A limit between two readbacks' currents, wherever.
        let limit = 0.5 + 0.05 * random.unit();
        let to = match kind {
            Limit::Plain => limit,
            Limit::FoldsBack | Limit::FoldsBackAndEnds => 0.2 + 0.1 * random.unit(),
        };
        setup.parts.source = supply(&format!(
            r#"{{ "voltage": "3.3 V", "output_resistance": "60 mohm",
                 "current_limit": "{:.0} uA", "fold_back_to": "{:.0} uA" }}"#,
            limit * 1e6,
            to * 1e6
        ));
        // Into the path of the sink driven fully, the limit is that much above a short circuit's:
        // the channel of a MOSFET at a small current is a resistance.
        let path = setup.parts.path;
        let channel = path.mosfet.transconductance_a_per_v2
            * (path.mosfet.gate_drive_v - path.mosfet.threshold_v - to * path.sense_ohm);
        let ohms = path.lead_ohm + path.mosfet.drain_ohm + path.sense_ohm + 1.0 / channel;
        let folded = to / (1.0 - (limit - to) * ohms / 3.3);
        let figures = work_out(&setup.night().record).unwrap();
        assert_stands(&figures, behind);
        let mut claims = claims.lock().unwrap();
        claims.take(&figures, Name::LoadRegulation, 0.060 * 0.45);
        claims.take(&figures, Name::OutputResistance, 0.060);
        claims.take_of(&figures, Name::CurrentLimitKnee, "up", limit);
        if kind != Limit::Plain {
            claims.take_of(&figures, Name::FoldBackCurrent, "up", folded);
        }
    });
}

#[test]
fn a_supplys_figures_hold_what_they_claim() {
    for behind in BOTH {
        sweep(behind, Limit::FoldsBack);
    }
}

#[test]
fn a_plain_limit_and_a_fold_back_hardly_seen_hold_what_they_claim() {
    sweep(Behind::Certificate, Limit::Plain);
    sweep(Behind::Certificate, Limit::FoldsBackAndEnds);
}

/// The largest of a course, and when it comes within a band to stay, on a fine grid.
fn course(amperes: f64, band: f64) -> (f64, f64) {
    let grid = || (1..=150_000_u32).map(|step| f64::from(step) * 1e-6);
    let ohms = |s: f64| 0.020 + 0.150 * (-s / 0.010).exp() + 0.100 * (1.0 - (-s / 0.0025).exp());
    let largest = grid().map(ohms).fold(0.0, f64::max);
    let mut outside = grid().filter(|s| (ohms(*s) - 0.120).abs() * amperes > band);
    (amperes * largest, outside.next_back().unwrap())
}

/// 20 mohm at once, 100 mohm that come on with 2.5 ms, 150 mohm that the regulator makes good with
/// 10 ms: the extreme lies some samples after the edge.
fn edges(behind: Behind) {
    let entry = stating(left());
    // The nearest codes of the setting converter, 3.3 A in 4096 steps.
    let set = |amperes: f64| (amperes / (3.3 / 4096.0)).round() * 3.3 / 4096.0;
    let amperes = set(0.420) - set(0.035);
    let settled = |amperes: f64| 3.3 - 0.120 * amperes;
    let (droop, recovered) = course(amperes, 0.005 * settled(0.420));
    let (overshoot, fallen) = course(amperes, 0.005 * settled(0.035));
    nights(&format!("{behind:?}"), |seed, claims| {
        let (mut setup, _) = erring(behind, PULSES, &entry, seed);
        setup.parts.source = supply(
            r#"{ "voltage": "3.3 V", "output_resistance": "20 mohm",
                 "undershoot": { "resistance": "150 mohm", "time_constant": "10 ms" },
                 "sag": { "resistance": "100 mohm", "time_constant": "2500 us" } }"#,
        );
        let figures = work_out(&setup.night().record).unwrap();
        assert_stands(&figures, behind);
        let mut claims = claims.lock().unwrap();
        claims.take_of(&figures, Name::Droop, "pulse", droop);
        claims.take_of(&figures, Name::RecoveryTime, "pulse", recovered);
        claims.take_of(&figures, Name::Overshoot, "after", overshoot);
        claims.take_of(&figures, Name::RecoveryTime, "after", fallen);
    });
}

#[test]
fn a_supplys_edges_hold_what_they_claim() {
    for behind in BOTH {
        edges(behind);
    }
}
