//! Puts a page together.

use super::record::fold;
use super::words::{counted, flag_text};
use super::{Flagged, Page, answer, digest, figure, table};
use crate::ink;
use crate::text::escape;
use std::fmt::Write as _;

const SCRIPT: &str = include_str!("script.js");
const STYLE: &str = include_str!("style.css");

/// The style: colours as variables for light and dark, then rules.
fn style() -> String {
    let (light, dark) = (ink::variables(false), ink::variables(true));
    format!(
        ":root{{color-scheme:light;{light}{LIGHT}}}\n\
         @media screen and (prefers-color-scheme:dark){{:root:not([data-light]){{color-scheme:dark;{dark}{DARK}}}}}\n\
         @media screen{{:root[data-dark]{{color-scheme:dark;{dark}{DARK}}}}}\n{}\n{STYLE}",
        ink::stylesheet()
    )
}

/// Colours of the page itself.
const LIGHT: &str = "--ground:#f6f4ef;--edge:#dcd7cb;--good:#1f708f;--bad:#a33a1c;--open:#7a5b12;--accent:#1f708f;";
const DARK: &str = "--ground:#0e1215;--edge:#2f373f;--good:#7cbfcc;--bad:#ff8f68;--open:#e3b95c;--accent:#7cbfcc;";

impl Page {
    /// The page as one HTML file: no network, no file beside it. Its content security policy allows nothing but its own style and
    /// script, each named by digest. Without scripts everything but the readout of charts and the switch of colours works.
    pub fn html(&self) -> String {
        let style = style();
        let title = match self.name.as_str() {
            "" => escape(&self.question),
            name => format!("{} · {}", escape(&self.question), escape(name)),
        };
        let mut out = String::with_capacity(1 << 18);
        let _ = write!(
            out,
            "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\"/>\n\
             <meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src '{}'; script-src '{}'; img-src data:; base-uri 'none'; form-action 'none'\"/>\n\
             <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\"/>\n\
             <meta name=\"referrer\" content=\"no-referrer\"/>\n<link rel=\"icon\" href=\"data:,\"/>\n\
             <title>{title}</title>\n<style>{style}</style>\n</head>\n<body>\n",
            digest::source(&style),
            digest::source(SCRIPT)
        );
        self.head(&mut out);
        out.push_str("<main>\n");
        self.answers(&mut out);
        self.unsettled(&mut out);
        if !self.figures.is_empty() {
            out.push_str("<section id=\"figures\">\n<h2>Figures</h2>\n");
            for (i, figure) in self.figures.iter().enumerate() {
                figure::write(&mut out, i + 1, figure);
            }
            out.push_str("</section>\n");
        }
        if !self.tables.is_empty() {
            out.push_str("<section id=\"tables\">\n<h2>Tables</h2>\n");
            for (i, view) in self.tables.iter().enumerate() {
                table::write(&mut out, i + 1, view);
            }
            out.push_str("</section>\n");
        }
        self.again(&mut out);
        let _ = write!(
            out,
            "</main>\n<footer><p dir=\"auto\">{}</p></footer>\n<script>{SCRIPT}</script>\n</body>\n</html>\n",
            escape(&self.made)
        );
        out
    }

    fn head(&self, out: &mut String) {
        out.push_str("<header>\n<div class=\"top\">");
        let _ = write!(out, "<p class=\"name\" dir=\"auto\">{}</p>", escape(&self.name));
        out.push_str("<button type=\"button\" id=\"shade\" hidden=\"\">dark</button></div>\n");
        let _ = write!(
            out,
            "<h1 dir=\"auto\">{}</h1>\n<p class=\"lead\">The numbers on this page are research estimates. They are not certified material data. Errors are one standard error.</p>\n<nav aria-label=\"On this page\"><ul>",
            escape(&self.question)
        );
        let parts = [
            ("answers", if self.answers.len() > 1 { "Answers" } else { "Answer" }, !self.answers.is_empty()),
            ("unsettled", "What is not settled", true),
            ("figures", "Figures", !self.figures.is_empty()),
            ("tables", "Tables", !self.tables.is_empty()),
            ("again", "The same digits again", !self.again.is_empty()),
        ];
        for (id, words, _) in parts.iter().filter(|p| p.2) {
            let _ = write!(out, "<li><a href=\"#{id}\">{words}</a></li>");
        }
        out.push_str("</ul></nav>\n</header>\n");
    }

    fn answers(&self, out: &mut String) {
        if self.answers.is_empty() && self.notes.is_empty() {
            return;
        }
        let _ = write!(
            out,
            "<section id=\"answers\">\n<h2>{}</h2>\n",
            if self.answers.len() > 1 { "Answers" } else { "Answer" }
        );
        out.push_str("<div class=\"answers\">\n");
        for one in &self.answers {
            answer::write(out, one);
        }
        out.push_str("</div>\n");
        for note in &self.notes {
            let _ = writeln!(out, "<p class=\"note\" dir=\"auto\">{}</p>", escape(note));
        }
        out.push_str("</section>\n");
    }

    /// Flags in words: of answers and of tables.
    fn unsettled(&self, out: &mut String) {
        let mut items = Vec::new();
        for one in self.answers.iter().filter(|a| !a.flags.is_empty()) {
            let words: Vec<String> = one.flags.iter().map(|f| escape(&flag_text(f))).collect();
            items.push(format!("<b dir=\"auto\">{}</b>: {}", escape(&one.name), words.join("; ")));
        }
        for (i, view) in self.tables.iter().enumerate() {
            let n = i + 1;
            let flagged = view.flagged.clone().unwrap_or_else(|| Flagged::of(&view.table));
            for (flag, count) in flagged.flags {
                items.push(format!(
                    "<a href=\"#table-{n}\">Table {n}</a>, {count} of {}: {}",
                    counted(flagged.rows, "row", "rows"),
                    escape(&flag_text(&flag))
                ));
            }
        }
        out.push_str("<section id=\"unsettled\">\n<h2>What is not settled</h2>\n");
        if items.is_empty() {
            out.push_str("<p>Nothing on this page is flagged.</p>\n");
        } else {
            out.push_str("<ul class=\"flags\">");
            for item in items {
                let _ = write!(out, "<li>{item}</li>");
            }
            out.push_str("</ul>\n");
        }
        out.push_str("</section>\n");
    }

    fn again(&self, out: &mut String) {
        if self.again.is_empty() && self.record == spinledger_terms::Value::Null {
            return;
        }
        out.push_str("<section id=\"again\">\n<h2>The same digits again</h2>\n<ol class=\"again\">\n");
        for step in &self.again {
            let _ = write!(out, "<li><p dir=\"auto\">{}</p>", escape(&step.words));
            if !step.command.is_empty() {
                let _ = write!(out, "<pre tabindex=\"0\"><code>{}</code></pre>", escape(&step.command));
            }
            out.push_str("</li>\n");
        }
        out.push_str("</ol>\n");
        fold(out, "Record of the whole", &self.record);
        out.push_str("</section>\n");
    }
}
