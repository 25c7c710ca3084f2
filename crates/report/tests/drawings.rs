//! Drawings as files: the same bytes every time, well-formed, in time.

#[path = "../examples/gallery/invented.rs"]
#[allow(dead_code)]
mod invented;

use spinledger_report::{Axis, Chart, DrawError, Drawing, Frame, Line, Picture, Point, Shades, Sites, Style, Walls};
use std::time::{Duration, Instant};

/// The shortest of a few runs, so that a busy machine does not count against the code.
fn shortest(mut work: impl FnMut()) -> Duration {
    (0..5)
        .map(|_| {
            let begin = Instant::now();
            work();
            begin.elapsed()
        })
        .min()
        .unwrap_or_default()
}

fn all() -> Vec<(String, Drawing)> {
    let mut all = Vec::new();
    for style in [Style::Points, Style::Joined, Style::Curve, Style::Band] {
        all.push((format!("{style:?}"), invented::crossing(&[12, 16, 24, 32], 9, style).draw(Frame::WIDE)));
    }
    for (name, chart) in invented::awkward().into_iter().chain([("powers", invented::powers())]) {
        all.push((name.to_owned(), chart.draw(Frame::WIDE)));
        all.push((format!("{name} narrow"), chart.draw(Frame::NARROW)));
    }
    all.extend(invented::pictures().into_iter().map(|(name, picture)| (name.to_owned(), picture.draw(400.0))));
    all
}

#[test]
fn drawings_have_the_same_bytes_every_time() {
    for ((name, a), (_, b)) in all().into_iter().zip(all()) {
        assert_eq!(a.svg(), b.svg(), "{name}");
        assert_eq!(a.png(1.0).unwrap(), b.png(1.0).unwrap(), "{name}");
    }
}

/// Bytes enter the ledger: when one of these fails, drawings have changed, and the revision of the steps `chart` and `picture`
/// must move with them.
#[test]
fn value_stability() {
    let chart = invented::crossing(&[12, 16, 24, 32], 9, Style::Joined).draw(Frame::WIDE);
    let picture = invented::pictures().swap_remove(0).1.draw(400.0);
    let hash = |bytes: &[u8]| blake3::hash(bytes).to_hex()[..16].to_owned();
    let found = [
        hash(chart.svg().as_bytes()),
        hash(&chart.png(2.0).unwrap()),
        hash(picture.svg().as_bytes()),
        hash(&picture.png(1.0).unwrap()),
    ];
    assert_eq!(found, FROZEN);
}

const FROZEN: [&str; 4] = ["002212c78df0ba04", "66ae37b6c935c570", "6ee0dcd09854bd93", "e1cb1da17a6bf930"];

#[test]
fn files_are_well_formed_and_accessible() {
    for (name, drawing) in all() {
        let svg = drawing.svg();
        let document = roxmltree::Document::parse(&svg).unwrap_or_else(|e| panic!("{name}: {e}"));
        let root = document.root_element();
        assert_eq!(root.attribute("role"), Some("img"), "{name}");
        for word in ["title", "desc"] {
            let text =
                root.children().find(|c| c.has_tag_name(("http://www.w3.org/2000/svg", word))).and_then(|c| c.text());
            assert!(text.is_some_and(|t| !t.is_empty()), "{name} has a {word}");
        }
        // Nothing but outlines: no font is needed, nothing is fetched.
        for node in root.children().filter(|n| n.is_element()) {
            assert!(matches!(node.tag_name().name(), "title" | "desc" | "path"), "{name}: {node:?}");
        }
        for path in root.children().filter_map(|n| n.attribute("d")) {
            assert!(path.bytes().all(|b| b.is_ascii_digit() || b"mlhvqcz .-".contains(&b)), "{name}: {path}");
        }
    }
}

#[test]
fn words_come_back_as_they_were() {
    let title = "</style><script>alert('1')</script> & \"quotes\" \u{202e}אבג\u{202c} \u{7} ]]>";
    let chart = Chart { title: title.to_owned(), ..invented::powers() };
    let svg = chart.draw(Frame::WIDE).svg();
    let document = roxmltree::Document::parse(&svg).unwrap();
    let found = document.descendants().find(|n| n.tag_name().name() == "title").and_then(|n| n.text());
    assert_eq!(found, Some(title.replace('\u{7}', "\u{fffd}").as_str()));
}

