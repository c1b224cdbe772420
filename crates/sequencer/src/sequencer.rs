//! The run: one event in, any number of outputs out.

mod burst;
mod hand;
mod pause;
mod progress;
mod queue;
mod reading;
mod session;

use std::collections::VecDeque;
use std::sync::Arc;

use quantity::{HostTime, SinkTime, Span, Voltage};
use sequence::plan::Plan;
use wire::{Cause, Order, OrderId, ReasonRefused};

use crate::account::Account;
use crate::alignment::Alignment;
use crate::course::{Course, Suspension};
use crate::event::{
    Command, Crossing, Ending, Event, Finding, Happening, Interlock, Output, StepEnd,
};
use crate::guard::{CURRENT_AT_STOP, Crossings, Guard, beyond_any_setpoint, interlock_of, micros};
use crate::orders::Limits;
use crate::phase::Phase;
use crate::program::{PlanError, Program};

/// Time between the reading that lets a run begin and its first step.
pub(crate) const LEAD: Span = Span::from_millis(300);
/// Time between a reading that meets a condition and the step that follows: the order must be on
/// stable storage and on the sink before its start.
pub(crate) const REACTION: Span = Span::from_millis(200);
/// How often the time above is doubled at most while order after order comes too late: 12.8 s.
const DOUBLINGS: u32 = 6;
/// Longest time in which a session must accept the setup.
pub(crate) const SETUP: Span = Span::from_secs(10);
/// Time after `off` at which no current may flow any more: orders, lines and samples are past.
pub(crate) const OFF_BY: Span = Span::from_millis(500);
/// Places in the sink's queue that are left free, for what is on the way.
const QUEUE_MARGIN: u16 = 2;

/// Why the sequencer wants to be told of the passing of time.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum DeadlineReason {
    /// No valid readback by then trips.
    Silence,
    /// The longest run is over by then.
    Time,
    /// The sink must have accepted its limits by then.
    Setup,
}

/// A run as a state machine. See the crate's head for the contract.
#[derive(Debug, Clone)]
pub struct Sequencer {
    pub(crate) program: Program,
    pub(crate) limits: Limits,
    pub(crate) phase: Phase,
    out: VecDeque<Output>,
    orders: u64,
    pub(crate) course: Course,
    pub(crate) suspension: Option<Suspension>,
    pub(crate) guard: Guard,
    pub(crate) account: Account,
    pub(crate) alignment: Alignment,
    /// Sink time of the latest reading of this session.
    pub(crate) previous: Option<SinkTime>,
    /// Sink time of the latest reading of any session on this clock.
    pub(crate) latest: SinkTime,
    pub(crate) latest_at: HostTime,
    pub(crate) voltage: Voltage,
    /// Steps up to here have begun, by the sink's word.
    pub(crate) begun_through: SinkTime,
    /// Steps refused as too late since one last began.
    late: u32,
    /// Readback interval last ordered.
    pub(crate) readback: Span,
    /// The sink begins its window anew by an order that no reading has followed yet.
    new_window: Option<queue::NewWindow>,
    pub(crate) bursts: burst::Bursts,
    /// What the hand wants and the sink has not been told yet.
    hand: Option<hand::Wanted>,
    /// A person or a script wants the run held: it is, or will be instead of beginning.
    pub(crate) held: bool,
    /// The sink has started anew while the link was gone.
    pub(crate) rebooted: bool,
    /// Host time of the latest event, and the time under way until then.
    pub(crate) now: HostTime,
    pub(crate) elapsed: Span,
}

impl Sequencer {
    /// A run of this plan that waits for its sink.
    ///
    /// # Errors
    /// [`PlanError`] for a plan whose structure or targets cannot be run.
    pub fn new(plan: impl Into<Arc<Plan>>) -> Result<Self, PlanError> {
        let plan = plan.into();
        let limits = Limits::new(&plan);
        let program = Program::new(plan, &limits)?;
        Ok(Self {
            readback: program.plan().readback,
            new_window: None,
            program,
            limits,
            phase: Phase::Waiting,
            out: VecDeque::new(),
            orders: 0,
            course: Course::default(),
            suspension: None,
            guard: Guard::default(),
            account: Account::default(),
            alignment: Alignment::default(),
            previous: None,
            latest: SinkTime::ZERO,
            latest_at: HostTime::ZERO,
            voltage: Voltage::ZERO,
            begun_through: SinkTime::ZERO,
            late: 0,
            bursts: burst::Bursts::default(),
            hand: None,
            held: false,
            rebooted: false,
            now: HostTime::MIN,
            elapsed: Span::ZERO,
        })
    }

