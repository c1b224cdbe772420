//! Where the voltage is read over two wires, the sink's own limit judges its terminals.
//!
//! They lie below the device under test by the leads' drop, so the sink's own undervoltage limit
//! acts before the host's, which takes the drop into account. It is not told a lower limit instead:
//! that would be right at one current alone, and let the device under test go too low at every
//! smaller one.

use quantity::{Current, Resistance, Voltage};

use super::PlanScene;
use crate::finding::{Finding, Findings};
use crate::plan::{Action, Op, PlanStep};
use crate::rule::Rule;

/// Without an ending on the voltage a drop of this share of the DUT's largest voltage is told;
/// common practice, no source.
const TELLING_PARTS: i64 = 100;

pub(super) fn trip_early(scene: &PlanScene<'_>, findings: &mut Findings) {
    let leads = scene.facts.correction.leads;
    if leads <= Resistance::ZERO {
        return;
    }
    let limit = scene.plan.interlocks.undervoltage.threshold;
    let largest = scene.plan.dut.voltage_max;
    let worst = scene
        .plan
        .ops
        .iter()
        .filter_map(|op| match op {
            Op::Step(step) => early(step, leads, (limit, largest)),
            Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
        })
        .max_by_key(Early::by);
    let Some(early) = worst else { return };
    let Early { acts, lowest, .. } = early;
    let wanted = if early.ends {
        format!("the step is to go on to {lowest}")
    } else {
        format!("`undervoltage` stands at {limit}")
    };
    findings.push(
        Finding::new(
            Rule::LeadsTripEarly,
            early.pointer,
            format!(
                "over two wires of {leads} the sink's own undervoltage limit acts at {acts} of the \
                 DUT's: it sees {} less at {}, and {wanted}",
                early.drop, early.current
            ),
            "sense over four wires, or shorten or thicken the leads; else expect the trip",
        )
        .numbers(acts, lowest),
    );
}

/// A step that the sink's own limit ends before its time.
struct Early {
    pointer: String,
    current: Current,
    drop: Voltage,
    /// The voltage at the device under test at which the sink's own limit acts.
    acts: Voltage,
    /// The voltage that the step is to go on to.
    lowest: Voltage,
    /// Whether that is the step's own ending.
    ends: bool,
}

impl Early {
    fn by(&self) -> Voltage {
        self.acts.saturating_sub(self.lowest)
    }
}

fn early(
    step: &PlanStep,
    leads: Resistance,
    (limit, largest): (Voltage, Voltage),
) -> Option<Early> {
    let mut endings = step.until.iter();
    let ending = endings.find_map(|until| until.condition.cut_off());
    let lowest = ending.unwrap_or(limit);
    let current = match step.action {
        Action::Rest => return None,
        Action::Current { target, .. } => target,
        Action::Power { target } => target.over(lowest)?,
        Action::Resistance { target } => lowest.over(target)?,
    };
    let drop = current.times_resistance(leads);
    let acts = limit.saturating_add(drop);
    let tells = match ending {
        Some(lowest) => acts > lowest,
        None => drop.microvolts().saturating_mul(TELLING_PARTS) > largest.microvolts(),
    };
    tells.then(|| Early {
        pointer: step.pointer.clone(),
        current,
        drop,
        acts,
        lowest,
        ends: ending.is_some(),
    })
}
