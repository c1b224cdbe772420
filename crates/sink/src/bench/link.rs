//! How a sink is reached.

use std::num::NonZeroU32;
use std::path::PathBuf;

use serde::{Deserialize, Serialize};

/// The way to a sink: one of the tables `link.serial`, `link.tcp`,
/// `link.simulated`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum Link {
    /// A serial port.
    Serial {
        /// The port as the system names it, such as `/dev/ttyACM0` or `COM3`.
        path: PathBuf,
        /// Bits per second; a USB port that needs none ignores it.
        #[serde(default = "baud_default")]
        baud: u32,
    },
    /// A TCP connection, such as a serial server's.
    Tcp {
        /// Host and port, such as `192.0.2.7:4000`.
        address: String,
    },
    /// No hardware: the firmware's own logic in front of a simulated source.
    Simulated {
        /// The source, in the words of the simulator; not looked into here.
        source: serde_json::Value,
        /// How many seconds pass on the sink in one of the host's; 1 is real
        /// time.
        #[serde(default = "real_time")]
        time_factor: NonZeroU32,
    },
}

impl Link {
    /// Whether no hardware stands behind the link.
    pub const fn is_simulated(&self) -> bool {
        matches!(self, Self::Simulated { .. })
    }
}

const fn baud_default() -> u32 {
    115_200
}

const fn real_time() -> NonZeroU32 {
    NonZeroU32::MIN
}
