use super::*;

/// Place, value and shade of a site.
type Site = (f64, f64, f64, i64);

fn main_table(points: &[Site]) -> Table {
    let numbers =
        |name: &str, f: fn(&Site) -> f64| Column::numbers(name, "", points.iter().map(|p| Some(f(p))).collect());
    Table {
        columns: vec![
            Column::integers("site", "", (0..points.len() as i64).map(Some).collect()),
            numbers("x", |p| p.0),
            numbers("y", |p| p.1),
            numbers("value", |p| p.2),
            Column::integers("state", "", points.iter().map(|p| Some(p.3)).collect()),
        ],
    }
}

fn walls_table(walls: &[[f64; 4]]) -> Table {
    let names = ["x0", "y0", "x1", "y1"];
    let column = |k: usize| Column::numbers(names[k], "", walls.iter().map(|w| Some(w[k])).collect());
    Table { columns: (0..4).map(column).collect() }
}

fn parameters(shown: &str, walls: bool) -> Value {
    Value::map([("shown", Value::text(shown)), ("walls", Value::Bool(walls)), ("title", Value::text("T"))])
}

/// Places that fill a rectangle are a grid with y upwards, in whatever order they come; names tell spins by their values.
#[test]
fn a_full_rectangle_is_a_grid() {
    let points = [
        (0.0, 0.0, 1.0, 1),
        (0.0, 1.0, -1.0, 0),
        (1.0, 0.0, 1.0, 1),
        (1.0, 1.0, 1.0, 1),
        (2.0, 0.0, -1.0, 0),
        (2.0, 1.0, 1.0, 1),
    ];
    let picture = picture_of(&parameters("spins", true), &main_table(&points), &walls_table(&[])).unwrap();
    assert_eq!(picture.sites, Sites::Grid { columns: 3, rows: 2, walls: true });
    assert_eq!(picture.states, [0, 1, 1, 1, 1, 0], "the upper row first");
    assert_eq!(picture.names, ["\u{2212}1", "+1"]);
    assert_eq!((picture.shades, picture.title.as_str()), (Shades::Apart, "T"));
    let without = picture_of(&parameters("spins", false), &main_table(&points), &walls_table(&[])).unwrap();
    assert_eq!(without.sites, Sites::Grid { columns: 3, rows: 2, walls: false });
    // One site is missing, or two are in one place: no grid.
    let mut twice = points;
    twice[5] = twice[4];
    for points in [&points[..5], &twice[..]] {
        let picture = picture_of(&parameters("spins", true), &main_table(points), &walls_table(&[])).unwrap();
        assert!(matches!(picture.sites, Sites::Plane { .. }));
    }
}

#[test]
fn a_line_is_a_strip() {
    let points: Vec<_> = (0..40).map(|i| (f64::from(i), 0.0, f64::from(i % 2), i64::from(i % 2))).collect();
    let picture = picture_of(&parameters("colours", true), &main_table(&points), &walls_table(&[])).unwrap();
    assert_eq!(picture.sites, Sites::Strip { rows: 3, walls: true });
    assert_eq!((picture.states.len(), &picture.names[..]), (40, &["colour 1".to_owned(), "colour 2".to_owned()][..]));
    assert!(picture.draw(400.0).svg().contains("A configuration of 40 sites. colour 1: 20 sites."));
}

/// Elsewhere walls are those of the table, unless they are not wanted.
#[test]
fn other_lattices_take_their_walls_from_the_table() {
    let points = [(0.0, 0.0, 0.0, 0), (1.0, 0.0, 1.0, 1), (0.5, 0.75, 1.0, 1)];
    let segment = [0.5, -0.25, 0.5, 0.25];
    let of = |walls: bool| {
        let picture = picture_of(&parameters("states", walls), &main_table(&points), &walls_table(&[segment])).unwrap();
        let Sites::Plane { positions, walls: Walls::Segments(segments) } = picture.sites else { panic!("a plane") };
        assert_eq!(positions[2], [0.5, 0.75]);
        assert_eq!(picture.names, ["state 0", "state 1"]);
        segments
    };
    assert_eq!((of(true), of(false)), (vec![segment], vec![]));
}

