//! Result tables as people and programs read them.

use spinledger_ledger::{read_table, write_table};
use spinledger_terms::{Cells, Column, Key, Table};
use spinledger_tests::program::{Desk, program};
use std::process::{Command, Stdio};
use std::time::Instant;

/// A table with everything that can be awkward; invented data.
fn awkward() -> Table {
    let texts = |texts: [&str; 4]| texts.map(|t| Some(t.to_owned())).to_vec();
    Table {
        columns: vec![
            Column::integers("size", "", vec![Some(8), Some(16), Some(32), Some(32)]),
            Column::numbers("temperature", "K", vec![Some(2.26), Some(2.27), Some(f64::INFINITY), Some(0.1 + 0.2)]),
            Column::texts("quantity", texts(["energy", "a, \"b\"", "größe", "susceptibility_disordered"])),
            Column::numbers("value", "", vec![Some(-1.492_187_512_345), Some(1.234e-7), None, Some(257.91)]),
            Column::numbers("error", "", vec![Some(0.001_23), Some(5e-9), None, Some(0.0)]),
            Column::numbers("tau", "sweeps", vec![Some(0.5), Some(12.345_678), None, Some(1e300)]),
            Column::booleans("equilibrated", vec![Some(true), Some(false), None, Some(true)]),
            Column::texts("flags", texts(["", "few-samples;not-equilibrated", "", ""])),
        ],
    }
}

fn desk() -> Desk {
    let desk = Desk::new();
    std::fs::write(desk.path("t.parquet"), write_table(&awkward(), &Key([1; 32])).unwrap()).unwrap();
    desk
}

fn print(desk: &Desk, args: &[&str]) -> String {
    let ran = desk.run(&[&["print"], args].concat());
    assert_eq!((ran.status, ran.err.as_str()), (Some(0), ""), "{args:?}");
    ran.out
}

#[test]
fn a_table_is_plain_text_in_a_pipe() {
    let expected = "\
size  temperature [K]  quantity                      value     error  tau [sweeps]  equilibrated  flags
   8             2.26  energy                      -1.4922    0.0012           0.5  true
  16             2.27  a, \"b\"                     1.234e-7  0.050e-7         12.35  false         few-samples;not-equilibrated
  32              inf  größe
  32              0.3  susceptibility_disordered    257.91         0         1e300  true
";
    assert_eq!(print(&desk(), &["t.parquet"]), expected);
    let few = print(&desk(), &["t.parquet", "--columns", "value,size", "--rows", "1", "--where", "size=32"]);
    assert_eq!(few, "value  size\n         32\nand 1 more row (--rows all shows them)\n");
    let none = print(&desk(), &["t.parquet", "--where", "size=7"]);
    assert!(none.starts_with("no rows; the columns are: size, temperature"), "{none}");
}

/// CSV and JSON lines hold every bit, and nothing that is not known becomes something.
#[test]
fn programs_get_every_digit() {
    let desk = desk();
    let csv = print(&desk, &["t.parquet", "--csv"]);
    let lines: Vec<&str> = csv.lines().collect();
    assert_eq!(lines[0], "size,temperature,quantity,value,error,tau,equilibrated,flags");
    assert_eq!(lines[1], "8,2.26,energy,-1.492187512345,0.00123,0.5,true,\"\"");
    assert_eq!(lines[2], "16,2.27,\"a, \"\"b\"\"\",1.234e-7,5e-9,12.345678,false,few-samples;not-equilibrated");
    assert_eq!(lines[3], "32,inf,größe,,,,,\"\"");
    assert_eq!(lines[4], "32,0.30000000000000004,susceptibility_disordered,257.91,0.0,1e300,true,\"\"");
    assert_eq!(lines.len(), 5);
    let json = print(&desk, &["t.parquet", "--json", "--columns", "temperature,value,equilibrated"]);
    let expected = "{\"temperature\":2.26,\"value\":-1.492187512345,\"equilibrated\":true}\n";
    assert!(json.starts_with(expected), "{json}");
    assert_eq!(json.lines().nth(2), Some("{\"temperature\":\"inf\",\"value\":null,\"equilibrated\":null}"));
    assert_eq!(print(&desk, &["t.parquet", "--csv", "--where", "equilibrated=", "--columns", "size"]), "size\n32\n");
    assert_eq!(
        print(&desk, &["t.parquet", "--csv", "--where", "flags=few-samples;not-equilibrated", "--columns", "size"]),
        "size\n16\n"
    );
}

/// Nothing wraps; what does not fit is named; flagged rows are told by a word in any width, coloured only on top.
#[test]
fn tables_fit_the_terminal() {
    let mut desk = desk();
    for plain in [false, true] {
        for width in [20, 24, 40, 60, 120, 140] {
            let shown = desk.at_terminal(&["print", "t.parquet"], width);
            assert_eq!(shown.status, Some(0));
            let lines = shown.lines();
            assert!(lines.iter().all(|line| line.chars().count() <= usize::from(width)), "{width}: {lines:#?}");
            let flagged = &lines[2];
            assert!(flagged.contains("flagged") || flagged.contains("few-samples"), "{width}: {lines:#?}");
            let all = lines.join(" ");
            assert_eq!(all.contains("not shown"), width < 140, "{width}: {lines:#?}");
            assert!(width >= 120 || all.contains("tau"), "{width}: {lines:#?}");
            assert_eq!(shown.raw.contains('\x1b'), !plain, "colours");
        }
        desk = desk.with("NO_COLOR", "1");
    }
    assert!(print(&desk, &["t.parquet"]).lines().all(|line| !line.contains('\x1b')));
}

