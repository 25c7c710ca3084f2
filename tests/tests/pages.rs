//! Figures and the report page, from the pipeline to the files: what is on them, that they are the same however and wherever they are made, what makes
//! them be made again, and what is said when there is nothing to draw.

use spinledger_ledger::file_key;
use spinledger_terms::Table;
use spinledger_tests::program::Desk;
use std::collections::BTreeMap;

/// A small study with everything that draws. Names of the steps in braces.
fn pipeline(title: &str, names: &BTreeMap<&str, &str>) -> String {
    let mut text = String::from(
        r#"spinledger: 1
pipeline: pages
title: TITLE
seed: 20261201
steps:
  {chains}:
    does: sample
    lattice: { plugin: square, size: 4 }
    model: ising
    update: swendsen-wang
    observe: [energy, magnetisation]
    scan:
      lattice.size: [4, 6, 8]
      temperature: { from: 2.0, to: 2.6, count: 7 }
    equilibrate: 100
    measure: 1500
    chains: 2
  {means}:  { does: averages, of: {chains} }
  {curves}: { does: reweight, of: {chains}, temperature: { from: 2.0, to: 6.0, count: 161 } }
  {tc}:     { does: crossing, of: {curves} }
  held:
    does: compare
    items:
      - name: ordering temperature
        take: { step: {tc}, quantity: critical_temperature }
        against: { value: 2.269185314213, source: "Onsager 1944" }
        precision: 0.001
  {cumulants}:
    does: chart
    of: {curves}
    quantity: binder
    points: {means}
    marks: [{ step: {tc}, quantity: critical_temperature, label: crossing }, { on: y, value: 0.61, label: level }]
  page: { does: report, of: [{means}, {curves}, {tc}, held, {cumulants}] }
"#,
    );
    for name in ["chains", "means", "curves", "tc", "cumulants"] {
        text = text.replace(&format!("{{{name}}}"), names.get(name).unwrap_or(&name));
    }
    text.replace("TITLE", title)
}

fn plain() -> String {
    pipeline("Where a small square lattice orders", &BTreeMap::new())
}

/// Text between two marks.
fn between<'a>(text: &'a str, from: &str, to: &str) -> &'a str {
    let start = text.find(from).unwrap_or_else(|| panic!("`{from}` is not there")) + from.len();
    let end = text[start..].find(to).unwrap_or_else(|| panic!("`{to}` is not there"));
    &text[start..start + end]
}

fn page(desk: &Desk) -> String {
    std::fs::read_to_string(desk.path("results/pages/page.html")).expect("a page")
}

/// The page says what was asked, what was found, that it is not settled and why, and shows figures and tables with their records.
#[test]
fn a_page_answers_and_says_what_is_not_settled() {
    let desk = Desk::new();
    desk.write("pages.yaml", &pipeline("\"Does <script>alert(1)</script> & order?\"", &BTreeMap::new()));
    desk.run_pipeline("pages.yaml", &[], 0);
    let page = page(&desk);
    assert!(page.contains("Does &lt;script&gt;alert(1)&lt;/script&gt; &amp; order?"), "the question, escaped");
    assert!(!page.contains("<script>alert"));
    for address in ["http:", "https:", "//www", "src=", "@import", "url("] {
        assert!(!page.contains(address), "`{address}` asks for something");
    }
    assert!(page.len() < 1_500_000, "{} bytes", page.len());

    let held = desk.table("results/pages/held.parquet");
    let found = held.numbers("value").unwrap()[0].expect("a value");
    let answer = between(&page, "<article class=\"answer", "</article>");
    assert!(answer.contains("ordering temperature") && answer.contains("Onsager 1944"));
    assert!(answer.contains(&format!("{found:.1}")[..3]), "{found} in {answer}");
    assert!(answer.contains("undecided") && answer.contains("standard errors"));
    assert!(answer.contains("Record of this number") && answer.contains("swendsen-wang"), "down to the chains");

    // Curves go up to 6 where no chain was: that is told in the table, in the section and under the figure.
    let curves = desk.table("results/pages/curves.parquet");
    let poor = (0..curves.rows()).filter(|row| curves.text("flags", *row).unwrap().contains("poor-overlap")).count();
    assert!(poor > 0, "the pipeline does not do what the test is for");
    let unsettled = between(&page, "<section id=\"unsettled\">", "</section>");
    assert!(unsettled.contains(&format!("{poor} of {} rows", curves.rows())), "{unsettled}");
    assert!(page.contains("flagged poor overlap"), "in a figure's description");

    // Energy, heat capacity, |m|, susceptibility; pairs; the chart. Not the cumulant twice, nor averages where curves are.
    assert_eq!(page.matches("<figure id=").count(), 6);
    assert_eq!(page.matches("<section class=\"table\"").count(), 4);
    assert_eq!(page.matches("Record of this figure").count(), 6);
    assert_eq!(page.matches("Record of this table").count(), 4);

    // All flags, also those of tables that are not shown.
    let shown = desk.table("results/pages/page.parquet");
    let of = |does: &str| {
        let row = (0..shown.rows()).find(|row| shown.text("does", *row) == Some(does)).unwrap();
        shown.text("flags", row).unwrap().to_owned()
    };
    assert!(of("reweight").contains("poor-overlap") && of("compare").contains("imprecise"), "{shown:?}");
}