#[test]
fn angles_are_shades_of_a_ring() {
    let points = [(0.0, 0.0, 0.1, 0), (1.0, 0.0, 3.0, 17)];
    let mut asked = parameters("angles", true);
    let picture = picture_of(&asked, &main_table(&points), &walls_table(&[])).unwrap();
    assert_eq!((picture.shades, picture.names.len()), (Shades::Ring(36), 0));
    asked.set("shades", Value::Integer(5));
    assert_eq!(picture_of(&asked, &main_table(&points), &walls_table(&[])).unwrap().shades, Shades::Ring(5));
    let pi = std::f64::consts::PI;
    let shades: Vec<i64> = [0.0, 1e-9, -1e-20, pi / 2.0, pi, -pi, -pi / 2.0].map(|a| shade_of_angle(a, 4)).to_vec();
    assert_eq!(shades, [0, 0, 0, 1, 2, 2, 3]);
    assert!((0..1000).all(|i| (0..36).contains(&shade_of_angle(f64::from(i - 500) * pi / 500.0, 36))));
}

fn points() -> Vec<Vec<(String, Value)>> {
    let point = |size: i64, t: f64| {
        vec![("size".to_owned(), Value::Integer(size)), ("temperature".to_owned(), Value::Number(t))]
    };
    vec![point(8, 2.0), point(8, 3.0), point(16, 2.0)]
}

fn seen(starts: &[&str]) -> Vec<Seen> {
    let of = |start: &str, chain: u32, sweep: u64| Seen { start: start.to_owned(), chain, sweep };
    starts.iter().flat_map(|s| [of(s, 0, 9), of(s, 0, 19), of(s, 1, 9), of(s, 1, 19)]).collect()
}

fn asked(pairs: &[(&str, Value)]) -> Value {
    Value::Map(pairs.iter().map(|(name, value)| ((*name).to_owned(), value.clone())).collect())
}

/// Exactly one configuration must be meant; what else there is, is said.
#[test]
fn the_configuration_that_is_meant() {
    let filter = |pairs: &[(&str, Value)]| ("where", asked(pairs));
    let one = || filter(&[("size", Value::Integer(8)), ("temperature", Value::Integer(3))]);
    let choose =
        |pairs: &[(&str, Value)], starts: &'static [&'static str]| chosen(&asked(pairs), &points(), &|_| seen(starts));
    assert_eq!(choose(&[one()], &["random"]), Ok((1, 1)), "chain 0, the last sweep");
    assert_eq!(choose(&[one(), ("chain", Value::Integer(1)), ("sweep", Value::Integer(9))], &["random"]), Ok((1, 2)));
    assert_eq!(choose(&[one(), ("start", Value::text("random"))], &["ordered", "random"]), Ok((1, 5)));
    let message = |pairs: &[(&str, Value)], starts| choose(pairs, starts).unwrap_err();
    assert_eq!(
        message(&[filter(&[("size", Value::Integer(8))])], &["random"]),
        "2 points match where one must; narrow it with `where`: they differ in `temperature` (2.0, 3.0)"
    );
    assert_eq!(
        message(&[filter(&[("size", Value::Integer(9))])], &["random"]),
        "no point matches (size = 9); points differ in `size` (8, 16), `temperature` (2.0, 3.0)"
    );
    assert_eq!(
        message(&[filter(&[("field", Value::Integer(9))])], &["random"]),
        "there is no column `field`; there are: size, temperature"
    );
    assert_eq!(
        message(&[one()], &["ordered", "random"]),
        "chains began from both; name one with `start`: ordered, random"
    );
    assert!(
        message(&[one(), ("start", Value::text("random"))], &["random"]).contains("only where they began from both")
    );
    assert_eq!(
        message(&[one(), ("chain", Value::Integer(2))], &["random"]),
        "nothing is kept of chain 2; there are chains 0, 1"
    );
    assert_eq!(
        message(&[one(), ("sweep", Value::Integer(10))], &["random"]),
        "nothing is kept at sweep 10; there are sweeps 9, 19"
    );
}
