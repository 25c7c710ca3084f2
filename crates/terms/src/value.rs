//! Values as a pipeline says them, and the canonical text that keys are made of.

use serde::de::{Deserialize, Deserializer, MapAccess, SeqAccess, Visitor};
use serde::ser::{Serialize, SerializeMap, SerializeSeq, Serializer};
use std::collections::BTreeMap;
use std::fmt::Write as _;

/// A value of a pipeline or a record. Maps are ordered by key, so that equal values have equal text.
#[derive(Clone, Debug, PartialEq)]
pub enum Value {
    /// Nothing given.
    Null,
    /// True or false.
    Bool(bool),
    /// A whole number.
    Integer(i64),
    /// A double; never NaN in canonical values.
    Number(f64),
    /// Text.
    Text(String),
    /// Values in order.
    List(Vec<Value>),
    /// Values by name.
    Map(BTreeMap<String, Value>),
}

impl Value {
    /// A map from pairs.
    pub fn map<K: Into<String>>(pairs: impl IntoIterator<Item = (K, Value)>) -> Self {
        Value::Map(pairs.into_iter().map(|(k, v)| (k.into(), v)).collect())
    }

    /// Text.
    pub fn text(text: impl Into<String>) -> Self {
        Value::Text(text.into())
    }

    /// The canonical text: JSON without spaces, keys in byte order, doubles in their shortest decimal form that reads
    /// back to the same bits (`1.0`, `2.26`, `1e-7`), infinities as `inf` and `-inf`, negative zero as `0.0`. Whole numbers and
    /// doubles differ (`1` and `1.0`): canonicalise by declared type first.
    pub fn canonical(&self) -> String {
        let mut out = String::new();
        self.write_canonical(&mut out);
        out
    }

    fn write_canonical(&self, out: &mut String) {
        match self {
            Value::Null => out.push_str("null"),
            Value::Bool(b) => out.push_str(if *b { "true" } else { "false" }),
            Value::Integer(i) => {
                let _ = write!(out, "{i}");
            }
            Value::Number(x) => out.push_str(&number_text(*x)),
            Value::Text(t) => write_text(t, out),
            Value::List(items) => {
                out.push('[');
                for (i, item) in items.iter().enumerate() {
                    if i > 0 {
                        out.push(',');
                    }
                    item.write_canonical(out);
                }
                out.push(']');
            }
            Value::Map(map) => {
                out.push('{');
                for (i, (key, item)) in map.iter().enumerate() {
                    if i > 0 {
                        out.push(',');
                    }
                    write_text(key, out);
                    out.push(':');
                    item.write_canonical(out);
                }
                out.push('}');
            }
        }
    }

    /// The entry of a map.
    pub fn get(&self, key: &str) -> Option<&Value> {
        match self {
            Value::Map(map) => map.get(key),
            _ => None,
        }
    }

    /// The value at a dotted path (`lattice.size`, `update.0.clusters`).
    pub fn at(&self, path: &str) -> Option<&Value> {
        path.split('.').try_fold(self, |value, word| match value {
            Value::Map(map) => map.get(word),
            Value::List(list) => list.get(word.parse::<usize>().ok()?),
            _ => None,
        })
    }

    /// Sets the value at a dotted path, making maps on the way; false where the path runs into something that is
    /// neither a map nor an existing element of a list.
    pub fn set(&mut self, path: &str, new: Value) -> bool {
        let mut value = self;
        for word in path.split('.') {
            value = match value {
                Value::Map(map) => map.entry(word.to_owned()).or_insert_with(|| Value::Map(BTreeMap::new())),
                Value::List(list) => match word.parse::<usize>().ok().and_then(|i| list.get_mut(i)) {
                    Some(item) => item,
                    None => return false,
                },
                _ => return false,
            };
        }
        *value = new;
        true
    }

    /// The number, whole or not.
    pub fn as_f64(&self) -> Option<f64> {
        match self {
            Value::Integer(i) => Some(*i as f64),
            Value::Number(x) => Some(*x),
            _ => None,
        }
    }

