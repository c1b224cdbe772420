//! The protocol's word lists: each enum's word on the wire, both ways.
//!
//! Invariants: a word is lower-case ASCII with hyphens; each list is written down once and read
//! back from the same table.

use core::fmt;

use crate::message::{Cause, LimitKind, Mode, ReasonRefused, Reset, SinkState};

/// An enum whose values are words on the wire.
pub(crate) trait Word: Copy + 'static {
    /// Every value with its word.
    const WORDS: &'static [(Self, &'static str)];

    /// The value of a word, if the list has it.
    fn from_word(word: &[u8]) -> Option<Self> {
        Self::WORDS
            .iter()
            .find(|(_, known)| known.as_bytes() == word)
            .map(|(value, _)| *value)
    }
}

impl Cause {
    /// The word on the wire.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Current => "current",
            Self::Power => "power",
            Self::VoltageHigh => "voltage-high",
            Self::VoltageLow => "voltage-low",
            Self::Temperature => "temperature",
            Self::Excess => "excess",
            Self::Sensor => "sensor",
            Self::Deadman => "deadman",
            Self::Watchdog => "watchdog",
        }
    }

    /// The number that stands for the cause in a readback's state, 1 to 9.
    pub const fn number(self) -> u8 {
        match self {
            Self::Current => 1,
            Self::Power => 2,
            Self::VoltageHigh => 3,
            Self::VoltageLow => 4,
            Self::Temperature => 5,
            Self::Excess => 6,
            Self::Sensor => 7,
            Self::Deadman => 8,
            Self::Watchdog => 9,
        }
    }

    /// The unit of the value a trip carries for this cause.
    pub const fn unit(self) -> &'static str {
        match self {
            Self::Current | Self::Excess => "uA",
            Self::Power => "uW",
            Self::VoltageHigh | Self::VoltageLow => "uV",
            Self::Temperature => "m°C",
            Self::Deadman => "us",
            Self::Sensor | Self::Watchdog => "",
        }
    }
}

impl Word for Cause {
    const WORDS: &'static [(Self, &'static str)] = &[
        (Self::Current, Self::Current.word()),
        (Self::Power, Self::Power.word()),
        (Self::VoltageHigh, Self::VoltageHigh.word()),
        (Self::VoltageLow, Self::VoltageLow.word()),
        (Self::Temperature, Self::Temperature.word()),
        (Self::Excess, Self::Excess.word()),
        (Self::Sensor, Self::Sensor.word()),
        (Self::Deadman, Self::Deadman.word()),
        (Self::Watchdog, Self::Watchdog.word()),
    ];
}

impl ReasonRefused {
    /// The word on the wire.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Session => "session",
            Self::Unknown => "unknown",
            Self::Range => "range",
            Self::Limit => "limit",
            Self::Unready => "unready",
            Self::Full => "full",
            Self::Late => "late",
            Self::Latched => "latched",
            Self::Cause => "cause",
            Self::Ability => "ability",
        }
    }
}

impl Word for ReasonRefused {
    const WORDS: &'static [(Self, &'static str)] = &[
        (Self::Session, Self::Session.word()),
        (Self::Unknown, Self::Unknown.word()),
        (Self::Range, Self::Range.word()),
        (Self::Limit, Self::Limit.word()),
        (Self::Unready, Self::Unready.word()),
        (Self::Full, Self::Full.word()),
        (Self::Late, Self::Late.word()),
        (Self::Latched, Self::Latched.word()),
        (Self::Cause, Self::Cause.word()),
        (Self::Ability, Self::Ability.word()),
    ];
}

impl Reset {
    /// The word on the wire.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Power => "power",
            Self::Pin => "pin",
            Self::Watchdog => "watchdog",
            Self::Software => "software",
            Self::Unknown => "unknown",
        }
    }
}

impl Word for Reset {
    const WORDS: &'static [(Self, &'static str)] = &[
        (Self::Power, Self::Power.word()),
        (Self::Pin, Self::Pin.word()),
        (Self::Watchdog, Self::Watchdog.word()),
        (Self::Software, Self::Software.word()),
        (Self::Unknown, Self::Unknown.word()),
    ];
}

impl Mode {
    /// The word on the wire, without the target.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Current(_) => "current",
            Self::Power(_) => "power",
            Self::Resistance(_) => "resistance",
        }
    }
}

impl LimitKind {
    /// The word on the wire, without the value.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Current(_) => "current",
            Self::Power(_) => "power",
            Self::VoltageHigh(_) => "voltage-high",
            Self::VoltageLow(_) => "voltage-low",
            Self::Temperature(_) => "temperature",
            Self::Excess(_) => "excess",
        }
    }
}

/// Cause numbers begin here in a readback's state.
const LATCHED_BASE: u8 = 16;

impl SinkState {
    /// The number on the wire: 0 off, 1 on, 2 saturated, 16 + cause number while latched.
    pub const fn number(self) -> u8 {
        match self {
            Self::Off => 0,
            Self::On => 1,
            Self::Saturated => 2,
            Self::Latched(cause) => LATCHED_BASE + cause.number(),
        }
    }

    /// The state of a number on the wire, if there is one.
    pub fn from_number(number: u8) -> Option<Self> {
        match number {
            0 => Some(Self::Off),
            1 => Some(Self::On),
            2 => Some(Self::Saturated),
            latched => {
                let number = latched.checked_sub(LATCHED_BASE)?;
                let mut causes = Cause::WORDS.iter().map(|(cause, _)| *cause);
                causes
                    .find(|cause| cause.number() == number)
                    .map(Self::Latched)
            }
        }
    }
}

impl fmt::Display for Cause {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.word())
    }
}

impl fmt::Display for ReasonRefused {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.word())
    }
}

impl fmt::Display for Reset {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.word())
    }
}

/// The word where there is one; the number is what travels in a readback.
impl fmt::Display for SinkState {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Off => f.pad("off"),
            Self::On => f.pad("on"),
            Self::Saturated => f.pad("out of headroom"),
            Self::Latched(cause) => write!(f, "latched: {cause}"),
        }
    }
}
