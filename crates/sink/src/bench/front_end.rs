//! What sets and reads the current: sense resistor, converters, sensor.

use quantity::{
    Current, Power, Ratio, Resistance, Span, Temperature, TemperatureCoefficient, Text, Textual,
    Voltage,
};
use serde::{Deserialize, Serialize};

use crate::uncertainty::Stated;

/// The analogue front end of a sink.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct FrontEnd {
    /// The sampling period: the sink judges its limits once in it, and edges
    /// fall on it.
    #[serde(with = "quantity::text")]
    pub tick: Span,
    /// The resistor whose drop is the measure of the current.
    pub sense_resistor: SenseResistor,
    /// The converter that sets the current.
    pub dac: Dac,
    /// The converter that reads current and voltage.
    pub adc: Adc,
    /// The sensor on the heat sink.
    pub temperature_sensor: TemperatureSensor,
}

/// The sense resistor, as its data sheet has it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SenseResistor {
    /// Nominal resistance.
    #[serde(with = "quantity::text")]
    pub resistance: Resistance,
    /// Largest deviation at 25 degC, plus or minus.
    #[serde(with = "quantity::text")]
    pub tolerance: Ratio,
    /// Largest magnitude of its temperature coefficient.
    #[serde(with = "quantity::text")]
    pub temperature_coefficient: TemperatureCoefficient,
    /// Power it may turn into heat for ever, up to `full_rating_up_to`.
    #[serde(with = "quantity::text")]
    pub rating: Power,
    /// Ambient temperature up to which the whole rating holds.
    #[serde(with = "quantity::text")]
    pub full_rating_up_to: Temperature,
    /// Temperature at which the rating has fallen to zero, in a straight line.
    #[serde(with = "quantity::text")]
    pub no_rating_at: Temperature,
}

/// How a converter's codes span its full scale.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub enum Codes {
    /// One code is full scale over 2^N: the last code falls one step short.
    #[serde(rename = "2^N")]
    PowerOfTwo,
    /// One code is full scale over 2^N - 1: the last code is full scale.
    #[serde(rename = "2^N-1")]
    PowerOfTwoLessOne,
}

/// The converter that sets the current.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Dac {
    /// Its resolution N in bits.
    pub bits: u8,
    /// Its full scale as it reaches the op-amp, after any divider.
    #[serde(with = "quantity::text")]
    pub full_scale: Voltage,
    /// How its codes span the full scale.
    pub codes: Codes,
    /// Lowest voltage its output reaches, as it reaches the op-amp: a buffered
    /// converter stops above 0 V.
    #[serde(with = "quantity::text")]
    pub minimum: Voltage,
    /// Offset of the op-amp, added to every setting; zero if not known.
    #[serde(with = "quantity::text")]
    pub offset: Voltage,
}

/// The converter that reads current and voltage.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Adc {
    /// Its resolution in bits.
    pub bits: u8,
    /// How its codes span the full scales.
    pub codes: Codes,
    /// The current at full scale: its own full scale over sense resistor and
    /// amplification.
    #[serde(with = "quantity::text")]
    pub current_full_scale: Current,
    /// The voltage at the sense terminals at full scale: its own full scale
    /// times the divider.
    #[serde(with = "quantity::text")]
    pub voltage_full_scale: Voltage,
    /// Stated error of current readbacks beside the sense resistor's: of the
    /// amplifier, the converter, its reference. `None`: not stated.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub current_error: Option<ReadError<Current>>,
    /// Stated error of voltage readbacks: of the divider, the converter, its
    /// reference. `None`: not stated.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub voltage_error: Option<ReadError<Voltage>>,
}

/// A bound on the error of a readback, as a data sheet states it: plus or minus
/// a share of the reading plus a constant.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, bound = "T: Textual")]
pub struct ReadError<T> {
    /// This share of the reading...
    pub of_reading: Text<Ratio>,
    /// ...plus this.
    #[serde(with = "quantity::text")]
    pub constant: T,
    /// What the bound means; any value within it is as likely unless said
    /// (JCGM 100:2008, 4.3.7).
    #[serde(default = "rectangular")]
    pub stated: Stated,
}

const fn rectangular() -> Stated {
    Stated::Rectangular
}

/// The temperature sensor and how it is read.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct TemperatureSensor {
    /// The sensor itself.
    pub element: Element,
    /// The divider it stands in.
    pub divider: SensorDivider,
}

/// A sensor's law from resistance to temperature.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum Element {
    /// An NTC by its Beta.
    NtcBeta {
        /// Resistance at 25 degC.
        #[serde(with = "quantity::text")]
        resistance_25: Resistance,
        /// Its Beta in kelvins.
        beta_kelvin: f64,
    },
    /// An NTC by the three coefficients of Steinhart and Hart, resistance in
    /// ohms, temperature in kelvins.
    SteinhartHart {
        /// Constant term, 1/K.
        a: f64,
        /// Coefficient of ln R, 1/K.
        b: f64,
        /// Coefficient of (ln R)^3, 1/K.
        c: f64,
    },
    /// An NTC by three points of its table, fitted after Steinhart and Hart.
    NtcPoints([ResistancePoint; 3]),
    /// A platinum resistor, 100 ohm at 0 degC, IEC 60751.
    Pt100,
    /// A platinum resistor, 1000 ohm at 0 degC, IEC 60751.
    Pt1000,
}

/// A point of a sensor's table.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ResistancePoint {
    /// Temperature.
    #[serde(with = "quantity::text")]
    pub at: Temperature,
    /// Resistance there.
    #[serde(with = "quantity::text")]
    pub resistance: Resistance,
}

/// The divider that turns the sensor's resistance into a voltage.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SensorDivider {
    /// The fixed resistor.
    #[serde(with = "quantity::text")]
    pub series: Resistance,
    /// Where the sensor sits.
    pub sensor: SensorSide,
    /// The divider's supply.
    #[serde(with = "quantity::text")]
    pub supply: Voltage,
    /// Full scale of the input that reads it.
    #[serde(with = "quantity::text")]
    pub full_scale: Voltage,
}

/// Which half of the divider the sensor is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum SensorSide {
    /// Between the input and ground.
    ToGround,
    /// Between the input and the supply.
    ToSupply,
}
