//! Rules on bursts: the sink can capture, and the capture fits.

use quantity::Span;

use super::Scene;
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