    /// The plan that is run.
    pub fn plan(&self) -> &Plan {
        self.program.plan()
    }

    /// How the run ended; `None` while it has not.
    pub fn ending(&self) -> Option<&Ending> {
        match &self.phase {
            Phase::End(ending) => Some(ending),
            Phase::Waiting
            | Phase::Preparation(_)
            | Phase::Progress
            | Phase::Pause(_)
            | Phase::Interruption { .. } => None,
        }
    }

    /// Takes one event in. Drain [`Self::poll_output`] before the next.
    pub fn handle(&mut self, event: &Event) {
        debug_assert!(
            self.out.is_empty(),
            "outputs must be drained before the next event"
        );
        if let Phase::End(_) = self.phase {
            self.handle_after_the_end(event);
            return;
        }
        if self.pass_time(event) {
            return;
        }
        match &event.what {
            Happening::Connected { time } => self.on_connected(*time),
            Happening::Reading(reading) => self.on_reading(reading),
            Happening::Edge { time, order } => self.on_edge(*time, *order),
            Happening::HoldExpired { time } => self.on_hold_expired(*time),
            Happening::SinkTripped { cause, value, .. } => self.on_sink_tripped(*cause, *value),
            Happening::Acknowledged { order } => self.on_acknowledged(*order),
            Happening::Refused { order, reason } => self.on_refused(*order, *reason),
            Happening::OffAcknowledged => self.on_off_acknowledged(),
            Happening::LinkLost => self.on_link_lost(),
            Happening::SinkRebooted => self.on_rebooted(),
            Happening::ClockOff { by } => {
                let threshold = self.plan().interlocks.clock;
                self.trip_by(Interlock::Clock, micros(*by), micros(threshold));
            }
            Happening::AnotherSink => self.trip_by(Interlock::Refusal, 0, 0),
            Happening::RecordFailed => self.trip_by(Interlock::Record, 1, 0),
            Happening::Command(command) => self.on_command(command),
            Happening::TimePassed => {}
        }
    }

    /// The next output; `None` when all have been taken.
    pub fn poll_output(&mut self) -> Option<Output> {
        self.out.pop_front()
    }

    /// When the sequencer next wants a [`Happening::TimePassed`], at the latest, and why.
    pub fn deadline(&self) -> Option<(HostTime, DeadlineReason)> {
        let setup = match &self.phase {
            Phase::Preparation(preparation) => Some((
                preparation.since.saturating_add(SETUP),
                DeadlineReason::Setup,
            )),
            Phase::Waiting
            | Phase::Progress
            | Phase::Pause(_)
            | Phase::Interruption { .. }
            | Phase::End(_) => None,
        };
        let silence = self.silent_since().map(|since| {
            (
                since.saturating_add(self.plan().interlocks.silence),
                DeadlineReason::Silence,
            )
        });
        let time = self
            .plan()
            .interlocks
            .time
            .filter(|_| self.phase.is_under_way())
            .map(|limit| {
                let left = limit.saturating_sub(self.elapsed);
                (self.now.saturating_add(left), DeadlineReason::Time)
            });
        [silence, time, setup]
            .into_iter()
            .flatten()
            .min_by_key(|(at, _)| *at)
    }

    /// From when on silence counts; `None` where nothing is to be heard.
    fn silent_since(&self) -> Option<HostTime> {
        match &self.phase {
            Phase::Preparation(preparation) => Some(preparation.since.max(self.latest_at)),
            Phase::Progress | Phase::Pause(_) => Some(self.latest_at),
            Phase::Interruption { since } => Some(*since),
            Phase::Waiting | Phase::End(_) => None,
        }
    }

