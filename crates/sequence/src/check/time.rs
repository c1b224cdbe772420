//! Rules on times: above zero, not below the sink's tick, on whole ticks.

use quantity::Span;

use super::Scene;
use crate::draft::{ActionDraft, ConditionDraft, StepDraft};
use crate::finding::{Finding, Findings};
use crate::plan::Condition;
use crate::profile::Segment;
use crate::rule::Rule;

/// Where the time of a step stands.
fn time_key(step: &StepDraft) -> &'static str {
    match &step.action {
        Some(ActionDraft::Rest) => "rest",
        Some(ActionDraft::Ramp(_)) => "ramp/over",
        Some(ActionDraft::Profile(_)) => "profile",
        Some(ActionDraft::Repeat(_)) => "repeat/at_most",
        Some(ActionDraft::Draw(_) | ActionDraft::Power(_) | ActionDraft::Resistance(_)) | None => {
            if step.until.is_empty() {
                "for"
            } else {
                "at_most"
            }
        }
    }
}

fn zero(pointer: String, findings: &mut Findings) {
    findings.push(
        Finding::new(
            Rule::TimeZero,
            pointer,
            "a time of 0 s where something is to last",
            "write a time above zero, or leave the step out",
        )
        .numbers(Span::ZERO, Span::ZERO),
    );
}

pub(super) fn above_zero(scene: &Scene<'_>, findings: &mut Findings) {
    if scene.draft.readback == Some(Span::ZERO) {
        zero("/readback".to_owned(), findings);
    }
    scene.draft.each_step(&mut |step| {
        if step.time == Some(Span::ZERO) {
            zero(step.key(time_key(step)), findings);
        }
        if step.readback == Some(Span::ZERO) {
            zero(step.key("readback"), findings);
        }
        for until in &step.until {
            let (span, key) = match until.condition {
                Some(ConditionDraft::Elapsed(span)) => (span, "elapsed"),
                Some(ConditionDraft::Watch(Condition::VoltageSettled { window, .. })) => {
                    (window, "voltage_settled/over")
                }
                Some(ConditionDraft::Watch(Condition::TemperatureSettled { window, .. })) => {
                    (window, "temperature_settled/over")
                }
                Some(ConditionDraft::Watch(_)) | None => continue,
            };
            if span == Span::ZERO {
                zero(format!("{}/{key}", until.pointer), findings);
            }
        }
    });
}

/// The shortest part of a step that the sink must time, and what it is.
fn shortest(step: &StepDraft, tick: Span) -> Option<(Span, Span, &'static str)> {
    let edge_too = tick.saturating_add(tick);
    match &step.action {
        Some(ActionDraft::Profile(segments)) => segments
            .iter()
            .map(|segment| (segment.span(), tick, "the profile's shortest segment"))
            .min(),
        // An edge to where the ramp begins takes a tick of its own.
        Some(ActionDraft::Ramp(ramp)) if ramp.has_from => {
            Some((step.time?, edge_too, "a ramp with its edge"))
        }
        Some(ActionDraft::Repeat(_)) | None => None,
        Some(
            ActionDraft::Rest
            | ActionDraft::Draw(_)
            | ActionDraft::Power(_)
            | ActionDraft::Resistance(_)
            | ActionDraft::Ramp(_),
        ) => Some((step.time?, tick, "the step")),
    }
}

pub(super) fn not_below_tick(scene: &Scene<'_>, findings: &mut Findings) {
    let tick = scene.facts.tick;
    let sink = &scene.facts.name;
    scene.draft.each_step(&mut |step| {
        let Some((span, least, what)) = shortest(step, tick) else {
            return;
        };
        if span > Span::ZERO && span < least {
            findings.push(
                Finding::new(
                    Rule::ShorterThanTick,
                    step.key(time_key(step)),
                    format!("{what} lasts {span}, the sink `{sink}` can time {least} at least"),
                    format!("make it {least} or longer"),
                )
                .numbers(span, least),
            );
        }
        if let Some(ActionDraft::Profile(segments)) = &step.action {
            short_slopes(step, segments, tick, findings);
        }
    });
}

/// A slope that begins with a jump needs a tick for the jump and one for itself.
fn short_slopes(step: &StepDraft, segments: &[Segment], tick: Span, findings: &mut Findings) {
    let least = tick.saturating_add(tick);
    let mut level = None;
    for &segment in segments {
        if let Segment::Slope { from, span, .. } = segment
            && level != Some(from)
            && span >= tick
            && span < least
        {
            findings.push(
                Finding::new(
                    Rule::ShorterThanTick,
                    step.key("profile"),
                    format!(
                        "the profile jumps to {from} and goes on in a slope of {span}, \
                         which the sink can time from {least} on"
                    ),
                    format!("make the slope {least} or longer"),
                )
                .numbers(span, least),
            );
        }
        level = Some(segment.last());
    }
}

pub(super) fn whole_ticks(scene: &Scene<'_>, findings: &mut Findings) {
    let tick = scene.facts.tick;
    let off = |span: Span| tick > Span::ZERO && !span.micros().is_multiple_of(tick.micros());
    scene.draft.each_step(&mut |step| {
        let spans: Vec<Span> = match &step.action {
            Some(ActionDraft::Profile(segments)) => {
                segments.iter().map(|segment| segment.span()).collect()
            }
            Some(ActionDraft::Repeat(_)) | None => return,
            Some(_) => step.time.into_iter().collect(),
        };
        let Some(&first) = spans.iter().find(|&&span| off(span)) else {
            return;
        };
        let count = spans.iter().filter(|&&span| off(span)).count();
        let what = if count == 1 {
            format!("{first} is no whole number of the sink's ticks of {tick}")
        } else {
            format!(
                "{count} segments are no whole number of the sink's ticks of {tick}, \
                 the first of {first}"
            )
        };
        findings.push(
            Finding::new(
                Rule::OffTick,
                step.key(time_key(step)),
                format!("{what}: the edge after it comes up to {tick} late"),
                format!("write multiples of {tick} where the charge of an edge matters"),
            )
            .numbers(first, tick),
        );
    });
}
