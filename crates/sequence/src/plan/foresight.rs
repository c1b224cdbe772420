//! What a plan will come to, for the check: how hot the sink gets, and how far current, power and
//! voltage go.
//!
//! On the safe side: the source stays at the DUT's largest voltage, the air at the bench's ambient
//! temperature, and each step lasts as long as the forecast has it.

use quantity::{Current, Power, Temperature, Voltage};
use sink::envelope::Envelope;
use sink::thermal::Rise;

use super::{Action, Forecast, Op, Plan};

/// What a plan will come to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Foresight {
    /// Duration, charge and energy.
    pub forecast: Forecast,
    /// How hot the sink gets; `None` where its envelope cannot be worked out.
    pub peak: Option<Peak>,
    /// The largest current asked for.
    pub current_max: Current,
    /// The most power in the sink, at the DUT's largest voltage.
    pub power_max: Power,
    /// The lowest voltage that a step waits for; `None` if none does.
    pub cut_off: Option<Voltage>,
}

/// How hot a sink gets, at most.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Peak {
    /// Its heat sink.
    pub heat_sink: Temperature,
    /// The hottest that may get.
    pub heat_sink_max: Temperature,
    /// The MOSFET's junction.
    pub junction: Temperature,
    /// The hottest that may get.
    pub junction_max: Temperature,
    /// The air that both were reckoned from.
    pub ambient: Temperature,
}

impl Plan {
    /// What the plan will come to on a sink of this envelope.
    pub fn foresight(&self, envelope: Option<&Envelope>) -> Foresight {
        let mut heat = envelope.map(|envelope| Heat::new(envelope, self.dut.voltage_max));
        let forecast = self.forecast_with(&mut heat);
        let steps = || {
            self.ops.iter().filter_map(|op| match op {
                Op::Step(step) => Some(step),
                Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
            })
        };
        let volts = self.dut.voltage_max;
        let drawn = |action: Action| match action {
            Action::Rest => (Current::ZERO, Power::ZERO),
            Action::Current { target, .. } => (target, volts.times(target)),
            // A regulated power draws most at the least voltage.
            Action::Power { target } => {
                let current = target.over(self.dut.voltage_min);
                (current.unwrap_or(Current::MAX), target)
            }
            Action::Resistance { target } => {
                let current = volts.over(target).unwrap_or(Current::MAX);
                (current, volts.times(current))
            }
        };
        let cut_off = steps()
            .flat_map(|step| &step.until)
            .filter_map(|until| until.condition.cut_off())
            .min();
        Foresight {
            forecast,
            peak: heat.as_ref().map(Heat::peak),
            current_max: steps()
                .map(|step| drawn(step.action).0)
                .max()
                .unwrap_or_default(),
            power_max: steps()
                .map(|step| drawn(step.action).1)
                .max()
                .unwrap_or_default(),
            cut_off,
        }
    }
}

/// Looks within a step, for its hottest instant: lags that fall and lags that rise may have their
/// sum's largest value in between.
const LOOKS: i32 = 12;

/// The heat of a sink as a plan is walked through.
#[derive(Debug, Clone)]
pub(super) struct Heat<'a> {
    envelope: &'a Envelope,
    volts: f64,
    junction: Rise,
    fins: Rise,
    hottest_junction: f64,
    hottest_fins: f64,
}

impl<'a> Heat<'a> {
    fn new(envelope: &'a Envelope, voltage: Voltage) -> Self {
        let (junction, heat_sink) = envelope.heat_path();
        Self {
            envelope,
            volts: voltage.volts(),
            junction: Rise::at_rest(junction),
            fins: Rise::at_rest(heat_sink),
            hottest_junction: 0.0,
            hottest_fins: 0.0,
        }
    }

    /// Lets a step act, whose current goes in a straight line.
    pub(super) fn step(&mut self, action: Action, from: Current, to: Current, seconds: f64) {
        let (envelope, volts) = (self.envelope, self.volts);
        let watts = |amperes: f64| match action {
            Action::Rest => 0.0,
            Action::Current { .. } => envelope.mosfet_watts(volts, amperes),
            // All of it, though a part goes into the sense resistor.
            Action::Power { target } => target.watts(),
            Action::Resistance { target } => {
                let amperes = volts / target.ohms();
                envelope.mosfet_watts(volts, amperes)
            }
        };
        // Cut finer at the beginning, where fast lags move.
        let mut done = 0.0;
        for look in 0..LOOKS {
            let until = 0.5_f64.powi(LOOKS - 1 - look);
            let middle = f64::midpoint(done, until);
            let amperes = from.amperes() + middle * (to.amperes() - from.amperes());
            let power = watts(amperes);
            let lasts = (until - done) * seconds;
            self.junction.advance(power, lasts);
            self.fins.advance(power, lasts);
            self.look();
            done = until;
        }
    }

    /// Repeats what led here from an earlier state, in so many seconds, so many times more.
    pub(super) fn repeat(&mut self, before: &Self, seconds: f64, times: f64) {
        self.junction.repeat(&before.junction, seconds, times);
        self.fins.repeat(&before.fins, seconds, times);
        self.look();
    }

    fn look(&mut self) {
        let heat_sink = self.fins.kelvins();
        self.hottest_fins = self.hottest_fins.max(heat_sink);
        self.hottest_junction = self
            .hottest_junction
            .max(heat_sink + self.junction.kelvins());
    }

    fn peak(&self) -> Peak {
        let ambient = self.envelope.ambient();
        let at = |rise: f64| {
            let degrees = ambient.degrees_celsius() + rise;
            Temperature::from_degrees_celsius(degrees).unwrap_or(Temperature::MAX)
        };
        Peak {
            heat_sink: at(self.hottest_fins),
            heat_sink_max: self.envelope.heat_sink_max(),
            junction: at(self.hottest_junction),
            junction_max: self.envelope.junction_max(),
            ambient,
        }
    }
}

#[cfg(test)]
mod tests;
