//! The main job as README shows it, and every pipeline and example of the documentation.

use spinledger_tests::program::{Desk, number, top};
use std::path::{Path, PathBuf};
use std::process::Command;
use std::time::Instant;

/// The square-lattice Ising model orders at 2/ln(1 + sqrt 2) (Onsager 1944 Phys. Rev. 65 117).
const ONSAGER: f64 = 2.269_185_314_213_022;

/// Parcels of the quickstart: chains, points, curves, crossing, comparison, chart, page.
const PARCELS: (u64, u64, u64) = (144 + 36 + 4 + 4, 0, 0);

fn text_of(file: &str) -> String {
    std::fs::read_to_string(top().join(file)).unwrap_or_else(|error| panic!("{file}: {error}"))
}

/// Files of a folder of the source tree with an ending.
fn files(folder: &str, ending: &str) -> Vec<PathBuf> {
    let entries = std::fs::read_dir(top().join(folder)).expect("the folder is there");
    let paths = entries.map(|entry| entry.expect("an entry").path());
    let mut paths: Vec<PathBuf> = paths.filter(|path| path.extension().is_some_and(|e| e == ending)).collect();
    paths.sort();
    assert!(!paths.is_empty(), "{folder} has files .{ending}");
    paths
}

/// Fenced blocks of a language in Markdown.
fn fenced(markdown: &str, language: &str) -> Vec<String> {
    let open = format!("```{language}\n");
    let rest = markdown.split(&open).skip(1);
    rest.map(|rest| rest.split("```").next().unwrap_or_default().to_owned()).collect()
}

/// The pipeline of README, run: the ordering temperature is Onsager's; the fit without a correction stands beside; pairs that share a size
/// are correlated; a second run computes nothing; the lines of Python in README read the results.
#[test]
fn the_quickstart_finds_where_the_square_lattice_orders() {
    let desk = Desk::new();
    desk.write("quickstart.yaml", &text_of("pipelines/quickstart.yaml"));
    let events = desk.run_pipeline("quickstart.yaml", &[], 0);
    assert_eq!(events.counts(), PARCELS);

    let tc = desk.table("results/quickstart/tc.parquet");
    let (value, error) = (number(&tc, "critical_temperature", "value"), number(&tc, "critical_temperature", "error"));
    assert!(error > 0.0 && error <= 0.002, "the error is {error}");
    // The seed is fixed: three standard errors are what is promised, and no draw of luck.
    assert!((value - ONSAGER).abs() <= 3.0 * error, "{value} +- {error}");
    for row in 0..tc.rows() {
        // Without the smallest of four sizes two pairs are left, which cannot test a correction.
        let less = tc.text("quantity", row) == Some("critical_temperature_without_smallest");
        assert_eq!(tc.text("flags", row), Some(if less { "few-sizes" } else { "" }), "{tc:?}");
    }
    let less = number(&tc, "critical_temperature_without_smallest", "value");
    assert!((less - ONSAGER).abs() <= 3.0 * number(&tc, "critical_temperature_without_smallest", "error"), "{less}");
    let shift = number(&tc, "shift_without_smallest", "error");
    assert!(shift > 0.0 && shift < number(&tc, "critical_temperature_without_smallest", "error"), "{shift}");
    let uncorrected = number(&tc, "critical_temperature_uncorrected", "error");
    assert!(uncorrected > 0.0 && uncorrected < error, "a fit without a correction claims more: {uncorrected}");

    let held = desk.table("results/quickstart/onsager.parquet");
    assert_eq!((held.rows(), held.text("name", 0)), (1, Some("tc.critical_temperature")));
    assert_eq!((held.text("verdict", 0), held.text("flags", 0)), (Some("agrees"), Some("")));

    correlations(&desk);
    nothing_is_computed_again(&desk);
    readme_shows_the_result(&desk);
    readme_reads_the_results(&desk);
    readme_shows_the_picture(&desk);
}

