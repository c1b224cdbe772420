//! From a record to its figures.

use journal::{Entry, JournalError, Record};
use quantity::{Charge, SinkTime, Span};
use sequence::plan::{DutKind, Plan};
use serde::Deserialize as _;
use sink::bench::SinkEntry;
use sink::correction::Bound;
use sink::uncertainty::{Budget, Contribution, DegreesOfFreedom, Evaluation};

use crate::charge::Amount;
use crate::contribution::{Conditions, FrontEnd, of_delivery};
use crate::figure::{Figure, Figures, Missing, Name, Rows, Standing, Unit};
use crate::resistance::resistances;
use crate::stage::{Stage, stages};
use crate::time_base::TimeBase;
use crate::walk::{Delivered, Sample, Stretch, Walk};

const BY_COUNTERS: &str = "difference of the sink's own counters, which integrate what it \
                           measured, corrected by the record's correction and time base";
const BY_TRAPEZOID: &str =
    "trapezoid over the readbacks' mean currents, as a check of the counters";
const TO_CUT_OFF: &str = "difference of the sink's own counters up to the instant at which the \
                          voltage crossed the cut-off, interpolated between readbacks";
const CAPACITY_SOURCE: &str = "IEC 61960-3, discharge performance (from memory): time to the \
                               end-of-discharge voltage times current, here as an integral";
const COMMON: &str = "common practice, no source";

/// Why figures could not be worked out.
#[derive(Debug, thiserror::Error)]
pub enum FiguresError {
    /// The record cannot be read.
    #[error(transparent)]
    Record(#[from] JournalError),
    /// The bench entry in the record cannot be understood.
    #[error(
        "the bench entry in the record cannot be read: {0}; was it written by a newer version?"
    )]
    Bench(serde_json::Error),
    /// Nothing was ever read back.
    #[error("the record has no readback: there is nothing to work figures out from")]
    Empty,
}

/// Works out every figure that a record supports; also of a run that is still going on.
///
/// # Errors
/// [`FiguresError`] if the record cannot be read or holds no readback.
pub fn work_out(record: &Record) -> Result<Figures, FiguresError> {
    let manifest = record.manifest();
    let entry = SinkEntry::deserialize(&manifest.bench).map_err(FiguresError::Bench)?;
    let others = record
        .entries_without_readings()
        .collect::<Result<Vec<Entry>, _>>()?;
    let plan = &manifest.plan;
    let stages = stages(plan, &others, SinkTime::MAX);
    let walked = walk(record, &stages)?;
    let bench = Workbench {
        plan,
        front_end: FrontEnd::of(&entry),
        time_base: TimeBase::of(&others),
        stages: &stages,
        walked: &walked,
    };
    let mut figures = Figures {
        record: manifest.record.clone(),
        software: concat!("sinkwarden ", env!("CARGO_PKG_VERSION")).to_owned(),
        standing: Standing::NominalUncalibrated,
        figures: Vec::new(),
        missing: Vec::new(),
        warnings: Vec::new(),
    };
    bench.whole_run(&mut figures);
    bench.by_label(&mut figures);
    figures
        .figures
        .extend(resistances(plan, &stages, &walked, &bench.front_end));
    bench.warn(&mut figures);
    Ok(figures)
}

/// Walks the readbacks once, a stretch for every stage.
fn walk(record: &Record, stages: &[Stage<'_>]) -> Result<Vec<Delivered>, FiguresError> {
    let correction = &record.manifest().plan.correction;
    let stretches = stages
        .iter()
        .map(|stage| Stretch {
            time: stage.begin..stage.end,
            below: stage
                .cut_off()
                .map(|voltage| correction.voltage_limit_to_nominal(voltage, Bound::Lower)),
        })
        .collect();
    let mut walk = Walk::new(stretches);
    let mut any = false;
    for chunk in record.chunks()? {
        let chunk = chunk?;
        any |= !chunk.readings.is_empty();
        walk.take(&chunk);
    }
    if any {
        Ok(walk.finish())
    } else {
        Err(FiguresError::Empty)
    }
}

/// All that the figures of one record are worked out from.
struct Workbench<'a> {
    plan: &'a Plan,
    front_end: FrontEnd,
    time_base: TimeBase,
    stages: &'a [Stage<'a>],
    walked: &'a [Delivered],
}

