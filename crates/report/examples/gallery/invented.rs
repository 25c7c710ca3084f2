//! Invented data in the shape of real ones. No number here was measured or computed from a model.

use spinledger_report::{
    Again, Answer, Axis, Chart, Content, Figure, Line, Mark, MarkAxis, Page, Picture, Point, Reference, Shades, Sites,
    Style, TableView, Verdict, Walls,
};
use spinledger_terms::{Column, Table, Value};

/// Noise between -1 and 1 that is the same everywhere.
pub(crate) struct Noise(pub(crate) u64);

impl Noise {
    pub(crate) fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 40) as f64 / (1u64 << 23) as f64 - 1.0
    }
}

/// A smooth step without transcendental functions, from 0 to 1.
fn step(x: f64) -> f64 {
    0.5 * (1.0 + x / (1.0 + x * x).sqrt())
}

/// Curves that cross at 2.269, one for each size.
pub(crate) fn crossing(sizes: &[u32], points: usize, style: Style) -> Chart {
    let mut noise = Noise(7);
    let lines = sizes
        .iter()
        .map(|&size| {
            let points = (0..points)
                .map(|i| {
                    let x = 2.20 + 0.16 * i as f64 / (points.max(2) - 1) as f64;
                    let error = 0.002 + 0.00006 * f64::from(size);
                    let y = 0.66 - 0.66 * step((x - 2.289) * f64::from(size) * 0.9);
                    Point { x, y: y + error * noise.next(), error: Some(error) }
                })
                .collect();
            Line { label: format!("L = {size}"), points, style }
        })
        .collect();
    Chart {
        title: "Binder cumulant of the magnetisation (invented data)".to_owned(),
        x: Axis::new("temperature T", "J"),
        y: Axis::new("Binder cumulant U₄", ""),
        lines,
        marks: vec![
            Mark { on: MarkAxis::X, value: 2.2895, error: 0.0012, label: "found 2.2895 ± 0.0012".to_owned() },
            Mark { on: MarkAxis::X, value: 2.2885, error: 0.0, label: "reference 2.2885".to_owned() },
        ],
        notes: Vec::new(),
    }
}

/// Two logarithmic axes, a fit and its points.
pub(crate) fn powers() -> Chart {
    let mut noise = Noise(3);
    let sizes = [8.0, 12.0, 16.0, 24.0, 32.0, 48.0, 64.0, 96.0, 128.0];
    let law = |l: f64| 1.09 * l * l / l.sqrt().sqrt();
    let points = sizes.map(|l| {
        let y = law(l) * (1.0 + 0.06 * noise.next());
        Point { x: l, y, error: Some(0.08 * y) }
    });
    let fit = (0..60).map(|i| {
        let l = 7.0 + 133.0 * f64::from(i) / 59.0;
        Point { x: l, y: law(l), error: Some(0.04 * law(l)) }
    });
    Chart {
        title: "Susceptibility at the crossing grows as a power of the size (invented data)".to_owned(),
        x: Axis::new("size L", "").logarithmic(),
        y: Axis::new("susceptibility χ", "1/J").logarithmic(),
        lines: vec![
            Line { label: "fit L^1.75".to_owned(), points: fit.collect(), style: Style::Band },
            Line { label: "measured".to_owned(), points: points.to_vec(), style: Style::Points },
        ],
        marks: vec![Mark { on: MarkAxis::Y, value: 100.0, error: 12.0, label: "a level of interest".to_owned() }],
        notes: Vec::new(),
    }
}