/// What is drawn is what stands in the tables.
#[test]
fn a_chart_holds_the_rows_that_were_asked_for() {
    let desk = Desk::new();
    desk.write("pages.yaml", &plain());
    desk.run_pipeline("pages.yaml", &["--only", "cumulants"], 0);
    let (curves, drawn) = (desk.table("results/pages/curves.parquet"), desk.table("results/pages/cumulants.parquet"));
    let means = desk.table("results/pages/means.parquet");
    let binder = |table: &Table| {
        let rows = (0..table.rows()).filter(|row| table.text("quantity", *row) == Some("binder"));
        let numbers = |name: &str| table.numbers(name).unwrap();
        let (sizes, ts, values, errors) = (numbers("size"), numbers("temperature"), numbers("value"), numbers("error"));
        rows.map(|r| (format!("L = {}", sizes[r].unwrap()), ts[r], values[r], errors[r])).collect::<Vec<_>>()
    };
    let (x, y, error) = (drawn.numbers("x").unwrap(), drawn.numbers("y").unwrap(), drawn.numbers("error").unwrap());
    let found: Vec<_> =
        (0..drawn.rows()).map(|r| (drawn.text("line", r).unwrap().to_owned(), x[r], y[r], error[r])).collect();
    assert_eq!(found, [binder(&curves), binder(&means)].concat());

    let svg = std::fs::read_to_string(desk.path("results/pages/cumulants.svg")).unwrap();
    let png = std::fs::read(desk.path("results/pages/cumulants.png")).unwrap();
    assert!(
        svg.starts_with("<svg") && svg.ends_with("</svg>\n") && svg.contains("Binder cumulant against temperature.")
    );
    assert!(svg.contains("Marked: level at 0.61") && svg.contains("Marked: crossing at 2."));
    assert!(png.starts_with(b"\x89PNG") && png.len() > 10_000);
    // Whatever file is asked, it names its entry.
    let keys = ["cumulants.svg", "cumulants.png", "cumulants.parquet"]
        .map(|name| file_key(&desk.path(&format!("results/pages/{name}"))).unwrap().expect("a key"));
    assert!(keys.iter().all(|key| *key == keys[0]));
}

/// The same bytes for any number of workers, in any folder; and what no content depends on makes nothing anew, not even the page.
#[test]
fn pages_are_the_same_and_made_once() {
    let one = Desk::new();
    one.write("pages.yaml", &plain());
    let first = one.run_pipeline("pages.yaml", &["--workers", "1"], 0);
    assert_eq!(first.counts_of("page"), (1, 0, 0));
    let two = Desk::new();
    std::fs::create_dir(two.path("elsewhere")).unwrap();
    two.write("elsewhere/other-name.yaml", &plain());
    two.run_pipeline("elsewhere/other-name.yaml", &["--workers", "2", "--threads", "2"], 0);
    let drawings = |desk: &Desk| {
        let mut files = desk.files("results/pages");
        files.retain(|name, _| [".svg", ".png", ".html"].iter().any(|end| name.ends_with(end)));
        files
    };
    let (a, b) = (drawings(&one), drawings(&two));
    assert_eq!(a.keys().collect::<Vec<_>>(), ["cumulants.png", "cumulants.svg", "page.html"]);
    assert!(a == b, "files differ between folders and numbers of workers");

    // Every step has another name, the file another form.
    let names = [("chains", "runs"), ("means", "m"), ("curves", "histograms"), ("tc", "where"), ("cumulants", "fig")];
    let text = pipeline("Where a small square lattice orders", &BTreeMap::from(names));
    one.write("pages.yaml", &text.replace("chains: 2", "# two\n    chains:    2"));
    let again = one.run_pipeline("pages.yaml", &[], 0);
    assert_eq!(again.counts().0, 0, "nothing is computed: {:?}", again.counts());
    assert_eq!(std::fs::read(one.path("results/pages/fig.svg")).unwrap(), a["cumulants.svg"]);
    assert_eq!(page(&one).as_bytes(), a["page.html"]);
    assert!(!one.path("results/pages/cumulants.svg").exists(), "figures that are shown no more go");

    // Another question is another page, and nothing else.
    one.write("pages.yaml", &pipeline("Another question", &BTreeMap::from(names)));
    let asked = one.run_pipeline("pages.yaml", &[], 0);
    assert_eq!((asked.counts().0, asked.counts_of("page")), (1, (1, 0, 0)));
    assert!(page(&one).contains("Another question"));
}