/// The picture in README is the one that the pipeline draws, and the page is small enough to be sent to a colleague.
fn readme_shows_the_picture(desk: &Desk) {
    let files = desk.files("results/quickstart");
    assert!(text_of("README.md").contains("(docs/cumulants.svg)"));
    assert!(
        text_of("docs/cumulants.svg").as_bytes() == files["cumulants.svg"],
        "docs/cumulants.svg is another picture"
    );
    assert!(files["page.html"].len() < 1_500_000, "the page has {} bytes", files["page.html"].len());
}

/// Crossings of (12, 16) and (16, 24) share the curve of 16, which moves them in opposite directions; those without a common size are independent.
fn correlations(desk: &Desk) {
    let table = desk.table("results/quickstart/tc.covariance.parquet");
    let cell = |name: &str, row: usize| table.column(name).and_then(|c| c.cells.number(row)).expect("a number");
    let covariance = |pair: [f64; 2], other: [f64; 2]| {
        let row = (0..table.rows()).find(|row| {
            [("size", pair[0]), ("partner", pair[1]), ("other_size", other[0]), ("other_partner", other[1])]
                .iter()
                .all(|(name, size)| cell(name, *row) == *size)
        });
        cell("covariance", row.expect("the matrix is complete"))
    };
    let pairs = [[12.0, 16.0], [16.0, 24.0], [24.0, 32.0]];
    let correlation = |a: [f64; 2], b: [f64; 2]| covariance(a, b) / (covariance(a, a) * covariance(b, b)).sqrt();
    for neighbours in pairs.windows(2) {
        let found = correlation(neighbours[0], neighbours[1]);
        assert!(found > -0.9 && found < -0.1, "{neighbours:?}: {found}");
        assert_eq!(found, correlation(neighbours[1], neighbours[0]));
    }
    assert_eq!(covariance(pairs[0], pairs[2]), 0.0);
    // The errors of the pairs are the roots of the diagonal.
    let table = desk.table("results/quickstart/tc.pairs.parquet");
    assert_eq!(table.rows(), 3);
    for (row, pair) in pairs.into_iter().enumerate() {
        let error = table.column("error").and_then(|c| c.cells.number(row)).expect("an error");
        assert!((error / covariance(pair, pair).sqrt() - 1.0).abs() < 1e-12, "{pair:?}");
    }
}

fn nothing_is_computed_again(desk: &Desk) {
    let before = desk.files("results");
    let mut best = f64::INFINITY;
    for _ in 0..3 {
        let start = Instant::now();
        let events = desk.run_pipeline("quickstart.yaml", &[], 0);
        best = best.min(start.elapsed().as_secs_f64());
        assert_eq!(events.counts(), (0, PARCELS.0, 0));
    }
    assert!(best < 0.5, "nothing to do took {best} s");
    assert!(before == desk.files("results"), "nothing is written");
}

/// README shows the result that was found, as the program prints it, and so does the page beside the pipelines.
fn readme_shows_the_result(desk: &Desk) {
    let ran = desk.run(&["run", "quickstart.yaml"]);
    let mut lines = ran.out.lines().skip_while(|line| !line.starts_with("result "));
    let (head, row) = (lines.next().expect("a table of results"), lines.next().expect("a result"));
    // With what is not settled, to the line that says where the results are.
    let told: Vec<&str> = lines.take_while(|line| !line.starts_with("results in")).collect();
    let shown = format!("{head}\n{row}\n{}", told.join("\n"));
    assert!(text_of("README.md").contains(&shown), "README shows another result than\n{shown}");
    let value = row.split_whitespace().nth(1).expect("a value");
    for page in ["README.md", "pipelines/README.md"] {
        let again = text_of(page).replace(&shown, "");
        assert!(again.contains(value), "{page} does not name the value {value}");
    }
}