/// Charts that are awkward on purpose, each with a name for its file.
pub(crate) fn awkward() -> Vec<(&'static str, Chart)> {
    let plain = |title: &str, points: Vec<Point>, style| Chart {
        title: title.to_owned(),
        x: Axis::new("x", ""),
        y: Axis::new("y", "J"),
        lines: vec![Line { label: "only".to_owned(), points, style }],
        marks: Vec::new(),
        notes: Vec::new(),
    };
    let at = |x, y| Point { x, y, error: None };
    let mut list = vec![
        ("empty", plain("Nothing to show (invented data)", Vec::new(), Style::Points)),
        (
            "single",
            plain("A single point (invented data)", vec![Point { x: 2.0, y: 3.0, error: Some(0.1) }], Style::Band),
        ),
        (
            "equal",
            plain("All values equal (invented data)", (0..9).map(|i| at(f64::from(i), 1.5)).collect(), Style::Joined),
        ),
        (
            "endless",
            plain(
                "Infinities and NaN are left out (invented data)",
                vec![
                    at(0.0, 1.0),
                    at(1.0, f64::NAN),
                    at(2.0, f64::INFINITY),
                    at(f64::NEG_INFINITY, 1.0),
                    at(4.0, 2.0),
                    at(5.0, 1.7),
                ],
                Style::Joined,
            ),
        ),
        (
            "huge-small",
            plain(
                "Huge and small (invented data)",
                (0..9).map(|i| at(1e-9 * f64::from(i), 4.2e11 + 1e9 * f64::from(i * i))).collect(),
                Style::Curve,
            ),
        ),
    ];
    let mut zoomed = crossing(&[12, 32], 41, Style::Joined);
    zoomed.x.range = Some((2.27, 2.30));
    zoomed.y.range = Some((0.25, 0.45));
    zoomed.title = "A range that cuts lines and bars off (invented data)".to_owned();
    list.push(("zoomed", zoomed));
    let mut worded = crossing(&[12, 16, 24, 32], 9, Style::Points);
    worded.title = "</style><script>alert(1)</script> & \"quotes\" in a title that is much too long for a single line, אבג (invented data)".to_owned();
    for (line, word) in worded.lines.iter_mut().zip([
        "ordered start, periodic",
        "random start, periodic",
        "ordered start, free rim",
        "random start, free rim",
    ]) {
        line.label = word.to_owned();
    }
    list.push(("worded", worded));
    let mut decades = powers();
    decades.lines[0].points = (0..40)
        .map(|i| Point { x: f64::from(i) - 3.0, y: 1e-3 * f64::from(1 << (i % 30)), error: Some(1e-3) })
        .collect();
    decades.lines.truncate(1);
    decades.lines[0].style = Style::Points;
    decades.title = "Many decades, and points that a logarithm cannot show (invented data)".to_owned();
    list.push(("decades", decades));
    list
}

/// Domains of up to `states` states: noise smoothed by votes of neighbours, and invented in every respect.
pub(crate) fn domains(side: usize, states: u16, rounds: usize) -> Vec<u16> {
    let mut noise = Noise(11);
    let mut cells: Vec<u16> =
        (0..side * side).map(|_| ((noise.next() + 1.0) * 0.5 * f64::from(states)) as u16 % states).collect();
    for _ in 0..rounds {
        cells = (0..side * side)
            .map(|i| {
                let (x, y) = (i % side, i / side);
                let mut votes = vec![0u8; usize::from(states)];
                for (dx, dy) in [(0, 0), (1, 0), (side - 1, 0), (0, 1), (0, side - 1)] {
                    votes[usize::from(cells[(y + dy) % side * side + (x + dx) % side])] += 1;
                }
                let most = votes.iter().max().copied().unwrap_or(0);
                // The own state wins where it is among the commonest.
                let own = cells[i];
                if votes[usize::from(own)] == most {
                    own
                } else {
                    votes.iter().position(|v| *v == most).unwrap_or(0) as u16
                }
            })
            .collect();
    }
    cells
}

/// Pictures, each with a name for its file.
pub(crate) fn pictures() -> Vec<(&'static str, Picture)> {
    let grid = |title: &str, side: usize, states: u16, rounds: usize, names: &[&str]| Picture {
        title: title.to_owned(),
        sites: Sites::Grid { columns: side, rows: side, walls: true },
        states: domains(side, states, rounds),
        names: names.iter().map(|n| (*n).to_owned()).collect(),
        shades: Shades::Apart,
    };
    let side = 24;
    let positions: Vec<[f64; 2]> = (0..side * side)
        .map(|i| {
            let (x, y) = ((i % side) as f64, (i / side) as f64);
            [x + 0.5 * (i / side % 2) as f64, y * 0.75f64.sqrt()]
        })
        .collect();
    let mut pairs = Vec::new();
    for i in 0..side * side {
        let (x, y) = (i % side, i / side);
        let mut near = |dx: usize, dy: usize, ok: bool| {
            if ok && x + dx < side + 1 && y + dy < side && x + dx >= 1 {
                pairs.push([i as u32, ((y + dy) * side + x + dx - 1) as u32]);
            }
        };
        near(2, 0, true);
        near(1, 1, true);
        near(if y % 2 == 0 { 0 } else { 2 }, 1, true);
    }
    vec![
        ("ising-48", grid("Two states, 48 × 48 (invented)", 48, 2, 3, &["down", "up"])),
        (
            "noise-24",
            grid("Noise, 24 × 24: minus sites at corners stay separate (invented)", 24, 2, 0, &["down", "up"]),
        ),
        ("ising-256", grid("Two states, 256 × 256 (invented)", 256, 2, 6, &["down", "up"])),
        ("noise-256", grid("Noise, 256 × 256 (invented)", 256, 2, 0, &[])),
        ("potts-96", grid("Six states, 96 × 96 (invented)", 96, 6, 5, &["0", "1", "2", "3", "4", "5"])),
        (
            "triangular-24",
            Picture {
                title: "Triangular, two states (invented)".to_owned(),
                sites: Sites::Plane { positions, walls: Walls::Pairs { pairs, length: 1.0 / 3f64.sqrt() } },
                states: domains(side, 2, 2),
                names: vec!["down".to_owned(), "up".to_owned()],
                shades: Shades::Apart,
            },
        ),
        (
            "angles-64",
            Picture {
                shades: Shades::Ring(64),
                states: (0..64 * 64).map(|i| ((i % 64) * 2 + (i / 64) * (i / 64) / 40) as u16 % 64).collect(),
                ..grid("Angles in 64 steps (invented)", 64, 2, 0, &[])
            },
        ),
    ]
}

