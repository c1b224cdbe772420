//! The rule on the envelope: what the sink can do at the DUT's voltages, step by step.
//!
//! Heat bounds the current at the largest voltage, the circuit (gate drive, the sink's own
//! resistance) at the least, so both ends are judged. The source's own resistance is taken as
//! zero, which is the hottest case.

use quantity::{Current, Resistance, Span, Voltage};
use sink::envelope::{Duration, Envelope};

use super::Scene;
use super::target::{action_key, each_current, least_voltage};
use crate::draft::{ActionDraft, StepDraft};
use crate::finding::{Finding, Findings};
use crate::rule::Rule;

/// Most pulses worked out; a steady current needs one answer for all steps.
const PULSES_MOST: usize = 500;

pub(super) fn holds(scene: &Scene<'_>, findings: &mut Findings) {
    let envelope = match &scene.facts.envelope {
        Ok(envelope) => envelope,
        Err(error) => {
            findings.push(Finding::new(
                Rule::AboveEnvelope,
                "",
                format!(
                    "the envelope of the sink `{}` cannot be worked out: {error}",
                    scene.facts.name
                ),
                "mend the sink's leads in the bench file",
            ));
            return;
        }
    };
    let dut = &scene.draft.dut;
    let (Some(least), Some(most)) = (least_voltage(scene), dut.voltage_max) else {
        return;
    };
    let mut pulses = 0;
    for voltage in [most, least] {
        let steady = ceiling(envelope, voltage, Duration::Continuous);
        each_current(scene, &mut |step, current, why| {
            // A source that may give up need not be followed down to its least voltage.
            let spared = voltage == least && step.may_give_up;
            let told = current > scene.facts.current_max;
            if current <= steady.0 || spared || told || pulses == PULSES_MOST {
                return;
            }
            pulses += 1;
            let Some(span) = lasts(step, current) else {
                return;
            };
            let (limit, name) = ceiling(envelope, voltage, Duration::Pulse(span));
            if current > limit {
                let message = format!(
                    "{why}, above the {limit} that the sink `{}` can hold at {voltage} for {span} \
                     (bound by: {name})",
                    scene.facts.name
                );
                let hint = format!("draw {limit} or less, or for a shorter time");
                findings.push(
                    Finding::new(Rule::AboveEnvelope, action_key(step), message, hint)
                        .numbers(current, limit),
                );
            }
        });
    }
}

fn ceiling(
    envelope: &Envelope,
    voltage: Voltage,
    duration: Duration,
) -> (Current, sink::envelope::Limit) {
    let ceiling = envelope.ceiling(voltage, Resistance::ZERO, duration);
    (ceiling.current, ceiling.binding)
}

/// How long a step holds its largest current at most.
fn lasts(step: &StepDraft, current: Current) -> Option<Span> {
    match &step.action {
        Some(ActionDraft::Profile(segments)) => segments
            .iter()
            .filter(|segment| segment.ends().contains(&current))
            .map(|segment| segment.span())
            .max(),
        Some(_) | None => step.time,
    }
}
