//! Generators against published known-answer vectors.

#[allow(dead_code, reason = "shared by the tests of several crates")]
#[path = "../../../tests/reference/table.rs"]
mod table;

use spinledger_numerics::random::{SplitMix, Xoshiro, unit_f64};
use table::{Row, Table};

fn rows(generator: &str) -> Vec<(String, Vec<String>)> {
    let table = Table::parse(include_str!("../../../tests/reference/rng_vectors.csv"));
    let of = |row: Row<'_>| {
        let words = row.text("output").split(' ').map(str::to_owned).collect();
        (row.text("input").to_owned(), words)
    };
    table.rows().filter(|row| row.text("generator") == generator).map(of).collect()
}

fn hex(words: &[String]) -> Vec<u64> {
    words.iter().map(|word| u64::from_str_radix(word, 16).expect("hexadecimal word")).collect()
}

/// The generator of `state=1 2 3 4` or `state=first 4 outputs of splitmix64(42)`.
fn generator(input: &str) -> Xoshiro {
    let state = input.strip_prefix("state=").expect("a state");
    let words: Vec<u64> = match state.strip_prefix("first 4 outputs of splitmix64(") {
        Some(seed) => {
            let mut splitmix = SplitMix::new(seed.trim_end_matches(')').parse().expect("a seed"));
            (0..4).map(|_| splitmix.next()).collect()
        }
        None => state.split(' ').map(|word| word.parse().expect("a word")).collect(),
    };
    Xoshiro::from_state(words.try_into().expect("four words"))
}

#[test]
fn splitmix_gives_the_published_words() {
    let rows = rows("splitmix64");
    assert_eq!(rows.len(), 4);
    for (input, words) in rows {
        let mut splitmix = SplitMix::new(input.strip_prefix("seed=").expect("a seed").parse().expect("a number"));
        let expected = hex(&words);
        assert_eq!((0..expected.len()).map(|_| splitmix.next()).collect::<Vec<_>>(), expected, "{input}");
    }
}

#[test]
fn xoshiro_gives_the_published_words() {
    let rows = rows("xoshiro256++");
    assert_eq!(rows.len(), 3);
    for (input, words) in rows {
        let mut generator = generator(&input);
        let mut found = vec![0; words.len()];
        generator.fill(&mut found);
        assert_eq!(found, hex(&words), "{input}");
    }
}

#[test]
fn unit_interval_gives_the_published_doubles() {
    let rows = rows("xoshiro256++ to [0,1)");
    assert_eq!(rows.len(), 2);
    for (input, words) in rows {
        let mut generator = generator(&input);
        for word in words {
            assert_eq!(unit_f64(generator.next()), word.parse::<f64>().expect("a double"), "{input}");
        }
    }
}
