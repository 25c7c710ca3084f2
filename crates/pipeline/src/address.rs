//! Scanned paths: which parameter a dotted path leads to, and what it may be.

use spinledger_terms::{Field, ItemKind, Kind, Value, Vocabulary, nearest};
use std::collections::BTreeMap;

/// Why a path leads nowhere. Without a message where the body itself is wrong, which is reported there.
#[derive(Debug, PartialEq)]
pub(crate) struct Lost {
    pub(crate) message: Option<String>,
    pub(crate) expected: Option<String>,
    pub(crate) nearest: Option<String>,
}

impl Lost {
    fn silent() -> Self {
        Lost { message: None, expected: None, nearest: None }
    }

    fn because(message: String) -> Self {
        Lost { message: Some(message), ..Lost::silent() }
    }

    /// `word` is not one of `names`; the nearest is put back into the whole path.
    fn unknown(walk: &Walk<'_>, word: &str, owner: &str, names: &[&str]) -> Self {
        let mut sorted = names.to_vec();
        sorted.sort_unstable();
        let near = nearest(word, names.iter().copied()).map(|near| {
            let mut words: Vec<&str> = walk.whole.split('.').collect();
            if let Some(slot) = words.get_mut(walk.words.len()) {
                *slot = near;
            }
            words.join(".")
        });
        let expected =
            if sorted.is_empty() { "no parameters".into() } else { format!("one of: {}", sorted.join(", ")) };
        Lost {
            message: Some(format!("`{}` leads nowhere: `{word}` is not a parameter of {owner}", walk.whole)),
            expected: Some(expected),
            nearest: near,
        }
    }
}

/// A path as far as it has been followed.
struct Walk<'a> {
    whole: &'a str,
    vocabulary: &'a Vocabulary,
    /// Words passed, as they stand in values: names may contain dots.
    words: Vec<String>,
}

/// The words of a path and the kind of the parameter there. `body` decides which plugin's parameters a path through a plugin item
/// goes by, and how long lists are.
pub(crate) fn resolve(
    fields: &[Field],
    body: &BTreeMap<String, Value>,
    owner: &str,
    path: &str,
    vocabulary: &Vocabulary,
) -> Result<(Vec<String>, Kind), Lost> {
    let words: Vec<&str> = path.split('.').collect();
    let mut walk = Walk { whole: path, vocabulary, words: Vec::new() };
    let kind = walk.field(fields, owner, &words, |name| body.get(name).cloned())?;
    Ok((walk.words, kind))
}

