//! A cell model's tables from empty to full, and the open-circuit voltage between pulses.
//!
//! Between pulses the voltage was read while a constant current flowed. What the series resistance
//! and the pairs took off then is known from the pulses on either side, so the open-circuit
//! voltage follows at as many states of charge as are wanted. It is as good as those resistances
//! are: near empty, where they rise beyond the last pulse, it comes out too low.

use quantity::{Charge, Text, Voltage};
use serde_json::{Value, json};

use crate::cell::{CellModel, CellPoint, Known, OpenCircuit, PairPoint};
use crate::charge::Amount;
use crate::draw::Factors;
use crate::drawn::{Drawn, Node};
use crate::predict::Terms;
use crate::walk::Delivered;
use crate::work::Workbench;

/// What stands under `format` in a cell model file.
pub(crate) const FORMAT: &str = "sinkwarden cell model 1";

/// Open-circuit voltages kept of one step.
const KEPT: usize = 32;

/// Pieces in which the pairs are followed through a step that was not looked at closely.
const PIECES: u32 = 64;

/// Part of the drop at the resistances that is not believed: between two pulses they are taken to
/// lie on a straight line.
const DROP_TRUST: f64 = 0.05;

/// Two states of charge nearer than this are one.
const APART: f64 = 1e-4;

/// How full the pairs are, followed through the run.
struct Pairs<'a> {
    drawn: &'a Drawn<'a>,
    volts: Vec<f64>,
}

impl Pairs<'_> {
    /// A current for a time, at a state of charge; gives the resistances there.
    fn pass(&mut self, amperes: f64, seconds: f64, state: f64) -> Option<Node> {
        let node = self.drawn.at(state)?;
        self.volts.resize(node.pairs.len(), 0.0);
        for (volts, &(resistance, tau)) in self.volts.iter_mut().zip(&node.pairs) {
            let settled = amperes * resistance;
            *volts = settled + (*volts - settled) * (-seconds / tau).exp();
        }
        Some(node)
    }
}

