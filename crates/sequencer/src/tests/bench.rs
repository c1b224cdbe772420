//! A scripted bench: a sink just good enough to answer orders, in front of an ideal cell.
//!
//! A test double, for the pure crate alone; the real firmware logic runs against the sequencer
//! in crate `run`. It moves from event to event, so that hours take no time, and knows the link
//! as a fixed delay.

use std::collections::VecDeque;
use std::fmt::Write as _;

use quantity::{Charge, Current, Energy, HostTime, SinkTime, Span, Temperature, Voltage};
use sequence::plan::Plan;
use wire::{
    Cause, Counters, Mode, Order, OrderId, OrderNumber, Readback, Reading, ReasonRefused,
    SinkState, Step, TemperatureReading,
};

use crate::event::{Command, Ending, Event, Finding, Happening, Output};
use crate::replay::Recorded;
use crate::{DeadlineReason, Sequencer};

/// Host time at the sink's start.
const EPOCH: i64 = 1_800_000_000_000_000;
const DELAY: Span = Span::from_millis(3);

pub(super) struct Bench {
    pub(super) sequencer: Sequencer,
    pub(super) now: SinkTime,
    /// Open-circuit voltage at no charge and what it loses per coulomb (uV).
    pub(super) emf: Voltage,
    pub(super) droop_per_coulomb: i64,
    pub(super) resistance_milliohm: i64,
    /// The source gives no more than this.
    pub(super) limit: Current,
    /// What flows besides.
    pub(super) leak: Current,
    pub(super) temperature: TemperatureReading,
    /// Time from an order to its arrival.
    pub(super) latency: Span,
    pub(super) lose_readings: bool,
    pub(super) lose_counters: bool,
    pub(super) lose_edges: bool,
    pub(super) latched: Option<Cause>,
    /// Added to what the sink's clock shows.
    pub(super) clock_shift: i64,
    /// Added to what the host's clock shows.
    pub(super) host_shift: i64,
    inbox: VecDeque<(SinkTime, OrderId, Order)>,
    queue: VecDeque<(OrderId, Step)>,
    active: Option<(OrderId, Step, SinkTime, Current)>,
    interval: Span,
    next_readback: Option<SinkTime>,
    charge: i128,
    energy: i128,
    window: Window,
    number: u16,
    lost: u16,
    pub(super) record: Vec<Recorded>,
    pub(super) ended: Option<Ending>,
    pub(super) starts: Vec<(OrderId, SinkTime)>,
    pub(super) offs: Vec<SinkTime>,
    /// Readback intervals, with the times at which they reached the sink.
    pub(super) readbacks: Vec<(SinkTime, Span)>,
}

#[derive(Default, Clone, Copy)]
struct Window {
    began: SinkTime,
    charge: i128,
    voltage: i128,
    currents: Option<(i64, i64)>,
    voltages: Option<(i64, i64)>,
}

impl Bench {
    pub(super) fn new(plan: Plan) -> Self {
        Self {
            sequencer: Sequencer::new(plan).unwrap(),
            now: SinkTime::from_micros(5_000_000),
            emf: Voltage::from_millivolts(3_700),
            droop_per_coulomb: 0,
            resistance_milliohm: 50,
            limit: Current::from_milliamperes(10_000),
            leak: Current::ZERO,
            temperature: TemperatureReading::Value(Temperature::from_whole_degrees_celsius(25)),
            latency: Span::from_millis(5),
            lose_readings: false,
            lose_counters: false,
            lose_edges: false,
            latched: None,
            clock_shift: 0,
            host_shift: 0,
            inbox: VecDeque::new(),
            queue: VecDeque::new(),
            active: None,
            interval: Span::ZERO,
            next_readback: None,
            charge: 0,
            energy: 0,
            window: Window::default(),
            number: 0,
            lost: 0,
            record: Vec::new(),
            ended: None,
            starts: Vec::new(),
            offs: Vec::new(),
            readbacks: Vec::new(),
        }
    }

    /// A bench with a connected session.
    pub(super) fn connected(plan: Plan) -> Self {
        let mut bench = Self::new(plan);
        bench.connect();
        bench
    }

    pub(super) fn connect(&mut self) {
        self.active = None;
        self.queue.clear();
        self.inbox.clear();
        self.interval = Span::ZERO;
        self.next_readback = None;
        self.happen(Happening::Connected { time: self.now });
    }

