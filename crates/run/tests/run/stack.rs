//! The whole stack in virtual time with all that can go wrong around it: a link with faults, a
//! disk that takes its time, a host that dies.
//!
//! It drives a keeper by the crate's contract, as the daemon does, and holds every run to the
//! crate's first invariant: no order reaches the link before its entry is durable.

use std::collections::VecDeque;
use std::sync::Arc;

use journal::{Body, Entry, Note};
use quantity::{HostTime, Span};
use run::{Effect, Keeper, KeeperConfig};
use sequence::plan::Plan;
use sequencer::Sequencer;
use sequencer::event::{Ending, Finding, Happening, Interlock};
use sequencer::replay::{Recorded, replay};
use simulator::device::{SimulatedSink, SinkParts};
use simulator::link::{FaultyDevice, LinkFaults};
use sink::bench::SinkEntry;
use transport::port::VirtualDevice;
use wire::{Decoder, HostLine, Order};

use crate::bench::EVENING;
use crate::tapped::Tapped;

/// Current below which a sink counts as off: under one code of its converter.
pub(crate) const NO_CURRENT_A: f64 = 1e-6;

/// A keeper, its sink, and what lies between them.
pub(crate) struct Stack {
    pub(crate) plan: Arc<Plan>,
    config: KeeperConfig,
    pub(crate) keeper: Option<Keeper>,
    pub(crate) link: FaultyDevice<Tapped>,
    /// Everything that was to be recorded, in its order.
    pub(crate) entries: Vec<Entry>,
    /// How many of them are on the disk.
    pub(crate) durable: u64,
    /// How long the disk takes; `None`: it takes nothing any more.
    pub(crate) disk: Option<Span>,
    writing: VecDeque<(Span, u64)>,
    /// How the run ended, once its record is complete.
    pub(crate) closed: Option<Ending>,
    /// No run is in progress.
    idle: bool,
    /// Longest stretch of time between two looks at the current.
    pub(crate) stride: Span,
    /// Looked at after every stretch.
    pub(crate) currents: Option<Vec<(Span, f64)>>,
    sent: Decoder<HostLine>,
    outbound: Vec<u8>,
}

impl Stack {
    /// A sink of these parts behind a link with these faults, and a run of the plan on it.
    pub(crate) fn new(
        entry: &SinkEntry,
        parts: SinkParts,
        plan: Plan,
        faults: &LinkFaults,
    ) -> Self {
        let seed = parts.seed;
        let tapped = Tapped::new(SimulatedSink::new(parts).unwrap());
        let config = KeeperConfig::for_sink(entry).unwrap();
        let mut stack = Self {
            plan: Arc::new(plan),
            keeper: Some(Keeper::new(config, 1)),
            config,
            link: FaultyDevice::new(tapped, faults, seed),
            entries: Vec::new(),
            durable: 0,
            disk: Some(Span::ZERO),
            writing: VecDeque::new(),
            closed: None,
            idle: false,
            stride: Span::from_secs(3600),
            currents: None,
            sent: Decoder::new(),
            outbound: Vec::new(),
        };
        stack.begin();
        stack
    }

    fn begin(&mut self) {
        self.idle = false;
        let sequencer = Sequencer::new(Arc::clone(&self.plan)).unwrap();
        self.act(|keeper, now| keeper.begin(sequencer, 0, now).unwrap());
    }

    /// Another run on the same sink, with a record of its own.
    pub(crate) fn take_another_run(&mut self) {
        self.entries.clear();
        self.durable = 0;
        self.writing.clear();
        self.closed = None;
        self.begin();
    }

    pub(crate) fn passed(&self) -> Span {
        self.link.now()
    }

    pub(crate) fn now(&self) -> HostTime {
        EVENING.saturating_add(self.passed())
    }

    pub(crate) fn sink(&self) -> &SimulatedSink {
        &self.link.device().sink
    }

    /// Does something to the keeper and all that follows from it.
    pub(crate) fn act(&mut self, deed: impl FnOnce(&mut Keeper, HostTime)) {
        let now = self.now();
        if let Some(keeper) = &mut self.keeper {
            deed(keeper, now);
        }
        self.settle();
    }

    fn settle(&mut self) {
        let (now, passed) = (self.now(), self.passed());
        loop {
            let Some(keeper) = &mut self.keeper else {
                return;
            };
            if let Some(effect) = keeper.poll_effect() {
                match effect {
                    Effect::Append(entry) => {
                        assert_eq!(entry.number, self.entries.len() as u64 + 1);
                        if let Some(delay) = self.disk {
                            self.writing
                                .push_back((passed.saturating_add(delay), entry.number));
                        }
                        self.entries.push(entry);
                    }
                    Effect::Closed { ending, .. } => {
                        self.idle = true;
                        self.closed = Some(ending);
                    }
                    Effect::NotTheSinkDescribed(_) | Effect::Reset(_) | Effect::OffAcknowledged => {
                    }
                }
                continue;
            }
            if self.writing.front().is_some_and(|(due, _)| *due <= passed) {
                let (_, number) = self.writing.pop_front().unwrap();
                self.durable = number;
                keeper.durable(number, now);
                continue;
            }
            self.outbound.clear();
            keeper.take_transmit(&mut self.outbound);
            break;
        }
        self.hold_to_the_record();
        let bytes = std::mem::take(&mut self.outbound);
        self.link.receive(&bytes);
        self.outbound = bytes;
    }

