//! What can break in a simulated sink, and when.

use quantity::{Span, Temperature, Voltage};
use serde::{Deserialize, Serialize};
use wire::Reset;

/// Something that happens to the hardware at a true time.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Fault {
    /// When, from the making of the device; it acts from the next tick on.
    #[serde(with = "quantity::text")]
    pub at: Span,
    /// What.
    pub what: Happening,
}

/// What happens.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Happening {
    /// The MOSFET fails short: no firmware can stop the current, only an isolator can.
    MosfetShorted,
    /// The MOSFET fails open, or the circuit is cut.
    MosfetOpen,
    /// The loop loses its sense connection and drives the gate to its stop.
    FeedbackLost,
    /// The voltage sense wire comes off: the converter reads zero.
    VoltageSenseLost,
    /// The temperature sensor's wire breaks.
    TemperatureOpen,
    /// The temperature sensor shorts.
    TemperatureShort,
    /// The temperature reading stays what it is.
    TemperatureStuck,
    /// The current reading stays what it is.
    CurrentStuck,
    /// The voltage reading stays what it is.
    VoltageStuck,
    /// All of the above are as new again.
    Mended,
    /// The oscillator changes its rate: parts in 10^9 fast.
    OscillatorRate(i32),
    /// The sink's clock jumps ahead.
    OscillatorJump(#[serde(with = "quantity::text")] Span),
    /// The supply is set to another voltage; a cell takes no notice.
    SupplyVoltage(#[serde(with = "quantity::text")] Voltage),
    /// The air around the heat sink changes.
    Ambient(#[serde(with = "quantity::text")] Temperature),
    /// The processor starts anew; to the firmware, for this reason.
    Restart(Reset),
    /// The processor stops and its outputs stay, until a restart.
    Hang,
}
