//! The cells of the examples: two invented types and three specimens of each.
//!
//! Nothing here describes a real cell. The files are `data/type-k.json` and `data/type-m.json`.

use super::model::{Model, ModelError, Spread};

const TYPE_K: &str = include_str!("../../data/type-k.json");
const TYPE_M: &str = include_str!("../../data/type-m.json");

/// A named cell of the examples: its type and what sets it apart.
#[derive(Debug, Clone, PartialEq)]
pub struct Specimen {
    /// Its type.
    pub model: Model,
    /// How far it is off its type.
    pub spread: Spread,
}

fn built_in(text: &str) -> Model {
    // The files are part of the program and a test reads them both.
    Model::from_json(text).unwrap_or_else(|error| unreachable!("built-in cell model: {error}"))
}

/// Type K: 3.2 Ah, high capacity. Invented.
pub fn type_k() -> Model {
    built_in(TYPE_K)
}

/// Type M: 2.6 Ah, low resistance. Invented.
pub fn type_m() -> Model {
    built_in(TYPE_M)
}

/// The labels of all built-in specimens, in order.
pub fn specimens() -> Vec<String> {
    [type_k(), type_m()]
        .into_iter()
        .flat_map(|model| model.specimens.into_keys())
        .collect()
}

/// A built-in specimen (`K-01` to `K-03`, `M-01` to `M-03`), or a type (`K`, `M`) without
/// spread.
///
/// # Errors
/// [`ModelError::Specimen`] for any other label.
pub fn specimen(label: &str) -> Result<Specimen, ModelError> {
    for (name, model) in [("K", type_k()), ("M", type_m())] {
        if label == name {
            return Ok(Specimen {
                model,
                spread: Spread::default(),
            });
        }
        if let Ok(spread) = model.spread(label) {
            return Ok(Specimen { model, spread });
        }
    }
    Err(ModelError::Specimen {
        label: label.to_owned(),
        known: format!("K, M, {}", specimens().join(", ")),
    })
}