    /// The sink loses its supply and comes back.
    pub(super) fn reboot(&mut self) {
        self.active = None;
        self.queue.clear();
        (self.charge, self.energy) = (0, 0);
        self.window = Window::default();
        let again = SinkTime::from_micros(100_000);
        // The host's clock goes on.
        self.host_shift += i64::try_from(self.now.saturating_since(again).micros()).unwrap();
        self.now = again;
        self.next_readback = None;
    }

    pub(super) fn host_time(&self) -> HostTime {
        let micros = i64::try_from((self.now + DELAY).micros()).unwrap();
        HostTime::from_micros(EPOCH + self.host_shift + micros)
    }

    pub(super) fn command(&mut self, command: Command) {
        self.happen(Happening::Command(command));
    }

    /// Feeds an event and carries the outputs out.
    pub(super) fn happen(&mut self, what: Happening) {
        let at = self.host_time();
        self.happen_at(at, what);
    }

    /// Feeds an event that the host learns of so much later; the host's clock stays ahead.
    pub(super) fn happen_after(&mut self, later: Span, what: Happening) {
        self.host_shift += i64::try_from(later.micros()).unwrap();
        self.happen(what);
    }

    fn happen_at(&mut self, at: HostTime, what: Happening) {
        let event = Event { at, what };
        self.record.push(Recorded::Event(event.clone()));
        self.sequencer.handle(&event);
        let outputs: Vec<Output> = std::iter::from_fn(|| self.sequencer.poll_output()).collect();
        let mut off = false;
        for output in outputs {
            self.record.push(Recorded::Output(output.clone()));
            match output {
                Output::Order { id, order } => {
                    self.inbox.push_back((self.now + self.latency, id, order));
                }
                Output::Off => {
                    self.offs.push(self.now);
                    self.inbox.clear();
                    self.queue.clear();
                    self.active = None;
                    off = true;
                }
                Output::Finding(_) => {}
                Output::Ended(ending) => {
                    assert_eq!(self.ended.replace(ending), None, "a run ends once");
                }
            }
        }
        if off {
            self.happen(Happening::OffAcknowledged);
        }
    }

    /// Runs until the run has ended, at most for this long.
    pub(super) fn run(&mut self, at_most: Span) -> Option<Ending> {
        let stop = self.now + at_most;
        while self.ended.is_none() && self.now < stop {
            self.turn(stop);
        }
        self.ended.clone()
    }

    /// Goes on to the next thing that happens, at most to `at_most`.
    fn turn(&mut self, at_most: SinkTime) {
        let mut next = at_most;
        let arrival = self.inbox.front().map(|(at, ..)| *at);
        let start = self.queue.front().map(|(_, step)| step.start);
        let hold = self
            .active
            .filter(|_| self.queue.is_empty())
            .map(|(_, step, began, _)| began + step.hold);
        let deadline = self.sequencer.deadline().map(|(at, _)| {
            let micros =
                at.micros() - EPOCH - self.host_shift - i64::try_from(DELAY.micros()).unwrap();
            SinkTime::from_micros(u64::try_from(micros).unwrap())
        });
        for time in [arrival, start, hold, self.next_readback, deadline]
            .into_iter()
            .flatten()
        {
            next = next.min(time.max(self.now));
        }
        self.flow(next);
        if arrival == Some(next) || arrival.is_some_and(|at| at <= next) {
            let (_, id, order) = self.inbox.pop_front().unwrap();
            self.carry_out(id, order);
        } else if start.is_some_and(|at| at <= next) {
            let (id, step) = self.queue.pop_front().unwrap();
            let from = self.setpoint();
            self.active = Some((id, step, next, from));
            self.starts.push((id, next));
            if !self.lose_edges {
                self.happen(Happening::Edge {
                    time: next,
                    order: id,
                });
            }
        } else if hold.is_some_and(|at| at <= next) {
            self.active = None;
            self.happen(Happening::HoldExpired { time: next });
        } else if self.next_readback.is_some_and(|at| at <= next) {
            self.read_back();
        } else if deadline.is_some_and(|at| at <= next) {
            self.happen(Happening::TimePassed);
        }
    }

