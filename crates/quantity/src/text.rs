//! Quantities as text in files and over HTTP: `"500 mA"`, never `500`.
//!
//! Use [`Text<T>`] as a field's type, or `#[serde(with = "quantity::text")]` on
//! a field of the quantity's own type. Both refuse a JSON or TOML number and
//! say that the unit is missing.

use alloc::borrow::{Cow, ToOwned};
use alloc::string::{String, ToString};
use alloc::vec::Vec;
use core::fmt;
use core::marker::PhantomData;
use core::str::FromStr;

use serde::de::{self, Visitor};
use serde::{Deserialize, Deserializer, Serialize, Serializer};

use crate::parse::ParseError;
use crate::unit::Dimension;
use crate::{
    Area, Charge, Current, CurrentSpec, Energy, Length, Power, Quantity, Ratio, Resistance, Span,
    SquareLawFactor, Temperature, TemperatureCoefficient, ThermalResistance, Voltage,
};

/// What can be written as a quantity's text.
pub trait Textual: fmt::Display + FromStr<Err = ParseError> {
    /// The name in the JSON Schema.
    const SCHEMA_NAME: &'static str;

    /// The dimension it measures.
    fn dimension() -> Dimension;

    /// Well-formed examples.
    fn examples() -> Vec<&'static str> {
        alloc::vec![Self::dimension().example()]
    }

    /// Every unit it may be written in, all spellings.
    fn unit_spellings() -> Vec<&'static str> {
        Self::dimension()
            .units()
            .iter()
            .flat_map(|unit| unit.spellings.iter().copied())
            .collect()
    }
}

macro_rules! textual {
    ($($name:ident: $schema:literal;)*) => {
        $(
            impl Textual for $name {
                const SCHEMA_NAME: &'static str = $schema;

                fn dimension() -> Dimension {
                    <$name as Quantity>::DIMENSION
                }
            }
        )*
    };
}

textual! {
    Current: "CurrentText";
    Voltage: "VoltageText";
    Power: "PowerText";
    Resistance: "ResistanceText";
    Charge: "ChargeText";
    Energy: "EnergyText";
    Temperature: "TemperatureText";
    Span: "SpanText";
    ThermalResistance: "ThermalResistanceText";
    Ratio: "RatioText";
    TemperatureCoefficient: "TemperatureCoefficientText";
    SquareLawFactor: "SquareLawFactorText";
    Length: "LengthText";
    Area: "AreaText";
}

impl Textual for CurrentSpec {
    const SCHEMA_NAME: &'static str = "CurrentSpecText";

    fn dimension() -> Dimension {
        Dimension::Current
    }

    fn examples() -> Vec<&'static str> {
        alloc::vec!["500 mA", "0.2 It"]
    }

    fn unit_spellings() -> Vec<&'static str> {
        let mut spellings = Current::unit_spellings();
        spellings.push("It");
        spellings
    }
}

/// A quantity that is text in files: serialised as `"500 mA"`, read from it.
#[derive(Copy, Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Default)]
pub struct Text<T>(
    /// The quantity itself.
    pub T,
);

impl<T> From<T> for Text<T> {
    fn from(quantity: T) -> Self {
        Self(quantity)
    }
}

impl<T: fmt::Display> fmt::Display for Text<T> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.fmt(f)
    }
}

impl<T: Textual> FromStr for Text<T> {
    type Err = ParseError;

    fn from_str(text: &str) -> Result<Self, ParseError> {
        text.parse().map(Self)
    }
}

impl<T: Textual> Serialize for Text<T> {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serialize(&self.0, serializer)
    }
}

impl<'de, T: Textual> Deserialize<'de> for Text<T> {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        deserialize(deserializer).map(Self)
    }
}

impl Serialize for CurrentSpec {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serialize(self, serializer)
    }
}

impl<'de> Deserialize<'de> for CurrentSpec {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        deserialize(deserializer)
    }
}

