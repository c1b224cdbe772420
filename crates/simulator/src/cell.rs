//! A simulated cell: open-circuit voltage, series resistance, two resistor-capacitor pairs,
//! charge counting, its own heat.
//!
//! The equivalent circuit is the usual Thevenin one. Its elements come from a [`Model`] file as
//! tables over the state of charge, joined by straight lines; temperature scales resistances
//! after Arrhenius and capacity by a table. Stepping is exact for a constant current: see
//! `ladder`. Slow things are refreshed every 256 ticks (or, in [`Cell::step`], every quarter of
//! a second): the cell's temperature and what follows from it, and the time constants. All else
//! follows the state of charge without delay.
//!
//! Invariants: the state of charge falls by exactly `charge / capacity`; below zero the first
//! segment of the table goes on, so an over-discharged cell collapses and never recovers by
//! itself.
//!
//! What it deliberately does not do: hysteresis, self-discharge, ageing, the entropic part of
//! the voltage and of the heat, venting.

mod library;
mod model;
#[cfg(test)]
mod tests;

pub use library::{Specimen, specimen, specimens, type_k, type_m};
pub use model::{
    CapacityAt, Heat, MODEL_FORMAT, Model, ModelError, PairTable, Spread, TemperatureEffect,
};

use crate::decay::after;
use crate::ladder::{Flow, Line, Network, PAIRS, Pair, State};

/// Longest time over which [`Cell::step`] holds temperature and time constants still.
const REFRESH_S: f64 = 0.25;

const ZERO_CELSIUS_K: f64 = 273.15;

/// One row of the tables, at one state of charge, with what leads to the next row.
#[derive(Debug, Clone, Copy)]
struct Segment {
    from: f64,
    to: f64,
    voltage: Line,
    series: Line,
    pairs: [(Line, Line); PAIRS],
}

/// How a cell begins.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Start {
    /// State of charge, 0 to 1.
    pub state_of_charge: f64,
    /// Temperature of the cell, degrees Celsius.
    pub temperature_degc: f64,
    /// Temperature around it, degrees Celsius.
    pub ambient_degc: f64,
}

/// A cell and its state.
#[derive(Debug, Clone)]
pub struct Cell {
    segments: Vec<Segment>,
    at: usize,
    state: State,
    capacity_c: f64,
    resistance_factor: f64,
    reference_k: f64,
    effect: TemperatureEffect,
    heat: Heat,
    ambient_degc: f64,
    temperature_degc: f64,
    /// Factors at the present temperature: series, pairs, then the charge state per coulomb.
    series_factor: f64,
    pair_factor: [f64; PAIRS],
    per_coulomb: f64,
    time_constant_s: [f64; PAIRS],
}

impl Cell {
    /// A cell after a model, one specimen's spread applied, in a given state.
    ///
    /// # Errors
    /// [`ModelError`] if the model's tables are unsound or the start lies outside them.
    pub fn new(model: &Model, spread: Spread, start: Start) -> Result<Self, ModelError> {
        model.check()?;
        spread.check()?;
        if !(0.0..=1.0).contains(&start.state_of_charge) {
            return Err(ModelError::StateOfCharge {
                given: start.state_of_charge,
            });
        }
        for temperature in [start.temperature_degc, start.ambient_degc] {
            if !(-100.0..=200.0).contains(&temperature) {
                return Err(ModelError::StartTemperature { given: temperature });
            }
        }
        let segments = segments(model);
        let mut cell = Self {
            at: segments.len().saturating_sub(1),
            segments,
            state: State {
                charge: start.state_of_charge,
                drop_v: [0.0; PAIRS],
            },
            capacity_c: model.capacity.coulombs() * spread.capacity_factor,
            resistance_factor: spread.resistance_factor,
            reference_k: model.reference_temperature.degrees_celsius() + ZERO_CELSIUS_K,
            effect: model.temperature_effect.clone(),
            heat: model.heat,
            ambient_degc: start.ambient_degc,
            temperature_degc: start.temperature_degc,
            series_factor: 1.0,
            pair_factor: [1.0; PAIRS],
            per_coulomb: 0.0,
            time_constant_s: [0.0; PAIRS],
        };
        cell.locate();
        cell.refresh_factors();
        Ok(cell)
    }

    /// Draws a constant current for a time and says what flowed. Negative currents charge.
    ///
    /// Exact but for the cell's temperature and the time constants, which stand still for a
    /// quarter of a second at a time.
    pub fn step(&mut self, current_a: f64, time_s: f64) -> Flow {
        let mut total = Flow::default();
        let mut open = time_s;
        while open > 0.0 {
            let border = self.time_to_border_s(current_a);
            let part = open
                .min(REFRESH_S)
                .min(if border > 1e-9 { border } else { 1e-9 });
            let left = self.time_constant_s.map(|tau| after(part, tau));
            let stretch = self.network().stretch(&self.state, current_a, 0.0);
            let flow = stretch.finish(&mut self.state, part, left);
            self.locate();
            self.refresh(flow.inner_j, part);
            total += flow;
            open -= part;
            if open < 1e-12 * time_s {
                break;
            }
        }
        total
    }

    /// The terminal voltage if this current flowed from now on, at its first instant.
    pub fn terminal_voltage_v(&self, current_a: f64) -> f64 {
        let (voltage, resistance) = self.network().thevenin(&self.state);
        voltage - current_a * resistance
    }

    /// The open-circuit voltage at the present state of charge, with all pairs at rest.
    pub fn open_circuit_voltage_v(&self) -> f64 {
        self.network().voltage_v.now
    }