impl Walk<'_> {
    fn field(
        &mut self,
        fields: &[Field],
        owner: &str,
        words: &[&str],
        given: impl Fn(&str) -> Option<Value>,
    ) -> Result<Kind, Lost> {
        let Some(field) = fields.iter().find(|f| f.name == words[0]) else {
            let names: Vec<&str> = fields.iter().map(|f| f.name.as_str()).collect();
            return Err(Lost::unknown(self, words[0], owner, &names));
        };
        self.words.push(field.name.clone());
        self.descend(&field.kind, given(&field.name).as_ref(), field.default.as_ref(), &words[1..])
    }

    fn descend(
        &mut self,
        kind: &Kind,
        raw: Option<&Value>,
        default: Option<&Value>,
        words: &[&str],
    ) -> Result<Kind, Lost> {
        let Some(word) = words.first() else { return Ok(kind.clone()) };
        match kind {
            Kind::Any {} => {
                self.words.extend(words.iter().map(|w| (*w).to_owned()));
                Ok(Kind::Any {})
            }
            Kind::Plugin { of } => match raw.or(default) {
                Some(Value::Text(name)) => self.item(*of, name, None, words),
                Some(Value::Map(map)) => match map.get("plugin") {
                    Some(Value::Text(name)) => self.item(*of, name, Some(map), words),
                    _ => Err(Lost::silent()),
                },
                Some(_) => Err(Lost::silent()),
                None => Err(Lost::because(format!(
                    "`{}` leads nowhere: the step has no `{}`",
                    self.whole,
                    self.words.join(".")
                ))),
            },
            Kind::Tree { fields } => {
                let owner = format!("`{}`", self.words.join("."));
                self.field(fields, &owner, words, |name| raw.and_then(|r| r.get(name)).cloned())
            }
            Kind::Map { of } => {
                // Names may contain dots (bond classes do): where nothing can lie deeper, the rest is one name.
                let name = if has_parts(of) { (*word).to_owned() } else { words.join(".") };
                let rest = if has_parts(of) { &words[1..] } else { &[] };
                let raw = raw.and_then(|r| r.get(&name)).cloned();
                self.words.push(name);
                self.descend(of, raw.as_ref(), None, rest)
            }
            Kind::List { of, .. } => {
                let list = raw.or(default).and_then(Value::as_list).unwrap_or(&[]);
                let Some((index, item)) = word.parse::<usize>().ok().and_then(|i| Some((i, list.get(i)?))) else {
                    return Err(Lost::because(format!(
                        "`{}` leads nowhere: `{}` is a list of {}, numbered from 0",
                        self.whole,
                        self.words.join("."),
                        list.len()
                    )));
                };
                self.words.push(index.to_string());
                self.descend(of, Some(item), None, &words[1..])
            }
            Kind::Either { of } => self.either(of, raw, default, words),
            other => Err(Lost::because(format!(
                "`{}` leads nowhere: `{}` is {}, which has no parts",
                self.whole,
                self.words.join("."),
                other.what()
            ))),
        }
    }

    fn either(
        &mut self,
        of: &[Kind],
        raw: Option<&Value>,
        default: Option<&Value>,
        words: &[&str],
    ) -> Result<Kind, Lost> {
        let here = self.words.len();
        let mut lost = None;
        for kind in of.iter().filter(|kind| has_parts(kind) && raw.is_none_or(|raw| fits(kind, raw))) {
            match self.descend(kind, raw, default, words) {
                Ok(kind) => return Ok(kind),
                Err(why) => lost = Some(why),
            }
            self.words.truncate(here);
        }
        Err(lost.unwrap_or_else(|| {
            let what = raw.or(default).map_or("nothing", Value::what);
            Lost::because(format!(
                "`{}` leads nowhere: `{}` is {what} here, which has no parts",
                self.whole,
                self.words.join(".")
            ))
        }))
    }

    fn item(
        &mut self,
        of: ItemKind,
        name: &str,
        given: Option<&BTreeMap<String, Value>>,
        words: &[&str],
    ) -> Result<Kind, Lost> {
        let Some((_, item)) = self.vocabulary.item(of, name) else { return Err(Lost::silent()) };
        if words[0] == "plugin" {
            let above = self.words.join(".");
            return Err(Lost {
                message: Some(format!("`{}` cannot be scanned, since parameters belong to their plugin", self.whole)),
                expected: Some(format!("`{above}:` and a list of plugins with their parameters")),
                nearest: Some(above),
            });
        }
        let mut fields = item.parameters.clone();
        if of == ItemKind::Update {
            fields.push(Field::new("times", Kind::COUNT, "how often within a sweep").default(Value::Integer(1)));
        }
        self.field(&fields, &format!("the {of} `{name}`"), words, |name| given.and_then(|g| g.get(name)).cloned())
    }
}

fn has_parts(kind: &Kind) -> bool {
    match kind {
        Kind::Either { of } => of.iter().any(has_parts),
        Kind::List { .. } | Kind::Map { .. } | Kind::Tree { .. } | Kind::Plugin { .. } | Kind::Any {} => true,
        _ => false,
    }
}

fn fits(kind: &Kind, raw: &Value) -> bool {
    match kind {
        Kind::Plugin { .. } => matches!(raw, Value::Text(_) | Value::Map(_)),
        Kind::Tree { .. } | Kind::Map { .. } => matches!(raw, Value::Map(_)),
        Kind::List { .. } => matches!(raw, Value::List(_)),
        Kind::Either { of } => of.iter().any(|kind| fits(kind, raw)),
        _ => true,
    }
}

/// The value at an address.
pub(crate) fn get<'a>(value: &'a Value, address: &[String]) -> Option<&'a Value> {
    address.iter().try_fold(value, |value, word| match value {
        Value::Map(map) => map.get(word),
        Value::List(list) => list.get(word.parse::<usize>().ok()?),
        _ => None,
    })
}

/// Sets the value at an address, making mappings on the way. A plugin item in its short form, a mere name, becomes a mapping.
/// Leaves the value alone where the address runs into something without parts, which resolving has refused.
pub(crate) fn set(value: &mut Value, address: &[String], new: Value) {
    let mut slot = value;
    for word in address {
        if let Value::Text(name) = slot {
            *slot = Value::map([("plugin", Value::text(std::mem::take(name)))]);
        }
        slot = match slot {
            Value::Map(map) => map.entry(word.clone()).or_insert_with(|| Value::Map(BTreeMap::new())),
            Value::List(list) => match word.parse::<usize>().ok().and_then(|i| list.get_mut(i)) {
                Some(item) => item,
                None => return,
            },
            _ => return,
        };
    }
    *slot = new;
}
