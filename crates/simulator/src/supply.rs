//! A simulated supply: set voltage, output resistance, slow and fast droop, current limit,
//! ripple.
//!
//! It is the same linear network as a cell's with a voltage that does not run down:
//!
//! - `output_resistance` acts at once;
//! - `undershoot` is a further drop at the first instant of a load step that the regulator then
//!   makes good, with its recovery time constant (a pair of negative resistance);
//! - `sag` is a further drop that comes on slowly.
//!
//! In current limit the regulator keeps for itself whatever voltage it takes to hold the
//! current. With `fold_back_to` the limit falls in a straight line from `current_limit` at the
//! set voltage to this current at a short circuit, and the supply leaves the limit only when the
//! load wants less than the folded limit: the knee has a return branch of its own.
//!
//! What it deliberately does not do: sinking current, thermal shutdown, a start-up ramp.

use quantity::{Current, Resistance, Span, Voltage};
use serde::{Deserialize, Serialize};

use crate::ladder::{Line, Network, PAIRS, Pair, State};

/// What a supply is.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SupplySpec {
    /// Voltage without load.
    #[serde(with = "quantity::text")]
    pub voltage: Voltage,
    /// Resistance that acts at once.
    #[serde(with = "quantity::text", default = "no_resistance")]
    pub output_resistance: Resistance,
    /// Drop at a load step that the regulator makes good.
    #[serde(default)]
    pub undershoot: Option<Droop>,
    /// Drop that comes on slowly.
    #[serde(default)]
    pub sag: Option<Droop>,
    /// Where the voltage gives up.
    #[serde(default)]
    pub current_limit: Option<quantity::Text<Current>>,
    /// Limit into a short circuit; without it the limit does not fold back.
    #[serde(default)]
    pub fold_back_to: Option<quantity::Text<Current>>,
    /// Ripple on the voltage.
    #[serde(default)]
    pub ripple: Option<Ripple>,
}

/// A first-order drop.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Droop {
    /// Drop per ampere.
    #[serde(with = "quantity::text")]
    pub resistance: Resistance,
    /// Its time constant.
    #[serde(with = "quantity::text")]
    pub time_constant: Span,
}

/// A sine on the voltage.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Ripple {
    /// Largest departure from the mean.
    #[serde(with = "quantity::text")]
    pub amplitude: Voltage,
    /// Its period. One shorter than two ticks of the sink shows as another: sampling folds it.
    #[serde(with = "quantity::text")]
    pub period: Span,
}

fn no_resistance() -> Resistance {
    Resistance::from_ohms(0.0).unwrap_or_else(|_| unreachable!("zero is a resistance"))
}

/// Why a supply cannot be.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum SupplyError {
    /// A value below zero or a time of zero.
    #[error("the supply's `{name}` is {value}; {mend}")]
    Value {
        /// The key.
        name: &'static str,
        /// What it is.
        value: String,
        /// What would do.
        mend: &'static str,
    },
    /// Folding back without a limit, or to more than it.
    #[error(
        "the supply folds back to {to} without a larger `current_limit`; give one, or leave `fold_back_to` out"
    )]
    FoldBack {
        /// Where to.
        to: Current,
    },
}

/// A supply and its state.
#[derive(Debug, Clone)]
pub struct Supply {
    network: Network,
    state: State,
    set_v: f64,
    limit_a: f64,
    short_a: f64,
    limiting: bool,
    ripple: Option<(f64, f64)>,
}

impl Supply {
    /// A supply without load.
    ///
    /// # Errors
    /// [`SupplyError`] with the key and the mend.
    pub fn new(spec: &SupplySpec) -> Result<Self, SupplyError> {
        spec.check()?;
        let undershoot = spec.undershoot.map_or((0.0, 0.0), Droop::in_si);
        let sag = spec.sag.map_or((0.0, 0.0), Droop::in_si);
        let pair = |(ohm, s): (f64, f64)| Pair {
            resistance_ohm: level(ohm),
            time_constant_s: s,
        };
        let pairs: [Pair; PAIRS] = [pair((-undershoot.0, undershoot.1)), pair(sag)];
        let limit_a = spec
            .current_limit
            .map_or(f64::INFINITY, |limit| limit.0.amperes());
        Ok(Self {
            network: Network {
                voltage_v: level(spec.voltage.volts()),
                series_ohm: level(spec.output_resistance.ohms() + undershoot.0),
                pairs,
                per_coulomb: 0.0,
            },
            state: State::default(),
            set_v: spec.voltage.volts(),
            limit_a,
            short_a: spec.fold_back_to.map_or(limit_a, |to| to.0.amperes()),
            limiting: false,
            ripple: spec
                .ripple
                .map(|ripple| (ripple.amplitude.volts(), ripple.period.seconds())),
        })
    }

