//! Averages against exact values, so fine that spins that share something would show. `examples/exactness.rs` does the same for longer.

use super::lattices::Square;
use super::models::Ising;
use crate::group::Group;
use crate::simd::Level;
use crate::word::LANES;
use spinledger_exact::closed::torus;
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Spins, UpdateInstance, View};

/// The critical temperature of the square lattice.
const CRITICAL: f64 = 2.269_185_314_213_022;
/// Moments of the magnetisation of the critical torus, by exact transfer.
const EXACT_MOMENTS: &str = include_str!("../../../../tests/reference/binder_finite.csv");
/// Correlations are measured up to this distance.
const FARTHEST: usize = 8;

/// An average beside its exact value.
#[derive(Clone, Debug)]
pub(crate) struct Estimate {
    pub(crate) name: String,
    pub(crate) value: f64,
    /// Standard error.
    pub(crate) error: f64,
    pub(crate) exact: f64,
}

impl Estimate {
    /// Of independent samples.
    fn of(name: String, samples: &[f64], exact: f64) -> Self {
        let n = samples.len() as f64;
        let value = samples.iter().sum::<f64>() / n;
        let square = samples.iter().map(|x| (x - value) * (x - value)).sum::<f64>();
        Estimate { name, value, error: (square / (n - 1.0) / n).sqrt(), exact }
    }

    /// (value - exact)/error.
    pub(crate) fn deviation(&self) -> f64 {
        (self.value - self.exact) / self.error
    }

    /// error/|exact|.
    pub(crate) fn precision(&self) -> f64 {
        self.error / self.exact.abs()
    }
}

