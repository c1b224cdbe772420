//! Rules on bursts: the sink can capture, the capture fits, and it is sent before the next.

use std::collections::BTreeSet;

use quantity::Span;

use super::order::in_order;
use super::{PlanScene, Scene};
use crate::draft::ActionDraft;
use crate::finding::{Finding, Findings};
use crate::rule::Rule;

pub(super) fn fits(scene: &Scene<'_>, findings: &mut Findings) {
    let facts = scene.facts;
    scene.draft.each_step(&mut |step| {
        let Some((before, after)) = step.burst else {
            return;
        };
        if matches!(
            step.action,
            Some(ActionDraft::Repeat(_) | ActionDraft::Profile(_))
        ) {
            return;
        }
        if facts.burst_samples == 0 {
            findings.push(Finding::new(
                Rule::AbilityMissing,
                step.key("burst"),
                format!("the sink `{}` cannot capture bursts", facts.name),
                "leave `burst` out, or take another sink",
            ));
            return;
        }
        let span = before.saturating_add(after);
        let samples = u64::from(facts.burst_samples);
        let longest = Span::from_micros(facts.tick.micros().saturating_mul(samples));
        if span > longest {
            findings.push(
                Finding::new(
                    Rule::BurstTooLong,
                    step.key("burst"),
                    format!(
                        "a burst of {span} does not fit the {samples} samples of {} that the \
                         sink `{}` can keep",
                        facts.tick, facts.name
                    ),
                    format!("capture {longest} or less"),
                )
                .numbers(span, longest),
            );
        }
        if let Some(time) = step.time.filter(|&time| after > time) {
            findings.push(
                Finding::new(
                    Rule::BurstTooLong,
                    step.key("burst/after"),
                    format!("a burst that goes on for {after} outlasts its step of {time}"),
                    format!("capture {time} or less after the edge"),
                )
                .numbers(after, time),
            );
        }
    });
}

/// A sink takes no second capture while it sends one: the sequencer then asks for none, and the
/// record says that it was missed.
pub(super) fn apart(scene: &PlanScene<'_>, findings: &mut Findings) {
    let plan = scene.plan;
    // Time since the edge of the capture before, and how long the sink is busy with it.
    let mut before: Option<(Span, Span)> = None;
    let mut told = BTreeSet::new();
    in_order(plan, &mut |step| {
        if let Some(burst) = step.burst {
            let needed = before.map(|(since, busy)| (since, busy.saturating_add(burst.before)));
            match needed {
                Some((since, needed)) if since < needed => {
                    if told.insert(&step.pointer) {
                        findings.push(
                            Finding::new(
                                Rule::BurstMissed,
                                format!("{}/burst", step.pointer),
                                format!(
                                    "the capture comes {since} after the one before it, but the \
                                     sink `{}` needs {needed} to send that: it will be missed",
                                    scene.facts.name
                                ),
                                "capture fewer samples, or not every edge: one at its beginning, \
                                 the next at its end",
                            )
                            .numbers(since, needed),
                        );
                    }
                }
                Some(_) | None => before = Some((Span::ZERO, burst.busy(plan.tick))),
            }
        }
        if let Some((since, _)) = &mut before {
            *since = since.saturating_add(step.duration);
        }
    });
}