/// A page. Every number on it is invented.
pub(crate) fn page() -> Page {
    let record = |quantity: &str| {
        Value::map([
            ("key", Value::text("0f3a9c1d77e2b4460f3a9c1d77e2b4460f3a9c1d77e2b4460f3a9c1d77e2b446")),
            (
                "step",
                Value::map([
                    ("does", Value::text("crossing")),
                    ("quantity", Value::text(quantity)),
                    ("revision", Value::Integer(1)),
                ]),
            ),
            (
                "inputs",
                Value::List(vec![
                    Value::map([
                        ("of", Value::text("curves")),
                        ("content", Value::text("b1946ac92492d2347c6235b4d2611184")),
                    ]),
                    Value::map([
                        ("sizes", Value::List([12, 16, 24, 32].map(Value::Integer).to_vec())),
                        ("chains", Value::Integer(4)),
                    ]),
                ]),
            ),
            ("seed", Value::Integer(20_261_201)),
            ("temperature", Value::Number(2.269_185_314_213)),
        ])
    };
    let answer = |name: &str, value, error, deviation, verdict, flags: &[&str]| Answer {
        name: name.to_owned(),
        value: Some(value),
        error,
        unit: "J".to_owned(),
        reference: Reference::Value { value: 2.2885, error: 0.0 },
        source: "Nobody, Invented Letters 12, 345 (2026)".to_owned(),
        deviation: Some(deviation),
        within: 3.0,
        verdict,
        flags: flags.iter().map(|f| (*f).to_owned()).collect(),
        record: record("critical_temperature"),
    };
    let figure = |content, caption: &str| Figure { caption: caption.to_owned(), content, record: record("binder") };
    let mut noise = Noise(5);
    let n = 180;
    let table = Table {
        columns: vec![
            Column::integers("size", "", (0..n).map(|i| Some([12, 16, 24, 32][i / 45])).collect()),
            Column::numbers(
                "temperature",
                "J",
                (0..n).map(|i| Some([2.2, 2.22, 2.24, 2.26, 2.28, 2.3, 2.32, 2.34, 2.36][i / 5 % 9])).collect(),
            ),
            Column::texts(
                "quantity",
                (0..n)
                    .map(|i| {
                        Some(
                            ["energy", "heat_capacity", "magnetisation_abs", "susceptibility", "binder"][i % 5]
                                .to_owned(),
                        )
                    })
                    .collect(),
            ),
            Column::numbers("value", "", (0..n).map(|_| Some(noise.next())).collect()),
            Column::numbers(
                "error",
                "",
                (0..n).map(|i| if i % 17 == 3 { None } else { Some(0.000_3 * (i % 7 + 1) as f64) }).collect(),
            ),
            Column::numbers("tau", "sweeps", (0..n).map(|i| Some(1.234_567 * (i % 31 + 1) as f64)).collect()),
            Column::booleans("equilibrated", (0..n).map(|i| Some(i % 29 != 4)).collect()),
            Column::texts(
                "flags",
                (0..n)
                    .map(|i| Some(if i % 29 == 4 { "not-equilibrated;few-samples" } else { "" }.to_owned()))
                    .collect(),
            ),
        ],
    };
    let mut pictures = pictures();
    Page {
        name: "invented-ordering".to_owned(),
        question: "Where does an invented magnet order? (all numbers on this page are invented)".to_owned(),
        answers: vec![
            answer("tc.critical_temperature", 2.289_53, Some(0.001_2), 0.86, Verdict::Agrees, &[]),
            answer("tc.critical_temperature, fit without correction", 2.294_1, Some(0.000_9), 6.2, Verdict::Disagrees, &[]),
            answer("quench.critical_temperature", 2.31, Some(0.05), 0.43, Verdict::Undecided, &["not-equilibrated", "poor-overlap"]),
            Answer {
                unit: String::new(),
                reference: Reference::Bracket { lower: Some(0.4), upper: Some(0.5) },
                ..answer("bounded.inverse_temperature", 0.436_8, Some(0.000_2), 0.0, Verdict::Agrees, &[])
            },
        ],
        notes: vec!["Leaving out the smallest size moves the extrapolated temperature by 0.0004, a third of its error. (Invented.)".to_owned()],
        figures: vec![
            figure(Content::Chart(crossing(&[12, 16, 24, 32], 9, Style::Joined)), "Binder cumulants of four sizes. Error bars are one standard error. Invented data."),
            figure(Content::Chart(crossing(&[8, 12, 16, 24, 32, 48, 64, 96], 161, Style::Band)), "Reweighted curves. Bands are one standard error wide to either side. Invented data."),
            figure(Content::Chart(powers()), "Growth with size. Invented data."),
            figure(Content::Picture(pictures.swap_remove(0).1), "A configuration with its domain walls. Invented."),
        ],
        tables: vec![TableView {
            caption: "Means with errors that include the autocorrelation time. Invented data.".to_owned(),
            table,
            file: "means.parquet".to_owned(),
            key: "0f3a9c1d77e2b4460f3a9c1d77e2b4460f3a9c1d77e2b4460f3a9c1d77e2b446".to_owned(),
            most_rows: 60, flagged: None,
            record: record("means"),
        }],
        again: vec![
            Again { words: "Take the program at the commit named below and build it.".to_owned(), command: "cargo build --release".to_owned() },
            Again { words: "Run the pipeline; its text is in the record of the whole.".to_owned(), command: "spinledger run invented-ordering.yaml".to_owned() },
        ],
        record: record("pipeline"),
        made: "Made by spinledger 0.1.0, commit 0000000 (invented).".to_owned(),
    }
}