/// Second and fourth moment of the magnetisation and Binder cumulant at the critical point: 512 chains, measured `samples` times each.
pub(crate) fn critical(size: usize, samples: usize) -> [Estimate; 3] {
    let line = EXACT_MOMENTS.lines().find(|line| line.starts_with(&format!("{size},"))).expect("a size of the table");
    let exact: Vec<f64> = line.split(',').map(|cell| cell.parse().unwrap_or(f64::NAN)).collect();
    let (exact_2, exact_4, exact_binder) = (exact[3], exact[4], exact[6]);
    let bench = Bench::new::<Square, Ising>(&params(&format!(r#"{{"size": {size}}}"#)), &params("{}"));
    let mut group =
        Group::new(bench.prepare(1.0 / CRITICAL, LANES, 11), Level::chosen().expect("a level")).expect("served");
    (0..LANES).for_each(|lane| group.import(lane, &View::bytes(&bench.random_states(lane as u64))).expect("fits"));
    // Many relaxation times, which are about size^2.17 sweeps.
    group.sweep(100 * (size * size) as u64).expect("swept");
    let mut sums = vec![[0.0; 2]; LANES];
    for _ in 0..samples {
        group.sweep((size * size / 4) as u64).expect("swept");
        for (lane, sums) in sums.iter_mut().enumerate() {
            let m = group.tallies(lane).magnetisation.expect("spins have values")[0] / (size * size) as f64;
            sums[0] += m * m;
            sums[1] += m * m * m * m;
        }
    }
    let [second, fourth]: [Vec<f64>; 2] = [0, 1].map(|k| sums.iter().map(|sums| sums[k] / samples as f64).collect());
    let name = |what: &str| format!("{what} of {size} x {size} at the critical point, 512 chains");
    let [m2, m4] = [Estimate::of(name("m^2"), &second, exact_2), Estimate::of(name("m^4"), &fourth, exact_4)];
    // To first order in the deviations of single chains.
    let cumulant = |m2: f64, m4: f64| 1.0 - m4 / (3.0 * m2 * m2);
    let slope = (2.0 * m4.value / (3.0 * m2.value * m2.value * m2.value), -1.0 / (3.0 * m2.value * m2.value));
    let value = cumulant(m2.value, m4.value);
    let linear = |(a, b): (&f64, &f64)| value + slope.0 * (a - m2.value) + slope.1 * (b - m4.value);
    let single: Vec<f64> = second.iter().zip(&fourth).map(linear).collect();
    let binder = Estimate::of(name("Binder cumulant"), &single, exact_binder);
    [m2, m4, binder]
}

/// Energy and heat capacity of one chain packed by sites and, with `correlations`, spin products at distances 1 to 8 along both directions
/// (against those of the infinite lattice: the temperature must be so high that 64 sites are infinite).
pub(crate) fn packed(temperature: f64, samples: usize, every: u64, correlations: bool) -> Vec<Estimate> {
    const SIZE: usize = 64;
    const BATCHES: usize = 64;
    let bench = Bench::new::<Square, Ising>(&params(r#"{"size": 64}"#), &params("{}"));
    let mut group =
        Group::new(bench.prepare(1.0 / temperature, 1, 12), Level::chosen().expect("a level")).expect("served");
    group.sweep(50_000).expect("swept");
    let exact = torus(SIZE, SIZE, 1.0 / temperature);
    let sites = (SIZE * SIZE) as f64;
    let mut batches = vec![[0.0; 2 + FARTHEST]; BATCHES];
    let mut states = vec![0; SIZE * SIZE];
    for batch in &mut batches {
        for _ in 0..samples / BATCHES {
            group.sweep(every).expect("swept");
            let energy = group.tallies(0).energy.expect("energy is kept") / sites;
            batch[0] += energy;
            // About the exact mean: no bias from an estimated one.
            batch[1] += sites * (energy - exact.energy) * (energy - exact.energy) / (temperature * temperature);
            if correlations {
                group.export(0, &mut Spins::States(&mut states));
                let row = |states: &[u8]| states.iter().rev().fold(0_u64, |bits, state| bits << 1 | u64::from(*state));
                let rows: Vec<u64> = states.chunks(SIZE).map(row).collect();
                for distance in 1..=FARTHEST {
                    let along: u32 =
                        rows.iter().map(|row| (row ^ row.rotate_right(distance as u32)).count_ones()).sum();
                    let across: u32 = (0..SIZE).map(|y| (rows[y] ^ rows[(y + distance) % SIZE]).count_ones()).sum();
                    batch[1 + distance] += 1.0 - f64::from(along + across) / sites;
                }
            }
        }
        batch.iter_mut().for_each(|sum| *sum /= (samples / BATCHES) as f64);
    }
    let estimate = |what: String, column: usize, exact: f64| {
        let column: Vec<f64> = batches.iter().map(|batch| batch[column]).collect();
        Estimate::of(format!("{what} of 64 x 64 at T = {temperature:.4}, packed by sites"), &column, exact)
    };
    let mut estimates =
        vec![estimate("energy".into(), 0, exact.energy), estimate("heat capacity".into(), 1, exact.heat_capacity)];
    for distance in (1..=FARTHEST).filter(|_| correlations) {
        estimates.push(estimate(
            format!("<s s'> at {distance}"),
            1 + distance,
            correlation(1.0 / temperature, distance),
        ));
    }
    estimates
}

/// <s s'> of two sites of a row of the infinite lattice above the critical temperature: a Toeplitz determinant (Montroll, Potts & Ward 1963 J. Math. Phys.
/// 4 308; McCoy & Wu 1973, The Two-Dimensional Ising Model, chapter VIII eq. 3.1). The integrals of its elements are over smooth periodic
/// functions, so that sums over equal steps give them to all digits.
fn correlation(k: f64, distance: usize) -> f64 {
    const STEPS: usize = 1024;
    let z = k.tanh();
    // Both below 1: the second is 1/alpha_2 of the book.
    let (near, far) = (z * (1.0 - z) / (1.0 + z), z * (1.0 + z) / (1.0 - z));
    let phase = |angle: f64| {
        let argument = |r: f64| (-r * angle.sin()).atan2(1.0 - r * angle.cos());
        argument(near) + argument(far) - angle
    };
    let element = |n: i32| {
        let at = |step: usize| std::f64::consts::TAU * step as f64 / STEPS as f64;
        -(0..STEPS).map(|step| (phase(at(step)) - f64::from(n) * at(step)).cos()).sum::<f64>() / STEPS as f64
    };
    let mut rows: Vec<Vec<f64>> =
        (0..distance as i32).map(|i| (0..distance as i32).map(|j| element(i - j)).collect()).collect();
    let mut determinant = 1.0;
    for pivot in 0..distance {
        let best =
            (pivot..distance).max_by(|a, b| rows[*a][pivot].abs().total_cmp(&rows[*b][pivot].abs())).unwrap_or(pivot);
        if best != pivot {
            rows.swap(best, pivot);
            determinant = -determinant;
        }
        determinant *= rows[pivot][pivot];
        let (above, below) = rows.split_at_mut(pivot + 1);
        for row in below {
            let factor = row[pivot] / above[pivot][pivot];
            row.iter_mut().zip(&above[pivot]).for_each(|(element, top)| *element -= factor * top);
        }
    }
    determinant
}

/// Of the 28 comparisons of this file one is off by more than this with a probability of 3e-4.
#[cfg(test)]
const DEVIATION: f64 = 4.5;

#[cfg(test)]
fn check(estimates: &[Estimate], precision: impl Fn(&Estimate) -> f64) {
    for estimate in estimates {
        assert!(estimate.deviation().abs() < DEVIATION, "{estimate:?}: {:.2}", estimate.deviation());
        assert!(
            estimate.precision() < precision(estimate),
            "not fine enough to say anything: {estimate:?} {:.1e}",
            estimate.precision()
        );
    }
}

#[test]
fn correlations_of_the_infinite_lattice() {
    for temperature in [2.4, 2.6, 3.5] {
        let (k, exact) = (1.0 / temperature, spinledger_exact::closed::square(1.0 / temperature));
        assert!((correlation(k, 1) + exact.energy / 2.0).abs() < 1e-12, "{temperature}");
        // High temperatures: two paths of length 3 around a square beside the bond; one of length 2, and eight of length 4, for two steps.
        let z = (0.01_f64).tanh();
        assert!((correlation(0.01, 1) - (z + 2.0 * z.powi(3))).abs() < 10.0 * z.powi(5));
        assert!((correlation(0.01, 2) - (z.powi(2) + 6.0 * z.powi(4))).abs() < 100.0 * z.powi(6));
    }
}

#[test]
fn moments_of_chains_at_the_critical_point() {
    check(&critical(8, 80_000), |_| 1e-4);
    check(&critical(12, 90_000), |_| 1e-4);
}

#[test]
fn energies_of_one_chain() {
    let precision = |estimate: &Estimate| if estimate.name.starts_with("energy") { 1e-4 } else { 2e-3 };
    check(&packed(2.0, 600_000, 8, false), precision);
    check(&packed(2.4, 650_000, 20, false), precision);
    check(&packed(5.0, 700_000, 4, false), precision);
}

#[test]
fn correlations_of_one_chain() {
    let precision = |estimate: &Estimate| match estimate.name.split(' ').next() {
        Some("energy") => 1e-4,
        Some("heat") => 5e-3,
        _ => 2e-3,
    };
    check(&packed(2.6, 180_000, 16, true), precision);
}