    /// The whole number.
    pub fn as_i64(&self) -> Option<i64> {
        match self {
            Value::Integer(i) => Some(*i),
            _ => None,
        }
    }

    /// The text.
    pub fn as_str(&self) -> Option<&str> {
        match self {
            Value::Text(t) => Some(t),
            _ => None,
        }
    }

    /// True or false.
    pub fn as_bool(&self) -> Option<bool> {
        match self {
            Value::Bool(b) => Some(*b),
            _ => None,
        }
    }

    /// The list.
    pub fn as_list(&self) -> Option<&[Value]> {
        match self {
            Value::List(list) => Some(list),
            _ => None,
        }
    }

    /// The map.
    pub fn as_map(&self) -> Option<&BTreeMap<String, Value>> {
        match self {
            Value::Map(map) => Some(map),
            _ => None,
        }
    }

    /// What the value is, for messages: "a number", "a list" ...
    pub fn what(&self) -> &'static str {
        match self {
            Value::Null => "nothing",
            Value::Bool(_) => "true or false",
            Value::Integer(_) => "a whole number",
            Value::Number(_) => "a number",
            Value::Text(_) => "text",
            Value::List(_) => "a list",
            Value::Map(_) => "a mapping",
        }
    }
}

/// The key under which JSON holds a number that is not finite.
const NOT_FINITE: &str = "not finite";

/// A double as canonical text. NaN, which no canonical value holds, becomes `nan`.
pub fn number_text(x: f64) -> String {
    if x == f64::INFINITY {
        "inf".to_owned()
    } else if x == f64::NEG_INFINITY {
        "-inf".to_owned()
    } else if x.is_nan() {
        "nan".to_owned()
    } else if x == 0.0 {
        "0.0".to_owned()
    } else {
        ryu::Buffer::new().format_finite(x).to_owned()
    }
}

fn write_text(text: &str, out: &mut String) {
    out.push('"');
    for c in text.chars() {
        match c {
            '"' => out.push_str("\\\""),
            '\\' => out.push_str("\\\\"),
            '\n' => out.push_str("\\n"),
            '\t' => out.push_str("\\t"),
            '\r' => out.push_str("\\r"),
            c if (c as u32) < 0x20 => {
                let _ = write!(out, "\\u{:04x}", c as u32);
            }
            c => out.push(c),
        }
    }
    out.push('"');
}

impl Serialize for Value {
    fn serialize<S: Serializer>(&self, s: S) -> Result<S::Ok, S::Error> {
        match self {
            Value::Null => s.serialize_unit(),
            Value::Bool(b) => s.serialize_bool(*b),
            Value::Integer(i) => s.serialize_i64(*i),
            // JSON has no infinities, and a bare text would come back as text.
            Value::Number(x) if !x.is_finite() => {
                let mut out = s.serialize_map(Some(1))?;
                out.serialize_entry(NOT_FINITE, &number_text(*x))?;
                out.end()
            }
            Value::Number(x) => s.serialize_f64(*x),
            Value::Text(t) => s.serialize_str(t),
            Value::List(list) => {
                let mut seq = s.serialize_seq(Some(list.len()))?;
                for item in list {
                    seq.serialize_element(item)?;
                }
                seq.end()
            }
            Value::Map(map) => {
                let mut out = s.serialize_map(Some(map.len()))?;
                for (key, item) in map {
                    out.serialize_entry(key, item)?;
                }
                out.end()
            }
        }
    }
}

