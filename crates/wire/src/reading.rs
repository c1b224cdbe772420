//! What the host makes of a readback pair, and its own number for an order.

use quantity::SinkTime;
use serde::{Deserialize, Serialize};

use crate::{Counters, Readback};

/// The host's own running number of an order over a whole run: 1, 2, 3, ...
///
/// The session maps it to the order number on the wire, which begins anew with each session.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Default, Serialize, Deserialize,
)]
#[serde(transparent)]
pub struct OrderId(pub u64);

/// A readback pair as the host received it, nominal.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Reading {
    /// The pair's number on the wire.
    pub readback: u16,
    /// Full sink time of the pair.
    pub time: SinkTime,
    /// Extremes, means, temperature, state since the previous pair.
    pub values: Readback,
    /// Counters; `None` when their line was lost.
    pub counters: Option<Counters>,
    /// Pairs lost between the previous one received and this one.
    pub lost: u16,
}
