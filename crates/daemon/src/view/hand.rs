//! Driving a setpoint by hand.

use quantity::{Current, Span, Text};
use serde::{Deserialize, Serialize};
use serde_json::Value;
use utoipa::ToSchema;

/// A run by hand to begin.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct HandRequest {
    /// The sink's name.
    pub sink: String,
    /// The device under test, in the words of a sequence.
    #[schema(value_type = Object)]
    pub dut: Value,
    /// The interlocks, in the words of a sequence: at least one; the bench's own for the others.
    #[schema(value_type = Object)]
    pub interlocks: Value,
    /// The current to begin with, true; `0 A` unless said.
    #[serde(default = "zero")]
    #[schema(value_type = String, example = "500 mA")]
    pub setpoint: Text<Current>,
    /// How long a setpoint holds unless it is asked for again: the script's own deadman.
    #[schema(value_type = String, example = "3 s")]
    pub interval: Text<Span>,
    /// Readback interval; the bench's usual one unless said.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<String>, example = "200 ms")]
    pub readback: Option<Text<Span>>,
    /// What it is for.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub title: Option<String>,
}

const fn zero() -> Text<Current> {
    Text(Current::ZERO)
}

/// A setpoint for a run by hand. Without one the setpoint stays and is held for another interval.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct SetpointRequest {
    /// The current from now on, true.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<String>, example = "500 mA")]
    pub setpoint: Option<Text<Current>>,
    /// The interval from now on.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<String>, example = "3 s")]
    pub interval: Option<Text<Span>>,
}
