use quantity::{SinkTime, Temperature};
use wire::{Readback, SinkState};

use super::*;

fn reading(current: i64, voltage: i64) -> Reading {
    Reading {
        readback: 0,
        time: SinkTime::ZERO,
        values: Readback {
            current: Current::from_microamperes(current),
            current_min: Current::from_microamperes(current - 1),
            current_max: Current::from_microamperes(current + 1),
            voltage: Voltage::from_microvolts(voltage),
            voltage_min: Voltage::from_microvolts(voltage - 10),
            voltage_max: Voltage::from_microvolts(voltage + 10),
            temperature: TemperatureReading::Value(Temperature::from_millidegrees_celsius(25_000)),
            state: SinkState::On,
        },
        counters: None,
        lost: 0,
    }
}

#[test]
fn a_curve_of_unknown_length_stays_small_and_keeps_its_extremes() {
    let mut curve = Curve::new(Correction::IDENTITY, 10);
    for second in 0..10_000_u64 {
        let dip = if second == 7_777 { 500_000 } else { 0 };
        let at = HostTime::ZERO.saturating_add(Span::from_secs(second));
        curve.take(at, &reading(640_000, 3_600_000 - dip));
    }
    let view = curve.view();
    assert!((5..=10).contains(&view.time_s.len()), "{view:?}");
    assert_eq!(view.readbacks.iter().sum::<u64>(), 10_000);
    let least = view.voltage_min_v.iter().copied().fold(f64::MAX, f64::min);
    assert!((least - 3.099_99).abs() < 1e-9, "{least}");
    assert!(view.time_s.windows(2).all(|pair| pair[0] < pair[1]));
    assert!(view.current_a.iter().all(|mean| (mean - 0.64).abs() < 1e-9));
}