    fn carry_out(&mut self, id: OrderId, order: Order) {
        let mut refused = None;
        match order {
            Order::Limit { .. }
            | Order::Deadman { .. }
            | Order::Isolator { .. }
            | Order::Burst { .. } => {}
            Order::Readback { interval } => {
                self.readbacks.push((self.now, interval));
                self.interval = interval;
                self.window = Window {
                    began: self.now,
                    ..Window::default()
                };
                self.next_readback = Some(self.now + interval);
            }
            Order::Step(step) => {
                if self.latched.is_some() {
                    refused = Some(ReasonRefused::Latched);
                } else if step.start < self.now {
                    refused = Some(ReasonRefused::Late);
                } else if self.queue.len() >= usize::from(self.sequencer.plan().queue) {
                    refused = Some(ReasonRefused::Full);
                } else {
                    assert!(
                        self.queue
                            .back()
                            .is_none_or(|(_, last)| last.start <= step.start)
                    );
                    self.queue.push_back((id, step));
                }
            }
            Order::Clear { from } => self.queue.retain(|(_, step)| step.start < from),
            Order::Reset => self.latched = None,
        }
        match refused {
            Some(reason) => self.happen(Happening::Refused { order: id, reason }),
            None => self.happen(Happening::Acknowledged { order: id }),
        }
    }

    fn setpoint(&self) -> Current {
        let Some((_, step, began, from)) = self.active else {
            return Current::ZERO;
        };
        match step.mode {
            Mode::Current(target) => {
                let gone = i128::from(self.now.saturating_since(began).micros());
                let ramp = i128::from(step.ramp.micros());
                if gone >= ramp {
                    return target;
                }
                let (a, b) = (
                    i128::from(from.microamperes()),
                    i128::from(target.microamperes()),
                );
                Current::from_microamperes(i64::try_from(a + (b - a) * gone / ramp).unwrap())
            }
            Mode::Power(power) => power.over(self.emf).unwrap(),
            Mode::Resistance(resistance) => self.emf.over(resistance).unwrap(),
        }
    }

    fn drawn(&self) -> Current {
        self.setpoint().min(self.limit) + self.leak
    }

    fn terminal(&self, drawn: Current) -> Voltage {
        let coulombs = i64::try_from(self.charge / 1_000_000_000_000).unwrap();
        let drop = drawn.microamperes() * self.resistance_milliohm / 1000;
        Voltage::from_microvolts(self.emf.microvolts() - coulombs * self.droop_per_coulomb - drop)
    }

    /// Lets current flow up to `next`.
    fn flow(&mut self, next: SinkTime) {
        let span = i128::from(next.saturating_since(self.now).micros());
        let before = self.drawn();
        let (low, high) = (before, {
            self.now = next;
            self.drawn()
        });
        if span == 0 {
            return;
        }
        let mean = i128::from(low.microamperes() + high.microamperes()) / 2;
        let voltage = i128::from(self.terminal(low).microvolts());
        self.charge += mean * span;
        self.energy += mean * voltage / 1_000_000 * span;
        let window = &mut self.window;
        window.charge += mean * span;
        window.voltage += voltage * span;
        for level in [low, high] {
            let level_voltage = self.emf.microvolts()
                - i64::try_from(self.charge / 1_000_000_000_000).unwrap() * self.droop_per_coulomb
                - level.microamperes() * self.resistance_milliohm / 1000;
            let (current, volts) = (level.microamperes(), level_voltage);
            let (a, b) = window.currents.unwrap_or((current, current));
            window.currents = Some((a.min(current), b.max(current)));
            let (a, b) = window.voltages.unwrap_or((volts, volts));
            window.voltages = Some((a.min(volts), b.max(volts)));
        }
    }

