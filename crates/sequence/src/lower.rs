//! From a draft that nothing refuses to a plan.
//!
//! Expands ramps and profiles into steps the sink knows, says elapsed times with durations,
//! turns labels into places. Judges nothing: a draft that cannot be lowered was refused before,
//! and `None` here is a broken invariant of the check.

use std::collections::{BTreeMap, BTreeSet};

use quantity::{Current, Span};

use crate::draft::{
    ActionDraft, ConditionDraft, Draft, NextDraft, RampDraft, RepeatDraft, StepDraft, UntilDraft,
};
use crate::facts::Facts;
use crate::plan::{
    Action, BurstRequest, Dut, Interlocks, LoopHead, Next, Op, OpIndex, Plan, PlanStep, Until,
};
use crate::profile::Segment;

/// The plan of a draft.
pub(crate) fn lower(
    draft: &Draft,
    facts: &Facts,
    interlocks: Interlocks,
    dut_label: Option<&str>,
) -> Option<Plan> {
    let mut labels = Vec::new();
    draft.each_step(&mut |step| labels.extend(step.label.clone()));
    let mut indices = BTreeMap::new();
    for (index, label) in labels.iter().enumerate() {
        indices.insert(label.clone(), u32::try_from(index).ok()?);
    }
    let mut writer = Writer {
        tick: facts.tick,
        places: vec![0; labels.len()],
        labels,
        indices,
        targets: draft.skip_targets(),
        ops: Vec::new(),
        // Before its first step a sink is off.
        level: Some(Current::ZERO),
    };
    writer.steps(&draft.steps)?;
    let Writer { labels, ops, .. } = writer.placed()?;
    let dut = &draft.dut;
    Some(Plan {
        title: draft.title.clone(),
        sink: facts.name.clone(),
        dut: Dut {
            label: dut_label
                .map(str::to_owned)
                .or_else(|| dut.label.clone())
                .unwrap_or_default(),
            kind: dut.kind?,
            rated_capacity: dut.rated_capacity,
            voltage_min: dut.voltage_min?,
            voltage_max: dut.voltage_max?,
            current_max: dut.current_max?,
            series: dut.series,
            parallel: dut.parallel,
        },
        ops,
        labels,
        interlocks,
        deadman: facts.deadman,
        readback: draft.readback.unwrap_or(facts.readback_usual),
        on_interruption: draft.on_interruption,
        ranges: facts.ranges,
        tick: facts.tick,
        queue: facts.queue,
        isolator: facts.isolator,
        by_hand: false,
        correction: facts.correction,
    })
}

struct Writer<'a> {
    tick: Span,
    labels: Vec<String>,
    indices: BTreeMap<String, u32>,
    /// The labels that some skip goes to.
    targets: BTreeSet<&'a str>,
    /// Where each label's first instruction is.
    places: Vec<OpIndex>,
    ops: Vec<Op>,
    /// The current that the instruction before leaves off with, where it is known.
    level: Option<Current>,
}

/// What all instructions of one step share.
struct Common<'a> {
    step: &'a StepDraft,
    label: Option<u32>,
}

impl Common<'_> {
    /// An instruction that simply lasts.
    fn plain(&self, action: Action, duration: Span) -> PlanStep {
        let step = self.step;
        PlanStep {
            action,
            duration,
            until: Vec::new(),
            then: Next::GoOn,
            readback: step.readback,
            may_give_up: step.may_give_up,
            burst: None,
            label: self.label,
            pointer: step.pointer.clone(),
        }
    }
}

/// The first elapsed time among conditions, and what follows it.
type Elapsed = Option<(Span, Next)>;

