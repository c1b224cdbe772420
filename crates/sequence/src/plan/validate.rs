//! Whether a plan keeps its invariants: asked after compiling, and before a plan that was read
//! back from a record drives anything.

use quantity::{Current, Power, Quantity, Resistance, Span};

use super::{
    Action, Armed, Condition, Interlocks, LoopHead, Next, Op, OpIndex, Plan, PlanStep, Until,
};

/// An invariant that a plan breaks.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("the plan is not valid at {place}: {what}; compile the sequence again")]
pub struct PlanError {
    /// Where: an instruction (`ops/3`), or a key of the plan.
    pub place: String,
    /// What is wrong.
    pub what: String,
}

fn wrong<T>(place: impl Into<String>, what: impl Into<String>) -> Result<T, PlanError> {
    Err(PlanError {
        place: place.into(),
        what: what.into(),
    })
}

fn index(place: OpIndex) -> usize {
    usize::try_from(place).unwrap_or(usize::MAX)
}

impl Plan {
    /// Whether the plan keeps its invariants.
    ///
    /// # Errors
    /// The first invariant that is broken, with its place.
    pub fn validate(&self) -> Result<(), PlanError> {
        self.whole()?;
        let depths = self.nesting()?;
        for (at, op) in self.ops.iter().enumerate() {
            let place = format!("ops/{at}");
            match op {
                Op::Step(step) => self.step(at, step, &depths, &place)?,
                Op::LoopBegin(head) => self.head(at, head, &depths, &place)?,
                Op::LoopEnd { .. } => {}
            }
        }
        self.interlocks.validate()
    }

    fn whole(&self) -> Result<(), PlanError> {
        if self.ops.is_empty() {
            return wrong("ops", "no instruction");
        }
        for (key, span) in [
            ("tick", self.tick),
            ("readback", self.readback),
            ("deadman", self.deadman),
        ] {
            if span == Span::ZERO {
                return wrong(key, "0 s");
            }
        }
        if self.queue == 0 {
            return wrong("queue", "a queue that holds nothing");
        }
        if self.by_hand && !matches!(self.ops[..], [Op::Step(_)]) {
            return wrong("ops", "a run by hand has one step and nothing else");
        }
        if self.dut.voltage_min >= self.dut.voltage_max {
            return wrong("dut", "the least voltage is not below the largest");
        }
        Ok(())
    }

    /// Which loops each instruction is in (their heads), if loops match and nest.
    fn nesting(&self) -> Result<Vec<Vec<usize>>, PlanError> {
        let mut open: Vec<usize> = Vec::new();
        let mut depths = Vec::with_capacity(self.ops.len());
        for (at, op) in self.ops.iter().enumerate() {
            if let Op::LoopEnd { begin } = op {
                if open.pop() != Some(index(*begin)) {
                    return wrong(format!("ops/{at}"), "the foot of a loop that is not open");
                }
                let matches = matches!(
                    self.ops.get(index(*begin)),
                    Some(Op::LoopBegin(head)) if index(head.end) == at
                );
                if !matches {
                    return wrong(format!("ops/{at}"), "head and foot of a loop do not match");
                }
            }
            depths.push(open.clone());
            if matches!(op, Op::LoopBegin(_)) {
                open.push(at);
            }
        }
        match open.last() {
            Some(at) => wrong(format!("ops/{at}"), "a loop without a foot"),
            None => Ok(depths),
        }
    }

    fn step(
        &self,
        at: usize,
        step: &PlanStep,
        depths: &[Vec<usize>],
        place: &str,
    ) -> Result<(), PlanError> {
        if step.duration == Span::ZERO {
            return wrong(place, "a duration of 0 s");
        }
        if step.readback == Some(Span::ZERO) {
            return wrong(place, "a readback interval of 0 s");
        }
        match step.action {
            Action::Current { target, ramp } => {
                if target < Current::ZERO {
                    return wrong(place, format!("a current of {target}"));
                }
                if ramp > step.duration {
                    return wrong(place, "a ramp longer than its step");
                }
            }
            Action::Power { target } if target <= Power::ZERO => {
                return wrong(place, format!("a power of {target}"));
            }
            Action::Resistance { target } if target <= Resistance::ZERO => {
                return wrong(place, format!("a resistance of {target}"));
            }
            Action::Rest | Action::Power { .. } | Action::Resistance { .. } => {}
        }
        self.label(step.label, place)?;
        self.next(at, step.then, depths, place)?;
        self.until(at, &step.until, depths, place)
    }