    /// Whether the voltage changes from tick to tick by itself.
    pub(crate) fn ripples(&self) -> bool {
        self.ripple.is_some()
    }

    /// Puts the ripple of an instant on the voltage.
    pub(crate) fn set_instant(&mut self, time_s: f64) {
        if let Some((amplitude, period)) = self.ripple {
            let phase = (time_s / period).fract() * core::f64::consts::TAU;
            self.network.voltage_v.now = self.set_v + amplitude * phase.sin();
        }
    }

    /// Sets another voltage.
    pub(crate) fn set_voltage(&mut self, voltage_v: f64) {
        self.set_v = voltage_v;
        self.network.voltage_v.now = voltage_v;
    }

    pub(crate) fn network(&self) -> &Network {
        &self.network
    }

    pub(crate) fn state(&self) -> &State {
        &self.state
    }

    pub(crate) fn state_mut(&mut self) -> &mut State {
        &mut self.state
    }

    pub(crate) fn time_constants_s(&self) -> [f64; PAIRS] {
        self.network.pairs.map(|pair| pair.time_constant_s)
    }

    /// The current that flows when a load wants `wanted_a`, if the regulator limits it;
    /// `least_v` says what voltage the load's path needs to carry a current.
    pub(crate) fn limited_a(&mut self, wanted_a: f64, least_v: impl Fn(f64) -> f64) -> Option<f64> {
        if wanted_a > self.limit_a {
            self.limiting = true;
        }
        if !self.limiting {
            return None;
        }
        let folded = self.folded_a(least_v);
        if wanted_a < folded || self.limit_a.is_infinite() {
            self.limiting = false;
            return None;
        }
        Some(folded)
    }

    /// Where the folding limit and the load's least voltage meet, by bisection: the limit rises
    /// with the voltage and the least voltage with the current, so the difference has one root
    /// below the limit unless the load could take more than the limit at every voltage.
    fn folded_a(&self, least_v: impl Fn(f64) -> f64) -> f64 {
        let share = |current: f64| (least_v(current) / self.set_v).clamp(0.0, 1.0);
        let allowed = |current: f64| self.short_a + (self.limit_a - self.short_a) * share(current);
        let (mut low, mut high) = (self.short_a, self.limit_a);
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if allowed(middle) > middle {
                low = middle;
            } else {
                high = middle;
            }
        }
        low
    }
}

impl SupplySpec {
    fn check(&self) -> Result<(), SupplyError> {
        let refuse = |name, value: String, mend| Err(SupplyError::Value { name, value, mend });
        if self.output_resistance.is_negative() {
            return refuse(
                "output_resistance",
                self.output_resistance.to_string(),
                "give a resistance of zero or more",
            );
        }
        let droops = [("undershoot", self.undershoot), ("sag", self.sag)];
        for (name, droop) in droops {
            let Some(droop) = droop else { continue };
            if droop.resistance.is_negative() || droop.time_constant == Span::ZERO {
                return refuse(
                    name,
                    format!("{} over {}", droop.resistance, droop.time_constant),
                    "give a resistance of zero or more and a time constant above zero",
                );
            }
        }
        if let Some(ripple) = self.ripple
            && ripple.period == Span::ZERO
        {
            return refuse(
                "ripple",
                ripple.period.to_string(),
                "give a period above zero",
            );
        }
        let limit = self.current_limit.map(|limit| limit.0);
        if let Some(limit) = limit
            && limit.amperes() <= 0.0
        {
            return refuse(
                "current_limit",
                limit.to_string(),
                "give a current above zero",
            );
        }
        match self.fold_back_to {
            Some(to) if to.0.is_negative() || limit.is_none_or(|limit| limit < to.0) => {
                Err(SupplyError::FoldBack { to: to.0 })
            }
            Some(_) | None => Ok(()),
        }
    }
}

impl Droop {
    fn in_si(self) -> (f64, f64) {
        (self.resistance.ohms(), self.time_constant.seconds())
    }
}

fn level(now: f64) -> Line {
    Line { now, slope: 0.0 }
}
