//! Where a run stands, and the one function that lets it change.

use quantity::{HostTime, SinkTime};
use wire::OrderId;

use crate::event::Ending;

/// Where a run stands.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum Phase {
    /// No session yet.
    Waiting,
    /// A session stands; limits are being set and the first readings judged.
    Preparation(Preparation),
    /// The sequence runs.
    Progress,
    /// Held by a person or a script: off.
    Pause(Pause),
    /// The link is gone.
    Interruption {
        /// Since when.
        since: HostTime,
    },
    /// Over.
    End(Ending),
}

/// What a preparation waits for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Preparation {
    /// When the session began, by either clock.
    pub(crate) since: HostTime,
    pub(crate) connected: SinkTime,
    /// The last order of the setup; `None` once it is acknowledged.
    pub(crate) awaited: Option<OrderId>,
    /// The reset of a latch that the host's own silence had caused.
    pub(crate) reset: Option<OrderId>,
    /// The run had begun before: it is to be taken up again.
    pub(crate) again: bool,
    /// The sink has started anew since.
    pub(crate) rebooted: bool,
}

/// What a pause waits for.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub(crate) struct Pause {
    /// The sink has said that it is off.
    pub(crate) off: bool,
    /// A person or a script wants to go on.
    pub(crate) go_on: bool,
}

impl Phase {
    /// Whether the run has begun and not ended, and the sink is there.
    pub(crate) fn is_under_way(&self) -> bool {
        match self {
            Self::Progress | Self::Pause(_) => true,
            Self::Waiting | Self::Preparation(_) | Self::Interruption { .. } | Self::End(_) => {
                false
            }
        }
    }

    /// Whether the run may go from here to there.
    pub(crate) fn may_become(&self, next: &Self) -> bool {
        match self {
            Self::End(_) => false,
            Self::Waiting | Self::Interruption { .. } => {
                matches!(next, Self::End(_) | Self::Preparation(_))
            }
            Self::Preparation(_) => matches!(
                next,
                Self::End(_)
                    | Self::Preparation(_)
                    | Self::Progress
                    | Self::Pause(_)
                    | Self::Interruption { .. }
            ),
            Self::Progress => {
                matches!(
                    next,
                    Self::End(_) | Self::Pause(_) | Self::Interruption { .. }
                )
            }
            Self::Pause(_) => matches!(
                next,
                Self::End(_) | Self::Pause(_) | Self::Progress | Self::Interruption { .. }
            ),
        }
    }
}