    /// Lets time pass up to the event; returns whether that has ended the run.
    ///
    /// The time until a lost link or a new session is not judged: after a crash of the host it
    /// is the time in which there was no host.
    fn pass_time(&mut self, event: &Event) -> bool {
        let passed = event.at.saturating_since(self.now);
        let at = event.at.max(self.now);
        self.now = at;
        match event.what {
            Happening::LinkLost | Happening::Connected { .. } => return false,
            Happening::Reading(_)
            | Happening::Edge { .. }
            | Happening::HoldExpired { .. }
            | Happening::SinkTripped { .. }
            | Happening::Acknowledged { .. }
            | Happening::Refused { .. }
            | Happening::OffAcknowledged
            | Happening::SinkRebooted
            | Happening::ClockOff { .. }
            | Happening::AnotherSink
            | Happening::RecordFailed
            | Happening::Command(_)
            | Happening::TimePassed => {}
        }
        let armed = self.plan().interlocks;
        let mut crossings = Crossings::default();
        if let Some(since) = self.silent_since() {
            let silent = at.saturating_since(since);
            if silent >= armed.silence {
                crossings.add(crossing(
                    Interlock::Silence,
                    micros(silent),
                    micros(armed.silence),
                ));
            }
        }
        if self.phase.is_under_way() {
            self.elapsed = self.elapsed.saturating_add(passed);
            if let Some(limit) = armed.time.filter(|limit| self.elapsed >= *limit) {
                crossings.add(crossing(
                    Interlock::Time,
                    micros(self.elapsed),
                    micros(limit),
                ));
            }
        }
        if let Phase::Preparation(preparation) = &self.phase {
            let waited = at.saturating_since(preparation.since);
            if waited >= SETUP {
                crossings.add(crossing(Interlock::Refusal, micros(waited), micros(SETUP)));
            }
        }
        if crossings.is_empty() {
            return false;
        }
        self.trip(&crossings);
        true
    }

    fn on_command(&mut self, command: &Command) {
        match command {
            Command::Stop => {
                self.off();
                self.end(Ending::Stopped);
            }
            Command::Hold => self.hold(),
            Command::Continue => self.ask_to_go_on(),
            Command::Setpoint { setpoint, interval } => self.set_by_hand(*setpoint, *interval),
        }
    }

    fn on_sink_tripped(&mut self, cause: Cause, value: i64) {
        let waits_for_link = match &self.phase {
            Phase::Interruption { .. } => true,
            Phase::Preparation(preparation) => preparation.again,
            Phase::Waiting | Phase::Progress | Phase::Pause(_) | Phase::End(_) => false,
        };
        if waits_for_link && cause == Cause::Deadman {
            // The sink turned itself off because the host was gone: that is why it is resumed.
            return;
        }
        self.trip_by_sink(cause, self.true_value(cause, value));
    }

    /// The sink's own value is nominal.
    fn true_value(&self, cause: Cause, value: i64) -> i64 {
        let correction = &self.plan().correction;
        match cause {
            Cause::Current => correction
                .current_from_readback(quantity::Current::from_microamperes(value))
                .microamperes(),
            Cause::VoltageHigh | Cause::VoltageLow => correction
                .terminal_voltage(Voltage::from_microvolts(value))
                .microvolts(),
            Cause::Power
            | Cause::Temperature
            | Cause::Excess
            | Cause::Sensor
            | Cause::Deadman
            | Cause::Watchdog => value,
        }
    }

    pub(crate) fn trip_by_sink(&mut self, cause: Cause, value: i64) {
        let (interlock, threshold) = interlock_of(cause, self.plan());
        let mut crossings = Crossings::default();
        crossings.add(Crossing {
            interlock,
            value,
            threshold,
            by_sink: true,
        });
        if cause == Cause::Sensor && value == CURRENT_AT_STOP {
            crossings.add_some(beyond_any_setpoint(self.plan()));
        }
        self.trip(&crossings);
    }

    pub(crate) fn trip_by(&mut self, interlock: Interlock, value: i64, threshold: i64) {
        let mut crossings = Crossings::default();
        crossings.add(crossing(interlock, value, threshold));
        self.trip(&crossings);
    }

