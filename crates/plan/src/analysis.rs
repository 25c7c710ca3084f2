//! Parcels of analysis steps: functions from content to tables.

use serde::{Deserialize, Serialize};
use spinledger_terms::{ContentHash, Key, Value};

/// One content that an analysis parcel takes.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct InputRef {
    /// What it serves as: the key of the parameter, or a path to it. No name of a step.
    pub role: String,
    /// The entry; not part of the preimage.
    pub key: Key,
    /// Its content.
    pub content: ContentHash,
}

/// The preimage of an analysis parcel: step kind and revision, parameters without names of steps, facts about the inputs that are not in
/// their content, and the content of the inputs.
pub fn preimage(does: &str, revision: i64, parameters: &Value, facts: &Value, inputs: &[InputRef]) -> String {
    let inputs = inputs.iter().map(|input| {
        Value::map([("content", Value::text(input.content.to_string())), ("role", Value::text(&input.role))])
    });
    Value::map([
        ("facts", facts.clone()),
        ("inputs", Value::List(inputs.collect())),
        ("kind", Value::text(does)),
        ("parameters", parameters.clone()),
        ("revision", Value::Integer(revision)),
    ])
    .canonical()
}

/// The preimage of a step's table that is gathered from the parcels of its points, with the scan columns in front.
pub fn gather_preimage(does: &str, revision: i64, parts: &[(Value, ContentHash)]) -> String {
    let parts = parts.iter().map(|(columns, content)| {
        Value::map([("columns", columns.clone()), ("content", Value::text(content.to_string()))])
    });
    Value::map([
        ("kind", Value::text(format!("{does}.gathered"))),
        ("parts", Value::List(parts.collect())),
        ("revision", Value::Integer(revision)),
    ])
    .canonical()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Keys of analyses depend on content, not on which entry or step holds it.
    #[test]
    fn entries_and_names_do_not_enter() {
        let input = |key| InputRef { role: "of".into(), key: Key([key; 32]), content: ContentHash([7; 32]) };
        let of = |key| preimage("averages", 1, &Value::map([("x", Value::Integer(1))]), &Value::Null, &[input(key)]);
        assert_eq!(of(1), of(2));
        let expected = r#"{"facts":null,"inputs":[{"content":""#.to_owned()
            + &"07".repeat(32)
            + r#"","role":"of"}],"kind":"averages","parameters":{"x":1},"revision":1}"#;
        assert_eq!(of(1), expected);
    }

    /// What keys of gathered tables are made of.
    #[test]
    fn value_stability_of_gathered_tables() {
        let columns = Value::List(vec![Value::List(vec![Value::text("size"), Value::text(""), Value::Integer(4)])]);
        let expected = r#"{"kind":"averages.gathered","parts":[{"columns":[["size","",4]],"content":""#.to_owned()
            + &"07".repeat(32)
            + r#""}],"revision":1}"#;
        assert_eq!(gather_preimage("averages", 1, &[(columns, ContentHash([7; 32]))]), expected);
    }
}
