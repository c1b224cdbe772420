//! Every message of the protocol as a type. One line on the wire is one value here.

use quantity::{Charge, Current, Energy, Power, Resistance, SinkTime, Span, Temperature, Voltage};
use serde::{Deserialize, Serialize};

/// The host's own number on an ask, echoed in its answer.
pub type Token = u16;

/// The number of an order within its session: 1 to 65535, then 1 again; 0 is no order.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct OrderNumber(pub u16);

impl OrderNumber {
    /// No order: before the first step, and in the answer to a line without a readable number.
    pub const NONE: Self = Self(0);
    /// The first order of every session.
    pub const FIRST: Self = Self(1);

    /// The number that follows: 65535 is followed by 1, and no order by the first.
    #[must_use]
    pub const fn next(self) -> Self {
        match self.0.checked_add(1) {
            Some(number) => Self(number),
            None => Self::FIRST,
        }
    }
}

/// A line from the host.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum HostLine {
    /// Begins a session; answered by the description.
    Hello {
        /// Echoed in each line of the description.
        token: Token,
        /// The host's number for the session, never 0.
        session: u32,
    },
    /// Asks for the sink's time.
    Clock {
        /// Echoed in the answer.
        token: Token,
    },
    /// Turns the current off, whatever else is going on.
    Off {
        /// Echoed in the answer.
        token: Token,
    },
    /// A numbered order, executed at most once.
    Order {
        /// Its place in the session.
        number: OrderNumber,
        /// What is ordered.
        order: Order,
    },
}

/// What a host can order.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Order {
    /// Sets one of the sink's own limits.
    Limit {
        /// Which one, with its value.
        limit: LimitKind,
        /// How long every sample must cross it; zero: one sample is enough. At most 60 s.
        persistence: Span,
    },
    /// Longest silence of the host before the sink turns itself off.
    Deadman {
        /// 100 ms to 10 s.
        interval: Span,
    },
    /// Interval between readbacks; zero stops them.
    Readback {
        /// At most an hour, and not below the fastest the sink states.
        interval: Span,
    },
    /// Queues a step.
    Step(Step),
    /// Drops queued steps starting at `from` or later; `SinkTime::ZERO` drops all.
    Clear {
        /// The earliest start that is dropped.
        from: SinkTime,
    },
    /// Clears a latch, if its cause is gone.
    Reset,
    /// Opens or closes the isolator relay.
    Isolator {
        /// True closes it.
        closed: bool,
    },
    /// Captures samples around an edge.
    Burst {
        /// Sink time of the edge.
        at: SinkTime,
        /// Samples kept from before it.
        before: u16,
        /// Samples taken from it on.
        after: u16,
    },
}

/// A step in the sink's queue.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Step {
    /// What is held, and its target, nominal.
    pub mode: Mode,
    /// Sink time at which it begins; `SinkTime::ZERO` means at once.
    pub start: SinkTime,
    /// Time over which the setpoint moves in a straight line to the target.
    pub ramp: Span,
    /// How long after its start it may last if nothing follows; never zero.
    pub hold: Span,
}

/// What a step holds constant, with its target.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Mode {
    /// Constant current; zero is a rest.
    Current(Current),
    /// Constant power, from the sink's own voltage sample.
    Power(Power),
    /// Constant resistance, likewise.
    Resistance(Resistance),
}

/// One of the sink's own limits with its value, nominal.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum LimitKind {
    /// Largest measured current.
    Current(Current),
    /// Largest measured power.
    Power(Power),
    /// Largest measured voltage.
    VoltageHigh(Voltage),
    /// Least measured voltage while on.
    VoltageLow(Voltage),
    /// Hottest heat sink.
    Temperature(Temperature),
    /// Largest measured current above the setpoint: not releasing.
    Excess(Current),
}