/// Writes the quantity's text. For `#[serde(with = "quantity::text")]`.
///
/// # Errors
/// Those of the serialiser.
pub fn serialize<T: Textual, S: Serializer>(value: &T, serializer: S) -> Result<S::Ok, S::Error> {
    serializer.collect_str(value)
}

/// Reads the quantity's text. For `#[serde(with = "quantity::text")]`.
///
/// # Errors
/// A number without a unit, or a text that is no such quantity.
pub fn deserialize<'de, T: Textual, D: Deserializer<'de>>(deserializer: D) -> Result<T, D::Error> {
    deserializer.deserialize_any(TextVisitor(PhantomData))
}

struct TextVisitor<T>(PhantomData<T>);

impl<T: Textual> TextVisitor<T> {
    fn bare<E: de::Error>(number: &dyn fmt::Display) -> E {
        let example = T::examples().first().copied().unwrap_or_default();
        E::custom(alloc::format!(
            "the number {number} has no unit, but {} is wanted; write a text with its unit, \
             for example \"{example}\"",
            T::dimension().with_article()
        ))
    }
}

impl<T: Textual> Visitor<'_> for TextVisitor<T> {
    type Value = T;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let example = T::examples().first().copied().unwrap_or_default();
        write!(
            f,
            "{} as text with its unit, for example \"{example}\"",
            T::dimension().with_article()
        )
    }

    fn visit_str<E: de::Error>(self, text: &str) -> Result<T, E> {
        text.parse().map_err(E::custom)
    }

    fn visit_i64<E: de::Error>(self, number: i64) -> Result<T, E> {
        Err(Self::bare(&number))
    }

    fn visit_u64<E: de::Error>(self, number: u64) -> Result<T, E> {
        Err(Self::bare(&number))
    }

    fn visit_f64<E: de::Error>(self, number: f64) -> Result<T, E> {
        Err(Self::bare(&number))
    }
}

/// The JSON Schema of a quantity's text: a pattern that lists the units.
fn schema<T: Textual>() -> schemars::Schema {
    let pattern = alloc::format!(
        r"^[+-]?[0-9]+(\.[0-9]+)? ?({})$",
        T::unit_spellings().join("|").replace('^', r"\^")
    );
    schemars::json_schema!({
        "type": "string",
        "description": alloc::format!("The text of {} with its unit; a bare number is refused.", T::dimension().with_article()),
        "pattern": pattern,
        "examples": T::examples(),
    })
}

impl<T: Textual> schemars::JsonSchema for Text<T> {
    fn schema_name() -> Cow<'static, str> {
        Cow::Borrowed(T::SCHEMA_NAME)
    }

    fn json_schema(_: &mut schemars::SchemaGenerator) -> schemars::Schema {
        schema::<T>()
    }
}

impl schemars::JsonSchema for CurrentSpec {
    fn schema_name() -> Cow<'static, str> {
        "CurrentSpec".to_owned().into()
    }

    fn json_schema(_: &mut schemars::SchemaGenerator) -> schemars::Schema {
        schema::<Self>()
    }
}

/// The same for a field that is optional: `#[serde(with = "quantity::text::option", default)]`.
pub mod option {
    use serde::{Deserialize, Deserializer, Serialize, Serializer};

    use super::{String, Text, Textual, ToString};

    /// Writes the text, or null.
    ///
    /// # Errors
    /// Those of the serialiser.
    pub fn serialize<T: Textual, S: Serializer>(
        value: &Option<T>,
        serializer: S,
    ) -> Result<S::Ok, S::Error> {
        value
            .as_ref()
            .map(|quantity| -> String { quantity.to_string() })
            .serialize(serializer)
    }

    /// Reads the text, or null.
    ///
    /// # Errors
    /// A number without a unit, or a text that is no such quantity.
    pub fn deserialize<'de, T: Textual, D: Deserializer<'de>>(
        deserializer: D,
    ) -> Result<Option<T>, D::Error> {
        Ok(Option::<Text<T>>::deserialize(deserializer)?.map(|text| text.0))
    }
}