    fn head(
        &self,
        at: usize,
        head: &LoopHead,
        depths: &[Vec<usize>],
        place: &str,
    ) -> Result<(), PlanError> {
        if head.times == Some(0) || head.at_most == Some(Span::ZERO) {
            return wrong(place, "a loop that runs no time");
        }
        if head.times.is_none() && head.at_most.is_none() && head.until.is_empty() {
            return wrong(place, "a loop that never ends");
        }
        if index(head.end) <= at + 1 {
            return wrong(place, "a loop around nothing");
        }
        self.label(head.label, place)?;
        self.until(at, &head.until, depths, place)
    }

    fn label(&self, label: Option<u32>, place: &str) -> Result<(), PlanError> {
        match label {
            Some(label) if self.labels.get(index(label)).is_none() => {
                wrong(place, format!("no label has the number {label}"))
            }
            Some(_) | None => Ok(()),
        }
    }

    fn until(
        &self,
        at: usize,
        until: &[Until],
        depths: &[Vec<usize>],
        place: &str,
    ) -> Result<(), PlanError> {
        for until in until {
            if let Condition::VoltageSettled { window, .. }
            | Condition::TemperatureSettled { window, .. } = until.condition
                && window == Span::ZERO
            {
                return wrong(place, "a condition on settling over 0 s");
            }
            self.next(at, until.then, depths, place)?;
        }
        Ok(())
    }

    /// A skip goes forward, to a step or a head, and enters no loop.
    fn next(
        &self,
        at: usize,
        next: Next,
        depths: &[Vec<usize>],
        place: &str,
    ) -> Result<(), PlanError> {
        let Next::SkipTo(target) = next else {
            return Ok(());
        };
        let target = index(target);
        if target <= at {
            return wrong(place, "a skip that does not go forward");
        }
        let (Some(here), Some(there)) = (depths.get(at), depths.get(target)) else {
            return wrong(place, "a skip to where nothing is");
        };
        if matches!(self.ops.get(target), Some(Op::LoopEnd { .. })) {
            return wrong(place, "a skip to the foot of a loop");
        }
        if here.starts_with(there) {
            Ok(())
        } else {
            wrong(place, "a skip into a loop")
        }
    }
}

impl Interlocks {
    fn validate(&self) -> Result<(), PlanError> {
        fn above_zero<T: Quantity>(key: &str, armed: Armed<T>) -> Result<(), PlanError> {
            if armed.threshold.base_units() <= 0 {
                return wrong(
                    format!("interlocks/{key}"),
                    "a threshold that is not above zero",
                );
            }
            Ok(())
        }
        above_zero("over_temperature", self.over_temperature)?;
        above_zero("over_power", self.over_power)?;
        above_zero("undervoltage", self.undervoltage)?;
        above_zero("over_voltage", self.over_voltage)?;
        above_zero("over_current", self.over_current)?;
        above_zero("not_following", self.not_following)?;
        above_zero("not_releasing", self.not_releasing)?;
        if self.reversed_polarity.threshold.base_units() > 0 {
            return wrong("interlocks/reversed_polarity", "a threshold above zero");
        }
        if self.undervoltage.threshold >= self.over_voltage.threshold {
            return wrong("interlocks/undervoltage", "not below the over-voltage");
        }
        for (key, span) in [("silence", self.silence), ("clock", self.clock)] {
            if span == Span::ZERO {
                return wrong(format!("interlocks/{key}"), "0 s");
            }
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests;