/// Several stages taken together.
#[derive(Default)]
struct Together {
    amount: Amount,
    rows: Option<Rows>,
    hottest_degc: Option<f64>,
    trapezoid_as: f64,
    trapezoid_doubt: f64,
    /// Stages that the record does not cover from end to end.
    open: usize,
}

impl Workbench<'_> {
    fn whole_run(&self, figures: &mut Figures) {
        let drawing = |stage: &Stage<'_>| stage.draws();
        let together = self.together(drawing);
        let Some(rows) = together.rows else {
            figures.missing.push(missing(
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
        self.capacity(figures);
        if let Some(hottest) = self.hottest() {
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
            self.charge_budget(together, 0.0),
            method,
            rows,
        ));
        figures.figures.push(Figure::new(
            Name::DeliveredEnergy,
            label.clone(),
            (amount.energy_wh, Unit::WattHour),
            self.energy_budget(together, 0.0),
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
        let Amount {
            charge_ah,
            energy_wh,
            ..
        } = together.amount;
        if charge_ah <= 0.0 {
            return;
        }
        // Charge and clock errors are common to both and cancel; the voltage's own remain.
        let voltage = Contribution::new(
            "converter step, voltage",
            Evaluation::TypeB,
            self.front_end.voltage(),
            DegreesOfFreedom::INFINITE,
        );
        figures.figures.push(Figure::new(
            Name::MeanVoltage,
            label,
            (energy_wh / charge_ah, Unit::Volt),
            Budget::new(vec![voltage]),
            ("energy over charge, both from the sink's counters", COMMON),
            rows,
        ));
    }

    /// Capacity and energy to the cut-off, of a cell or pack that was discharged to one.
    fn capacity(&self, figures: &mut Figures) {
        if self.plan.dut.kind == DutKind::Supply {
            return;
        }
        let Some(last) = self
            .stages
            .iter()
            .position(|stage| stage.cut_off().is_some())
        else {
            figures.missing.push(missing(
                Name::Capacity,
                "no step was ended by the voltage falling below its cut-off",
            ));
            return;
        };
        let Some(cut_off) = self.cut_off(last) else {
            figures.missing.push(missing(
                Name::Capacity,
                "the instant of the cut-off lies in no readback of the step that it ended",
            ));
            return;
        };
        let mut together = self.together_of(|index, stage| index < last && stage.draws());
        together.add(self.walked.get(last), Some(cut_off.amount));
        let Some(rows) = together.rows else { return };
        let method = (TO_CUT_OFF, CAPACITY_SOURCE);
        figures.figures.push(Figure::new(
            Name::Capacity,
            None,
            (together.amount.charge_ah, Unit::AmpereHour),
            self.charge_budget(&together, cut_off.uncertainty_ah),
            method,
            rows,
        ));
        figures.figures.push(Figure::new(
            Name::Energy,
            None,
            (together.amount.energy_wh, Unit::WattHour),
            self.energy_budget(&together, cut_off.uncertainty_wh),
            method,
            rows,
        ));
    }

    /// What the stage delivered up to the instant at which the voltage crossed, and how well
    /// that instant is known: `I u(V) / |dV/dt|`.
    fn cut_off(&self, index: usize) -> Option<CutOff> {
        let stage = self.stages.get(index)?;
        let delivered = self.walked.get(index)?;
        let limit = stage.cut_off()?;
        let begin = delivered.begin?;
        let (before, after) = delivered.crossing?;
        let voltage = |sample: &Sample| {
            self.plan
                .correction
                .voltage_from_readback(sample.voltage)
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
        let whole = Amount::between(begin, end, &self.plan.correction, self.time_base);
        let instant_s = self.front_end.voltage() / slope.abs();
        let power = current * limit.volts();
        Some(CutOff {
            amount: Amount {
                charge_ah: whole.charge_ah - current * beyond_s / 3600.0,
                energy_wh: whole.energy_wh - power * beyond_s / 3600.0,
                seconds: whole.seconds - beyond_s,
            },
            uncertainty_ah: current * instant_s / 3600.0,
            uncertainty_wh: power * instant_s / 3600.0,
        })
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
        let line = Contribution::new(
            "jumps of current between readbacks",
            Evaluation::TypeB,
            doubt,
            DegreesOfFreedom::INFINITE,
        );
        figures.figures.push(Figure::new(
            Name::ChargeByTrapezoid,
            None,
            (value, Unit::AmpereHour),
            Budget::new(vec![line]),
            (BY_TRAPEZOID, "trapezoidal rule, summed after Neumaier"),
            rows,
        ));
        let readback_step = 1e-6 * together.amount.seconds / 3600.0;
        let bound = 3.0 * doubt + readback_step;
        if (value - counted).abs() > bound {
            figures.warnings.push(format!(
                "the counters give {counted:.6} Ah and the trapezoid {value:.6} Ah: they differ by \
                 more than the {bound:.6} Ah that the readback interval explains; were readbacks lost?"
            ));
        }
    }

    fn by_label(&self, figures: &mut Figures) {
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

    fn warn(&self, figures: &mut Figures) {
        if figures.standing == Standing::NominalUncalibrated {
            figures.warnings.push(
                "nominal, uncalibrated: the uncertainty holds what the bench file states of the \
                 sense resistor and the converters, and nothing that only a calibration would find"
                    .to_owned(),
            );
        }
        let open = self
            .walked
            .iter()
            .filter(|delivered| delivered.end.is_none())
            .count();
        if open > 0 {
            figures.warnings.push(format!(
                "{open} step(s) are not covered to their end: the run is still going on, or the record breaks off"
            ));
        }
    }

    fn hottest(&self) -> Option<f64> {
        let hottest = self
            .walked
            .iter()
            .filter_map(|delivered| delivered.hottest)
            .max()?;
        Some(hottest.degrees_celsius())
    }

    fn together(&self, wanted: impl Fn(&Stage<'_>) -> bool) -> Together {
        self.together_of(|_, stage| wanted(stage))
    }

    fn together_of(&self, wanted: impl Fn(usize, &Stage<'_>) -> bool) -> Together {
        let mut together = Together::default();
        for (index, (stage, delivered)) in self.stages.iter().zip(self.walked).enumerate() {
            if wanted(index, stage) {
                let amount = Amount::of(delivered, &self.plan.correction, self.time_base);
                together.add(Some(delivered), amount);
            }
        }
        together
    }

    fn charge_budget(&self, together: &Together, cut_off_ah: f64) -> Budget {
        let conditions = Conditions {
            value: together.amount.charge_ah,
            per_ampere: together.amount.seconds / 3600.0,
            per_volt: 0.0,
            hottest_degc: together.hottest_degc,
            cut_off: cut_off_ah,
        };
        of_delivery(&self.front_end, self.time_base, &conditions)
    }

    fn energy_budget(&self, together: &Together, cut_off_wh: f64) -> Budget {
        let amount = together.amount;
        let mean_voltage = if amount.charge_ah > 0.0 {
            amount.energy_wh / amount.charge_ah
        } else {
            0.0
        };
        let conditions = Conditions {
            value: amount.energy_wh,
            per_ampere: mean_voltage * amount.seconds / 3600.0,
            per_volt: amount.charge_ah,
            hottest_degc: together.hottest_degc,
            cut_off: cut_off_wh,
        };
        of_delivery(&self.front_end, self.time_base, &conditions)
    }

    fn clock_budget(&self, seconds: f64) -> Budget {
        Budget::new(vec![Contribution::new(
            "clocks",
            Evaluation::TypeB,
            seconds * self.time_base.uncertainty,
            DegreesOfFreedom::INFINITE,
        )])
    }
}

/// Where a stage reached its cut-off.
struct CutOff {
    amount: Amount,
    uncertainty_ah: f64,
    uncertainty_wh: f64,
}

impl Together {
    fn add(&mut self, delivered: Option<&Delivered>, amount: Option<Amount>) {
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
        if let Some(hottest) = delivered.hottest {
            let hottest = hottest.degrees_celsius();
            self.hottest_degc = Some(
                self.hottest_degc
                    .map_or(hottest, |so_far| so_far.max(hottest)),
            );
        }
        self.trapezoid_as += delivered.trapezoid.value();
        self.trapezoid_doubt += delivered.trapezoid_doubt.value();
    }
}

fn missing(name: Name, reason: &str) -> Missing {
    Missing {
        name,
        label: None,
        reason: reason.to_owned(),
    }
}
