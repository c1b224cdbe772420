//! Every message of the protocol as a type. One line on the wire is one value here.

use quantity::{Charge, Current, Energy, Power, Resistance, SinkTime, Span, Temperature, Voltage};
use serde::{Deserialize, Serialize};

/// The host's own number on an ask, echoed in its answer.
pub type Token = u16;

/// The number of an order within its session: 1 to 65535, then 1 again; 0 is no order.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct OrderNumber(pub u16);

/// A line from the host.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum HostLine {
    /// Begins a session; answered by the description.
    Hello { token: Token, session: u32 },
    /// Asks for the sink's time.
    Clock { token: Token },
    /// Turns the current off, whatever else is going on.
    Off { token: Token },
    /// A numbered order, executed at most once.
    Order { number: OrderNumber, order: Order },
}

/// What a host can order.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Order {
    /// Sets one of the sink's own limits.
    Limit { limit: LimitKind, persistence: Span },
    /// Longest silence of the host before the sink turns itself off.
    Deadman { interval: Span },
    /// Interval between readbacks; zero stops them.
    Readback { interval: Span },
    /// Queues a step.
    Step(Step),
    /// Drops queued steps starting at `from` or later; `SinkTime::ZERO` drops all.
    Clear { from: SinkTime },
    /// Clears a latch, if its cause is gone.
    Reset,
    /// Opens or closes the isolator relay.
    Isolator { closed: bool },
    /// Captures samples around an edge.
    Burst { at: SinkTime, before: u16, after: u16 },
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
    /// How long after its start it may last if nothing follows.
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
    Ok { number: OrderNumber },
    /// Answer to `off`.
    OffDone { token: Token },
    /// The order was not executed.
    No { number: OrderNumber, reason: ReasonRefused },
    /// The order was not the expected one.
    NoGap { number: OrderNumber, expected: OrderNumber },
    /// Answer to `clock`.
    Clock { token: Token, time: SinkTime },
    /// First line of a readback pair.
    Counters { readback: u16, counters: Counters },
    /// Second line of a readback pair; time in its low 32 bits.
    Readback { readback: u16, time_low: u32, values: Readback },
    /// A step began.
    Edge { event: u16, time: SinkTime, step: OrderNumber },
    /// The last step's hold ran out: off.
    End { event: u16, time: SinkTime },
    /// The sink turned itself off and latched.
    Trip { event: u16, time: SinkTime, cause: Cause, value: i64 },
    /// Up to four burst samples from `index` on.
    Burst { burst: u16, index: u16, len: u8, samples: [(Current, Voltage); 4] },
    /// All samples of a capture have been sent.
    BurstDone { burst: u16 },
    /// Description, first line.
    About { token: Token, protocol: u16, firmware: u32, serial: u32, reset: Reset },
    /// Description, second line.
    Front { token: Token, tick: Span, queue: u16, fastest: Span, burst: u16, abilities: Abilities },
    /// Description, third line.
    Drive { token: Token, bits: u8, full_scale: Voltage, span: u8, sense: Resistance },
    /// Description, fourth line.
    Sense { token: Token, bits: u8, current: Current, voltage: Voltage },
    /// Description, last line: the session has begun.
    Ready { token: Token, session: u32, time: SinkTime },
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
#[expect(clippy::struct_excessive_bools, reason = "four independent abilities, each yes or no")]
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
