//! What contributes to the uncertainty of a figure of a sink without a certificate.
//!
//! Only what the bench file states: the sense resistor's tolerance and temperature coefficient,
//! the steps of the converter that reads, the clocks. What a calibration would find beyond that
//! (an amplifier's gain, an offset) is not in it, and the figure says so.

use sink::bench::{Codes, SinkEntry};
use sink::uncertainty::{
    Budget, Contribution, DegreesOfFreedom, Evaluation, Stated, of_resolution,
};

use crate::time_base::TimeBase;

/// The temperature at which a sense resistor has its nominal value, degrees Celsius.
const REFERENCE_DEGC: f64 = 25.0;

/// What is known of the sink's front end.
#[derive(Debug, Clone, Copy)]
pub(crate) struct FrontEnd {
    /// Sense resistor's tolerance, a fraction, plus or minus.
    tolerance: f64,
    /// Its temperature coefficient, per kelvin, plus or minus.
    temperature_coefficient: f64,
    /// One step of the converter that reads, ampere.
    current_step: f64,
    /// One step of the converter that reads, volt.
    voltage_step: f64,
}

impl FrontEnd {
    pub(crate) fn of(entry: &SinkEntry) -> Self {
        let front_end = &entry.front_end;
        let adc = front_end.adc;
        let codes = f64::from(1_u32 << adc.bits.min(31));
        let steps = match adc.codes {
            Codes::PowerOfTwo => codes,
            Codes::PowerOfTwoLessOne => codes - 1.0,
        };
        Self {
            tolerance: front_end.sense_resistor.tolerance.fraction(),
            temperature_coefficient: front_end
                .sense_resistor
                .temperature_coefficient
                .fraction_per_kelvin(),
            current_step: adc.current_full_scale.amperes() / steps,
            voltage_step: adc.voltage_full_scale.volts() / steps,
        }
    }

    /// Standard uncertainty of a voltage read, volt: the converter's step.
    pub(crate) fn voltage(&self) -> f64 {
        of_resolution(self.voltage_step)
    }

    /// One step of the converter that reads the current, ampere.
    pub(crate) const fn current_step(&self) -> f64 {
        self.current_step
    }

    /// The lines that any current, charge or energy of this sink has, each as a fraction of it.
    fn relative(&self, hottest_degc: Option<f64>) -> Vec<(&'static str, f64)> {
        let rectangular = |bound| Stated::Rectangular.standard_uncertainty(bound);
        let warming = hottest_degc.map_or(0.0, |hottest| (hottest - REFERENCE_DEGC).abs());
        vec![
            ("sense resistor, tolerance", rectangular(self.tolerance)),
            (
                "sense resistor, temperature",
                rectangular(self.temperature_coefficient * warming),
            ),
        ]
    }
}

/// What a charge or an energy was delivered under.
pub(crate) struct Conditions {
    /// The value, in the figure's unit.
    pub(crate) value: f64,
    /// How much of the figure's unit a steady ampere would have added.
    pub(crate) per_ampere: f64,
    /// How much of the figure's unit a steady volt would have added; zero for a charge.
    pub(crate) per_volt: f64,
    /// Hottest heat sink, degrees Celsius.
    pub(crate) hottest_degc: Option<f64>,
    /// Uncertainty of the end, in the figure's unit: the cut-off instant.
    pub(crate) cut_off: f64,
}

/// The budget of a charge or an energy.
pub(crate) fn of_delivery(front_end: &FrontEnd, time_base: TimeBase, of: &Conditions) -> Budget {
    let mut lines: Vec<Contribution> = front_end
        .relative(of.hottest_degc)
        .into_iter()
        .map(|(name, fraction)| type_b(name, (of.value * fraction).abs()))
        .collect();
    lines.push(type_b(
        "converter step, current",
        of_resolution(front_end.current_step) * of.per_ampere.abs(),
    ));
    if of.per_volt != 0.0 {
        lines.push(type_b(
            "converter step, voltage",
            of_resolution(front_end.voltage_step) * of.per_volt.abs(),
        ));
    }
    lines.push(type_b("clocks", (of.value * time_base.uncertainty).abs()));
    if of.cut_off > 0.0 {
        lines.push(type_b("cut-off instant", of.cut_off));
    }
    Budget::new(lines)
}

/// The budget of a difference of voltages over a difference of currents, in ohms.
pub(crate) fn of_resistance(front_end: &FrontEnd, resistance: f64, current: f64) -> Budget {
    let both_steps = std::f64::consts::SQRT_2;
    // Carried on by half an interval, a voltage weighs 1.5 times one reading less half another.
    let carried_on = 1.5_f64.hypot(0.5);
    let mut lines: Vec<Contribution> = front_end
        .relative(None)
        .into_iter()
        .map(|(name, fraction)| type_b(name, (resistance * fraction).abs()))
        .filter(|line| line.standard_uncertainty > 0.0)
        .collect();
    lines.push(type_b(
        "converter steps, voltage",
        both_steps * carried_on * of_resolution(front_end.voltage_step) / current.abs(),
    ));
    lines.push(type_b(
        "converter steps, current",
        both_steps * of_resolution(front_end.current_step) * (resistance / current).abs(),
    ));
    Budget::new(lines)
}

fn type_b(name: &str, standard: f64) -> Contribution {
    Contribution::new(
        name,
        Evaluation::TypeB,
        standard,
        DegreesOfFreedom::INFINITE,
    )
}
