//! Probabilities of flips, seen directly: spins between pinned neighbours.

use super::models::Ising;
use super::systems::Islands;
use crate::decision::Decision;
use crate::group::Group;
use crate::simd::Level;
use spinledger_sdk::UpdateInstance;
use spinledger_sdk::testing::{Bench, params};

/// Sweeps: 10^7 to 10^8 decisions of most kinds.
const SWEEPS: usize = 200_000;
/// Largest deviation in standard deviations. Each of the 180 probabilities is off by more with a probability of 2e-7 (two sides); of the five
/// temperatures and both signs together some is with 4e-4.
const DEVIATION: f64 = 5.2;

/// The largest deviation of a frequency of flips from its probability, in standard deviations.
fn worst(x: f64, coupling: f64, tamper: impl FnOnce(&mut Group<'_>)) -> f64 {
    let bench = Bench::new::<Islands, Ising>(&params("{}"), &params(&format!(r#"{{"coupling": {coupling}}}"#)));
    let mut group = Group::new(bench.prepare(x / 2.0, 512, 3), Level::chosen().expect("a level")).expect("prepared");
    tamper(&mut group);
    let kinds: Vec<(usize, usize)> = Islands::sites().collect();
    // Visits and flips of spins that were up, and down.
    let mut counts = vec![[[0_u64; 2]; 2]; kinds.len()];
    let mut before = group.vectors().to_vec();
    for _ in 0..SWEEPS {
        group.sweep(1).expect("swept");
        for ((counts, old), new) in counts.iter_mut().zip(&mut before).zip(group.vectors()) {
            for (old, new) in old.iter_mut().zip(new) {
                let flips = *old ^ new;
                let downs = u64::from(old.count_ones());
                let down_flips = u64::from((flips & *old).count_ones());
                counts[0][0] += 64 - downs;
                counts[0][1] += u64::from(flips.count_ones()) - down_flips;
                counts[1][0] += downs;
                counts[1][1] += down_flips;
                *old = *new;
            }
        }
    }
    let mut worst: f64 = 0.0;
    for ((degree, down), counts) in kinds.into_iter().zip(counts) {
        let decision = Decision::new(degree, x);
        for (state, [visits, flips]) in counts.into_iter().enumerate() {
            let unlike = if state == 0 { down } else { degree - down };
            let p = decision.probability(if coupling > 0.0 { unlike } else { degree - unlike });
            let (n, flips) = (visits as f64, flips as f64);
            // Where no spread is to be expected, nothing may deviate.
            let spread = (n * p * (1.0 - p)).sqrt().max(1e-3);
            worst = worst.max((flips - n * p).abs() / spread);
        }
    }
    worst
}

#[test]
fn flips_have_their_probabilities() {
    for x in [0.0, 0.06, 0.3, 2.0 / 2.269_185_314_213_022, 1.7] {
        for coupling in [1.0, -1.0] {
            let worst = worst(x, coupling, |_| {});
            assert!(worst < DEVIATION, "x = {x}, coupling {coupling}: {worst} standard deviations");
        }
    }
}

/// The test above means something: it sees rare events that are left out, and a digit of the least weight.
#[test]
fn planted_faults_are_found() {
    let x = 2.0 / 2.269_185_314_213_022;
    let quiet = |group: &mut Group<'_>| {
        for kind in group.kinds().iter_mut().flatten() {
            kind.rare = crate::rare::Rare::new(&vec![0.0; kind.decision.left.len()], &bench_key());
        }
    };
    assert!(worst(x, 1.0, quiet) > 3.0 * DEVIATION, "no rare events");
    let digit =
        |group: &mut Group<'_>| group.kinds()[4].as_mut().expect("spins of four neighbours").decision.digits[0] ^= 1;
    assert!(worst(x, 1.0, digit) > 3.0 * DEVIATION, "one digit of four neighbours");
    let soft = |group: &mut Group<'_>| group.kinds()[6].as_mut().expect("spins of six neighbours").decision.soft = true;
    assert!(worst(x, 1.0, soft) > 3.0 * DEVIATION, "ties of six neighbours");
}

fn bench_key() -> spinledger_numerics::random::StreamKey {
    spinledger_numerics::random::StreamKey::from_text("no events")
}
