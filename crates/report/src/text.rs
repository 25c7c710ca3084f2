//! Text that is safe inside XML and HTML.

/// Escapes for element content and for attributes in double or single quotes, in XML and HTML alike. Control characters that
/// neither allows become the replacement character.
pub(crate) fn escape(text: &str) -> String {
    let mut out = String::with_capacity(text.len() + 8);
    for letter in text.chars() {
        match letter {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            '\'' => out.push_str("&#39;"),
            '\t' | '\n' => out.push(letter),
            '\u{fffe}' | '\u{ffff}' => out.push('\u{fffd}'),
            c if c.is_control() => out.push('\u{fffd}'),
            c => out.push(c),
        }
    }
    out
}

/// A text as a JSON string that is safe inside a `script` element.
pub(crate) fn json_text(text: &str) -> String {
    use std::fmt::Write as _;
    let mut out = String::with_capacity(text.len() + 2);
    out.push('"');
    for letter in text.chars() {
        match letter {
            '"' => out.push_str("\\\""),
            '\\' => out.push_str("\\\\"),
            '<' | '>' | '&' | '\u{2028}' | '\u{2029}' => {
                let _ = write!(out, "\\u{:04x}", letter as u32);
            }
            c if c.is_control() => {
                let _ = write!(out, "\\u{:04x}", c as u32);
            }
            c => out.push(c),
        }
    }
    out.push('"');
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nothing_gets_out_of_text() {
        assert_eq!(
            escape("</style><script a='1' b=\"2\">&\u{1}"),
            "&lt;/style&gt;&lt;script a=&#39;1&#39; b=&quot;2&quot;&gt;&amp;\u{fffd}"
        );
        assert_eq!(json_text("</script>\"\\\n"), "\"\\u003c/script\\u003e\\\"\\\\\\u000a\"");
    }
}
