//! Rules on the order of things: labels, skips, repeats, what can be reached.

use std::collections::{BTreeMap, BTreeSet};

use quantity::Current;

use super::{PlanScene, Scene};
use crate::draft::{ActionDraft, NextDraft, StepDraft};
use crate::finding::{Finding, Findings};
use crate::plan::{Next, Op, Plan};
use crate::rule::Rule;

pub(super) fn labels_unique(scene: &Scene<'_>, findings: &mut Findings) {
    let mut first: BTreeMap<&str, &str> = BTreeMap::new();
    scene.draft.each_step(&mut |step| {
        let Some(label) = step.label.as_deref() else {
            return;
        };
        if let Some(other) = first.get(label) {
            findings.push(Finding::new(
                Rule::LabelDuplicate,
                step.key("label"),
                format!("the label \"{label}\" stands already at {other}"),
                "give each step its own label",
            ));
        } else {
            first.insert(label, &step.pointer);
        }
    });
}

/// Where a step is: its number in the order of the file, and the repeats around it.
#[derive(Clone)]
struct Site<'a> {
    order: usize,
    repeats: Vec<&'a str>,
}

fn sites<'a>(
    steps: &'a [StepDraft],
    repeats: &[&'a str],
    found: &mut Vec<(&'a StepDraft, Site<'a>)>,
) {
    for step in steps {
        let site = Site {
            order: found.len(),
            repeats: repeats.to_vec(),
        };
        found.push((step, site));
        if let Some(ActionDraft::Repeat(repeat)) = &step.action {
            let mut inside = repeats.to_vec();
            inside.push(&step.pointer);
            sites(&repeat.steps, &inside, found);
        }
    }
}

pub(super) fn skips(scene: &Scene<'_>, findings: &mut Findings) {
    let mut found = Vec::new();
    sites(&scene.draft.steps, &[], &mut found);
    let mut labels: BTreeMap<&str, &Site<'_>> = BTreeMap::new();
    for (step, site) in &found {
        if let Some(label) = step.label.as_deref() {
            labels.entry(label).or_insert(site);
        }
    }
    for (step, site) in &found {
        let nexts = step.until.iter().map(|until| &until.then);
        for next in nexts.chain(std::iter::once(&step.then)) {
            let NextDraft::SkipTo { label, pointer } = next else {
                continue;
            };
            match labels.get(label.as_str()) {
                Some(target) => skip(site, target, label, pointer, findings),
                None => unknown(label, pointer, labels.keys().copied(), findings),
            }
        }
    }
}

fn unknown<'a>(
    label: &str,
    pointer: &str,
    known: impl Iterator<Item = &'a str>,
    findings: &mut Findings,
) {
    let hint = match crate::shape::nearest(label, known) {
        Some(near) => format!("did you mean \"{near}\"?"),
        None => "give the step that is meant this label".to_owned(),
    };
    findings.push(Finding::new(
        Rule::LabelUnknown,
        pointer,
        format!("no step has the label \"{label}\""),
        hint,
    ));
}

fn skip(from: &Site<'_>, target: &Site<'_>, label: &str, pointer: &str, findings: &mut Findings) {
    if !from.repeats.starts_with(&target.repeats) {
        findings.push(Finding::new(
            Rule::SkipIntoRepeat,
            pointer,
            format!("the step \"{label}\" is inside a repeat that this one is not in"),
            "skip to the repeat itself, or to a step after it",
        ));
    } else if target.order <= from.order {
        findings.push(Finding::new(
            Rule::SkipBackward,
            pointer,
            format!("the step \"{label}\" is not after this one"),
            "put the steps that are to run again into a `repeat`",
        ));
    }
}

pub(super) fn repeats_end(scene: &Scene<'_>, findings: &mut Findings) {
    scene.draft.each_step(&mut |step| {
        let Some(ActionDraft::Repeat(repeat)) = &step.action else {
            return;
        };
        if !repeat.has_times && !repeat.has_at_most {
            findings.push(Finding::new(
                Rule::EndlessRepeat,
                step.key("repeat"),
                "the repeat could go on for ever",
                "add `times`, or `at_most` with the longest time it may take",
            ));
        }
    });
}

pub(super) fn ramp_starts(scene: &Scene<'_>, findings: &mut Findings) {
    let targets = scene.draft.skip_targets();
    ramp_starts_in(&scene.draft.steps, true, &targets, findings);
}

