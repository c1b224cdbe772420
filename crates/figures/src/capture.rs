//! The captures of a record: every sample around an edge.
//!
//! The sink numbers its captures and the journal its orders; a capture belongs to the latest
//! order for one that stood in the journal when its first sample came, since the sink takes one
//! at a time. The first of the samples after the edge is taken at the tick of the edge, before
//! the new setpoint is set: it still shows the step before.

use std::collections::BTreeMap;

use journal::{Body, Entry, Note};
use quantity::{Current, SinkTime, Span, Voltage};
use sequencer::event::Happening;
use wire::{Order, OrderId};

use crate::figure::Rows;
use crate::stage::Stage;

/// One capture.
#[derive(Debug, Clone)]
pub(crate) struct Capture {
    order: OrderId,
    at: SinkTime,
    before: u16,
    samples: Vec<CaptureSample>,
    rows: Rows,
}

/// One sample of a capture, nominal.
#[derive(Debug, Clone, Copy)]
pub(crate) struct CaptureSample {
    /// Ticks since the edge; the sample at 0 shows the step before.
    pub(crate) tick: i32,
    pub(crate) current: Current,
    pub(crate) voltage: Voltage,
}

/// All captures of which samples came, in the order of their edges.
pub(crate) fn captures(others: &[Entry]) -> Vec<Capture> {
    let mut captures: Vec<Capture> = Vec::new();
    let mut open: BTreeMap<u16, OrderId> = BTreeMap::new();
    for entry in others {
        match &entry.body {
            Body::Order {
                id,
                order: Order::Burst { at, before, .. },
            } => captures.push(Capture {
                order: *id,
                at: *at,
                before: *before,
                samples: Vec::new(),
                rows: Rows {
                    first: entry.number,
                    last: entry.number,
                },
            }),
            Body::Event(Happening::Refused { order, .. }) => {
                captures.retain(|capture| capture.order != *order);
            }
            Body::Note(Note::Burst {
                capture,
                index,
                samples,
            }) => {
                let latest = captures.last().map(|capture| capture.order);
                let Some(order) = open.get(capture).copied().or(latest) else {
                    continue;
                };
                open.insert(*capture, order);
                let belongs = captures.iter_mut().rev().find(|one| one.order == order);
                if let Some(belongs) = belongs {
                    belongs.take(*index, samples, entry.number);
                }
            }
            Body::Note(Note::BurstDone { capture }) => {
                open.remove(capture);
            }
            Body::Note(_)
            | Body::Event(_)
            | Body::Order { .. }
            | Body::Off
            | Body::Finding(_)
            | Body::Ended(_) => {}
        }
    }
    captures.retain(|capture| !capture.samples.is_empty());
    for capture in &mut captures {
        capture.samples.sort_by_key(|sample| sample.tick);
    }
    captures
}

impl Capture {
    fn take(&mut self, index: u16, samples: &[(Current, Voltage)], row: u64) {
        self.rows.last = row;
        let first = i32::from(index) - i32::from(self.before);
        for (tick, &(current, voltage)) in (first..).zip(samples) {
            self.samples.push(CaptureSample {
                tick,
                current,
                voltage,
            });
        }
    }

    /// Whether its edge is the beginning of a stage; edges fall on the next tick.
    fn is_of(&self, stage: &Stage<'_>, tick: Span) -> bool {
        stage.begin >= self.at && stage.begin.saturating_since(self.at) <= tick
    }

    /// The journal entries it came in.
    pub(crate) const fn rows(&self) -> Rows {
        self.rows
    }

    /// The samples of the step before, the one at the edge among them.
    pub(crate) fn before(&self) -> impl Iterator<Item = &CaptureSample> {
        self.samples.iter().filter(|sample| sample.tick <= 0)
    }

    /// The samples of the step that began.
    pub(crate) fn after(&self) -> impl Iterator<Item = &CaptureSample> {
        self.samples.iter().filter(|sample| sample.tick > 0)
    }
}

/// The capture of a stage's beginning.
pub(crate) fn of_stage<'c>(
    captures: &'c [Capture],
    stage: &Stage<'_>,
    tick: Span,
) -> Option<&'c Capture> {
    // By time they are in order, as orders are; the one wanted is the last not after the stage.
    let after = captures.partition_point(|capture| capture.at <= stage.begin);
    let capture = captures.get(after.checked_sub(1)?)?;
    capture.is_of(stage, tick).then_some(capture)
}
