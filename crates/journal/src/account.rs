//! Time, charge and energy of a record's readbacks, counted from the first one.
//!
//! Pure. The sink's own clock and counters decide; a restart of the sink, which sets both to
//! zero, is bridged.

use quantity::{Charge, Energy, HostTime, SinkTime, Span, Voltage};
use sink::correction::Correction;
use wire::{Counters, Reading};

use crate::columns::Row;

/// Time, charge and energy since the first readback, over restarts of the sink.
#[derive(Debug, Clone)]
pub(crate) struct Account {
    correction: Correction,
    last: Option<(SinkTime, HostTime)>,
    /// Sink time from which `elapsed_before` counts on.
    from: SinkTime,
    elapsed_before: Span,
    elapsed: Span,
    /// Counters from which charge and energy count on.
    base: Option<Counters>,
    before: (Charge, Energy),
    total: (Charge, Energy),
    /// Nominal voltage times time since `base`, for the mean.
    volt_micros: i128,
    micros: i128,
}

impl Account {
    pub(crate) fn new(correction: Correction) -> Self {
        Self {
            correction,
            last: None,
            from: SinkTime::ZERO,
            elapsed_before: Span::ZERO,
            elapsed: Span::ZERO,
            base: None,
            before: (Charge::ZERO, Energy::ZERO),
            total: (Charge::ZERO, Energy::ZERO),
            volt_micros: 0,
            micros: 0,
        }
    }

    pub(crate) fn row<'a>(
        &'a mut self,
        number: u64,
        at: HostTime,
        reading: &'a Reading,
        label: &'a str,
    ) -> Row<'a> {
        match self.last {
            None => self.from = reading.time,
            Some((time, last_at)) if reading.time < time => self.restart(reading, at, last_at),
            Some((time, _)) => {
                let span = i128::from(reading.time.saturating_since(time).micros());
                self.micros += span;
                self.volt_micros += span * i128::from(reading.values.voltage.microvolts());
            }
        }
        self.last = Some((reading.time, at));
        let since = reading.time.saturating_since(self.from);
        self.elapsed = self.elapsed_before.saturating_add(since);
        let counted = reading.counters.is_some();
        if let Some(counters) = reading.counters {
            self.count(&counters);
        }
        Row {
            number,
            at,
            elapsed: self.elapsed,
            reading,
            charge: counted.then_some(self.total.0),
            energy: counted.then_some(self.total.1),
            label,
            correction: &self.correction,
        }
    }

    /// True charge since the first readback, as last counted.
    pub(crate) fn charge(&self) -> Charge {
        self.total.0
    }

    /// The sink has started anew: clock and counters from zero. The host's clock bridges the
    /// time; no charge flowed, since a sink is off at power-up.
    fn restart(&mut self, reading: &Reading, at: HostTime, last_at: HostTime) {
        self.elapsed_before = self.elapsed.saturating_add(at.saturating_since(last_at));
        self.from = reading.time;
        self.before = self.total;
        self.base = reading.counters.map(|counters| Counters {
            charge: Charge::ZERO,
            energy: Energy::ZERO,
            ..counters
        });
        self.volt_micros = 0;
        self.micros = 0;
    }

    fn count(&mut self, counters: &Counters) {
        let base = *self.base.get_or_insert(*counters);
        let over = counters.time.saturating_since(base.time);
        let charge = counters.charge.saturating_sub(base.charge);
        let energy = counters.energy.saturating_sub(base.energy);
        let mean = self.volt_micros.checked_div(self.micros).unwrap_or(0);
        let mean = Voltage::from_microvolts(i64::try_from(mean).unwrap_or(0));
        let true_charge = self.correction.charge_from_counter(charge, over);
        let true_energy = self
            .correction
            .energy_from_counter(energy, charge, mean, over);
        self.total = (
            self.before.0.saturating_add(true_charge),
            self.before.1.saturating_add(true_energy),
        );
    }
}
