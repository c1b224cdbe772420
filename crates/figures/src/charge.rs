//! Charge and energy of a stretch: from the sink's counters, in true values.

use quantity::{Span, Voltage};
use sink::correction::Correction;

use crate::time_base::TimeBase;
use crate::walk::{Delivered, Mark};

/// Seconds in an hour.
const HOUR_S: f64 = 3600.0;

/// What was delivered between two marks, in true values and true time.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(crate) struct Amount {
    /// Ampere hours.
    pub(crate) charge_ah: f64,
    /// Watt hours.
    pub(crate) energy_wh: f64,
    /// Seconds.
    pub(crate) seconds: f64,
    /// What the bend of a correction may hide in the charge, at most, ampere hours.
    pub(crate) hidden_ah: f64,
    /// The same of the energy, watt hours.
    pub(crate) hidden_wh: f64,
}

impl Amount {
    /// From the counters at two instants, by the correction and the time base.
    pub(crate) fn between(
        begin: Mark,
        end: Mark,
        correction: &Correction,
        time_base: TimeBase,
    ) -> Self {
        let span = end.time.saturating_since(begin.time);
        let charge = end.charge.saturating_sub(begin.charge);
        let energy = end.energy.saturating_sub(begin.energy);
        let mean_voltage = mean_voltage(begin, end, span);
        let true_charge = correction.charge_from_counter(charge, span);
        let true_energy = correction.energy_from_counter(energy, charge, mean_voltage, span);
        Self {
            charge_ah: true_charge.coulombs() / HOUR_S * time_base.factor,
            energy_wh: true_energy.joules() / HOUR_S * time_base.factor,
            seconds: span.seconds() * time_base.factor,
            hidden_ah: 0.0,
            hidden_wh: 0.0,
        }
    }

    /// With what bent curves, and leads, may hide in it, for a stretch that goes to and fro.
    pub(crate) fn hiding(self, delivered: &Delivered, correction: &Correction) -> Self {
        let hours = |seconds: f64| seconds / HOUR_S;
        let hidden_ah = hours(delivered.current_spread.hides(correction.current_read));
        let volt_hours = hours(delivered.voltage_spread.hides(correction.voltage_read));
        let leads = correction.leads.ohms();
        let hidden_leads_wh = hours(leads * delivered.current_spread.squares());
        if self.seconds <= 0.0 {
            return self;
        }
        let mean_current = self.charge_ah / hours(self.seconds);
        let mean_voltage = if self.charge_ah > 0.0 {
            self.energy_wh / self.charge_ah
        } else {
            0.0
        };
        Self {
            hidden_ah,
            hidden_wh: hidden_ah * mean_voltage + volt_hours * mean_current + hidden_leads_wh,
            ..self
        }
    }

    /// What a stretch delivered, so far if it is still going on; `None` where the record does not
    /// reach it.
    pub(crate) fn of(
        delivered: &Delivered,
        correction: &Correction,
        time_base: TimeBase,
    ) -> Option<Self> {
        let between = Self::between(
            delivered.begin?,
            delivered.end.or(delivered.latest)?,
            correction,
            time_base,
        );
        Some(between.hiding(delivered, correction))
    }

    /// The sum of both.
    pub(crate) fn plus(self, other: Self) -> Self {
        Self {
            charge_ah: self.charge_ah + other.charge_ah,
            energy_wh: self.energy_wh + other.energy_wh,
            seconds: self.seconds + other.seconds,
            hidden_ah: self.hidden_ah + other.hidden_ah,
            hidden_wh: self.hidden_wh + other.hidden_wh,
        }
    }
}

/// The nominal mean voltage weighted by time, which only an offset of the current needs; where a
/// current flowed, the mean weighted by charge stands in for it.
fn mean_voltage(begin: Mark, end: Mark, span: Span) -> Voltage {
    let charge = end.charge.saturating_sub(begin.charge).coulombs();
    let energy = end.energy.saturating_sub(begin.energy).joules();
    if span == Span::ZERO || charge.abs() < f64::MIN_POSITIVE {
        return Voltage::ZERO;
    }
    Voltage::from_volts(energy / charge).unwrap_or(Voltage::ZERO)
}