/// A line from the sink.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum SinkLine {
    /// The order was executed.
    Ok {
        /// The order's number.
        number: OrderNumber,
    },
    /// Answer to `off`.
    OffDone {
        /// The ask's token.
        token: Token,
    },
    /// The order was not executed.
    No {
        /// The order's number; 0 answers a line that bore no readable order number.
        number: OrderNumber,
        /// Why not.
        reason: ReasonRefused,
    },
    /// The order was not the expected one.
    NoGap {
        /// The order's number.
        number: OrderNumber,
        /// The number the sink expects next.
        expected: OrderNumber,
    },
    /// Answer to `clock`.
    Clock {
        /// The ask's token.
        token: Token,
        /// Sink time at which the ask was handled.
        time: SinkTime,
    },
    /// First line of a readback pair.
    Counters {
        /// Counts readbacks, 1 to 65535, then 1 again.
        readback: u16,
        /// What it carries.
        counters: Counters,
    },
    /// Second line of a readback pair; time in its low 32 bits.
    Readback {
        /// Counts readbacks, the same as in the pair's first line.
        readback: u16,
        /// Low 32 bits of the sink time in the pair's first line, in microseconds.
        time_low: u32,
        /// What it carries.
        values: Readback,
    },
    /// A step began.
    Edge {
        /// Counts events, 1 to 65535, then 1 again.
        event: u16,
        /// Sink time of the edge.
        time: SinkTime,
        /// Number of the order that queued the step.
        step: OrderNumber,
    },
    /// The last step's hold ran out: off.
    End {
        /// Counts events.
        event: u16,
        /// Sink time at which the current went off.
        time: SinkTime,
    },
    /// The sink turned itself off and latched.
    Trip {
        /// Counts events.
        event: u16,
        /// Sink time at which the current went off.
        time: SinkTime,
        /// Why.
        cause: Cause,
        /// What was measured, in the unit of the cause.
        value: i64,
    },
    /// Up to four burst samples from `index` on.
    Burst {
        /// Counts captures, 1 to 65535, then 1 again.
        burst: u16,
        /// Index of the first of these samples within the capture, from 0.
        index: u16,
        /// How many of `samples` are meant, 1 to 4; the others are zero.
        len: u8,
        /// Current and voltage of each sample.
        samples: [(Current, Voltage); 4],
    },
    /// All samples of a capture have been sent.
    BurstDone {
        /// Counts captures.
        burst: u16,
    },
    /// Description, first line.
    About {
        /// The ask's token.
        token: Token,
        /// Protocol version the sink speaks.
        protocol: u16,
        /// Firmware version: major * 10000 + minor * 100 + patch.
        firmware: u32,
        /// Serial number.
        serial: u32,
        /// Why the sink last started.
        reset: Reset,
    },
    /// Description, second line.
    Front {
        /// The ask's token.
        token: Token,
        /// Time between samples.
        tick: Span,
        /// Steps the queue holds.
        queue: u16,
        /// Shortest readback interval.
        fastest: Span,
        /// Samples a burst can hold; 0: none.
        burst: u16,
        /// What it can do beyond constant current.
        abilities: Abilities,
    },
    /// Description, third line.
    Drive {
        /// The ask's token.
        token: Token,
        /// Bits of the converter that sets.
        bits: u8,
        /// Its full scale.
        full_scale: Voltage,
        /// 0: a code is full scale / 2^bits; 1: full scale / (2^bits - 1).
        span: u8,
        /// Sense resistor.
        sense: Resistance,
    },
    /// Description, fourth line.
    Sense {
        /// The ask's token.
        token: Token,
        /// Bits of the converter that reads.
        bits: u8,
        /// Current at its full scale.
        current: Current,
        /// Voltage at its full scale.
        voltage: Voltage,
    },
    /// Description, last line: the session has begun.
    Ready {
        /// The ask's token.
        token: Token,
        /// The session that has begun.
        session: u32,
        /// Sink time.
        time: SinkTime,
    },
}

/// The counters of a readback pair.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Counters {
    /// Sink time of the readback.
    pub time: SinkTime,
    /// Charge measured since power-up.
    pub charge: Charge,
    /// Energy measured since power-up.
    pub energy: Energy,
    /// Order number of the step that runs or ran last; 0: none.
    pub step: OrderNumber,
    /// Steps in the queue that have not begun.
    pub queued: u16,
    /// Damaged lines since power-up, wrapping.
    pub damaged: u16,
}

/// The values of a readback pair, over the samples since the previous one.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Readback {
    /// Mean current.
    pub current: Current,
    /// Least current.
    pub current_min: Current,
    /// Largest current.
    pub current_max: Current,
    /// Mean voltage.
    pub voltage: Voltage,
    /// Least voltage.
    pub voltage_min: Voltage,
    /// Largest voltage.
    pub voltage_max: Voltage,
    /// Heat sink temperature, or what is wrong with its sensor.
    pub temperature: TemperatureReading,
    /// What the sink is doing.
    pub state: SinkState,
}

