//! Budgets: what contributes to the uncertainty of a figure.

use std::f64::consts::SQRT_2;

use sink::uncertainty::{Budget, Contribution, DegreesOfFreedom, Evaluation, Stated};

use crate::channel::Instrument;
use crate::time_base::TimeBase;

/// What a charge or an energy was delivered under.
pub(crate) struct Conditions {
    /// The value, in the figure's unit.
    pub(crate) value: f64,
    /// How much of the figure's unit a steady ampere would have added.
    pub(crate) per_ampere: f64,
    /// How much of the figure's unit a steady volt would have added; `None` for a charge.
    pub(crate) per_volt: Option<f64>,
    /// The cut-off that ended it.
    pub(crate) end: End,
    /// What a bent correction may hide, at most, in the figure's unit.
    pub(crate) hidden: f64,
}

/// What a cut-off does to a charge or an energy; nothing where there was none.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct End {
    /// The cut-off voltage, volt.
    pub(crate) volts: f64,
    /// The current there, ampere.
    pub(crate) amperes: f64,
    /// How much more of the figure's unit a volt read too high lets through before the cut-off.
    pub(crate) per_volt: f64,
}

/// The budget of a charge, `Q = a T + b Q_nominal`, or of an energy.
pub(crate) fn of_delivery(instrument: &Instrument, time_base: TimeBase, of: &Conditions) -> Budget {
    let mut lines = instrument.current.over(of.per_ampere, of.value);
    let end = of.end;
    if let Some(per_volt) = of.per_volt {
        // A voltage read too high counts too much energy, and ends too late as well.
        lines.extend(
            instrument
                .voltage
                .over(per_volt + end.per_volt, of.value + end.volts * end.per_volt),
        );
        if of.per_ampere > 0.0 {
            // A steady ohm would have added the mean current times the charge.
            let amperes = of.value / of.per_ampere;
            let per_ohm = amperes * per_volt + end.amperes * end.per_volt;
            lines.extend(of_leads(instrument, per_ohm));
        }
    } else {
        // Each of the voltage's errors by itself: one that is a bound stays one.
        let voltage = instrument
            .voltage
            .over(end.per_volt, end.volts * end.per_volt);
        let leads = of_leads(instrument, end.amperes * end.per_volt);
        lines.extend(voltage.into_iter().chain(leads).map(|line| Contribution {
            name: format!("cut-off instant: {}", line.name),
            ..line
        }));
    }
    lines.push(clocks((of.value * time_base.uncertainty).abs()));
    if of.hidden > 0.0 {
        lines.push(bounded("bend and leads within steps", of.hidden));
    }
    Budget::new(lines)
}

/// How often the steps of two readings count in their difference.
pub(crate) const ONE_EACH: f64 = SQRT_2;

/// The budget of a difference of voltages over a difference of currents, in ohms. `weight` says
/// how often the voltage's steps count.
pub(crate) fn of_resistance(
    instrument: &Instrument,
    resistance: f64,
    current: f64,
    weight: f64,
) -> Budget {
    let voltage = resistance * current;
    let mut lines = instrument
        .voltage
        .of_difference(voltage, weight, 1.0 / current);
    lines.extend(
        instrument
            .current
            .of_difference(current, ONE_EACH, resistance / current),
    );
    lines.extend(of_leads(instrument, 1.0));
    Budget::new(lines)
}

/// What noise and steps leave of a mean of so many captured samples, in ohms.
pub(crate) fn of_samples(
    instrument: &Instrument,
    resistance: f64,
    current: f64,
    samples: f64,
) -> [Contribution; 2] {
    let voltage = instrument.voltage.resolution_of(samples);
    let amperes = instrument.current.resolution_of(samples);
    [
        stated("captured samples, voltage", voltage / current),
        stated(
            "captured samples, current",
            (amperes * resistance / current).abs(),
        ),
    ]
}

/// The share of two-wire leads in a figure to which an ohm would have added so much; none over
/// four wires.
pub(crate) fn of_leads(instrument: &Instrument, per_ohm: f64) -> Option<Contribution> {
    let standard = (instrument.leads_ohm * per_ohm).abs();
    (standard > 0.0).then(|| stated("leads", standard))
}

/// The line of the clocks: a host's clock is somewhere within its bound, and stays there.
pub(crate) fn clocks(standard: f64) -> Contribution {
    stated("clocks", standard).rectangular()
}

/// A line whose standard uncertainty is stated.
pub(crate) fn stated(name: impl Into<String>, standard: f64) -> Contribution {
    Contribution::new(
        name,
        Evaluation::TypeB,
        standard,
        DegreesOfFreedom::INFINITE,
    )
}

/// A line of which only a bound is known (JCGM 100:2008, 4.3.7).
pub(crate) fn bounded(name: impl Into<String>, bound: f64) -> Contribution {
    stated(name, Stated::Rectangular.standard_uncertainty(bound)).rectangular()
}

/// A line evaluated from the spread of what was read.
pub(crate) fn observed(
    name: impl Into<String>,
    standard: f64,
    freedom: DegreesOfFreedom,
) -> Contribution {
    Contribution::new(name, Evaluation::TypeA, standard, freedom)
}
