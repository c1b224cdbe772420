//! What the sink is connected to: a cell or a supply, and the ledger of what truly happened.
//!
//! The ledger knows what no instrument knows: the exact charge and energy at the source's
//! terminals and where every joule went. Tests hold the program's figures against it.

use crate::cell::Cell;
use crate::decay::{BLOCK, Decay};
use crate::ladder::{Flow, Network, PAIRS, State, Stretch};
use crate::sum::Compensated;
use crate::supply::Supply;

/// A source of current.
#[derive(Debug, Clone)]
pub enum Source {
    /// A cell.
    Cell(Box<Cell>),
    /// A supply.
    Supply(Box<Supply>),
}

impl Source {
    pub(crate) fn network(&self) -> Network {
        match self {
            Self::Cell(cell) => cell.network(),
            Self::Supply(supply) => *supply.network(),
        }
    }

    pub(crate) fn state(&self) -> &State {
        match self {
            Self::Cell(cell) => cell.state(),
            Self::Supply(supply) => supply.state(),
        }
    }

    fn state_mut(&mut self) -> &mut State {
        match self {
            Self::Cell(cell) => cell.state_mut(),
            Self::Supply(supply) => supply.state_mut(),
        }
    }

    pub(crate) fn time_constants_s(&self) -> [f64; PAIRS] {
        match self {
            Self::Cell(cell) => cell.time_constants_s(),
            Self::Supply(supply) => supply.time_constants_s(),
        }
    }

    /// Whole ticks for which one stretch at this current holds; at least one. A border of the
    /// tables crossed within that one tick is overshot by less than the tick's charge.
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "clamped to 1..=BLOCK before the cast"
    )]
    pub(crate) fn ticks_to_border(&self, current_a: f64, tick_s: f64) -> u32 {
        let time = match self {
            Self::Cell(cell) => cell.time_to_border_s(current_a),
            Self::Supply(_) => f64::INFINITY,
        };
        (time / tick_s).clamp(1.0, f64::from(BLOCK)) as u32
    }

    pub(crate) fn finish(&mut self, stretch: &Stretch, time_s: f64, left: [f64; PAIRS]) -> Flow {
        let flow = stretch.finish(self.state_mut(), time_s, left);
        if let Self::Cell(cell) = self {
            cell.locate();
        }
        flow
    }

    pub(crate) fn refresh(&mut self, lost_j: f64, time_s: f64) {
        if let Self::Cell(cell) = self {
            cell.refresh(lost_j, time_s);
        }
    }

    /// The current that flows when the sink's loop wants `wanted_a`, if the source itself
    /// holds it down.
    pub(crate) fn limited_a(&mut self, wanted_a: f64, least_v: impl Fn(f64) -> f64) -> Option<f64> {
        match self {
            Self::Cell(_) => None,
            Self::Supply(supply) => supply.limited_a(wanted_a, least_v),
        }
    }

    pub(crate) fn moves_by_itself(&self) -> bool {
        match self {
            Self::Cell(_) => false,
            Self::Supply(supply) => supply.ripples(),
        }
    }

    pub(crate) fn set_instant(&mut self, time_s: f64) {
        if let Self::Supply(supply) = self {
            supply.set_instant(time_s);
        }
    }
}

/// The decays of a source's pairs, as tables over ticks.
#[derive(Debug, Clone)]
pub(crate) struct Decays([Decay; PAIRS]);

impl Decays {
    pub(crate) fn new() -> Self {
        Self([Decay::new(), Decay::new()])
    }

    pub(crate) fn set(&mut self, time_constants_s: [f64; PAIRS], tick_s: f64) {
        for (decay, tau) in self.0.iter_mut().zip(time_constants_s) {
            decay.set(tau, tick_s);
        }
    }

    pub(crate) fn at(&self, ticks: u32) -> [f64; PAIRS] {
        let [a, b] = &self.0;
        [a.at(ticks), b.at(ticks)]
    }
}

/// An instant at which the terminal voltage first fell below a watched value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Crossing {
    /// The watched voltage, volt.
    pub below_v: f64,
    /// True time since the device was made, seconds; `None`: not yet.
    pub at_s: Option<f64>,
}

/// What truly flowed, and where it went.
#[derive(Debug, Clone, Default)]
pub struct Ledger {
    pub(crate) sums: [Compensated; 7],
    pub(crate) crossings: Vec<Crossing>,
}

/// The ledger's figures at an instant. All are since the device was made.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Truth {
    /// True time, seconds.
    pub time_s: f64,
    /// Charge through the source's terminals, coulomb.
    pub charge_c: f64,
    /// Energy out of the source's terminals, joule.
    pub terminal_j: f64,
    /// Energy given by the source's ideal voltage (open-circuit voltage times current), joule.
    pub source_j: f64,
    /// Energy lost inside the source, joule.
    pub inner_j: f64,
    /// Heat of the leads, joule.
    pub leads_j: f64,
    /// Heat of the MOSFET, joule.
    pub mosfet_j: f64,
    /// Heat of the sense resistor, joule.
    pub sense_j: f64,
}

/// Flows within the sink beside those of the source.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Flows {
    pub(crate) source: Flow,
    pub(crate) leads_j: f64,
    pub(crate) mosfet_j: f64,
    pub(crate) sense_j: f64,
}

impl Flows {
    fn list(&self) -> [f64; 7] {
        [
            self.source.charge_c,
            self.source.terminal_j,
            self.source.source_j,
            self.source.inner_j,
            self.leads_j,
            self.mosfet_j,
            self.sense_j,
        ]
    }
}

impl core::ops::AddAssign for Flows {
    fn add_assign(&mut self, other: Self) {
        self.source += other.source;
        self.leads_j += other.leads_j;
        self.mosfet_j += other.mosfet_j;
        self.sense_j += other.sense_j;
    }
}

impl Ledger {
    pub(crate) fn add(&mut self, flows: &Flows) {
        for (sum, amount) in self.sums.iter_mut().zip(flows.list()) {
            sum.add(amount);
        }
    }

    pub(crate) fn truth(&self, time_s: f64) -> Truth {
        let [
            charge_c,
            terminal_j,
            source_j,
            inner_j,
            leads_j,
            mosfet_j,
            sense_j,
        ] = self.sums.map(Compensated::value);
        Truth {
            time_s,
            charge_c,
            terminal_j,
            source_j,
            inner_j,
            leads_j,
            mosfet_j,
            sense_j,
        }
    }
}
