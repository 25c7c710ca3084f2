//! Prints how far values are from exact ones in units of their errors, over many repetitions: `cargo run --release -p spinledger-tests --example calibration
//! -- [repetitions]` (default 100, two fifths as many for crossings; about half an hour on two cores).

use spinledger_tests::calibration::{Averages, CRITICAL, Crossings, Pulls, averages, crossings};

fn line(what: &str, pulls: &Pulls) {
    let count = pulls.all.len() as f64;
    let flags: Vec<String> = pulls.flags.iter().map(|(word, count)| format!("{word} {count}")).collect();
    println!(
        "{what:44} {:+.2} +- {:.2}   {:.2} +- {:.2}   {:.1}   {}",
        pulls.mean(),
        1.0 / count.sqrt(),
        pulls.width(),
        1.0 / (2.0 * count).sqrt(),
        pulls.largest(),
        flags.join(", ")
    );
}

fn main() {
    let repetitions = std::env::args().nth(1).and_then(|text| text.parse().ok()).unwrap_or(100);
    println!("{:44} mean            width           largest, flags\n", format!("{repetitions} repetitions"));
    for (update, measure) in [("metropolis", 4000), ("metropolis", 1000), ("wolff", 4000), ("wolff", 500)] {
        println!("averages, {update}, 4 chains of {measure}");
        for (sizes, temperatures) in [(&[4][..], &[1.5, 2.5, 4.0][..]), (&[8, 16], &[2.2, CRITICAL, 2.5])] {
            let case = Averages { update, sizes, temperatures, measure };
            for ((quantity, point), pulls) in averages(&case, repetitions) {
                line(&format!("  {quantity}, {point}"), &pulls);
            }
        }
    }
    let sizes = &[8, 12, 16, 24];
    for case in [
        Crossings { name: "fine", sizes, temperatures: (2.22, 2.34, 9), measure: 8000 },
        Crossings { name: "short", sizes, temperatures: (2.22, 2.34, 9), measure: 1500 },
        Crossings { name: "coarse", sizes, temperatures: (2.16, 2.40, 7), measure: 8000 },
        Crossings { name: "wide", sizes, temperatures: (2.0, 2.6, 16), measure: 4000 },
        Crossings { name: "few and precise", sizes: &[8, 12], temperatures: (2.16, 2.40, 7), measure: 100_000 },
    ] {
        let (from, to, count) = case.temperatures;
        println!(
            "crossing, {}: sizes {:?}, {count} points from {from} to {to}, 4 chains of {}",
            case.name, case.sizes, case.measure
        );
        // Dear ones, of which fewer tell enough: the width of 40 is known to 0.11.
        let found = crossings(&case, (2 * repetitions / 5).max(2));
        line("  critical temperature", &found.place);
        line("  value at the crossing", &found.value);
        println!("  error of the critical temperature {:.5}, none found {}", found.error, found.missing);
    }
}