/// `known`: whether the current at the beginning is known; answers the same for the end.
fn ramp_starts_in(
    steps: &[StepDraft],
    mut known: bool,
    targets: &BTreeSet<&str>,
    findings: &mut Findings,
) {
    for step in steps {
        if step
            .label
            .as_deref()
            .is_some_and(|label| targets.contains(label))
        {
            known = false;
        }
        known = match &step.action {
            Some(ActionDraft::Ramp(ramp)) => {
                if !ramp.has_from && !known {
                    findings.push(Finding::new(
                        Rule::RampStartUnknown,
                        step.key("ramp"),
                        "the current at which the ramp begins does not follow from the step before",
                        "add `from` to the ramp",
                    ));
                }
                step.until.is_empty() && !step.may_give_up
            }
            Some(ActionDraft::Rest | ActionDraft::Draw(_) | ActionDraft::Profile(_)) => {
                step.until.is_empty() || !matches!(step.action, Some(ActionDraft::Profile(_)))
            }
            Some(ActionDraft::Repeat(repeat)) => {
                ramp_starts_in(&repeat.steps, false, targets, findings);
                false
            }
            Some(ActionDraft::Power(_) | ActionDraft::Resistance(_)) => false,
            // What could not be read is a finding already.
            None => true,
        };
    }
}

/// The currents a step asks for, for rules that go through all of them.
pub(super) fn currents(step: &StepDraft) -> Vec<Current> {
    match &step.action {
        Some(ActionDraft::Draw(current)) => current.iter().copied().collect(),
        Some(ActionDraft::Ramp(ramp)) => ramp.from.into_iter().chain(ramp.to).collect(),
        Some(ActionDraft::Profile(segments)) => {
            segments.iter().flat_map(|segment| segment.ends()).collect()
        }
        Some(
            ActionDraft::Rest
            | ActionDraft::Power(_)
            | ActionDraft::Resistance(_)
            | ActionDraft::Repeat(_),
        )
        | None => Vec::new(),
    }
}

/// Where an instruction can lead.
fn successors(plan: &Plan, at: usize) -> Vec<usize> {
    let index = |place: u32| usize::try_from(place).unwrap_or(usize::MAX);
    let follow = |next: Next, after: usize| match next {
        Next::GoOn => Some(after),
        Next::SkipTo(place) => Some(index(place)),
        Next::End => None,
    };
    match plan.ops.get(at) {
        Some(Op::Step(step)) => {
            let given_up = step.may_give_up.then_some(Next::GoOn);
            let nexts = step.until.iter().map(|until| until.then);
            nexts
                .chain([step.then])
                .chain(given_up)
                .filter_map(|next| follow(next, at + 1))
                .collect()
        }
        Some(Op::LoopBegin(head)) => {
            let after = index(head.end) + 1;
            let timed = head.at_most.is_some().then_some(Next::GoOn);
            let nexts = head.until.iter().map(|until| until.then).chain(timed);
            std::iter::once(at + 1)
                .chain(nexts.filter_map(|next| follow(next, after)))
                .collect()
        }
        Some(Op::LoopEnd { begin }) => vec![index(*begin), at + 1],
        None => Vec::new(),
    }
}

pub(super) fn reachable(scene: &PlanScene<'_>, findings: &mut Findings) {
    let plan = scene.plan;
    let mut reached = BTreeSet::new();
    let mut open = vec![0];
    while let Some(at) = open.pop() {
        if at < plan.ops.len() && reached.insert(at) {
            open.extend(successors(plan, at));
        }
    }
    let mut told: BTreeSet<&str> = BTreeSet::new();
    for (at, op) in plan.ops.iter().enumerate() {
        let pointer = match op {
            Op::Step(step) => step.pointer.as_str(),
            Op::LoopBegin(head) => head.pointer.as_str(),
            Op::LoopEnd { .. } => continue,
        };
        let inside = told.iter().any(|outer| {
            pointer == *outer
                || pointer
                    .strip_prefix(outer)
                    .is_some_and(|rest| rest.starts_with('/'))
        });
        if !reached.contains(&at) && !inside {
            told.insert(pointer);
            findings.push(Finding::new(
                Rule::Unreachable,
                pointer,
                "the step can never be reached: every way before it ends or skips over it",
                "leave the step out, or check the `then` of the steps before it",
            ));
        }
    }
}
