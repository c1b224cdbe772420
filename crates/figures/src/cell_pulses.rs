//! A cell's model from pulses at several states of charge.
//!
//! Invariants:
//! - The file has two pairs only if every pulse tells two; else one, and a note says which do
//!   not.
//! - Nothing is said of states of charge that were not seen: beyond the pulses the tables are
//!   carried on, and a note says from where.

use quantity::{Temperature, Text};
use serde_json::Value;

use crate::cell::{CellModel, CellPoint, Known, PairPoint};
use crate::cell_fit::{Mean, Pulse, put_together};
use crate::charge::Amount;
use crate::contribution::End;
use crate::figure::Rows;
use crate::least_squares::{Fitted, number};
use crate::look::is_model_pulse;
use crate::resistance::ended;
use crate::walk::Sample;
use crate::work::Workbench;

/// A second pair is told if one pair alone is less probable than this.
const LEVEL: f64 = 0.01;

/// A time constant or resistance known no better than to this share is not told.
const VAGUE: f64 = 0.5;

/// Two time constants nearer than this ratio are one.
const APART: f64 = 3.0;

/// How far the slope of the open-circuit voltage between neighbouring pulses is trusted at one of
/// them, a share of it.
const SLOPE_TRUST: f64 = 0.5;

const METHOD: &str = "least squares (Levenberg-Marquardt) of a series resistance and \
                      resistor-capacitor pairs, each readback as the mean over its interval, to \
                      every pulse between two rests; two pairs where an F-test at 1 % demands \
                      them and both are told; uncertainties from the covariance of the fit and \
                      the gains of current and voltage";

/// Where a capacity comes from that was not measured.
const RATED: &str = "the rated capacity";

/// A pulse of the record, ready to be fitted.
struct Found {
    pulse: Pulse,
    delivered_ah: f64,
    rows: Rows,
}

/// A pulse with its fits.
struct FittedPulse {
    found: Found,
    one: Fitted,
    /// The fit with two pairs, or why there is none.
    two: Result<Fitted, String>,
}

