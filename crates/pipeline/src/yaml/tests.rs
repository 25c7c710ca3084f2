use super::*;

fn value(text: &str) -> Value {
    let (document, problems) = read(text);
    assert_eq!(problems, []);
    document.unwrap().root.value()
}

fn told(text: &str) -> Vec<String> {
    read(text).1.iter().map(|p| format!("{}: {}", p.path, p.message)).collect()
}

#[test]
fn scalars() {
    let text =
        "[1, -2, 0x1f, 1e3, 2., .inf, ~, true, yes, '1', 1_000, 9223372036854775808, 007, !!int '3', !!str 4, 1e999]";
    let expected = r#"[1,-2,31,1000.0,2.0,inf,null,true,"yes","1","1_000",9.223372036854776e18,"007",3,"4","1e999"]"#;
    assert_eq!(value(text).canonical(), expected);
}

#[test]
fn written_keys_win_over_merged_and_earlier_over_later() {
    let text = "a: &a { x: 1, y: 1 }\nb: &b { y: 2, z: 2 }\nc:\n  <<: [*a, *b]\n  x: 3\nd: { <<: *b, w: 0 }\n";
    let all = value(text);
    assert_eq!(all.get("c").unwrap().canonical(), r#"{"x":3,"y":1,"z":2}"#);
    assert_eq!(all.get("d").unwrap().canonical(), r#"{"w":0,"y":2,"z":2}"#);
    // Each is found where it stands.
    let (document, _) = read(text);
    let document = document.unwrap();
    let at = |path: &str| {
        let found = document.root.find(&Path::top().dotted(path), Mark::Key);
        let start = offset(text, &found.route, found.mark).unwrap();
        (text[..start].matches('\n').count() + 1, &text[start..=start])
    };
    assert_eq!(at("c.x"), (5, "x"));
    assert_eq!(at("c.y"), (1, "y"));
    assert_eq!(at("c.z"), (2, "z"));
    assert_eq!(at("d.z"), (2, "z"));
    // What is not there is found as far as the way leads: the value of `d`, here.
    assert_eq!(at("d.nothing"), (6, "{"));
}

#[test]
fn repeated_keys_leave_the_first() {
    let (document, problems) = read("a: 1\nb: { c: 1, c: 2 }\na: 2\n");
    assert_eq!(document.unwrap().root.value().canonical(), r#"{"a":1,"b":{"c":1}}"#);
    let told: Vec<_> = problems.iter().map(|p| (p.path.to_string(), p.other.clone().unwrap().0.to_string())).collect();
    assert_eq!(told, [("2:12".into(), "2:6".into()), ("3:1".into(), "1:1".into())]);
}

#[test]
fn keys_with_dots_are_found() {
    let (document, _) = read("a: { first.x: 1, first: { y: 2 } }");
    let document = document.unwrap();
    let find = |path: &str| document.root.find(&Path::top().dotted(path), Mark::Value).node.value();
    assert_eq!(find("a.first.x"), Value::Map([("y".to_owned(), Value::Integer(2))].into()));
    assert_eq!(document.root.find(&Path::top().key("a").key("first.x"), Mark::Value).node.value(), Value::Integer(1));
}

#[test]
fn line_ends_of_other_systems() {
    assert_eq!(value("a: 1\r\nb: [1,\r\n 2]\r\n").canonical(), r#"{"a":1,"b":[1,2]}"#);
    assert_eq!(told("a: 1\r\na: 2\r\n"), ["2:1: `a` is here twice"]);
}

#[test]
fn empty_documents_hold_nothing() {
    for text in ["", "\n", "# c\n", "---\n", "~"] {
        assert_eq!(value(text), Value::Null, "{text:?}");
    }
}

/// What could keep the program busy for long is refused soon.
#[test]
fn floods_are_refused() {
    let start = std::time::Instant::now();
    let long = |text: &str| text.repeat(LONGEST / text.len());
    assert!(told(&long("x: 1\n"))[0].contains("too many values"));
    assert!(told(&"x: 1\n".repeat(50_000))[0].contains("is here twice"));
    assert_eq!(told(&"[".repeat(100_000)).len(), 1);
    assert_eq!(told(&"- ".repeat(100_000)).len(), 1);
    let bomb: String = (1..40).map(|i| format!("a{i}: &a{i} [*a{}, *a{}]\n", i - 1, i - 1)).collect();
    assert!(told(&format!("a0: &a0 x\n{bomb}"))[0].contains("too many values"));
    let wide = format!("a: &a [{}]\nb: [{}]\n", "1, ".repeat(20_000), "*a, ".repeat(20_000));
    assert_eq!(told(&wide), ["2:4: too many values here, counting aliases as often as they are used"]);
    assert!(start.elapsed().as_secs() < 60, "{:?}", start.elapsed());
}