impl Writer<'_> {
    fn here(&self) -> Option<OpIndex> {
        OpIndex::try_from(self.ops.len()).ok()
    }

    fn label_index(&self, label: &str) -> Option<u32> {
        self.indices.get(label).copied()
    }

    fn steps(&mut self, steps: &[StepDraft]) -> Option<()> {
        steps.iter().try_for_each(|step| self.step(step))
    }

    fn step(&mut self, step: &StepDraft) -> Option<()> {
        let label = match &step.label {
            Some(label) => Some(self.label_index(label)?),
            None => None,
        };
        if let Some(index) = label {
            let here = self.here()?;
            *self.places.get_mut(usize::try_from(index).ok()?)? = here;
            // A step that is skipped to may begin from any current.
            if step
                .label
                .as_deref()
                .is_some_and(|label| self.targets.contains(label))
            {
                self.level = None;
            }
        }
        let common = Common { step, label };
        match step.action.as_ref()? {
            ActionDraft::Rest => self.held(&common, Action::Rest, Some(Current::ZERO)),
            ActionDraft::Draw(current) => {
                let target = (*current)?;
                self.held(&common, constant(target), Some(target))
            }
            ActionDraft::Power(power) => {
                self.held(&common, Action::Power { target: (*power)? }, None)
            }
            ActionDraft::Resistance(resistance) => {
                let target = (*resistance)?;
                self.held(&common, Action::Resistance { target }, None)
            }
            ActionDraft::Ramp(ramp) => self.ramp(&common, *ramp),
            ActionDraft::Profile(segments) => self.profile(&common, segments),
            ActionDraft::Repeat(repeat) => self.repeat(&common, repeat),
        }
    }

    /// An instruction that holds something for the step's time.
    fn held(&mut self, common: &Common<'_>, action: Action, level: Option<Current>) -> Option<()> {
        let step = common.step;
        let plain = self.conditional(common, action, step.time?)?;
        self.ops.push(Op::Step(plain));
        self.level = level;
        Some(())
    }

    /// An instruction with all that the step says about its end.
    fn conditional(&self, common: &Common<'_>, action: Action, duration: Span) -> Option<PlanStep> {
        let step = common.step;
        let (until, elapsed) = self.until(&step.until)?;
        let mut plain = common.plain(action, duration);
        plain.until = until;
        plain.then = self.next(&step.then)?;
        plain.burst = step
            .burst
            .map(|(before, after)| BurstRequest { before, after });
        if let Some((span, then)) = elapsed.filter(|&(span, _)| span < duration) {
            plain.duration = span;
            plain.then = then;
        }
        Some(plain)
    }

    /// The conditions, and the first elapsed time among them.
    fn until(&self, until: &[UntilDraft]) -> Option<(Vec<Until>, Elapsed)> {
        let mut conditions = Vec::new();
        let mut elapsed: Elapsed = None;
        for draft in until {
            let then = self.next(&draft.then)?;
            match draft.condition? {
                ConditionDraft::Watch(condition) => conditions.push(Until {
                    condition,
                    persistence: draft.persistence.unwrap_or(Span::ZERO),
                    then,
                }),
                ConditionDraft::Elapsed(span) => {
                    if elapsed.is_none_or(|(earliest, _)| span < earliest) {
                        elapsed = Some((span, then));
                    }
                }
            }
        }
        Some((conditions, elapsed))
    }

    /// What follows; a skip holds the label's index until [`Self::placed`].
    fn next(&self, next: &NextDraft) -> Option<Next> {
        Some(match next {
            NextDraft::GoOn => Next::GoOn,
            NextDraft::End => Next::End,
            NextDraft::SkipTo { label, .. } => Next::SkipTo(self.label_index(label)?),
        })
    }

    /// An edge to where a ramp begins, one tick long, unless the current is there already.
    fn edge(&mut self, common: &Common<'_>, from: Current) -> Span {
        if self.level == Some(from) {
            return Span::ZERO;
        }
        let edge = common.plain(constant(from), self.tick);
        self.ops.push(Op::Step(edge));
        self.tick
    }

    fn ramp(&mut self, common: &Common<'_>, ramp: RampDraft) -> Option<()> {
        let (over, to) = (common.step.time?, ramp.to?);
        let begin = self.ops.len();
        let spent = ramp.from.map_or(Span::ZERO, |from| self.edge(common, from));
        let duration = over.checked_sub(spent)?;
        let action = Action::Current {
            target: to,
            ramp: duration,
        };
        let step = self.conditional(common, action, duration)?;
        let ends_early = !step.until.is_empty() || step.may_give_up || step.duration < duration;
        self.ops.push(Op::Step(step));
        self.burst_at(begin);
        self.level = (!ends_early).then_some(to);
        Some(())
    }

    /// Moves a step's burst from its last instruction to its first.
    fn burst_at(&mut self, begin: usize) {
        let last = self.ops.len().saturating_sub(1);
        if begin == last {
            return;
        }
        let burst = match self.ops.get_mut(last) {
            Some(Op::Step(step)) => step.burst.take(),
            Some(Op::LoopBegin(_) | Op::LoopEnd { .. }) | None => None,
        };
        if let Some(Op::Step(step)) = self.ops.get_mut(begin) {
            step.burst = burst;
        }
    }

    /// A profile: its segments, inside a loop of one turn when conditions can end it.
    fn profile(&mut self, common: &Common<'_>, segments: &[Segment]) -> Option<()> {
        let step = common.step;
        let (until, elapsed) = self.until(&step.until)?;
        let begin = self.here()?;
        let turns = step.imported.map_or(1, |imported| imported.turns);
        let looped = turns > 1 || !until.is_empty() || elapsed.is_some();
        if looped {
            self.ops.push(Op::LoopBegin(LoopHead {
                times: Some(turns),
                until,
                at_most: elapsed.map(|(span, _)| span),
                end: 0,
                label: common.label,
                pointer: step.pointer.clone(),
            }));
        }
        if turns > 1 {
            // The second turn begins where the first ended.
            self.level = None;
        }
        for &segment in segments {
            self.segment(common, segment)?;
        }
        let then = self.next(&step.then)?;
        if turns > 1 && then != Next::GoOn {
            return self.turned(common, begin, then);
        }
        if let Some(Op::Step(last)) = self.ops.last_mut() {
            last.then = then;
        }
        if looped {
            self.close(begin)?;
        }
        Some(())
    }

    /// Ends a profile of several turns that does not simply go on: what follows stands at a step
    /// of its own behind the last turn, one tick of rest.
    fn turned(&mut self, common: &Common<'_>, begin: OpIndex, then: Next) -> Option<()> {
        self.close(begin)?;
        let mut rest = common.plain(Action::Rest, self.tick);
        rest.then = then;
        self.ops.push(Op::Step(rest));
        self.level = Some(Current::ZERO);
        Some(())
    }

    fn segment(&mut self, common: &Common<'_>, segment: Segment) -> Option<()> {
        match segment {
            Segment::Hold { current, span } => {
                let step = common.plain(constant(current), span);
                self.ops.push(Op::Step(step));
                self.level = Some(current);
            }
            Segment::Slope { from, to, span } => {
                let duration = span.checked_sub(self.edge(common, from))?;
                let action = Action::Current {
                    target: to,
                    ramp: duration,
                };
                let step = common.plain(action, duration);
                self.ops.push(Op::Step(step));
                self.level = Some(to);
            }
        }
        Some(())
    }

    fn repeat(&mut self, common: &Common<'_>, repeat: &RepeatDraft) -> Option<()> {
        let (until, elapsed) = self.until(&common.step.until)?;
        let begin = self.here()?;
        let elapsed = elapsed.map(|(span, _)| span);
        self.ops.push(Op::LoopBegin(LoopHead {
            times: repeat.times,
            until,
            at_most: match (repeat.at_most, elapsed) {
                (Some(at_most), Some(elapsed)) => Some(at_most.min(elapsed)),
                (at_most, elapsed) => at_most.or(elapsed),
            },
            end: 0,
            label: common.label,
            pointer: common.step.pointer.clone(),
        }));
        // The second turn begins where the first ended.
        self.level = None;
        self.steps(&repeat.steps)?;
        self.close(begin)
    }

    fn close(&mut self, begin: OpIndex) -> Option<()> {
        let end = self.here()?;
        self.ops.push(Op::LoopEnd { begin });
        if let Some(Op::LoopBegin(head)) = self.ops.get_mut(usize::try_from(begin).ok()?) {
            head.end = end;
        }
        self.level = None;
        Some(())
    }

    /// Turns label indices of skips into places.
    fn placed(mut self) -> Option<Self> {
        let places = self.places.clone();
        let place = |next: &mut Next| match *next {
            Next::GoOn | Next::End => Some(()),
            Next::SkipTo(label) => {
                *next = Next::SkipTo(*places.get(usize::try_from(label).ok()?)?);
                Some(())
            }
        };
        for op in &mut self.ops {
            let until = match op {
                Op::Step(step) => {
                    place(&mut step.then)?;
                    &mut step.until
                }
                Op::LoopBegin(head) => &mut head.until,
                Op::LoopEnd { .. } => continue,
            };
            for until in until {
                place(&mut until.then)?;
            }
        }
        Some(self)
    }
}

/// A constant current; none at all is a rest.
fn constant(target: Current) -> Action {
    if target == Current::ZERO {
        Action::Rest
    } else {
        Action::Current {
            target,
            ramp: Span::ZERO,
        }
    }
}