impl Workbench<'_> {
    /// The model, if the record has pulses between rests; a note for every pulse that cannot be
    /// fitted.
    pub(crate) fn cell_model(&self, record: &str) -> Option<CellModel> {
        let mut found = self.model_pulses();
        if found.is_empty() {
            return None;
        }
        self.tie_slopes(&mut found);
        let mut notes = Vec::new();
        let fitted: Vec<FittedPulse> = found
            .into_iter()
            .filter_map(|found| {
                let after_ah = found.delivered_ah;
                fit(found)
                    .map_err(|reason| {
                        notes.push(format!("the pulse after {after_ah:.4} Ah: {reason}"));
                    })
                    .ok()
            })
            .collect();
        let last_ah = fitted.last()?.found.delivered_ah;
        let two = fitted.iter().all(|pulse| pulse.two.is_ok());
        let (capacity_ah, capacity_from) = self.capacity_for(last_ah, &mut notes);
        let measured = capacity_from != RATED;
        let capacity_u = if measured { self.whole_charge_u() } else { 0.0 };
        let points: Vec<CellPoint> = fitted
            .iter()
            .map(|pulse| self.point(pulse, two, capacity_ah))
            .collect();
        if !two {
            let told = fitted.iter().filter(|pulse| pulse.two.is_ok()).count();
            notes.push(format!(
                "{told} of {} pulses tell a second pair; the model has one",
                fitted.len()
            ));
        }
        let squares: f64 = points
            .iter()
            .map(|point| point.residual_rms_v.powi(2))
            .sum();
        let mut model = CellModel {
            residual_rms_v: (squares / number(points.len())).sqrt(),
            points,
            open_circuit: Vec::new(),
            capacity_ah,
            capacity_standard_uncertainty_ah: capacity_u,
            capacity_from: capacity_from.to_owned(),
            file: Value::Null,
            notes,
            method: METHOD.to_owned(),
        };
        model.open_circuit = self.open_circuit(&model);
        model.file = self.tables(record, &mut model);
        Some(model)
    }

    fn model_pulses(&self) -> Vec<Found> {
        let start = self.walked.first().and_then(|first| first.begin);
        (0..self.stages.len())
            .filter(|&index| is_model_pulse(self.stages, index))
            .filter_map(|index| {
                let stage = self.stages.get(index)?;
                let rest = self.walked.get(index.checked_sub(1)?)?;
                let (pulse, relaxation) = (self.walked.get(index)?, self.walked.get(index + 1)?);
                let until =
                    Amount::between(start?, pulse.begin?, &self.plan.correction, self.time_base);
                let before = self.stages.get(index.checked_sub(1)?)?;
                let (_, rest_v) = self.true_values(&ended(before, rest)?.0);
                let curve = pulse.looked.curve.as_ref()?;
                let after = relaxation.looked.curve.as_ref()?;
                let length_s = stage.length().seconds() * self.time_base.factor;
                let in_pulse: Vec<Mean> = curve
                    .iter()
                    .map(|sample| self.mean(sample, index))
                    .collect();
                let amperes = curve
                    .iter()
                    .map(|sample| self.true_values(sample).0)
                    .sum::<f64>()
                    / number(curve.len());
                let relaxing: Vec<Mean> = after
                    .iter()
                    .map(|sample| self.mean(sample, index))
                    .collect();
                let mut means = put_together(&in_pulse, 0.0);
                means.extend(put_together(&relaxing, length_s));
                (amperes > 0.0).then_some(Found {
                    pulse: Pulse {
                        amperes,
                        length_s,
                        means,
                        slope: None,
                        rest_v,
                        shared: self.instrument.voltage.shared(),
                    },
                    delivered_ah: until.charge_ah,
                    rows: Rows {
                        first: curve.first()?.row,
                        last: after.last()?.row,
                    },
                })
            })
            .collect()
    }

    /// A readback as a mean over its interval since the edge of the stage at this index. The
    /// samples in it stand half a tick after the middles of their ticks.
    fn mean(&self, sample: &Sample, index: usize) -> Mean {
        let begin = self.stages.get(index).map(|stage| stage.begin);
        let half_tick = 0.5 * self.plan.tick.seconds();
        let since = |time: quantity::SinkTime| {
            begin.map_or(0.0, |begin| time.saturating_since(begin).seconds())
        };
        Mean {
            from_s: (since(sample.from) + half_tick) * self.time_base.factor,
            until_s: (since(sample.time) + half_tick) * self.time_base.factor,
            volts: self.true_values(sample).1,
            count: 1.0,
        }
    }

    /// Ties the fall of the open-circuit voltage in a pulse to what its neighbours show.
    fn tie_slopes(&self, found: &mut [Found]) {
        let rests: Vec<(f64, f64)> = found
            .iter()
            .map(|found| (found.delivered_ah, found.pulse.rest_v))
            .collect();
        let resolution = self.instrument.voltage.resolution();
        for (index, found) in found.iter_mut().enumerate() {
            let before = index.checked_sub(1).and_then(|before| rests.get(before));
            let here = rests.get(index);
            let after = rests.get(index + 1);
            let (Some(one), Some(other)) = (before.or(here), after.or(here)) else {
                continue;
            };
            let charge = other.0 - one.0;
            if charge <= 0.0 {
                continue;
            }
            let slope = (one.1 - other.1) / charge;
            if slope > 0.0 {
                found.pulse.slope = Some((slope, resolution / (SLOPE_TRUST * slope)));
            }
        }
    }

    /// Standard uncertainty of all charge delivered, ampere hour.
    fn whole_charge_u(&self) -> f64 {
        let together = self.together_of(|_, stage| stage.draws());
        let combined = self.charge_budget(&together, End::default()).combined();
        combined.map_or(0.0, |combined| combined.standard_uncertainty)
    }

    /// The charge that the states of charge stand on, and where it comes from.
    fn capacity_for(&self, last_ah: f64, notes: &mut Vec<String>) -> (f64, &'static str) {
        let whole = self.together_of(|_, stage| stage.draws()).amount.charge_ah;
        let ended_empty = self.stages.iter().any(|stage| stage.cut_off().is_some());
        if ended_empty {
            return (whole, "delivered in this run, to its cut-off");
        }
        let rated = self
            .plan
            .dut
            .rated_capacity
            .map(|rated| rated.coulombs() / 3600.0);
        match rated {
            Some(rated) if rated > last_ah => {
                notes.push(
                    "the run did not end at a cut-off: states of charge stand on the rated \
                     capacity, as if the cell had begun full"
                        .to_owned(),
                );
                (rated, RATED)
            }
            Some(_) | None => {
                notes.push(
                    "the run did not end at a cut-off and delivered the rated capacity: states of \
                     charge stand on all that was delivered"
                        .to_owned(),
                );
                (whole.max(last_ah), "delivered in this run")
            }
        }
    }

    fn point(&self, pulse: &FittedPulse, two: bool, capacity_ah: f64) -> CellPoint {
        let (fitted, no_second_pair) = match &pulse.two {
            Ok(fitted) if two => (fitted, None),
            Ok(_) => (&pulse.one, Some("other pulses do not tell it".to_owned())),
            Err(reason) => (&pulse.one, Some(reason.clone())),
        };
        let current = &self.instrument.current;
        let voltage = &self.instrument.voltage;
        let gains = |value: f64| {
            let lines = [voltage.of_gain(value), current.of_gain(value)].concat();
            lines.iter().map(|line| line.share().powi(2)).sum::<f64>()
        };
        let resistance = |index: usize| {
            let value = fitted.parameter(index);
            Known {
                value,
                standard_uncertainty: (fitted.covariance(index, index) + gains(value)).sqrt(),
            }
        };
        let places: Vec<usize> = (2..fitted.parameters.len()).collect();
        let pairs = places
            .iter()
            .skip(1)
            .step_by(2)
            .map(|&index| {
                let seconds = fitted.parameter(index + 1).exp();
                PairPoint {
                    resistance_ohm: resistance(index),
                    time_constant_s: Known {
                        value: seconds,
                        standard_uncertainty: seconds * fitted.standard(index + 1),
                    },
                }
            })
            .collect();
        let correlation = |one: usize, other: usize| {
            fitted.covariance(one, other) / (fitted.standard(one) * fitted.standard(other))
        };
        let level = fitted.parameter(0);
        CellPoint {
            state_of_charge: 1.0 - pulse.found.delivered_ah / capacity_ah,
            delivered_ah: pulse.found.delivered_ah,
            open_circuit_voltage_v: Known {
                value: level,
                standard_uncertainty: fitted.standard(0).hypot(voltage.standard(level)),
            },
            series_resistance_ohm: resistance(2),
            pairs,
            correlations: places
                .iter()
                .map(|&one| {
                    places
                        .iter()
                        .map(|&other| correlation(one, other))
                        .collect()
                })
                .collect(),
            residual_rms_v: fitted.residual_rms(),
            no_second_pair,
            rows: pulse.found.rows,
        }
    }

    /// The heat sink's at the beginning: where nothing has been drawn yet, it and the cell are as
    /// warm as the air.
    pub(crate) fn reference_temperature(&self) -> String {
        let at_first = self
            .walked
            .iter()
            .find_map(|delivered| delivered.latest_temperature)
            .unwrap_or(Temperature::from_millidegrees_celsius(23_000));
        Text(at_first).to_string()
    }
}

