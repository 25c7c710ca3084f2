//! The page as a file: asks for nothing, lets nothing out, stays small.

#[path = "../examples/gallery/invented.rs"]
#[allow(dead_code)]
mod invented;

use spinledger_report::{Content, Figure, Page, Style};
use spinledger_terms::Value;
use std::time::{Duration, Instant};

/// The page as XML: what it says is written so that both readers agree, but for the doctype, the style and the script, which are cut out.
fn parsed<T>(html: &str, look: impl FnOnce(&roxmltree::Document<'_>) -> T) -> T {
    let body = html.strip_prefix("<!DOCTYPE html>\n").expect("the doctype comes first");
    let cut = |text: &str, begin: &str, end: &str| {
        let from = text.find(begin).expect("there is one") + begin.len();
        let to = from + text[from..].find(end).expect("it ends");
        format!("{}{}", &text[..from], &text[to..])
    };
    let body = cut(&cut(body, "<style>", "</style>"), "\n<script>", "</script>");
    let document = roxmltree::Document::parse(&body).unwrap_or_else(|e| {
        let line = body.lines().nth(e.pos().row as usize - 1).unwrap_or("");
        panic!("{e}: {}", &line[..line.len().min(300)])
    });
    look(&document)
}

#[test]
fn pages_are_well_formed_and_the_same_every_time() {
    for page in [invented::page(), invented::nasty(), Page::new("", "")] {
        let html = page.html();
        assert_eq!(html, page.html());
        parsed(&html, |document| assert!(document.root_element().has_tag_name("html")));
    }
}

/// Words stay words: the elements and attributes of a page with nasty words are those of a page with plain ones.
#[test]
fn nothing_gets_out_of_words() {
    let html = invented::nasty().html();
    assert_eq!(html.matches("<script").count(), 2, "values of one chart, and the script");
    assert_eq!(html.matches("</script").count(), 2);
    assert_eq!(html.matches("</style").count(), 1);
    assert!(!html.contains("<img"));
    parsed(&html, |document| {
        for node in document.descendants() {
            assert!(node.attributes().all(|a| !a.name().starts_with("on") && a.name() != "style"), "{node:?}");
        }
        let heading = document.descendants().find(|n| n.has_tag_name("h1")).and_then(|n| n.text()).unwrap();
        assert!(heading.starts_with(&invented::NASTY.replace('\u{0}', "\u{fffd}")), "{heading}");
    });
}

/// Nothing that a browser would fetch: no address at all, no source, no import, and a policy that forbids it.
#[test]
fn the_page_asks_for_nothing() {
    for page in [invented::page(), invented::nasty()] {
        let html = page.html();
        for word in ["http:", "https:", "//www", "url(", "@import", "<iframe", "<object", "<embed"] {
            assert!(!html.contains(word), "{word}");
        }
        parsed(&html, |document| {
            for node in document.descendants() {
                for attribute in node.attributes() {
                    let value = attribute.value();
                    match attribute.name() {
                        "src" | "srcset" | "action" | "data" => panic!("{node:?}"),
                        "href" => assert!(value.starts_with('#') || value == "data:,", "{value}"),
                        _ => {}
                    }
                }
            }
            let policy = document
                .descendants()
                .find(|n| n.attribute("http-equiv") == Some("Content-Security-Policy"))
                .and_then(|n| n.attribute("content"))
                .unwrap();
            assert!(policy.starts_with("default-src 'none'; style-src 'sha256-"), "{policy}");
            assert!(!policy.contains("unsafe"), "{policy}");
        });
    }
}

#[test]
fn links_lead_somewhere_and_names_are_unique() {
    parsed(&invented::page().html(), |document| {
        let mut names = std::collections::BTreeSet::new();
        for id in document.descendants().filter_map(|n| n.attribute("id")) {
            assert!(names.insert(id), "{id} twice");
        }
        for node in document.descendants() {
            for name in ["href", "aria-labelledby"] {
                if let Some(target) = node.attribute(name).filter(|t| *t != "data:,") {
                    assert!(names.contains(target.trim_start_matches('#')), "{target}");
                }
            }
        }
    });
}

#[test]
fn the_answer_comes_first_with_error_and_verdict() {
    let html = invented::page().html();
    let place = |text: &str| html.find(text).unwrap_or_else(|| panic!("{text} is missing"));
    let order = [
        "<h1",
        "not certified material data",
        "<strong>2.2895</strong> <span class=\"error\">± 0.0012</span>",
        "agrees</p>",
        "It lies 0.86 standard errors above",
        "What is not settled</h2>",
        "the chains have not forgotten where they began",
        "<figure",
        "<table",
        "The same digits again</h2>",
        "<footer",
    ];
    for pair in order.windows(2) {
        assert!(place(pair[0]) < html.rfind(pair[1]).unwrap_or(0), "{} comes before {}", pair[0], pair[1]);
    }
    let clean = Page { answers: vec![], tables: vec![], ..invented::page() };
    assert!(clean.html().contains("Nothing on this page is flagged."));
}

/// Long tables are cut, and the page says so.
#[test]
fn long_tables_say_how_long_they_are() {
    let html = invented::page().html();
    assert!(html.contains("60 of 180 rows shown."));
    assert_eq!(html.matches("<tr").count(), 61);
}

#[test]
fn pages_are_small_and_fast() {
    let length = invented::page().html().len();
    assert!(length < 1_000_000, "{length} bytes");
    // Eight sizes, five hundred points each, in three styles.
    let figures = [Style::Points, Style::Joined, Style::Band].map(|style| Figure {
        caption: "Invented".to_owned(),
        content: Content::Chart(invented::crossing(&[8, 12, 16, 24, 32, 48, 64, 96], 500, style)),
        record: Value::Null,
    });
    let page = Page { figures: figures.to_vec(), ..invented::page() };
    let begin = Instant::now();
    let length = page.html().len();
    let time = begin.elapsed();
    assert!(time < Duration::from_secs(3), "{time:?}");
    assert!(length < 4_000_000, "{length} bytes");
}
