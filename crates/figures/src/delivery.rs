//! Charge, energy, mean voltage and time: of the whole run and of every label.

use quantity::{Charge, Span};
use sink::uncertainty::Budget;

use crate::charge::Amount;
use crate::contribution::{Conditions, End, clocks, of_delivery, of_leads, stated};
use crate::figure::{COMMON, Figure, Figures, Missing, Name, Rows, Unit};
use crate::least_squares::number;
use crate::stage::Stage;
use crate::walk::Delivered;
use crate::work::Workbench;

const BY_COUNTERS: &str = "difference of the sink's own counters, which integrate what it \
                           measured, corrected by the record's correction and time base";
const BY_TRAPEZOID: &str = "trapezoid over the readbacks' mean currents, each at the middle of its interval, as a check of \
     the counters";

/// Several stages taken together.
#[derive(Default)]
pub(crate) struct Together {
    pub(crate) amount: Amount,
    pub(crate) rows: Option<Rows>,
    trapezoid_as: f64,
    trapezoid_doubt: f64,
    /// Stages that the record does not cover from end to end.
    open: usize,
}

impl Workbench<'_> {
    pub(crate) fn whole_run(&self, figures: &mut Figures, hottest_degc: Option<f64>) {
        let drawing = |stage: &Stage<'_>| stage.draws();
        let together = self.together(drawing);
        let Some(rows) = together.rows else {
            figures.missing.push(Missing::new(
                Name::DeliveredCharge,
                "no step that draws was carried out",
            ));
            return;
        };
        self.delivery(figures, None, &together, rows);
        figures.figures.push(Figure::new(
            Name::Duration,
            None,
            (together.amount.seconds, Unit::Second),
            self.clock_budget(together.amount.seconds),
            (
                "time under steps that draw, by the sink's clock and its measured rate",
                COMMON,
            ),
            rows,
        ));
        self.trapezoid(figures, &together, rows);
        if let Some(hottest) = hottest_degc {
            figures.figures.push(Figure::new(
                Name::PeakTemperature,
                None,
                (hottest, Unit::DegreeCelsius),
                Budget::default(),
                (
                    "largest heat sink temperature of any readback, as the sink reports it",
                    COMMON,
                ),
                rows,
            ));
        }
    }

    /// Charge, energy and mean voltage of several stages.
    fn delivery(
        &self,
        figures: &mut Figures,
        label: Option<&str>,
        together: &Together,
        rows: Rows,
    ) {
        let amount = together.amount;
        let label = label.map(str::to_owned);
        let method = (BY_COUNTERS, COMMON);
        figures.figures.push(Figure::new(
            Name::DeliveredCharge,
            label.clone(),
            (amount.charge_ah, Unit::AmpereHour),
            self.charge_budget(together, End::default()),
            method,
            rows,
        ));
        figures.figures.push(Figure::new(
            Name::DeliveredEnergy,
            label.clone(),
            (amount.energy_wh, Unit::WattHour),
            self.energy_budget(together, End::default()),
            method,
            rows,
        ));
        self.mean_voltage(figures, label, together, rows);
    }

    fn mean_voltage(
        &self,
        figures: &mut Figures,
        label: Option<String>,
        together: &Together,
        rows: Rows,
    ) {
        let amount = together.amount;
        if amount.charge_ah <= 0.0 {
            return;
        }
        let mean = amount.energy_wh / amount.charge_ah;
        // Charge and clock errors are common to both and cancel; the voltage's own remain.
        let mut lines = self.instrument.voltage.of_reading(mean);
        let amperes = amount.charge_ah * 3600.0 / amount.seconds;
        lines.extend(of_leads(self.instrument, amperes));
        figures.figures.push(Figure::new(
            Name::MeanVoltage,
            label,
            (mean, Unit::Volt),
            Budget::new(lines),
            ("energy over charge, both from the sink's counters", COMMON),
            rows,
        ));
    }

    fn trapezoid(&self, figures: &mut Figures, together: &Together, rows: Rows) {
        let factor = self.time_base.factor / 3600.0;
        let nominal = Charge::from_coulombs(together.trapezoid_as).unwrap_or(Charge::ZERO);
        let span = Span::from_seconds(together.amount.seconds).unwrap_or(Span::ZERO);
        let value = self
            .plan
            .correction
            .charge_from_counter(nominal, span)
            .coulombs()
            * factor;
        let doubt = together.trapezoid_doubt.sqrt() * factor;
        let counted = together.amount.charge_ah;
        // The readings err as the counters do, and so does the clock.
        let mut budget = self.charge_budget(together, End::default());
        if doubt > 0.0 {
            let line = stated("jumps of current between readbacks", doubt);
            budget.contributions.push(line);
        }
        figures.figures.push(Figure::new(
            Name::ChargeByTrapezoid,
            None,
            (value, Unit::AmpereHour),
            budget,
            (BY_TRAPEZOID, "trapezoidal rule, summed after Neumaier"),
            rows,
        ));
        let readback_step = 1e-6 * together.amount.seconds / 3600.0;
        // Each edge is known to a tick.
        let edges = 2.0 * number(self.stages.len()) * self.plan.tick.seconds();
        let steady = counted / together.amount.seconds;
        let bound = 3.0 * doubt + readback_step + edges * steady.abs();
        if (value - counted).abs() > bound {
            figures.warnings.push(format!(
                "the counters give {counted:.6} Ah and the trapezoid {value:.6} Ah: they differ by \
                 more than the {bound:.6} Ah that the readback interval explains; were readbacks lost?"
            ));
        }
    }

    pub(crate) fn by_label(&self, figures: &mut Figures) {
        for label in &self.plan.labels {
            let together = self.together(|stage| stage.label == Some(label) && stage.draws());
            if together.open > 0 {
                figures.missing.push(Missing {
                    name: Name::DeliveredCharge,
                    label: Some(label.clone()),
                    reason: "the record does not reach to the end of the step".to_owned(),
                });
            }
            if let Some(rows) = together.rows {
                self.delivery(figures, Some(label), &together, rows);
            }
        }
    }

    fn together(&self, wanted: impl Fn(&Stage<'_>) -> bool) -> Together {
        self.together_of(|_, stage| wanted(stage))
    }

    pub(crate) fn together_of(&self, wanted: impl Fn(usize, &Stage<'_>) -> bool) -> Together {
        let mut together = Together::default();
        for (index, (stage, delivered)) in self.stages.iter().zip(self.walked).enumerate() {
            if wanted(index, stage) {
                let amount = Amount::of(delivered, &self.plan.correction, self.time_base);
                together.add(Some(delivered), amount);
            }
        }
        together
    }

    pub(crate) fn charge_budget(&self, together: &Together, end: End) -> Budget {
        let conditions = Conditions {
            value: together.amount.charge_ah,
            per_ampere: together.amount.seconds / 3600.0,
            per_volt: None,
            end,
            hidden: together.amount.hidden_ah,
        };
        of_delivery(self.instrument, self.time_base, &conditions)
    }

    pub(crate) fn energy_budget(&self, together: &Together, end: End) -> Budget {
        let amount = together.amount;
        let mean_voltage = if amount.charge_ah > 0.0 {
            amount.energy_wh / amount.charge_ah
        } else {
            0.0
        };
        let conditions = Conditions {
            value: amount.energy_wh,
            per_ampere: mean_voltage * amount.seconds / 3600.0,
            per_volt: Some(amount.charge_ah),
            end,
            hidden: amount.hidden_wh,
        };
        of_delivery(self.instrument, self.time_base, &conditions)
    }

    fn clock_budget(&self, seconds: f64) -> Budget {
        Budget::new(vec![clocks(seconds * self.time_base.uncertainty)])
    }
}

impl Together {
    pub(crate) fn add(&mut self, delivered: Option<&Delivered>, amount: Option<Amount>) {
        let Some(delivered) = delivered else { return };
        match amount {
            Some(amount) => self.amount = self.amount.plus(amount),
            None => self.open += 1,
        }
        if let Some((first, last)) = delivered.rows {
            let first = self.rows.map_or(first, |rows| rows.first.min(first));
            let last = self.rows.map_or(last, |rows| rows.last.max(last));
            self.rows = Some(Rows { first, last });
        }
        self.trapezoid_as += delivered.trapezoid.value();
        self.trapezoid_doubt += delivered.trapezoid_doubt.value();
    }
}