fn fit(found: Found) -> Result<FittedPulse, String> {
    let one = found.pulse.fit(1).map_err(|error| error.to_string())?;
    let two = second_pair(&found.pulse, &one);
    Ok(FittedPulse { found, one, two })
}

/// The fit with two pairs, if the data tell them apart.
fn second_pair(pulse: &Pulse, one: &Fitted) -> Result<Fitted, String> {
    let two = pulse.fit(2).map_err(|error| error.to_string())?;
    let chance = two.chance_against(one).unwrap_or(1.0);
    if chance > LEVEL {
        return Err(format!(
            "one pair fits as well (probability {chance:.2} of so little gain by chance)"
        ));
    }
    let (fast, slow) = (two.parameter(4), two.parameter(6));
    if (slow - fast).exp() < APART {
        return Err(format!(
            "its time constant of {:.3} s is too near to the first of {:.3} s",
            slow.exp(),
            fast.exp()
        ));
    }
    for (index, what) in [(3, "first"), (5, "second")] {
        let resistance = two.parameter(index);
        let vague = two.standard(index) > VAGUE * resistance || two.standard(index + 1) > VAGUE;
        if resistance <= 0.0 || vague {
            return Err(format!(
                "the {what} of two pairs is not told: {:.2e} ohm with u = {:.1e} ohm",
                resistance,
                two.standard(index)
            ));
        }
    }
    Ok(two)
}
