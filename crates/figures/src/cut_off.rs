//! Capacity and energy to the cut-off: where the voltage crossed, and what had flowed until then.

use sequence::plan::DutKind;

use crate::charge::Amount;
use crate::contribution::End;
use crate::figure::{Figure, Figures, Missing, Name, Unit};
use crate::walk::Sample;
use crate::work::Workbench;

const TO_CUT_OFF: &str = "difference of the sink's own counters up to the instant at which the \
                          voltage crossed the cut-off, interpolated between readbacks";
const SOURCE: &str = "IEC 61960-3, discharge performance (from memory): time to the \
                      end-of-discharge voltage times current, here as an integral";

/// Where a stage reached its cut-off.
struct CutOff {
    amount: Amount,
    /// What it does to the charge.
    charge: End,
    /// What it does to the energy.
    energy: End,
}

impl Workbench<'_> {
    /// Capacity and energy to the cut-off, of a cell or pack that was discharged to one.
    pub(crate) fn capacity(&self, figures: &mut Figures) {
        if self.plan.dut.kind == DutKind::Supply {
            return;
        }
        let Some(last) = self
            .stages
            .iter()
            .position(|stage| stage.cut_off().is_some())
        else {
            figures.missing.push(Missing::new(
                Name::Capacity,
                "no step was ended by the voltage falling below its cut-off",
            ));
            return;
        };
        let Some(cut_off) = self.cut_off(last) else {
            figures.missing.push(Missing::new(
                Name::Capacity,
                "the instant of the cut-off lies in no readback of the step that it ended",
            ));
            return;
        };
        let mut together = self.together_of(|index, stage| index < last && stage.draws());
        together.add(self.walked.get(last), Some(cut_off.amount));
        let Some(rows) = together.rows else { return };
        let method = (TO_CUT_OFF, SOURCE);
        figures.figures.push(Figure::new(
            Name::Capacity,
            None,
            (together.amount.charge_ah, Unit::AmpereHour),
            self.charge_budget(&together, cut_off.charge),
            method,
            rows,
        ));
        figures.figures.push(Figure::new(
            Name::Energy,
            None,
            (together.amount.energy_wh, Unit::WattHour),
            self.energy_budget(&together, cut_off.energy),
            method,
            rows,
        ));
    }

    /// What the stage delivered up to the instant at which the voltage crossed, and how well
    /// that instant is known: by `u(V) / |dV/dt|`.
    fn cut_off(&self, index: usize) -> Option<CutOff> {
        let stage = self.stages.get(index)?;
        let delivered = self.walked.get(index)?;
        let limit = stage.cut_off()?;
        let begin = delivered.begin?;
        let (before, after) = delivered.crossing?;
        let voltage = |sample: &Sample| {
            self.plan
                .correction
                .voltage_from_readback(sample.voltage, sample.current)
                .volts()
        };
        let (high, low) = (voltage(&before), voltage(&after));
        // A mean stands for the middle of its interval.
        let seconds = after.middle().saturating_since(before.middle()).seconds();
        let slope = (high - low) / seconds;
        let share = ((high - limit.volts()) / (high - low)).clamp(0.0, 1.0);
        let end = delivered.end?;
        // From the crossing to the end of the stage a steady current flows; taking that off the
        // end keeps the counters' exactness.
        let since = end.time.saturating_since(before.middle()).seconds();
        let beyond_s = (since - share * seconds).max(0.0) * self.time_base.factor;
        let current = self
            .plan
            .correction
            .current_from_readback(after.current)
            .amperes();
        let correction = &self.plan.correction;
        let whole =
            Amount::between(begin, end, correction, self.time_base).hiding(delivered, correction);
        let charge = End {
            volts: limit.volts(),
            amperes: current,
            per_volt: current / slope.abs() / 3600.0,
        };
        let beyond_v = limit.volts() - 0.5 * slope * beyond_s;
        Some(CutOff {
            amount: Amount {
                charge_ah: whole.charge_ah - current * beyond_s / 3600.0,
                energy_wh: whole.energy_wh - current * beyond_v * beyond_s / 3600.0,
                seconds: whole.seconds - beyond_s,
                ..whole
            },
            charge,
            energy: End {
                per_volt: charge.per_volt * limit.volts(),
                ..charge
            },
        })
    }
}