/// A temperature, or the named fault of its sensor: never a number that means nothing.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum TemperatureReading {
    /// The sensor's value.
    Value(Temperature),
    /// The sensor or its wire is open.
    Open,
    /// The sensor or its wire is shorted.
    Short,
}

/// What the sink is doing.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum SinkState {
    /// Gate off.
    Off,
    /// A step is in progress and followed.
    On,
    /// A step is in progress but the loop is out of headroom.
    Saturated,
    /// Off by the sink's own decision, until reset.
    Latched(Cause),
}

/// Why the sink latched.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Cause {
    /// Over-current.
    Current,
    /// Over-power.
    Power,
    /// Over-voltage.
    VoltageHigh,
    /// Undervoltage.
    VoltageLow,
    /// Over-temperature.
    Temperature,
    /// Current above the setpoint: not releasing.
    Excess,
    /// Sensor open, short, frozen or impossible.
    Sensor,
    /// No valid host line for the agreed interval.
    Deadman,
    /// The sink's watchdog fired.
    Watchdog,
}

/// Why an order was not executed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum ReasonRefused {
    /// No session has begun.
    Session,
    /// Unknown kind or word.
    Unknown,
    /// A value or the number of fields is out of range.
    Range,
    /// The target is above a limit.
    Limit,
    /// Not all limits are set.
    Unready,
    /// Queue or burst memory full.
    Full,
    /// The start lies in the past.
    Late,
    /// The sink is latched.
    Latched,
    /// The cause of the latch stands.
    Cause,
    /// The sink has no such ability.
    Ability,
}

/// Why the sink last started.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Reset {
    /// Power applied.
    Power,
    /// Reset pin.
    Pin,
    /// Watchdog.
    Watchdog,
    /// Software's own request.
    Software,
    /// The port cannot tell.
    Unknown,
}

/// What a sink can do beyond constant current.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "four independent abilities, each yes or no"
)]
pub struct Abilities {
    /// Constant power steps.
    pub power: bool,
    /// Constant resistance steps.
    pub resistance: bool,
    /// Burst capture.
    pub burst: bool,
    /// Isolator relay.
    pub isolator: bool,
}

/// The whole description, gathered from its five lines.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Description {
    /// Protocol version.
    pub protocol: u16,
    /// Firmware version: major * 10000 + minor * 100 + patch.
    pub firmware: u32,
    /// Serial number.
    pub serial: u32,
    /// Why it last started.
    pub reset: Reset,
    /// Time between samples.
    pub tick: Span,
    /// Steps the queue holds.
    pub queue: u16,
    /// Shortest readback interval.
    pub fastest_readback: Span,
    /// Samples a burst can hold.
    pub burst: u16,
    /// What it can do beyond constant current.
    pub abilities: Abilities,
    /// Bits of the converter that sets.
    pub drive_bits: u8,
    /// Its full scale.
    pub drive_full_scale: Voltage,
    /// Whether a code is full scale over 2^N (false) or over 2^N - 1 (true).
    pub drive_spans_full_scale: bool,
    /// Sense resistor.
    pub sense_resistor: Resistance,
    /// Bits of the converter that reads.
    pub sense_bits: u8,
    /// Current at its full scale.
    pub sense_current: Current,
    /// Voltage at its full scale.
    pub sense_voltage: Voltage,
}

impl Description {
    /// What a description is gathered into: no sink at all.
    pub(crate) const BLANK: Self = Self {
        protocol: 0,
        firmware: 0,
        serial: 0,
        reset: Reset::Unknown,
        tick: Span::ZERO,
        queue: 0,
        fastest_readback: Span::ZERO,
        burst: 0,
        abilities: Abilities {
            power: false,
            resistance: false,
            burst: false,
            isolator: false,
        },
        drive_bits: 0,
        drive_full_scale: Voltage::ZERO,
        drive_spans_full_scale: false,
        sense_resistor: Resistance::ZERO,
        sense_bits: 0,
        sense_current: Current::ZERO,
        sense_voltage: Voltage::ZERO,
    };
}