    fn read_back(&mut self) {
        self.next_readback = Some(self.now + self.interval);
        let window = std::mem::replace(
            &mut self.window,
            Window {
                began: self.now,
                ..Window::default()
            },
        );
        self.number = if self.number == u16::MAX {
            1
        } else {
            self.number + 1
        };
        if self.lose_readings {
            self.lost += 1;
            return;
        }
        let span = i128::from(self.now.saturating_since(window.began).micros()).max(1);
        let idle = self.terminal(self.drawn()).microvolts();
        let (current_min, current_max) = window.currents.unwrap_or((0, 0));
        let (voltage_min, voltage_max) = window.voltages.unwrap_or((idle, idle));
        let mean =
            |sum: i128, low: i64, high: i64| i64::try_from(sum / span).unwrap().clamp(low, high);
        let saturated = self.setpoint() > self.limit;
        let state = match (self.latched, self.active) {
            (Some(cause), _) => SinkState::Latched(cause),
            (None, Some(_)) if saturated => SinkState::Saturated,
            (None, Some((_, step, ..))) if step.mode != Mode::Current(Current::ZERO) => {
                SinkState::On
            }
            (None, _) => SinkState::Off,
        };
        let time = SinkTime::from_micros(self.now.micros().strict_add_signed(self.clock_shift));
        let micro = |value: i128| i64::try_from(value / 1_000_000).unwrap();
        let counters = Counters {
            time,
            charge: Charge::from_microcoulombs(micro(self.charge)),
            energy: Energy::from_microjoules(micro(self.energy)),
            step: OrderNumber(0),
            queued: 0,
            damaged: 0,
        };
        let values = Readback {
            current: Current::from_microamperes(mean(window.charge, current_min, current_max)),
            current_min: Current::from_microamperes(current_min),
            current_max: Current::from_microamperes(current_max),
            voltage: Voltage::from_microvolts(mean(window.voltage, voltage_min, voltage_max)),
            voltage_min: Voltage::from_microvolts(voltage_min),
            voltage_max: Voltage::from_microvolts(voltage_max),
            temperature: self.temperature,
            state,
        };
        let reading = Reading {
            readback: self.number,
            time,
            values,
            counters: (!self.lose_counters).then_some(counters),
            lost: std::mem::take(&mut self.lost),
        };
        self.happen(Happening::Reading(reading));
    }

    /// What came out, one line each, without the setup; times since the first step.
    pub(super) fn chronicle(&self) -> String {
        let mut text = String::new();
        let zero = self
            .starts
            .first()
            .map_or(SinkTime::ZERO, |(_, time)| *time);
        let since = |time: SinkTime| {
            let micros = i128::from(time.micros()) - i128::from(zero.micros());
            format!(
                "{}.{:03}",
                micros / 1_000_000,
                (micros % 1_000_000).abs() / 1000
            )
        };
        for recorded in &self.record {
            let Recorded::Output(output) = recorded else {
                continue;
            };
            match output {
                Output::Order {
                    order: Order::Step(step),
                    ..
                } => {
                    let mode = match step.mode {
                        Mode::Current(current) => current.to_string(),
                        Mode::Power(power) => power.to_string(),
                        Mode::Resistance(resistance) => resistance.to_string(),
                    };
                    writeln!(
                        text,
                        "step {mode} at {} ramp {} hold {}",
                        since(step.start),
                        step.ramp,
                        step.hold
                    )
                }
                Output::Order {
                    order: Order::Limit { .. } | Order::Deadman { .. },
                    ..
                } => Ok(()),
                Output::Order { order, .. } => writeln!(text, "{order:?}"),
                Output::Off => writeln!(text, "off"),
                Output::Finding(Finding::StepBegan { op, time }) => {
                    writeln!(text, "  began {op} at {}", since(*time))
                }
                Output::Finding(Finding::StepEnded { op, time, by }) => {
                    writeln!(text, "  ended {op} at {} by {by:?}", since(*time))
                }
                Output::Finding(Finding::Crossed(crossing)) => writeln!(
                    text,
                    "  crossed {:?} {} against {}{}",
                    crossing.interlock,
                    crossing.value,
                    crossing.threshold,
                    if crossing.by_sink {
                        ", by the sink"
                    } else {
                        ""
                    }
                ),
                Output::Finding(finding) => writeln!(text, "  {finding:?}"),
                Output::Ended(ending) => writeln!(text, "{ending:?}"),
            }
            .unwrap();
        }
        text
    }

    /// The latest reading that came.
    pub(super) fn latest_reading(&self) -> Reading {
        let reading = |recorded: &Recorded| match recorded {
            Recorded::Event(Event {
                what: Happening::Reading(reading),
                ..
            }) => Some(*reading),
            Recorded::Event(_) | Recorded::Output(_) => None,
        };
        self.record.iter().rev().find_map(reading).unwrap()
    }

    /// The reason of the next deadline.
    pub(super) fn deadline_reason(&self) -> Option<DeadlineReason> {
        self.sequencer.deadline().map(|(_, reason)| reason)
    }
}