    /// No order but `off` goes out before its entry is durable.
    fn hold_to_the_record(&mut self) {
        let lines: Vec<HostLine> = self.sent.feed(&self.outbound).map(Result::unwrap).collect();
        if self.idle {
            return;
        }
        for line in lines {
            let HostLine::Order { order, .. } = line else {
                continue;
            };
            // A step that `off` has overtaken is sent again as a clearing that clears nothing.
            let harmless = matches!(order, Order::Clear { .. });
            let recorded = || {
                let until = usize::try_from(self.durable).unwrap();
                let durable = self.entries[..until].iter().rev();
                durable
                    .filter_map(|entry| match &entry.body {
                        Body::Order { order, .. } => Some(*order),
                        _ => None,
                    })
                    .any(|other| other == order)
            };
            assert!(
                harmless || recorded(),
                "{order:?} was sent before it was recorded"
            );
        }
    }

    /// Lets time pass until then, or until the record is complete.
    pub(crate) fn run_to(&mut self, until: Span) {
        let mut inbound = Vec::new();
        while self.closed.is_none() && self.passed() < until {
            let deadline = self.keeper.as_ref().and_then(Keeper::deadline);
            let deadline = deadline.map(|at| at.saturating_since(EVENING));
            let disk = self.writing.front().map(|(due, _)| *due);
            let stride = self.passed().saturating_add(self.stride);
            let next = [deadline, disk].into_iter().flatten();
            let next = next.fold(until.min(stride), Span::min);
            inbound.clear();
            self.link.advance(next, &mut inbound);
            if let Some(currents) = &mut self.currents {
                let current = self.link.device().sink.current_a();
                currents.push((self.link.now(), current));
            }
            self.act(|keeper, now| {
                if inbound.is_empty() {
                    keeper.tick(now);
                } else {
                    keeper.receive(&inbound, now);
                }
            });
        }
    }

    /// Lets time pass without a run.
    pub(crate) fn stand_idle(&mut self, until: Span) {
        self.closed = None;
        self.run_to(until);
    }

    /// Lets time pass until the record is complete; gives how the run ended.
    pub(crate) fn run_to_the_end(&mut self, at_most: Span) -> Ending {
        self.run_to(at_most);
        match &self.closed {
            Some(ending) => ending.clone(),
            None => panic!("not ended after {at_most}: {}", self.tale()),
        }
    }

    /// The host dies: what is not on the disk is lost.
    pub(crate) fn crash(&mut self) {
        self.keeper = None;
        self.writing.clear();
        self.entries
            .truncate(usize::try_from(self.durable).unwrap());
    }

    /// A new host takes the run up from what stands in the record.
    pub(crate) fn resume(&mut self) {
        let mut sequencer = Sequencer::new(Arc::clone(&self.plan)).unwrap();
        let mut due = VecDeque::new();
        for entry in &self.entries {
            if let Some(event) = entry.event() {
                assert!(due.is_empty());
                sequencer.handle(&event);
                due.extend(std::iter::from_fn(|| sequencer.poll_output()));
            } else if let Some(output) = entry.output() {
                assert_eq!(due.pop_front(), Some(output));
            }
        }
        let now = self.now();
        let last = self.entries.last().map_or(now, |entry| entry.at);
        let bodies = due.into_iter().map(Body::from);
        let mut bodies: Vec<Body> = bodies.collect();
        bodies.push(Body::Note(Note::Resumed {
            gap: now.saturating_since(last),
            last_number: self.durable,
        }));
        bodies.push(Body::Event(Happening::LinkLost));
        for body in bodies {
            let number = self.entries.len() as u64 + 1;
            let entry = Entry {
                number,
                at: now,
                body,
            };
            if let Some(event) = entry.event() {
                sequencer.handle(&event);
                assert_eq!(sequencer.poll_output(), None);
            }
            self.entries.push(entry);
        }
        self.durable = self.entries.len() as u64;
        self.keeper = Some(Keeper::new(self.config, 1_000));
        self.sent = Decoder::new();
        let recorded = self.durable;
        self.act(|keeper, now| keeper.begin(sequencer, recorded, now).unwrap());
    }

    /// What was found, the first naming the trip.
    pub(crate) fn crossed(&self) -> Vec<(Interlock, bool)> {
        crossed(&self.entries)
    }

    /// Everything but readings and notes, a line each.
    pub(crate) fn tale(&self) -> String {
        let lines = self.entries.iter().filter(|entry| {
            entry.reading().is_none()
                && !matches!(
                    entry.body,
                    Body::Event(Happening::Acknowledged { .. } | Happening::Edge { .. })
                )
        });
        let lines: Vec<String> = lines
            .map(|entry| {
                let at = entry.at.saturating_since(EVENING);
                format!("{} {at} {:?}", entry.number, entry.body)
            })
            .collect();
        let first = lines.len().saturating_sub(40);
        lines[first..].join("\n")
    }
}

/// The crossings in a record, in their order: which, and whether the sink acted first.
pub(crate) fn crossed(entries: &[Entry]) -> Vec<(Interlock, bool)> {
    let crossings = entries.iter().filter_map(|entry| match &entry.body {
        Body::Finding(Finding::Crossed(crossing)) => Some((crossing.interlock, crossing.by_sink)),
        _ => None,
    });
    crossings.collect()
}

/// Replays a record: every output must come out again, bit for bit, and none besides.
pub(crate) fn replays(plan: &Arc<Plan>, entries: &[Entry], ending: &Ending) {
    let recorded = entries.iter().filter_map(|entry| {
        let event = entry.event().map(Recorded::Event);
        event.or_else(|| entry.output().map(Recorded::Output))
    });
    let summary = replay(Arc::clone(plan), recorded).unwrap();
    assert_eq!(summary.unrecorded, 0);
    assert_eq!(summary.ending.as_ref(), Some(ending));
}
