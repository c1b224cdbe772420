//! From a record to its figures.

use journal::{JournalError, Record};
use quantity::SinkTime;
use sequence::plan::{DutKind, Plan};
use serde::Deserialize as _;
use sink::bench::SinkEntry;
use sink::correction::Bound;

use crate::capture::{Capture, captures};
use crate::channel::Instrument;
use crate::charge::Amount;
use crate::efficiency::InputMeter;
use crate::figure::{Figures, Standing};
use crate::look::look;
use crate::noise::noise;
use crate::resistance::resistances;
use crate::stage::{Stage, stages};
use crate::time_base::TimeBase;
use crate::trust::Trust;
use crate::walk::{Delivered, Stretch, Walk};

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
    work_out_with_input(record, None)
}

/// The same, with an input meter's readings beside the record, for efficiencies.
///
/// # Errors
/// As [`work_out`].
pub fn work_out_with_input(
    record: &Record,
    input: Option<&InputMeter>,
) -> Result<Figures, FiguresError> {
    let manifest = record.manifest();
    let entry = SinkEntry::deserialize(&manifest.bench).map_err(FiguresError::Bench)?;
    let others = record.others()?;
    let plan = &manifest.plan;
    let stages = stages(plan, &others, SinkTime::MAX);
    let walked = walk(record, &stages)?;
    let hottest = hottest(&walked);
    let trust = Trust::of(manifest, &entry, &others, hottest);
    let instrument = match noise(&stages, &walked, plan.tick.seconds()) {
        Some(noise) => trust.instrument.with_noise(noise),
        None => trust.instrument,
    };
    let captures = captures(&others);
    let bench = Workbench {
        plan,
        captures: &captures,
        instrument: &instrument,
        time_base: TimeBase::of(&others),
        stages: &stages,
        walked: &walked,
    };
    let mut figures = Figures {
        record: manifest.record.clone(),
        software: concat!("sinkwarden ", env!("CARGO_PKG_VERSION")).to_owned(),
        standing: trust.standing,
        figures: Vec::new(),
        missing: Vec::new(),
        warnings: trust.warning.into_iter().collect(),
        cell_model: None,
    };
    bench.whole_run(&mut figures, hottest);
    bench.capacity(&mut figures);
    bench.by_label(&mut figures);
    figures
        .figures
        .extend(resistances(plan, &stages, &walked, bench.instrument));
    bench.pulses(&mut figures);
    bench.droops(&mut figures);
    bench.supply(&mut figures);
    bench.knees(&mut figures);
    bench.efficiency(&mut figures, input);
    bench.heat(&mut figures, &entry);
    if plan.dut.kind != DutKind::Supply {
        figures.cell_model = bench.cell_model(&manifest.record);
    }
    bench.warn(&mut figures);
    Ok(figures)
}

/// Walks the readbacks once, a stretch for every stage.
pub(crate) fn walk(record: &Record, stages: &[Stage<'_>]) -> Result<Vec<Delivered>, FiguresError> {
    let plan = &record.manifest().plan;
    let correction = &plan.correction;
    let stretches = stages
        .iter()
        .enumerate()
        .map(|(index, stage)| Stretch {
            look: look(plan, stages, index),
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
pub(crate) struct Workbench<'a> {
    pub(crate) plan: &'a Plan,
    pub(crate) captures: &'a [Capture],
    pub(crate) instrument: &'a Instrument,
    pub(crate) time_base: TimeBase,
    pub(crate) stages: &'a [Stage<'a>],
    pub(crate) walked: &'a [Delivered],
}

impl Workbench<'_> {
    fn warn(&self, figures: &mut Figures) {
        if figures.standing == Standing::NominalUncalibrated {
            figures.warnings.push(
                "nominal, uncalibrated: the uncertainty holds what the bench file states of the \
                 sense resistor and the converters, and nothing that only a calibration would find"
                    .to_owned(),
            );
        }
        if figures.standing == Standing::CurrentCalibrated {
            figures.warnings.push(
                "the certificate is of the current alone: the voltage is nominal, uncalibrated, and \
                 so is all that needs it (energies, voltages, resistances, powers, and the instant of \
                 a cut-off); the uncertainty of the voltage holds what the bench file states of its \
                 converter, and nothing that only a calibration would find"
                    .to_owned(),
            );
        }
        self.warn_of_range(figures);
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
}

impl Workbench<'_> {
    /// A certificate's line is vouched for between its points only.
    fn warn_of_range(&self, figures: &mut Figures) {
        let steps = self.stages.iter().zip(self.walked);
        let amounts = steps
            .filter(|(stage, _)| stage.draws())
            .filter_map(|(_, delivered)| {
                Amount::of(delivered, &self.plan.correction, self.time_base)
            })
            .filter(|amount| amount.charge_ah > 0.0 && amount.seconds > 0.0);
        let (mut current, mut voltage) = (Extent::NONE, Extent::NONE);
        for amount in amounts {
            current.take(amount.charge_ah * 3600.0 / amount.seconds);
            voltage.take(amount.energy_wh / amount.charge_ah);
        }
        let channels = [
            ("current", "A", current, &self.instrument.current),
            ("voltage", "V", voltage, &self.instrument.voltage),
        ];
        for (what, unit, seen, channel) in channels {
            let Some((low, high)) = channel.range else {
                continue;
            };
            if seen.low < low - channel.step || seen.high > high + channel.step {
                figures.warnings.push(format!(
                    "the mean {what} of steps reaches from {:.4} {unit} to {:.4} {unit}, and the \
                     certificate vouches for {low:.4} {unit} to {high:.4} {unit}: beyond, its \
                     line is only carried on",
                    seen.low, seen.high
                ));
            }
        }
    }
}

/// Least and largest of some values.
#[derive(Clone, Copy)]
struct Extent {
    low: f64,
    high: f64,
}

impl Extent {
    const NONE: Self = Self {
        low: f64::INFINITY,
        high: f64::NEG_INFINITY,
    };

    const fn take(&mut self, value: f64) {
        self.low = self.low.min(value);
        self.high = self.high.max(value);
    }
}

/// The hottest heat sink of the whole run, degrees Celsius.
fn hottest(walked: &[Delivered]) -> Option<f64> {
    let hottest = walked
        .iter()
        .filter_map(|delivered| delivered.hottest)
        .max()?;
    Some(hottest.degrees_celsius())
}