fn readme_reads_the_results(desk: &Desk) {
    let python = std::env::var_os("SPINLEDGER_PYTHON").map_or_else(|| top().join(".venv/bin/python"), PathBuf::from);
    let snippets = fenced(&text_of("README.md"), "python");
    assert_eq!(snippets.len(), 1);
    desk.write("snippet.py", &snippets[0]);
    let output = Command::new(python).arg("snippet.py").current_dir(desk.path(".")).output();
    let output = output.expect("Python runs: `tests/all` makes its environment");
    let said = String::from_utf8_lossy(&output.stdout);
    assert!(output.status.success(), "{said}{}", String::from_utf8_lossy(&output.stderr));
    // One row for each temperature.
    assert!(said.contains("(9, 3)") && said.contains("2.36"), "{said}");
}

/// README shows the pipeline that its first command runs, and what `check` prints of a wrong one.
#[test]
fn readme_shows_what_is_there() {
    let readme = text_of("README.md");
    assert!(fenced(&readme, "yaml").contains(&text_of("pipelines/quickstart.yaml")), "README's pipeline is the file's");
    assert!(!readme.contains("@@"), "a place in README is still to be filled");
    let desk = Desk::new();
    let wrong =
        text_of("pipelines/quickstart.yaml").replace("measure:", "mesure:").replace("plugin: square", "plugin: sqare");
    desk.write("wrong.yaml", &wrong);
    let ran = desk.run(&["check", "wrong.yaml"]);
    assert_eq!(ran.status, Some(2));
    assert!(fenced(&readme, "text").contains(&ran.err), "README shows another message than\n{}", ran.err);
}

/// Every pipeline that people start from is sound.
#[test]
fn every_pipeline_is_sound() {
    let desk = Desk::new();
    for path in files("pipelines", "yaml") {
        let shown = path.display().to_string();
        let ran = desk.run(&["check", &shown]);
        assert_eq!(ran.status, Some(0), "{shown}: {}", ran.err);
        let name = path.file_name().and_then(|name| name.to_str()).expect("a name");
        assert!(text_of("pipelines/README.md").contains(name), "pipelines/README.md does not name {name}");
    }
}

/// Every YAML block in the documentation is a whole pipeline, and sound.
#[test]
fn every_example_in_the_documentation_is_sound() {
    let desk = Desk::new();
    let mut whole = 0;
    let mut documents: Vec<PathBuf> = files("docs", "md");
    documents.extend(["README.md", "pipelines/README.md"].map(|file| top().join(file)));
    for path in documents {
        let markdown = std::fs::read_to_string(&path).expect("a page");
        for (at, block) in fenced(&markdown, "yaml").into_iter().enumerate() {
            let what = format!("{}, block {at}", shown(&path));
            assert!(
                block.starts_with("spinledger:") || block.starts_with('#'),
                "{what} is no whole pipeline:\n{block}"
            );
            desk.write("example.yaml", &block);
            let ran = desk.run(&["check", "example.yaml"]);
            assert_eq!(ran.status, Some(0), "{what}:\n{}", ran.err);
            whole += 1;
        }
    }
    assert!(whole >= 6, "{whole} examples");
}

/// Links between pages lead to files that are there.
#[test]
fn links_lead_somewhere() {
    let mut documents: Vec<PathBuf> = files("docs", "md");
    documents.extend(["README.md", "DEVELOPERS.md", "pipelines/README.md"].map(|file| top().join(file)));
    let mut links = 0;
    for path in documents {
        let markdown = std::fs::read_to_string(&path).expect("a page");
        for rest in markdown.split("](").skip(1) {
            let target = rest.split(')').next().unwrap_or_default().split('#').next().unwrap_or_default();
            if target.is_empty() || target.starts_with("http") {
                continue;
            }
            let there = path.parent().expect("a folder").join(target).exists();
            assert!(there, "{} links to {target}, which is not there", shown(&path));
            links += 1;
        }
    }
    assert!(links > 3, "{links} links");
}

fn shown(path: &Path) -> String {
    path.display().to_string()
}
