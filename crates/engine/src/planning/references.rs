//! Names of steps in parameters: found, to follow them, and taken out, since no key depends on them.

use spinledger_terms::{Admission, Field, Kind, Path, Value, Vocabulary, admit};

/// Names of steps in a step's parameters: path and name.
pub(super) fn references(fields: &[Field], parameters: &Value) -> Vec<(String, String)> {
    fn walk(kind: &Kind, value: &Value, path: &str, out: &mut Vec<(String, String)>) {
        let under = |word: &str| if path.is_empty() { word.to_owned() } else { format!("{path}.{word}") };
        match (kind, value) {
            (Kind::Step {}, Value::Text(name)) => out.push((path.to_owned(), name.clone())),
            (Kind::List { of, .. }, Value::List(list)) => {
                for (i, item) in list.iter().enumerate() {
                    walk(of, item, &under(&i.to_string()), out);
                }
            }
            (Kind::Map { of }, Value::Map(map)) => map.iter().for_each(|(k, v)| walk(of, v, &under(k), out)),
            (Kind::Tree { fields }, Value::Map(map)) => {
                for field in fields {
                    if let Some(value) = map.get(&field.name) {
                        walk(&field.kind, value, &under(&field.name), out);
                    }
                }
            }
            (Kind::Either { of }, value) => {
                // Only one alternative took the value; a text that is a word of another alternative is no name of a step.
                let taken = of.iter().find(|kind| {
                    let (mut problems, mut references) = (Vec::new(), Vec::new());
                    let vocabulary = Vocabulary::default();
                    let mut admission =
                        Admission { vocabulary: &vocabulary, problems: &mut problems, references: &mut references };
                    admit(kind, value, &Path::top(), &mut admission).is_some()
                });
                if let Some(kind) = taken {
                    walk(kind, value, path, out);
                }
            }
            _ => {}
        }
    }
    let mut out = Vec::new();
    for field in fields {
        if let Some(value) = parameters.get(&field.name) {
            walk(&field.kind, value, &field.name, &mut out);
        }
    }
    out
}

/// Takes the name of a step out of parameters: null stands in a list, nothing in a mapping.
pub(super) fn remove(parameters: &mut Value, role: &str) {
    let (parent, last) = match role.rsplit_once('.') {
        Some((parent, last)) => (at_mut(parameters, parent), last),
        None => (Some(parameters), role),
    };
    match parent {
        Some(Value::Map(map)) => {
            map.remove(last);
        }
        Some(Value::List(list)) => {
            if let Some(item) = last.parse::<usize>().ok().and_then(|i| list.get_mut(i)) {
                *item = Value::Null;
            }
        }
        _ => {}
    }
}

fn at_mut<'a>(value: &'a mut Value, path: &str) -> Option<&'a mut Value> {
    path.split('.').try_fold(value, |value, word| match value {
        Value::Map(map) => map.get_mut(word),
        Value::List(list) => list.get_mut(word.parse::<usize>().ok()?),
        _ => None,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fields() -> Vec<Field> {
        let item = vec![
            Field::new("take", Kind::Tree { fields: vec![Field::new("step", Kind::Step {}, "")] }, ""),
            Field::new("name", Kind::Text {}, ""),
        ];
        vec![
            Field::new("of", Kind::Either { of: vec![Kind::words(&["nothing"]), Kind::Step {}] }, ""),
            Field::new("items", Kind::list(Kind::Tree { fields: item }), ""),
            Field::new("more", Kind::list(Kind::Step {}), ""),
            Field::new("title", Kind::Text {}, ""),
        ]
    }

    fn parameters(of: &str) -> Value {
        let take = |step: &str| Value::map([("step", Value::text(step)), ("quantity", Value::text("energy"))]);
        let item = |step: &str| Value::map([("take", take(step)), ("name", Value::text("a"))]);
        Value::map([
            ("of", Value::text(of)),
            ("items", Value::List(vec![item("b"), item("c")])),
            ("more", Value::List(vec![Value::text("d"), Value::text("e")])),
            ("title", Value::text("b")),
        ])
    }

    /// Whatever takes names of steps is found, by path; text that only looks like one is not.
    #[test]
    fn names_of_steps_are_found() {
        let found = |of: &str| -> Vec<String> {
            references(&fields(), &parameters(of)).into_iter().map(|(path, name)| format!("{path}={name}")).collect()
        };
        let rest = ["items.0.take.step=b", "items.1.take.step=c", "more.0=d", "more.1=e"];
        assert_eq!(found("a"), [&["of=a"][..], &rest].concat());
        assert_eq!(found("nothing"), rest, "a word of another alternative is no step");
    }

    /// Without names, two pipelines that differ in them only have the same parameters; places in lists stay.
    #[test]
    fn names_of_steps_are_taken_out() {
        let without = |of: &str| {
            let mut value = parameters(of);
            for (role, _) in references(&fields(), &value) {
                remove(&mut value, &role);
            }
            value
        };
        assert_eq!(without("a"), without("z"));
        let rest = without("a");
        assert_eq!(rest.get("of"), None);
        assert_eq!(rest.at("items.1.take").map(Value::canonical).as_deref(), Some(r#"{"quantity":"energy"}"#));
        assert_eq!(rest.get("more"), Some(&Value::List(vec![Value::Null, Value::Null])));
        let mut value = Value::map([("a", Value::Integer(1))]);
        remove(&mut value, "a.b.c");
        remove(&mut value, "x.0");
        assert_eq!(value, Value::map([("a", Value::Integer(1))]), "what is not there is no error");
    }
}
