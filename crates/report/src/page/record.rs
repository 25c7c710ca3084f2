//! Records: nested names and values behind a fold.

use crate::text::escape;
use spinledger_terms::{Value, number_text};
use std::fmt::Write as _;

/// A fold with a record in it; nothing for Null.
pub(super) fn fold(out: &mut String, summary: &str, record: &Value) {
    if *record == Value::Null {
        return;
    }
    let _ = write!(out, "<details class=\"record\"><summary>{}</summary>", escape(summary));
    value(out, record);
    out.push_str("</details>\n");
}

fn value(out: &mut String, record: &Value) {
    match record {
        Value::Map(map) if !map.is_empty() => {
            out.push_str("<dl>");
            for (name, item) in map {
                let _ = write!(out, "<div><dt>{}</dt><dd>", breakable(name));
                value(out, item);
                out.push_str("</dd></div>");
            }
            out.push_str("</dl>");
        }
        Value::List(items) if items.iter().any(|i| matches!(i, Value::Map(_) | Value::List(_))) => {
            out.push_str("<ol>");
            for item in items {
                out.push_str("<li>");
                value(out, item);
                out.push_str("</li>");
            }
            out.push_str("</ol>");
        }
        Value::List(items) => {
            let texts: Vec<String> = items.iter().map(plain).collect();
            let _ = write!(out, "<span dir=\"auto\">{}</span>", texts.join(", "));
        }
        other => {
            let _ = write!(out, "<span dir=\"auto\">{}</span>", plain(other));
        }
    }
}

/// A value without parts, with all its digits: records are for copying.
fn plain(value: &Value) -> String {
    match value {
        Value::Null => "not given".to_owned(),
        Value::Bool(true) => "yes".to_owned(),
        Value::Bool(false) => "no".to_owned(),
        Value::Integer(i) => i.to_string(),
        Value::Number(x) => number_text(*x),
        Value::Text(text) => escape(text),
        Value::List(_) | Value::Map(_) => "nothing".to_owned(),
    }
}

/// A name that may break after underscores and dots.
pub(super) fn breakable(name: &str) -> String {
    escape(name).replace('_', "_<wbr/>").replace('.', ".<wbr/>")
}