/// What nobody should be able to smuggle into a page.
pub(crate) const NASTY: &str = "</style></script><script>alert('1')</script><img src=x onerror=alert(2)> & \"quotes\" \u{202e}אבג שלום <!-- ]]> \u{0}";

/// A page in which every word is nasty and long.
pub(crate) fn nasty() -> Page {
    let text = || format!("{NASTY}{}", "long".repeat(200));
    let record =
        Value::map([(text(), Value::List(vec![Value::text(text()), Value::map([(text(), Value::text(text()))])]))]);
    let mut chart = crossing(&[12, 16], 3, Style::Points);
    chart.title = text();
    chart.x.label = text();
    chart.y.unit = text();
    chart.lines[0].label = text();
    chart.marks[0].label = text();
    let mut picture = pictures().swap_remove(0).1;
    picture.title = text();
    picture.names[0] = text();
    let mut column = Column::texts(&text(), vec![Some(text())]);
    column.unit = text();
    Page {
        name: text(),
        question: text(),
        answers: vec![Answer {
            name: text(),
            value: None,
            error: None,
            unit: text(),
            reference: Reference::Value { value: 1.0, error: 0.1 },
            source: text(),
            deviation: None,
            within: f64::NAN,
            verdict: Verdict::Undecided,
            flags: vec![text()],
            record: record.clone(),
        }],
        notes: vec![text()],
        figures: [Content::Chart(chart), Content::Picture(picture)]
            .map(|content| Figure { caption: text(), content, record: record.clone() })
            .to_vec(),
        tables: vec![TableView {
            caption: text(),
            table: Table { columns: vec![column, Column::texts("flags", vec![Some(text())])] },
            file: text(),
            key: text(),
            most_rows: 10,
            flagged: None,
            record: record.clone(),
        }],
        again: vec![Again { words: text(), command: text() }],
        record,
        made: text(),
    }
}