impl<'de> Deserialize<'de> for Value {
    fn deserialize<D: Deserializer<'de>>(d: D) -> Result<Self, D::Error> {
        struct Read;
        impl<'de> Visitor<'de> for Read {
            type Value = Value;
            fn expecting(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
                f.write_str("a value")
            }
            fn visit_bool<E>(self, b: bool) -> Result<Value, E> {
                Ok(Value::Bool(b))
            }
            fn visit_i64<E>(self, i: i64) -> Result<Value, E> {
                Ok(Value::Integer(i))
            }
            fn visit_u64<E>(self, u: u64) -> Result<Value, E> {
                Ok(i64::try_from(u).map_or(Value::Number(u as f64), Value::Integer))
            }
            fn visit_f64<E>(self, x: f64) -> Result<Value, E> {
                Ok(Value::Number(x))
            }
            fn visit_str<E>(self, t: &str) -> Result<Value, E> {
                Ok(Value::Text(t.to_owned()))
            }
            fn visit_unit<E>(self) -> Result<Value, E> {
                Ok(Value::Null)
            }
            fn visit_none<E>(self) -> Result<Value, E> {
                Ok(Value::Null)
            }
            fn visit_some<D: Deserializer<'de>>(self, d: D) -> Result<Value, D::Error> {
                Value::deserialize(d)
            }
            fn visit_seq<A: SeqAccess<'de>>(self, mut seq: A) -> Result<Value, A::Error> {
                let mut list = Vec::new();
                while let Some(item) = seq.next_element()? {
                    list.push(item);
                }
                Ok(Value::List(list))
            }
            fn visit_map<A: MapAccess<'de>>(self, mut access: A) -> Result<Value, A::Error> {
                let mut map = BTreeMap::new();
                while let Some((key, item)) = access.next_entry()? {
                    map.insert(key, item);
                }
                if let (1, Some(Value::Text(text))) = (map.len(), map.get(NOT_FINITE)) {
                    return Ok(match text.as_str() {
                        "inf" => Value::Number(f64::INFINITY),
                        "-inf" => Value::Number(f64::NEG_INFINITY),
                        _ => Value::Number(f64::NAN),
                    });
                }
                Ok(Value::Map(map))
            }
        }
        d.deserialize_any(Read)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Keys of published entries hang on these texts: a change here orphans every ledger.
    #[test]
    fn value_stability() {
        let v = Value::map([
            ("b", Value::List(vec![Value::Integer(1), Value::Number(1.0), Value::Number(-0.0)])),
            ("a", Value::text("q\"\\\n\u{1}é")),
            (
                "c",
                Value::List(vec![Value::Number(1e-7), Value::Number(1e22), Value::Number(f64::INFINITY), Value::Null]),
            ),
            ("d", Value::Number(2.269185314213022)),
        ]);
        assert_eq!(
            v.canonical(),
            "{\"a\":\"q\\\"\\\\\\n\\u0001é\",\"b\":[1,1.0,0.0],\"c\":[1e-7,1e22,inf,null],\"d\":2.269185314213022}"
        );
    }

    #[test]
    fn paths_reach_into_maps_and_lists() {
        let mut v = Value::map([("update", Value::List(vec![Value::map([("plugin", Value::text("wolff"))])]))]);
        assert!(v.set("update.0.clusters", Value::Integer(3)));
        assert!(v.set("lattice.size", Value::Integer(8)));
        assert!(!v.set("update.1.clusters", Value::Integer(3)));
        assert_eq!(v.at("update.0.clusters"), Some(&Value::Integer(3)));
        assert_eq!(v.at("lattice.size").and_then(Value::as_i64), Some(8));
        assert_eq!(v.at("lattice.size.x"), None);
    }

    /// Values go to workers and back as JSON, also those that JSON has no numbers for.
    #[test]
    fn json_keeps_every_number() {
        let v = Value::List(vec![
            Value::Number(f64::INFINITY),
            Value::Number(-f64::INFINITY),
            Value::Integer(1),
            Value::Number(1.0),
        ]);
        let text = serde_json::to_string(&v).unwrap();
        assert_eq!(serde_json::from_str::<Value>(&text).unwrap(), v, "{text}");
    }

    proptest::proptest! {
        /// Numbers in keys read back to the same bits, so different values never share a key.
        #[test]
        fn number_text_round_trips(x in proptest::num::f64::NORMAL | proptest::num::f64::SUBNORMAL) {
            proptest::prop_assert_eq!(number_text(x).parse::<f64>().unwrap().to_bits(), x.to_bits());
        }
    }
}
