//! Parameters as they arrive: checked against the manifest, complete with defaults.

use crate::{Error, Result};

/// A node of the parameter tree; the top is a mapping from parameter to value.
#[derive(Clone, Debug, PartialEq)]
pub enum Params {
    /// Nothing.
    Null,
    /// True or false.
    Boolean(bool),
    /// A whole number.
    Integer(i64),
    /// A number.
    Number(f64),
    /// Text.
    Text(String),
    /// Values in order.
    List(Vec<Params>),
    /// Values by name, in byte order of the names.
    Map(Vec<(String, Params)>),
}

impl Params {
    /// The value of a parameter, if given.
    pub fn get(&self, name: &str) -> Option<&Params> {
        match self {
            Params::Map(map) => map.iter().find(|(key, _)| key == name).map(|(_, value)| value),
            _ => None,
        }
    }

    /// The value of a parameter.
    ///
    /// # Errors
    /// Where it is missing, which a manifest that fits the code rules out.
    pub fn need(&self, name: &str) -> Result<&Params> {
        self.get(name).ok_or_else(|| Error::new(format!("the parameter `{name}` is missing")))
    }

    /// A number (whole or not).
    ///
    /// # Errors
    /// Where it is missing or something else.
    pub fn number(&self, name: &str) -> Result<f64> {
        self.need(name)?.as_number().ok_or_else(|| Error::new(format!("`{name}` is not a number")))
    }

    /// A whole number of at least zero.
    ///
    /// # Errors
    /// Where it is missing or something else.
    pub fn count(&self, name: &str) -> Result<usize> {
        match self.need(name)? {
            Params::Integer(i) if *i >= 0 => Ok(*i as usize),
            _ => Err(Error::new(format!("`{name}` is not a whole number of at least 0"))),
        }
    }

    /// Text.
    ///
    /// # Errors
    /// Where it is missing or something else.
    pub fn text(&self, name: &str) -> Result<&str> {
        self.need(name)?.as_text().ok_or_else(|| Error::new(format!("`{name}` is not text")))
    }

    /// One whole number for all of `directions`, or a list with one each.
    ///
    /// # Errors
    /// Where it is missing, something else, or the list has another length.
    pub fn counts_per_direction(&self, name: &str, directions: usize) -> Result<Vec<usize>> {
        let wrong = || Error::new(format!("`{name}` must be a whole number or a list of {directions}"));
        let one = |value: &Params| match value {
            Params::Integer(i) if *i >= 0 => Ok(*i as usize),
            _ => Err(wrong()),
        };
        match self.need(name)? {
            Params::List(list) if list.len() == directions => list.iter().map(one).collect(),
            Params::List(_) => Err(wrong()),
            value => Ok(vec![one(value)?; directions]),
        }
    }

    /// One word for all of `directions`, or a list with one each.
    ///
    /// # Errors
    /// Where it is missing, something else, or the list has another length.
    pub fn words_per_direction(&self, name: &str, directions: usize) -> Result<Vec<String>> {
        let wrong = || Error::new(format!("`{name}` must be a word or a list of {directions}"));
        let one = |value: &Params| value.as_text().map(str::to_owned).ok_or_else(wrong);
        match self.need(name)? {
            Params::List(list) if list.len() == directions => list.iter().map(one).collect(),
            Params::List(_) => Err(wrong()),
            value => Ok(vec![one(value)?; directions]),
        }
    }

    /// A number for each of `classes`: one number for all, or a mapping from class to number, in which the longest name that
    /// begins a class's name (whole words between dots) wins and classes without one get 0.
    ///
    /// # Errors
    /// Where it is missing, something else, or names a class that does not exist.
    pub fn numbers_by_class(&self, name: &str, classes: &[&str]) -> Result<Vec<f64>> {
        let covers =
            |key: &str, class: &str| class == key || class.strip_prefix(key).is_some_and(|rest| rest.starts_with('.'));
        match self.need(name)? {
            Params::Map(map) => {
                if let Some((key, _)) = map.iter().find(|(key, _)| classes.iter().all(|class| !covers(key, class))) {
                    let known = classes.join(", ");
                    return Err(Error::new(format!("`{name}` names the bond class `{key}`; the lattice has: {known}")));
                }
                classes
                    .iter()
                    .map(|class| {
                        let best = map.iter().filter(|(key, _)| covers(key, class)).max_by_key(|(key, _)| key.len());
                        best.map_or(Ok(0.0), |(key, value)| {
                            value.as_number().ok_or_else(|| Error::new(format!("`{name}.{key}` is not a number")))
                        })
                    })
                    .collect()
            }
            value => {
                let all = value.as_number().ok_or_else(|| Error::new(format!("`{name}` is not a number")))?;
                Ok(vec![all; classes.len()])
            }
        }
    }

    /// The number, whole or not.
    pub fn as_number(&self) -> Option<f64> {
        match self {
            Params::Integer(i) => Some(*i as f64),
            Params::Number(x) => Some(*x),
            _ => None,
        }
    }

    /// The text.
    pub fn as_text(&self) -> Option<&str> {
        match self {
            Params::Text(text) => Some(text),
            _ => None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_longest_class_name_wins_and_unnamed_classes_are_zero() {
        let map = Params::Map(vec![
            ("first".into(), Params::Number(1.0)),
            ("first.x".into(), Params::Number(2.0)),
            ("second".into(), Params::Integer(3)),
        ]);
        let params = Params::Map(vec![("coupling".into(), map)]);
        let values = params.numbers_by_class("coupling", &["first.x", "first.y", "second", "third"]).unwrap();
        assert_eq!(values, [2.0, 1.0, 3.0, 0.0]);
        assert!(params.numbers_by_class("coupling", &["first.x"]).unwrap_err().0.contains("`second`"));
    }
}
