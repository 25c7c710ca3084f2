//! Parameters from JSON text: small, since plugins should not need a JSON library for their tests.

use crate::Params;

/// Parameters as they would arrive for this JSON text. Numbers with a point or an exponent are numbers, others whole.
///
/// # Panics
/// Where the text is not JSON. Escapes other than `\"`, `\\`, `\/`, `\n` and `\t` are refused.
pub fn params(text: &str) -> Params {
    let mut reader = Reader { text, at: 0 };
    let value = reader.value();
    reader.space();
    assert!(reader.at == text.len(), "something follows the JSON value: {}", &text[reader.at..]);
    value
}

struct Reader<'a> {
    text: &'a str,
    at: usize,
}

impl Reader<'_> {
    fn rest(&self) -> &str {
        &self.text[self.at..]
    }

    fn space(&mut self) {
        self.at = self.text.len() - self.rest().trim_start().len();
    }

    /// Goes over a token if it comes next.
    fn take(&mut self, token: &str) -> bool {
        self.space();
        let there = self.rest().starts_with(token);
        if there {
            self.at += token.len();
        }
        there
    }

    fn value(&mut self) -> Params {
        for (token, value) in
            [("null", Params::Null), ("true", Params::Boolean(true)), ("false", Params::Boolean(false))]
        {
            if self.take(token) {
                return value;
            }
        }
        if self.take("[") {
            let mut list = Vec::new();
            while !self.take("]") {
                assert!(list.is_empty() || self.take(","), "a list goes on with `,`: {}", self.rest());
                list.push(self.value());
            }
            return Params::List(list);
        }
        if self.take("{") {
            let mut map: Vec<(String, Params)> = Vec::new();
            while !self.take("}") {
                assert!(map.is_empty() || self.take(","), "a mapping goes on with `,`: {}", self.rest());
                assert!(self.take("\""), "a key is text: {}", self.rest());
                let key = self.string();
                assert!(self.take(":"), "a key is followed by `:`: {}", self.rest());
                map.push((key, self.value()));
            }
            map.sort_by(|a, b| a.0.cmp(&b.0));
            return Params::Map(map);
        }
        if self.take("\"") {
            return Params::Text(self.string());
        }
        let end = self.rest().find([',', ']', '}', ' ', '\n']).unwrap_or(self.rest().len());
        let word = self.rest()[..end].to_owned();
        self.at += end;
        match word.parse::<i64>() {
            Ok(integer) => Params::Integer(integer),
            Err(_) => Params::Number(word.parse().unwrap_or_else(|_| panic!("not a JSON value: `{word}`"))),
        }
    }

    fn string(&mut self) -> String {
        let mut out = String::new();
        let rest = self.text[self.at..].to_owned();
        let mut chars = rest.char_indices();
        while let Some((at, c)) = chars.next() {
            match c {
                '"' => {
                    self.at += at + 1;
                    return out;
                }
                '\\' => match chars.next() {
                    Some((_, c @ ('"' | '\\' | '/'))) => out.push(c),
                    Some((_, 'n')) => out.push('\n'),
                    Some((_, 't')) => out.push('\t'),
                    other => panic!("an escape that is not read here: {other:?}"),
                },
                c => out.push(c),
            }
        }
        panic!("a text without end")
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn all_kinds_of_values_arrive() {
        let value = params(r#" {"b": [1, 2.5, -1e3], "a": {"t": "x \"y\"", "u": true}, "c": null} "#);
        assert_eq!(
            value.get("b"),
            Some(&Params::List(vec![Params::Integer(1), Params::Number(2.5), Params::Number(-1000.0)]))
        );
        assert_eq!(value.get("a").and_then(|a| a.get("t")), Some(&Params::Text("x \"y\"".into())));
        assert_eq!(value.get("c"), Some(&Params::Null));
    }

    #[test]
    #[should_panic(expected = "not a JSON value")]
    fn words_are_refused() {
        params("{\"a\": yes}");
    }
}
