//! A bench file's entry becomes the sink it describes.

use super::*;

const WEIR: &str = include_str!("../../../sink/src/bench/weir.toml");

/// The first sink of the example bench, with another source.
fn left(source: &str) -> SinkEntry {
    let bench = sink::bench::Bench::from_toml(WEIR).unwrap();
    let mut entry = bench.sink("left").unwrap().clone();
    entry.link = Link::Simulated {
        source: serde_json::from_str(source).unwrap(),
        time_factor: std::num::NonZeroU32::MIN,
    };
    entry
}

fn check_refused(source: &str, message: &str) {
    let error = simulated_sink(&left(source)).unwrap_err().to_string();
    assert_eq!(error, message);
}

#[test]
fn every_sink_of_the_example_bench_can_be_simulated() {
    let bench = sink::bench::Bench::from_toml(WEIR).unwrap();
    for entry in &bench.sinks {
        let mut sink = simulated_sink(entry).unwrap();
        let mut out = Vec::new();
        sink.receive(b"hello 1 7 0000\n");
        sink.advance(Span::from_secs(1), &mut out);
        assert_eq!(sink.now(), Span::from_secs(1));
        assert!(sink.truth().charge_c.abs() < 1e-12, "off at power-up");
    }
}

#[test]
fn a_cell_by_its_label_is_enough() {
    let parts = sink_parts(&left(r#"{"cell": "K-02"}"#)).unwrap();
    let Source::Cell(cell) = &parts.source else {
        panic!("a cell was asked for")
    };
    assert!((cell.capacity_c() / 3600.0 - 3.27 * 0.993).abs() < 0.02);
    assert_eq!(
        parts.figures.sense_current,
        Current::from_amperes(3.3).unwrap()
    );
    assert!(parts.four_wire);
    // 0.6 m there and back, 1.5 mm2: at 20 degC and the nominal cross-section.
    assert!(
        (parts.path.lead_ohm - 0.0138).abs() < 1e-4,
        "{}",
        parts.path.lead_ohm
    );
    // The bench file's own converter: 200 uV minimum, 50 uV offset over 0.1 ohm.
    assert!((parts.errors.drive_floor_v - 2e-4).abs() < 1e-12);
    assert!((parts.errors.set_offset_a - 5e-4).abs() < 1e-12);
    assert!((parts.heat_path.heat_sink_j_per_k - 144.0).abs() < 1e-9);
    SimulatedSink::new(parts).unwrap();
}

#[test]
fn a_supply_with_errors_faults_and_a_line_rate_is_read() {
    let source = r#"{
        "supply": {"voltage": "3.3 V", "output_resistance": "40 mohm",
                   "undershoot": {"resistance": "150 mohm", "time_constant": "300 us"},
                   "current_limit": "1.2 A", "fold_back_to": "400 mA",
                   "ripple": {"amplitude": "5 mV", "period": "10 ms"}},
        "temperature": "30 degC", "seed": 9, "line_rate_baud": 115200,
        "errors": {"set_gain": "1.5 %", "current_noise": "400 uA", "oscillator": "-40 ppm",
                   "sense_drift": "50 ppm/K", "temperature_offset_k": 0.5},
        "faults": [{"at": "10 min", "what": "mosfet_shorted"},
                   {"at": "20 min", "what": {"supply_voltage": "5 V"}},
                   {"at": "30 min", "what": {"restart": "watchdog"}}]
    }"#;
    let parts = sink_parts(&left(source)).unwrap();
    assert!((parts.errors.set_gain - 0.015).abs() < 1e-12);
    assert_eq!(parts.errors.oscillator_ppb, -40_000);
    assert!((parts.errors.sense_per_k - 5e-5).abs() < 1e-12);
    assert_eq!(parts.bytes_per_second, Some(11_520));
    assert_eq!(parts.faults.len(), 3);
    assert!((parts.ambient_degc - 30.0).abs() < 1e-12);
    SimulatedSink::new(parts).unwrap();
}

#[test]
fn a_whole_model_can_stand_in_the_place_of_a_label() {
    let model = serde_json::to_value(crate::cell::type_m()).unwrap();
    let source = serde_json::json!({"model": model, "state_of_charge": "40 %"}).to_string();
    let parts = sink_parts(&left(&source)).unwrap();
    let Source::Cell(cell) = &parts.source else {
        panic!("a cell was asked for")
    };
    assert!((cell.state_of_charge() - 0.4).abs() < 1e-12);
}

#[test]
fn what_cannot_be_simulated_is_refused_with_the_sinks_name_and_the_mend() {
    check_refused(
        r#"{"cell": "K-01", "supply": {"voltage": "3.3 V"}}"#,
        "the simulated source of sink `left` has 2 of `cell`, `model` and `supply`; give exactly \
         one",
    );
    check_refused(
        r#"{"cell": "X-01"}"#,
        "the simulated source of sink `left`: there is no cell `X-01`; known are K, M, K-01, K-02, \
         K-03, M-01, M-02, M-03",
    );
    check_refused(
        r#"{"cell": "K-01", "state_of_charge": "140 %"}"#,
        "the simulated source of sink `left`: a state of charge of 1.4 is none; give 0 (empty) to \
         1 (full)",
    );
    let error = simulated_sink(&left(r#"{"cel": "K-01"}"#))
        .unwrap_err()
        .to_string();
    assert!(error.contains("unknown field `cel`"), "{error}");
    assert!(error.contains("sink `left`"), "{error}");
}

#[test]
fn a_sink_with_hardware_is_not_simulated() {
    let mut entry = left(r#"{"cell": "K-01"}"#);
    entry.link = Link::Tcp {
        address: "192.0.2.7:4000".to_owned(),
    };
    assert_eq!(
        simulated_sink(&entry).unwrap_err().to_string(),
        "sink `left` is not simulated; give it a `link.simulated` with a `source`"
    );
}

#[test]
fn a_transfer_table_of_a_square_law_gives_back_its_figures() {
    use sink::bench::GatePoint;
    let points = [0.1_f64, 1.0, 4.0, 9.0].map(|amperes| GatePoint {
        gate: Voltage::from_volts(2.5 + (2.0 * amperes / 8.0).sqrt()).unwrap(),
        current: Current::from_amperes(amperes).unwrap(),
    });
    let (threshold, factor) = square_law(&Transfer::Table(points.to_vec()));
    assert!((threshold - 2.5).abs() < 1e-5 && (factor - 8.0).abs() < 1e-4);
}

// Source: the usual wire table, 16.14 ohm per 1000 ft for gauge 22 (at 20 degC).
#[test]
fn a_gauge_gives_the_resistance_of_the_wire_table() {
    let conductor = Conductor::Gauge {
        length: quantity::Length::from_metres(0.5 * 304.8).unwrap(),
        gauge: 22,
    };
    let ohm = lead_resistance(&conductor).ohms();
    assert!((ohm - 16.14).abs() < 0.02, "{ohm}");
}