/// What a sample step wrote is one table, files in order of their names, equal to the files one below the other.
#[test]
fn a_folder_is_one_table() {
    let desk = Desk::new();
    let text = "spinledger: 1\npipeline: p\nseed: 1\nsteps:\n  chains:\n    does: sample\n    lattice: { plugin: square, size: 4 }\n    model: ising\n    \
        update: metropolis\n    observe: [energy]\n    scan: { temperature: [2.0, 3.0] }\n    measure: 30\n    chains: 2\n  means: { does: averages, of: chains }\n";
    desk.write("p.yaml", text);
    desk.run_pipeline("p.yaml", &[], 0);
    let csv = print(&desk, &["results/p/chains", "--csv"]);
    let mut expected = Vec::new();
    for name in desk.parquet("results/p/chains").keys() {
        let table = read_table(&desk.path("results/p/chains").join(name)).unwrap();
        let Cells::Number(energies) = &table.column("energy").unwrap().cells else { panic!("numbers") };
        expected.extend(energies.iter().map(|e| format!("{:?}", e.unwrap())));
    }
    let column = csv.lines().next().unwrap().split(',').position(|name| name == "energy").unwrap();
    let energies: Vec<&str> = csv.lines().skip(1).map(|line| line.split(',').nth(column).unwrap()).collect();
    assert_eq!(energies, expected);
    assert_eq!(energies.len(), 120);
    let shown = print(&desk, &["results/p/chains"]);
    assert!(shown.ends_with("and 80 more rows (--rows all shows them)\n"), "{shown}");
    assert_eq!(print(&desk, &["results/p/chains", "--rows", "all"]).lines().count(), 121);
    let ran = desk.run(&["print", "results/p"]);
    assert!(ran.status == Some(2) && ran.err.contains("no one table"), "{}", ran.err);
}

/// Millions of rows print their first at once, in memory that would not hold them.
#[test]
fn long_tables_stream() {
    const ROWS: i64 = 4_000_000;
    let desk = Desk::new();
    let numbers = |f: fn(i64) -> f64| (0..ROWS).map(|i| Some(f(i))).collect();
    let table = Table {
        columns: vec![
            Column::integers("sweep", "sweeps", (0..ROWS).map(Some).collect()),
            Column::numbers("energy", "", numbers(|i| (i as f64).sqrt())),
            Column::numbers("magnetisation", "", numbers(|i| 1.0 / (i as f64 + 1.0))),
        ],
    };
    let path = desk.path("long.parquet");
    std::fs::write(&path, write_table(&table, &Key([1; 32])).unwrap()).unwrap();
    drop(table);
    let begun = Instant::now();
    let shown = print(&desk, &["long.parquet"]);
    assert!(begun.elapsed().as_secs_f64() < 0.5, "{:?}", begun.elapsed());
    assert!(shown.ends_with("and 3999960 more rows (--rows all shows them)\n"), "{shown}");
    for format in ["--csv", "--json", "--rows=all", "--where=sweep=3999999"] {
        // 4 million rows of three columns would take 192 MB.
        let shell = format!("ulimit -v 100000; exec \"$0\" print long.parquet {format}");
        let mut child = Command::new("sh")
            .args(["-c", &shell])
            .arg(program())
            .current_dir(path.parent().unwrap())
            .stdout(Stdio::piped())
            .spawn()
            .unwrap();
        let mut out = child.stdout.take().unwrap();
        let (mut lines, mut chunk) = (0, vec![0; 1 << 16]);
        loop {
            let read = std::io::Read::read(&mut out, &mut chunk).unwrap();
            if read == 0 {
                break;
            }
            lines += chunk[..read].iter().filter(|byte| **byte == b'\n').count();
        }
        assert!(child.wait().unwrap().success(), "{format}");
        let expected = match format {
            "--json" => 4_000_000,
            "--where=sweep=3999999" => 2,
            _ => 4_000_001,
        };
        assert_eq!(lines, expected, "{format}");
    }
    // A reader that has seen enough ends it, and is no mistake.
    let shell = "\"$0\" print long.parquet --csv 2>&1 | head -2; exit ${PIPESTATUS:-0}";
    let output = Command::new("sh").args(["-c", shell]).arg(program()).current_dir(path.parent().unwrap()).output();
    assert_eq!(String::from_utf8(output.unwrap().stdout).unwrap(), "sweep,energy,magnetisation\n0,0.0,1.0\n");
}

#[test]
fn what_cannot_be_printed_is_told() {
    let desk = desk();
    desk.write("p.yaml", "spinledger: 1\n");
    std::fs::create_dir(desk.path("empty")).unwrap();
    let cases: [(&[&str], &str); 9] = [
        (&["nothing.parquet"], "there is no file or folder nothing.parquet"),
        (&["p.yaml"], "p.yaml is no Parquet table"),
        (&["empty"], "the folder empty holds no Parquet file"),
        (&["t.parquet", "--columns", "valu"], "no column `valu` in t.parquet; the nearest is `value`; it has: size"),
        (&["t.parquet", "--where", "size"], "`size` is no condition; expected COLUMN=VALUE"),
        (&["t.parquet", "--where", "sise=8"], "no column `sise`"),
        (&["t.parquet", "--where", "size=big"], "column `size` holds whole numbers, not `big`"),
        (&["t.parquet", "--rows", "few"], "expected a number of rows, or `all`"),
        (&["t.parquet", "--csv", "--json"], "cannot be used with"),
    ];
    for (args, wanted) in cases {
        let ran = desk.run(&[&["print"], args].concat());
        assert_eq!(ran.status, Some(2), "{args:?}");
        assert!(ran.out.is_empty() && ran.err.contains(wanted), "{args:?}: {}", ran.err);
    }
}