    /// The series resistance at the present state of charge and temperature, ohm.
    pub fn series_resistance_ohm(&self) -> f64 {
        self.network().series_ohm.now
    }

    /// State of charge: 1 is full, 0 is empty at the present temperature.
    pub fn state_of_charge(&self) -> f64 {
        self.state.charge
    }

    /// Temperature of the cell, degrees Celsius.
    pub fn temperature_degc(&self) -> f64 {
        self.temperature_degc
    }

    /// Charge from full to empty at the present temperature, coulomb.
    pub fn capacity_c(&self) -> f64 {
        1.0 / self.per_coulomb
    }

    pub(crate) fn state(&self) -> &State {
        &self.state
    }

    pub(crate) fn state_mut(&mut self) -> &mut State {
        &mut self.state
    }

    pub(crate) fn time_constants_s(&self) -> [f64; PAIRS] {
        self.time_constant_s
    }

    fn segment(&self) -> Segment {
        let last = self.segments.last();
        self.segments
            .get(self.at)
            .or(last)
            .copied()
            .unwrap_or_else(|| {
                unreachable!("a checked model has at least two rows, hence one segment")
            })
    }

    /// The network at the present state of charge.
    pub(crate) fn network(&self) -> Network {
        let segment = self.segment();
        let along = self.state.charge - segment.from;
        let here = |line: Line, factor: f64| Line {
            now: (line.now + line.slope * along) * factor,
            slope: line.slope * factor,
        };
        let mut pairs = [Pair::default(); PAIRS];
        let tables = segment.pairs.iter().zip(self.pair_factor);
        for ((pair, (table, factor)), tau) in pairs.iter_mut().zip(tables).zip(self.time_constant_s)
        {
            *pair = Pair {
                resistance_ohm: here(table.0, factor),
                time_constant_s: tau,
            };
        }
        Network {
            voltage_v: here(segment.voltage, 1.0),
            series_ohm: here(segment.series, self.series_factor),
            pairs,
            per_coulomb: self.per_coulomb,
        }
    }

    /// Time until the state of charge leaves its segment of the tables, seconds.
    pub(crate) fn time_to_border_s(&self, current_a: f64) -> f64 {
        let segment = self.segment();
        let rate = current_a * self.per_coulomb;
        if rate > 0.0 && self.at > 0 {
            (self.state.charge - segment.from) / rate
        } else if rate < 0.0 && self.at + 1 < self.segments.len() {
            (segment.to - self.state.charge) / -rate
        } else {
            f64::INFINITY
        }
    }

    /// Finds the segment the state of charge lies in.
    pub(crate) fn locate(&mut self) {
        // A segment is left through its lower border at the border itself, or discharging
        // would stay in it for one more piece of no length.
        while self.at > 0 && self.state.charge <= self.segment().from {
            self.at -= 1;
        }
        while self.at + 1 < self.segments.len() && self.state.charge > self.segment().to {
            self.at += 1;
        }
    }

    /// Warms the cell by what was lost in it, and renews all that follows from temperature.
    pub(crate) fn refresh(&mut self, lost_j: f64, time_s: f64) {
        let Heat {
            capacity_j_per_k,
            to_ambient_k_per_w,
        } = self.heat;
        if capacity_j_per_k > 0.0 && to_ambient_k_per_w > 0.0 && time_s > 0.0 {
            let settled = self.ambient_degc + lost_j / time_s * to_ambient_k_per_w;
            let left = after(time_s, capacity_j_per_k * to_ambient_k_per_w);
            self.temperature_degc = settled + (self.temperature_degc - settled) * left;
            self.refresh_factors();
        } else {
            self.refresh_time_constants();
        }
    }

    fn refresh_factors(&mut self) {
        let inverse = 1.0 / (self.temperature_degc + ZERO_CELSIUS_K) - 1.0 / self.reference_k;
        let arrhenius = |activation: f64| {
            if activation.abs() > 0.0 {
                (activation * inverse).exp()
            } else {
                1.0
            }
        };
        self.series_factor = self.resistance_factor * arrhenius(self.effect.series_activation_k);
        for (factor, activation) in self
            .pair_factor
            .iter_mut()
            .zip(&self.effect.pair_activation_k)
        {
            *factor = self.resistance_factor * arrhenius(*activation);
        }
        let fraction = self.effect.capacity_fraction(self.temperature_degc);
        self.per_coulomb = 1.0 / (self.capacity_c * fraction);
        self.refresh_time_constants();
    }

    fn refresh_time_constants(&mut self) {
        let segment = self.segment();
        let along = (self.state.charge - segment.from).max(0.0);
        for (tau, (_, line)) in self.time_constant_s.iter_mut().zip(segment.pairs) {
            *tau = line.now + line.slope * along;
        }
    }
}

fn segments(model: &Model) -> Vec<Segment> {
    let charges = &model.state_of_charge;
    charges
        .windows(2)
        .enumerate()
        .filter_map(|(index, window)| {
            let &[from, to] = window else { return None };
            let line = |table: &[f64]| {
                let (a, b) = (table.get(index)?, table.get(index + 1)?);
                Some(Line {
                    now: *a,
                    slope: (b - a) / (to - from),
                })
            };
            let mut pairs = [(Line::default(), Line::default()); PAIRS];
            for (slot, table) in pairs.iter_mut().zip(&model.pairs) {
                *slot = (line(&table.resistance_ohm)?, line(&table.time_constant_s)?);
            }
            Some(Segment {
                from,
                to,
                voltage: line(&model.open_circuit_voltage_v)?,
                series: line(&model.series_resistance_ohm)?,
                pairs,
            })
        })
        .collect()
}
