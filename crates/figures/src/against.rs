//! A record against another of the same plan: what each label delivered, and how far the voltages
//! lie apart at the same time within each step.
//!
//! Meant for a recorded night beside the same sequence on a simulated source. Both are true
//! values, each by its own record's correction.

use std::collections::BTreeMap;

use journal::Record;
use quantity::SinkTime;
use serde::{Deserialize, Serialize};

use crate::charge::Amount;
use crate::figure::Figures;
use crate::stage::{EACH_MAX, stages};
use crate::time_base::TimeBase;
use crate::track::Track;
use crate::work::{FiguresError, walk};

/// What two records of one plan have in common and what not.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Against {
    /// Each label in the order of its first step; `None`: steps without one.
    pub labels: Vec<LabelDifference>,
}

/// One label in both records; the first of each pair is of the first record.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LabelDifference {
    /// The label.
    pub label: Option<String>,
    /// How often its steps were carried out.
    pub steps: [u32; 2],
    /// How long they took, second.
    pub duration_s: [f64; 2],
    /// Charge delivered, ampere hour.
    pub charge_ah: [f64; 2],
    /// Energy delivered, watt hour.
    pub energy_wh: [f64; 2],
    /// Root mean square of the voltages' difference, second record less first, volt; `None` where
    /// there is no time at which both were read.
    pub voltage_rms_v: Option<f64>,
    /// The difference of the voltages that is largest, with its sign, volt.
    pub voltage_largest_v: Option<f64>,
}

/// Compares two records of one plan.
///
/// # Errors
/// [`FiguresError`] if either cannot be read or holds no readback.
pub fn against(one: &Record, other: &Record) -> Result<Against, FiguresError> {
    let (one, other) = (Course::of(one)?, Course::of(other)?);
    let labels = one.order.iter().chain(
        other
            .order
            .iter()
            .filter(|label| !one.order.contains(label)),
    );
    Ok(Against {
        labels: labels
            .map(|label| difference(label, &one, &other))
            .collect(),
    })
}

type Label = Option<String>;

/// What one label's steps were in a record.
#[derive(Default)]
struct Labelled {
    steps: u32,
    amount: Amount,
    /// Voltage over the time since each step's beginning; of the first hundred.
    tracks: Vec<Track>,
}

struct Course {
    order: Vec<Label>,
    labels: BTreeMap<Label, Labelled>,
}

impl Course {
    fn of(record: &Record) -> Result<Self, FiguresError> {
        let plan = &record.manifest().plan;
        let others = record.others()?;
        let stages = stages(plan, &others, SinkTime::MAX);
        let walked = walk(record, &stages)?;
        let time_base = TimeBase::of(&others);
        let mut course = Self {
            order: Vec::new(),
            labels: BTreeMap::new(),
        };
        for (stage, delivered) in stages.iter().zip(&walked) {
            let label = stage.label.map(str::to_owned);
            if !course.order.contains(&label) {
                course.order.push(label.clone());
            }
            let labelled = course.labels.entry(label).or_default();
            labelled.steps += 1;
            if let Some(amount) = Amount::of(delivered, &plan.correction, time_base) {
                labelled.amount = labelled.amount.plus(amount);
            }
        }
        course.follow(record, &stages)?;
        Ok(course)
    }

    /// The voltages, in means over the time since each step's beginning.
    fn follow(
        &mut self,
        record: &Record,
        stages: &[crate::stage::Stage<'_>],
    ) -> Result<(), FiguresError> {
        let correction = &record.manifest().plan.correction;
        let mut place = 0;
        let mut latest = SinkTime::ZERO;
        let mut begun = None;
        for chunk in record.chunks()? {
            let chunk = chunk?;
            for index in 0..chunk.readings.len() {
                let Some(reading) = chunk.readings.get(index) else {
                    break;
                };
                let from = std::mem::replace(&mut latest, reading.time);
                while stages.get(place).is_some_and(|stage| stage.end <= from) {
                    place += 1;
                }
                let Some(stage) = stages.get(place) else {
                    return Ok(());
                };
                if from < stage.begin || reading.time > stage.end || from >= reading.time {
                    continue;
                }
                let label = stage.label.map(str::to_owned);
                let Some(labelled) = self.labels.get_mut(&label) else {
                    continue;
                };
                if begun != Some(place) && stage.occurrence.unwrap_or(1) <= EACH_MAX {
                    begun = Some(place);
                    labelled.tracks.push(Track::default());
                }
                if let (Some(track), true) = (labelled.tracks.last_mut(), begun == Some(place)) {
                    let since = reading.time.saturating_since(stage.begin).seconds();
                    let values = reading.values;
                    let volts = correction
                        .voltage_from_readback(values.voltage, values.current)
                        .volts();
                    track.add(since, [volts, 0.0]);
                }
            }
        }
        Ok(())
    }
}

fn difference(label: &Label, one: &Course, other: &Course) -> LabelDifference {
    let empty = Labelled::default();
    let sides = [one, other].map(|course| course.labels.get(label).unwrap_or(&empty));
    let [first, second] = sides;
    let (mut squares, mut count, mut largest) = (0.0, 0.0, None::<f64>);
    for (one, other) in first.tracks.iter().zip(&second.tracks) {
        for apart in Track::differences(one, other) {
            squares += apart * apart;
            count += 1.0;
            if largest.is_none_or(|largest| apart.abs() > largest.abs()) {
                largest = Some(apart);
            }
        }
    }
    LabelDifference {
        label: label.clone(),
        steps: sides.map(|side| side.steps),
        duration_s: sides.map(|side| side.amount.seconds),
        charge_ah: sides.map(|side| side.amount.charge_ah),
        energy_wh: sides.map(|side| side.amount.energy_wh),
        voltage_rms_v: (count > 0.0).then(|| (squares / count).sqrt()),
        voltage_largest_v: largest,
    }
}

impl Figures {
    /// The figure of this name of the whole run.
    pub fn of_whole_run(&self, name: crate::Name) -> Option<&crate::Figure> {
        let mut figures = self.figures.iter();
        figures.find(|figure| figure.name == name && figure.label.is_none())
    }
}