/// A chart of what is not there breaks its own parcel, and says what there is.
#[test]
fn what_cannot_be_drawn_is_said() {
    let desk = Desk::new();
    let cases = [
        ("quantity: binder", "quantity: bindre", "no row of the table has quantity = \"bindre\""),
        (
            "quantity: binder",
            "quantity: binder\n    x: temperatur",
            "no column `temperatur`; it has: size, sites, temperature",
        ),
        ("quantity: binder", "quantity: binder\n    y: flags", "the column `flags` holds no numbers"),
        ("quantity: binder", "table: pairs", "the step has no table `pairs`; it has: main, replicates"),
        ("label: crossing", "where: { size: 4 }", "mark 1: the table has no column `size`"),
    ];
    for (from, to, message) in cases {
        let text = plain();
        assert!(text.contains(from));
        desk.write("pages.yaml", &text.replacen(from, to, 1));
        let ran = desk.run(&["run", "pages.yaml", "--quiet"]);
        assert_eq!(ran.status, Some(1), "{to}: {}{}", ran.out, ran.err);
        assert!(ran.err.contains("cumulants") && ran.err.contains(message), "{to}: {}", ran.err);
    }
    let refused = [
        ("of: curves\n", "of: chains\n", "`chains` does sample"),
        ("[means, curves", "[chains, curves", "`chains` does sample"),
        (
            "{ on: y, value: 0.61, label: level }",
            "{ on: y, label: level }",
            "a reference line stands at a value or at a result",
        ),
        ("points: means", "points: means\n    range: { x: [3, 2] }", "the range is empty"),
        ("points: means", "points: means\n    scale: { x: logarithmic }", "logarithmic"),
    ];
    for (from, to, message) in refused {
        let text = plain();
        assert!(text.contains(from), "{from}");
        desk.write("pages.yaml", &text.replacen(from, to, 1));
        let ran = desk.run(&["check", "pages.yaml"]);
        assert_eq!(ran.status, Some(2), "{to}: {}{}", ran.out, ran.err);
        assert!(ran.err.contains(message) && ran.err.contains("pages.yaml:"), "{to}: {}", ran.err);
    }
}

/// Many points and many lines are drawn and put on a page in little time, and every line can still be told from the others.
#[test]
fn five_hundred_points_and_eight_sizes_stay_quick() {
    let desk = Desk::new();
    let text = plain()
        .replace("[4, 6, 8]", "[4, 5, 6, 7, 8, 9, 10, 12]")
        .replace("measure: 1500", "measure: 400")
        .replace("from: 2.0, to: 6.0, count: 161", "from: 2.0, to: 2.6, count: 500");
    desk.write("pages.yaml", &text);
    desk.run_pipeline("pages.yaml", &[], 0);
    let drawn = desk.table("results/pages/cumulants.parquet");
    assert_eq!(drawn.rows(), 8 * 500 + 8 * 7);
    let seconds = |file: &str| {
        let key = file_key(&desk.path(file)).unwrap().unwrap();
        let ledger = spinledger_ledger::Ledger::open(&desk.path(".spinledger")).unwrap();
        ledger.read_record(&key).unwrap().provenance.seconds
    };
    let (chart, page) = (seconds("results/pages/cumulants.svg"), seconds("results/pages/page.html"));
    assert!(chart < 3.0 && page < 3.0, "chart {chart} s, page {page} s");
    let svg = std::fs::read_to_string(desk.path("results/pages/cumulants.svg")).unwrap();
    let colours: std::collections::BTreeSet<&str> =
        svg.split("stroke=\"").skip(1).filter_map(|rest| rest.split('"').next()).collect();
    assert!(colours.len() >= 8, "{colours:?}");
}