impl Workbench<'_> {
    /// The open-circuit voltage in every long step of constant current, from full to empty.
    pub(crate) fn open_circuit(&self, model: &CellModel) -> Vec<OpenCircuit> {
        let factors = Factors::of(model, Terms::EXPECTED);
        let (Some(drawn), Some(start)) = (
            factors.expected(),
            self.walked.first().and_then(|first| first.begin),
        ) else {
            return Vec::new();
        };
        let mut pairs = Pairs {
            drawn: &drawn,
            volts: Vec::new(),
        };
        let mut found = Vec::new();
        for delivered in self.walked {
            let correction = &self.plan.correction;
            let Some(amount) = Amount::of(delivered, correction, self.time_base) else {
                continue;
            };
            let before = delivered.begin.map_or(0.0, |begin| {
                Amount::between(start, begin, correction, self.time_base).charge_ah
            });
            let amperes = if amount.seconds > 0.0 {
                amount.charge_ah * 3600.0 / amount.seconds
            } else {
                0.0
            };
            let state =
                |seconds: f64| 1.0 - (before + amperes * seconds / 3600.0) / model.capacity_ah;
            let mut passed = 0.0;
            for (seconds, volts) in self.watched(delivered, amount.seconds) {
                let node = pairs.pass(amperes, seconds - passed, state(seconds));
                passed = seconds;
                if let (Some(volts), Some(node)) = (volts, node) {
                    let drop = amperes * node.series + pairs.volts.iter().sum::<f64>();
                    found.push(OpenCircuit {
                        state_of_charge: state(seconds),
                        voltage_v: Known {
                            value: volts + drop,
                            standard_uncertainty: self
                                .instrument
                                .voltage
                                .standard(volts)
                                .hypot(DROP_TRUST * drop),
                        },
                    });
                }
            }
            pairs.pass(amperes, amount.seconds - passed, state(amount.seconds));
        }
        found
    }

    /// Instants of a step, with the true voltage where it was looked at.
    fn watched(&self, delivered: &Delivered, seconds: f64) -> Vec<(f64, Option<f64>)> {
        let Some(track) = &delivered.looked.discharge else {
            let piece = seconds / f64::from(PIECES);
            return (1..=PIECES)
                .map(|index| (piece * f64::from(index), None))
                .collect();
        };
        let points = track.points();
        let every = points.len().div_ceil(KEPT).max(1);
        let last = points.len().saturating_sub(1);
        points
            .iter()
            .enumerate()
            .map(|(index, point)| {
                let [volts, amperes] = point.values;
                // The first mean holds the edge itself.
                let kept = index > 0 && (index % every == 0 || index == last);
                let volts = kept.then(|| self.true_means(amperes, volts).1);
                (point.seconds * self.time_base.factor, volts)
            })
            .collect()
    }

    /// The model's file: the tables from empty to full, carried on to both ends.
    pub(crate) fn tables(&self, record: &str, model: &mut CellModel) -> Value {
        let mut rising: Vec<&CellPoint> = model.points.iter().rev().collect();
        rising.dedup_by(|later, earlier| later.state_of_charge <= earlier.state_of_charge);
        let seen = rising.first().zip(rising.last());
        if let Some((first, last)) = seen {
            model.notes.push(format!(
                "resistances seen from a state of charge of {:.3} to {:.3}; beyond, they are \
                 those of the nearest pulse",
                first.state_of_charge, last.state_of_charge
            ));
        }
        let curve = model.curve();
        let mut states: Vec<f64> = curve.iter().map(|(state, _)| *state).collect();
        states.retain(|state| (APART..=1.0 - APART).contains(state));
        states.insert(0, 0.0);
        states.push(1.0);
        let mut floor = 0.0_f64;
        let voltages: Vec<f64> = states
            .iter()
            .map(|state| {
                floor = floor.max(straight(&curve, *state, false));
                floor
            })
            .collect();
        let over = |value: &dyn Fn(&CellPoint) -> f64| -> Vec<f64> {
            let table: Vec<(f64, f64)> = rising
                .iter()
                .map(|point| (point.state_of_charge, value(point)))
                .collect();
            states
                .iter()
                .map(|state| straight(&table, *state, true))
                .collect()
        };
        let count = rising.first().map_or(0, |point| point.pairs.len());
        let pairs: Vec<Value> = (0..count)
            .map(|pair| {
                let of = |value: fn(&PairPoint) -> f64| {
                    over(&|point: &CellPoint| point.pairs.get(pair).map_or(f64::NAN, value))
                };
                json!({
                    "resistance_ohm": of(|pair| pair.resistance_ohm.value.max(0.0)),
                    "time_constant_s": of(|pair| pair.time_constant_s.value),
                })
            })
            .collect();
        let charge =
            |ah: f64| Text(Charge::from_coulombs(ah * 3600.0).unwrap_or(Charge::ZERO)).to_string();
        let dut = &self.plan.dut;
        json!({
            "format": FORMAT,
            "name": dut.label,
            "origin": format!("fitted to the pulses of record {record}"),
            "rated_capacity": dut
                .rated_capacity
                .map_or_else(|| charge(model.capacity_ah), |rated| Text(rated).to_string()),
            "capacity": charge(model.capacity_ah),
            "largest_voltage": Text::<Voltage>(dut.voltage_max).to_string(),
            "cut_off_voltage": Text::<Voltage>(dut.voltage_min).to_string(),
            "reference_temperature": self.reference_temperature(),
            "state_of_charge": states,
            "open_circuit_voltage_v": voltages,
            "series_resistance_ohm": over(&|point| point.series_resistance_ohm.value.max(0.0)),
            "pairs": pairs,
        })
    }
}

impl CellModel {
    /// State of charge and open-circuit voltage, from empty to full: of the pulses, and between
    /// them of the steps of constant current.
    pub(crate) fn curve(&self) -> Vec<(f64, f64)> {
        let pulses = self.points.iter().map(|point| {
            (
                point.state_of_charge,
                point.open_circuit_voltage_v.value,
                true,
            )
        });
        let between = self
            .open_circuit
            .iter()
            .map(|seen| (seen.state_of_charge, seen.voltage_v.value, false));
        let mut all: Vec<(f64, f64, bool)> = pulses.chain(between).collect();
        all.sort_by(|one, other| one.0.total_cmp(&other.0));
        // A rest tells more than a step beside it.
        let mut curve: Vec<(f64, f64, bool)> = Vec::with_capacity(all.len());
        for point in all {
            match curve.last_mut() {
                Some(last) if point.0 - last.0 < APART => {
                    if point.2 {
                        *last = point;
                    }
                }
                Some(_) | None => curve.push(point),
            }
        }
        curve
            .into_iter()
            .map(|(state, volts, _)| (state, volts))
            .collect()
    }
}

/// The value of a table on straight lines between its entries; beyond them level, or straight on.
pub(crate) fn straight(table: &[(f64, f64)], at: f64, level: bool) -> f64 {
    let above = table.partition_point(|(x, _)| *x < at);
    let last = table.len().saturating_sub(1);
    let low = above.saturating_sub(1).min(last.saturating_sub(1));
    let (Some(&(x, y)), Some(&(next_x, next_y))) = (table.get(low), table.get((low + 1).min(last)))
    else {
        return f64::NAN;
    };
    if next_x - x <= 0.0 {
        return y;
    }
    let share = (at - x) / (next_x - x);
    let share = if level { share.clamp(0.0, 1.0) } else { share };
    y + share * (next_y - y)
}