    /// Off first; then what crossed, the first in the table's order naming the trip.
    pub(crate) fn trip(&mut self, crossings: &Crossings) {
        self.off();
        let mut first = None;
        for crossing in crossings.iter() {
            first.get_or_insert(crossing.interlock);
            self.push(Output::Finding(Finding::Crossed(crossing)));
        }
        self.end(Ending::Tripped(first.unwrap_or(Interlock::Refusal)));
    }

    /// Ends the run; `Off` is out already.
    pub(crate) fn end(&mut self, ending: Ending) {
        if let Some(running) = self.course.running.take_if(|running| !running.ended) {
            let time = self.latest.max(running.since);
            let op = running.step.slot.op;
            self.push(Output::Finding(Finding::StepEnded {
                op,
                time,
                by: StepEnd::Run,
            }));
        }
        self.course = Course::default();
        self.suspension = None;
        self.enter(Phase::End(ending.clone()));
        self.push(Output::Ended(ending));
    }

    /// After the end only `off` comes out: once more if the sink still says that it is on.
    fn handle_after_the_end(&mut self, event: &Event) {
        if let Happening::Reading(reading) = &event.what {
            let on = match reading.values.state {
                wire::SinkState::On | wire::SinkState::Saturated => true,
                wire::SinkState::Off | wire::SinkState::Latched(_) => false,
            };
            if on && event.at.saturating_since(self.now) >= OFF_BY {
                self.off();
                self.now = event.at;
            }
        }
    }

    /// The one place where the phase changes.
    pub(crate) fn enter(&mut self, next: Phase) {
        assert!(
            self.phase.may_become(&next),
            "a run cannot go from {:?} to {:?}",
            self.phase,
            next
        );
        self.phase = next;
    }

    pub(crate) fn push(&mut self, output: Output) {
        self.out.push_back(output);
    }

    /// Off waits for nothing, not even for what the same event has brought before it.
    pub(crate) fn off(&mut self) {
        let overtaken = self
            .out
            .iter()
            .any(|output| matches!(output, Output::Order { .. }));
        assert!(
            !overtaken,
            "an order and then off in one event: the order would come after it"
        );
        self.out.push_front(Output::Off);
    }

    pub(crate) fn find(&mut self, finding: Finding) {
        self.push(Output::Finding(finding));
    }

    /// Numbers an order and sends it out.
    pub(crate) fn order(&mut self, order: Order) -> OrderId {
        self.orders += 1;
        let id = OrderId(self.orders);
        self.push(Output::Order { id, order });
        id
    }

    /// The sink's time now, at least, from what has been heard of it.
    pub(crate) fn sink_now(&self) -> SinkTime {
        self.alignment
            .sink_time(self.now)
            .unwrap_or(self.latest)
            .max(self.latest)
    }

    /// Time left to an order that is given now, to reach the sink before its step is due.
    ///
    /// Doubled with each order in turn that came too late: behind a disk or a link that always
    /// needs longer than [`REACTION`], a step would else be put off for ever.
    pub(crate) fn reaction(&self) -> Span {
        let factor = 1_i64 << self.late.min(DOUBLINGS);
        REACTION.checked_mul_int(factor).unwrap_or(REACTION)
    }

    /// Steps that may wait in the sink's queue.
    pub(crate) fn capacity(&self) -> usize {
        usize::from(self.plan().queue.saturating_sub(QUEUE_MARGIN).max(1))
    }

    fn on_refused(&mut self, order: OrderId, reason: ReasonRefused) {
        if self.bursts.refused(order) {
            if let Some(op) = self.bursts.missed() {
                self.find(Finding::BurstMissed { op });
            }
            return;
        }
        if reason == ReasonRefused::Late && self.phase == Phase::Progress {
            self.reschedule_refused(order);
            return;
        }
        match &self.phase {
            // Refusals of what has been dropped since, or of a session that is gone.
            Phase::Waiting | Phase::Interruption { .. } | Phase::Pause(_) => {}
            Phase::Preparation(_) | Phase::Progress | Phase::End(_) => {
                let number = i64::try_from(order.0).unwrap_or(i64::MAX);
                self.trip_by(Interlock::Refusal, number, 0);
            }
        }
    }
}

pub(crate) fn crossing(interlock: Interlock, value: i64, threshold: i64) -> Crossing {
    Crossing {
        interlock,
        value,
        threshold,
        by_sink: false,
    }
}
