//! Orders as people read them, in logs and on the command line.
//!
//! Invariant: quantities are exact; sink times are cut to milliseconds, and what is plain (no
//! ramp, no persistence) is left out. Nothing reads this text back.

use core::fmt;

use quantity::{SinkTime, Span};

use crate::message::{LimitKind, Mode, Order, Step};

/// Sink time in seconds with three decimals, rounded down: enough for the eye.
struct Seconds(SinkTime);

impl fmt::Display for Seconds {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let micros = self.0.micros();
        write!(
            f,
            "{}.{:03} s",
            micros / 1_000_000,
            micros % 1_000_000 / 1_000
        )
    }
}

impl fmt::Display for Mode {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Current(current) if *current == quantity::Current::ZERO => f.write_str("rest"),
            Self::Current(current) => current.fmt(f),
            Self::Power(power) => power.fmt(f),
            Self::Resistance(resistance) => resistance.fmt(f),
        }
    }
}

impl fmt::Display for LimitKind {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Current(current) => write!(f, "current above {current}"),
            Self::Power(power) => write!(f, "power above {power}"),
            Self::VoltageHigh(voltage) => write!(f, "voltage above {voltage}"),
            Self::VoltageLow(voltage) => write!(f, "voltage below {voltage}"),
            Self::Temperature(temperature) => write!(f, "temperature above {temperature}"),
            Self::Excess(current) => write!(f, "current above the setpoint by {current}"),
        }
    }
}

impl fmt::Display for Step {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.mode)?;
        if self.start == SinkTime::ZERO {
            f.write_str(" at once")?;
        } else {
            write!(f, " from {}", Seconds(self.start))?;
        }
        if self.ramp != Span::ZERO {
            write!(f, ", ramp {}", self.ramp)?;
        }
        write!(f, ", hold {}", self.hold)
    }
}

impl fmt::Display for Order {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.kind())?;
        match self {
            Self::Limit { limit, persistence } => {
                write!(f, ": {limit}")?;
                if *persistence != Span::ZERO {
                    write!(f, " for {persistence}")?;
                }
                Ok(())
            }
            Self::Deadman { interval } => write!(f, ": {interval}"),
            Self::Readback { interval } if *interval == Span::ZERO => f.write_str(": stopped"),
            Self::Readback { interval } => write!(f, ": every {interval}"),
            Self::Step(step) => write!(f, ": {step}"),
            Self::Clear { from } if *from == SinkTime::ZERO => f.write_str(": all steps"),
            Self::Clear { from } => write!(f, ": steps from {} on", Seconds(*from)),
            Self::Reset => Ok(()),
            Self::Isolator { closed } => f.write_str(if *closed { ": close" } else { ": open" }),
            Self::Burst { at, before, after } => {
                write!(
                    f,
                    ": {before} samples before {}, {after} from then on",
                    Seconds(*at)
                )
            }
        }
    }
}
