//! The JSON Schema (draft 2020-12) of a shape.
//!
//! Quantities take their pattern, with every unit spelling, from crate `quantity` through
//! schemars, so a unit added there is in the published schema at once.

use std::collections::BTreeMap;

use quantity::{
    Charge, Current, CurrentSpec, Energy, Power, Resistance, Span, Temperature, Text, Textual,
    Voltage,
};
use schemars::{JsonSchema, SchemaGenerator};
use serde_json::{Map, Value, json};

use super::{Kind, Object, Shape, Word};

/// The schema of a whole document with this root.
pub(crate) fn schema(root: &'static Object) -> Value {
    let mut writer = Writer::default();
    let mut document = writer.body(root);
    document.insert(
        "$schema".to_owned(),
        json!("https://json-schema.org/draft/2020-12/schema"),
    );
    document.insert("title".to_owned(), json!(root.name));
    document.insert("$defs".to_owned(), json!(writer.definitions));
    Value::Object(document)
}

#[derive(Default)]
struct Writer {
    definitions: BTreeMap<&'static str, Value>,
}

fn reference(name: &str) -> Value {
    json!({ "$ref": format!("#/$defs/{name}") })
}

impl Writer {
    fn shape(&mut self, shape: &Shape) -> Value {
        match *shape {
            Shape::Text { longest } => {
                json!({ "type": "string", "minLength": 1, "maxLength": longest })
            }
            Shape::Quantity(kind) => self.quantity(kind),
            Shape::Count { least, most } => {
                json!({ "type": "integer", "minimum": least, "maximum": most })
            }
            Shape::Bool => json!({ "type": "boolean" }),
            Shape::Word(words) => choice(words),
            Shape::Version(version) => json!({ "const": version }),
            Shape::Object(object) => self.object(object),
            Shape::List { of, least } => {
                json!({ "type": "array", "items": self.shape(of), "minItems": least })
            }
            Shape::Tuple(shapes) => {
                let items: Vec<Value> = shapes.iter().map(|shape| self.shape(shape)).collect();
                json!({ "type": "array", "prefixItems": items, "items": false, "minItems": shapes.len() })
            }
            Shape::WordOr(words, object) => {
                json!({ "anyOf": [choice(words), self.object(object)] })
            }
        }
    }

    fn quantity(&mut self, kind: Kind) -> Value {
        match kind {
            Kind::Current => self.text::<Current>(),
            Kind::RatedCurrent => self.text::<CurrentSpec>(),
            Kind::Voltage => self.text::<Voltage>(),
            Kind::Power => self.text::<Power>(),
            Kind::Resistance => self.text::<Resistance>(),
            Kind::Charge => self.text::<Charge>(),
            Kind::Energy => self.text::<Energy>(),
            Kind::Temperature => self.text::<Temperature>(),
            Kind::Time => self.text::<Span>(),
        }
    }

    fn text<T: Textual>(&mut self) -> Value {
        self.definitions
            .entry(T::SCHEMA_NAME)
            .or_insert_with(|| Text::<T>::json_schema(&mut SchemaGenerator::default()).to_value());
        reference(T::SCHEMA_NAME)
    }

    fn object(&mut self, object: &'static Object) -> Value {
        if !self.definitions.contains_key(object.name) {
            // The name goes in first, so that an object inside itself ends the recursion.
            self.definitions.insert(object.name, Value::Null);
            let body = self.body(object);
            self.definitions.insert(object.name, Value::Object(body));
        }
        reference(object.name)
    }

    fn body(&mut self, object: &'static Object) -> Map<String, Value> {
        let mut properties = Map::new();
        for field in object.fields {
            let mut schema = self.shape(&field.shape);
            if let Value::Object(map) = &mut schema {
                map.insert("description".to_owned(), json!(field.meaning));
            }
            properties.insert(field.key.to_owned(), schema);
        }
        let required: Vec<&str> = object
            .fields
            .iter()
            .filter(|field| field.required)
            .map(|field| field.key)
            .collect();
        let mut body = Map::new();
        body.insert("type".to_owned(), json!("object"));
        body.insert("description".to_owned(), json!(object.meaning));
        body.insert("properties".to_owned(), Value::Object(properties));
        body.insert("additionalProperties".to_owned(), json!(false));
        if !required.is_empty() {
            body.insert("required".to_owned(), json!(required));
        }
        if !object.one_of.is_empty() {
            let choices: Vec<Value> = object
                .one_of
                .iter()
                .map(|key| json!({ "required": [key] }))
                .collect();
            body.insert("oneOf".to_owned(), json!(choices));
        }
        body
    }
}

fn choice(words: &[Word]) -> Value {
    let choices: Vec<Value> = words
        .iter()
        .map(|word| json!({ "const": word.word, "description": word.meaning }))
        .collect();
    json!({ "oneOf": choices })
}