#[test]
fn png_is_the_drawing_at_its_scale() {
    let drawing = invented::powers().draw(Frame::WIDE);
    let png = drawing.png(2.0).unwrap();
    assert_eq!(&png[..8], b"\x89PNG\r\n\x1a\n");
    let side = |at: usize| u32::from_be_bytes(png[at..at + 4].try_into().unwrap());
    assert_eq!((f64::from(side(16)), f64::from(side(20))), (drawing.width() * 2.0, drawing.height() * 2.0));
    assert!(matches!(drawing.png(0.0), Err(DrawError::Size { .. })));
    assert!(matches!(drawing.png(f64::NAN), Err(DrawError::Size { .. })));
    assert!(matches!(drawing.png(1e6), Err(DrawError::Size { .. })));
}

#[test]
fn five_hundred_points_of_eight_sizes_take_less_than_a_tenth_of_a_second() {
    let chart = invented::crossing(&[8, 12, 16, 24, 32, 48, 64, 96], 500, Style::Points);
    let time = shortest(|| assert!(chart.draw(Frame::WIDE).svg().len() < 400_000));
    assert!(time < Duration::from_millis(100), "{time:?}");
}

#[test]
fn a_large_configuration_is_small_and_fast() {
    for (name, most) in [("ising-256", 250_000), ("noise-256", 250_000)] {
        let picture = invented::pictures().into_iter().find(|p| p.0 == name).unwrap().1;
        let time = shortest(|| {
            let length = picture.draw(520.0).svg().len();
            assert!(length < most, "{name}: {length} bytes");
        });
        assert!(time < Duration::from_millis(500), "{name}: {time:?}");
    }
}

#[test]
fn senseless_input_is_drawn_all_the_same() {
    let grid = |columns, rows, states| Picture {
        title: String::new(),
        sites: Sites::Grid { columns, rows, walls: true },
        states,
        names: Vec::new(),
        shades: Shades::Apart,
    };
    let plane = |positions, walls, states| Picture { sites: Sites::Plane { positions, walls }, ..grid(0, 0, states) };
    let pictures = [
        grid(0, 5, vec![1, 2]),
        grid(3, 3, vec![0, 1]),
        grid(1, 1, vec![u16::MAX; 9]),
        Picture { shades: Shades::Ring(0), ..grid(2, 2, vec![0, 1, 2, 3]) },
        plane(vec![], Walls::Segments(vec![[f64::NAN; 4]]), vec![1]),
        plane(vec![[0.0, f64::NAN], [1.0, 2.0]], Walls::Pairs { pairs: vec![[0, 1], [7, 9]], length: 1.0 }, vec![0, 1]),
    ];
    for picture in pictures {
        let drawing = picture.draw(200.0);
        roxmltree::Document::parse(&drawing.svg()).unwrap();
        drawing.png(1.0).unwrap();
    }
}

proptest::proptest! {
    /// Whatever the numbers, a chart is drawn, and its coordinates stay near the paper.
    #[test]
    fn any_numbers_make_a_chart(
        numbers in proptest::collection::vec((proptest::num::f64::ANY, proptest::num::f64::ANY, proptest::num::f64::ANY), 0..12),
        logarithmic in proptest::bool::ANY,
        style in 0usize..4,
    ) {
        let points = numbers.iter().map(|&(x, y, e)| Point { x, y, error: Some(e) }).collect();
        let axis = if logarithmic { Axis::new("x", "").logarithmic() } else { Axis::new("x", "") };
        let style = [Style::Points, Style::Joined, Style::Curve, Style::Band][style];
        let lines = vec![Line { label: "any".to_owned(), points, style }];
        let chart = Chart { title: "any".to_owned(), x: axis.clone(), y: axis, lines, marks: vec![], notes: vec![] };
        let drawing = chart.draw(Frame::NARROW);
        let svg = drawing.svg();
        proptest::prop_assert!(roxmltree::Document::parse(&svg).is_ok());
        proptest::prop_assert!(!svg.contains("1000000"), "a coordinate ran away: {svg}");
        drawing.png(1.0).unwrap();
    }
}
