//! A supply's current limit: where its voltage gives way, and whether it folds back.
//!
//! Seen in a step that raises the current and may give up. The knee is the largest current that
//! a whole readback saw; beyond it the loop of the sink is out of headroom, and the current that
//! still flows is the supply's own.

use sequence::plan::{Action, DutKind};
use sink::accumulate::Moments;
use sink::uncertainty::{Budget, Contribution};

use crate::contribution::{bounded, stated};
use crate::figure::{COMMON, Figure, Figures, Missing, Name, Rows, Unit};
use crate::least_squares::number;
use crate::noise::expected_largest;
use crate::stage::Stage;
use crate::walk::Sample;
use crate::work::Workbench;

/// The voltage has given way where it is below this share of what it was one readback before.
const GIVEN_WAY: f64 = 0.9;

/// A limit folds back if beyond the knee less than this share of the knee's current flows.
const FOLDS: f64 = 0.95;

const KNEE: &str = "largest mean current of a readback up to the one in which the voltage (its \
                    smallest sample) fell below 90 % of the mean of the readback before (of one \
                    that folds back: of the readback before), and on to where the rise met the \
                    limit, in a step that raises the current";
const FOLD: &str = "mean current of the readbacks beyond the one in which the voltage fell, the \
                    sink still asking for more (where the step ended there: its smallest sample, \
                    with half of what noise takes from it put back); below 95 % of the knee the \
                    limit folds back";

/// A readback of the sweep, true values.
struct Seen {
    amperes: f64,
    volts: f64,
    least_amperes: f64,
    least_volts: f64,
    row: u64,
}

impl Workbench<'_> {
    /// Knee and fold-back of every rising step in which the supply may give up.
    pub(crate) fn knees(&self, figures: &mut Figures) {
        if self.plan.dut.kind != DutKind::Supply {
            return;
        }
        for (stage, delivered) in self.stages.iter().zip(self.walked) {
            let rising = match stage.step.action {
                Action::Current { ramp, .. } => ramp.micros() > 0,
                Action::Rest | Action::Power { .. } | Action::Resistance { .. } => false,
            };
            let Some(curve) = &delivered.looked.curve else {
                continue;
            };
            if rising {
                self.knee(figures, stage, curve);
            }
        }
    }

    fn knee(&self, figures: &mut Figures, stage: &Stage<'_>, curve: &[Sample]) {
        let points: Vec<Seen> = curve
            .iter()
            .map(|sample| {
                let (amperes, volts) = self.true_values(sample);
                let (least_amperes, least_volts) =
                    self.true_pair(sample.current_min, sample.voltage_min);
                Seen {
                    amperes,
                    volts,
                    least_amperes,
                    least_volts,
                    row: sample.row,
                }
            })
            .collect();
        let (Some(first), Some(last)) = (points.first(), points.last()) else {
            return;
        };
        // Gradual falls are the supply's output resistance; giving way is sudden.
        let fallen = points
            .iter()
            .zip(points.iter().skip(1))
            .position(|(before, seen)| seen.least_volts < GIVEN_WAY * before.volts)
            .map(|place| place + 1);
        let up_to = fallen.unwrap_or(points.len() - 1);
        let top = points
            .iter()
            .take(up_to + 1)
            .enumerate()
            .max_by(|(_, one), (_, other)| one.amperes.total_cmp(&other.amperes));
        let Some((place, &Seen { amperes: knee, .. })) = top else {
            return;
        };
        // A ramp that only comes down shows no knee.
        if knee - first.amperes <= 3.0 * self.instrument.current.step {
            return;
        }
        let beyond = fallen.map_or(&[][..], |fallen| points.split_at(fallen).1);
        let rows = Rows {
            first: first.row,
            last: last.row,
        };
        if beyond.is_empty() {
            let reason = format!("the supply held its voltage up to {knee:.4} A");
            figures
                .missing
                .push(Missing::of(Name::CurrentLimitKnee, stage.label, reason));
            return;
        }
        let (folded, readings, doubt) = self.folded(beyond);
        let folds = folded < FOLDS * knee;
        // Where a limit folds back, the readback in which it does is a mean of both.
        let place = match fallen {
            Some(fallen) if folds => fallen - 1,
            Some(_) | None => place,
        };
        let knee = points.get(place).map_or(knee, |point| point.amperes);
        let before = place.checked_sub(1).and_then(|before| points.get(before));
        // By the whole ramp: a difference of two readbacks is noisy, and the limit may cut the last
        // one short.
        let climb = before.map_or(0.0, |before| {
            (before.amperes - first.amperes).abs() / number(place.max(2) - 1)
        });
        // A readback is a mean over a rise. Where the one in which the voltage gave way tells the
        // limit, it was reached in it, at an instant as likely as any: at most half a rise above its
        // mean, and in 95 % of cases within the interval about 0.22 of one. Else it was reached right
        // after the one before: from half a rise to one and a half above.
        let within = fallen == Some(place);
        let (on, bound) = if within { (0.22, 0.25) } else { (1.0, 0.5) };
        let knee = knee + on * climb;
        let mut lines = self.instrument.current.of_reading(knee);
        lines.push(bounded("rise of the current in a readback", bound * climb));
        figures.figures.push(Figure::of_stage(
            Name::CurrentLimitKnee,
            stage,
            (knee, Unit::Ampere),
            Budget::new(lines),
            (KNEE, COMMON),
            rows,
        ));
        if folds {
            let mut lines = self.instrument.current.of_mean(folded, readings);
            lines.extend(doubt);
            figures.figures.push(Figure::of_stage(
                Name::FoldBackCurrent,
                stage,
                (folded, Unit::Ampere),
                Budget::new(lines),
                (FOLD, COMMON),
                rows,
            ));
        } else {
            let reason = format!(
                "the limit does not fold back: beyond the knee of {knee:.4} A the current stayed \
                 above {:.0} % of it",
                FOLDS * 100.0
            );
            figures
                .missing
                .push(Missing::of(Name::FoldBackCurrent, stage.label, reason));
        }
    }

    /// The current beyond the knee: the mean of the readbacks that lie wholly there. Where the step
    /// ended in the readback in which the voltage fell, its smallest sample is all there is: one of
    /// an unknown number, of which noise made it the smallest. Beside it of how many readings it is.
    fn folded(&self, beyond: &[Seen]) -> (f64, f64, Vec<Contribution>) {
        let whole: Moments = beyond.iter().skip(1).map(|seen| seen.amperes).collect();
        if let Some(mean) = whole.mean() {
            return (mean, number(beyond.len() - 1), Vec::new());
        }
        let sample = beyond
            .iter()
            .map(|seen| seen.least_amperes)
            .fold(f64::INFINITY, f64::min);
        let noise = self.instrument.current.resolution_of(1.0);
        let excess = 0.5 * noise * expected_largest(self.instrument.current.samples().max(1.0));
        let doubt = vec![
            stated("noise of a sample", noise),
            bounded("smallest of several noisy samples", excess),
        ];
        (sample + excess, 1.0, doubt)
    }
}
