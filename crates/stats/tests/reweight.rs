//! Reweighting of measurements drawn from exact densities of states.

mod common;
#[allow(dead_code, reason = "shared by the tests of several crates")]
#[path = "../../../tests/reference/table.rs"]
mod table;

use common::{Normal, moments};
use spinledger_numerics::elementary::{exp, ln};
use spinledger_stats::jackknife::replicate_error;
use spinledger_stats::reweight::{Histograms, ReweightError, Reweighted};
use table::Table;

/// Energies and logarithms of their numbers of states.
struct Density(Vec<(f64, f64)>);

impl Density {
    /// The 8 x 8 Ising torus, counted.
    fn eight() -> Self {
        let table = Table::parse(include_str!("../../../tests/reference/density_of_states_8x8.csv"));
        Self(table.rows().map(|row| (row.number("E"), ln(row.number("g")))).collect())
    }

    /// The 4 x 4 Ising torus, counted.
    fn four() -> Self {
        let table = Table::parse(include_str!("../../../tests/reference/density_of_states.csv"));
        let rows = table.rows().filter(|row| row.text("system") == "square_4x4_periodic");
        Self(rows.map(|row| (row.number("E"), ln(row.number("g")))).collect())
    }

    fn probabilities(&self, beta: f64) -> Vec<f64> {
        let most = self.0.iter().map(|(e, g)| g - beta * e).fold(f64::NEG_INFINITY, f64::max);
        let weights: Vec<f64> = self.0.iter().map(|(e, g)| exp(g - beta * e - most)).collect();
        let total: f64 = weights.iter().sum();
        weights.iter().map(|weight| weight / total).collect()
    }

    /// <E>, <E^2>.
    fn exact(&self, beta: f64) -> (f64, f64) {
        let p = self.probabilities(beta);
        let mean = |power: i32| p.iter().zip(&self.0).map(|(p, (e, _))| p * e.powi(power)).sum();
        (mean(1), mean(2))
    }

    /// Independent energies.
    fn draw(&self, beta: f64, count: usize, normal: &mut Normal) -> Vec<f64> {
        let mut cumulated = 0.0;
        let sums: Vec<f64> = self
            .probabilities(beta)
            .iter()
            .map(|p| {
                cumulated += p;
                cumulated
            })
            .collect();
        let place = |u: f64| sums.partition_point(|sum| *sum < u).min(sums.len() - 1);
        (0..count).map(|_| self.0[place(normal.uniform())].0).collect()
    }
}

fn collect(runs: &[(f64, Vec<f64>)], blocks: usize) -> Histograms {
    let mut histograms = Histograms::new(2, blocks);
    for (beta, energies) in runs {
        let fill = |row: usize, out: &mut [f64]| {
            out[0] = energies[row];
            out[1] = energies[row] * energies[row];
        };
        histograms.add(*beta, 0.5, energies, fill).expect("a sound run");
    }
    histograms
}

/// Heat capacity and its error at a temperature.
fn heat(found: &Reweighted, at: usize, beta: f64) -> (f64, f64) {
    let heat = |means: &[f64]| beta * beta * (means[1] - means[0] * means[0]);
    let replicates: Vec<f64> = found.replicates.iter().map(|block| heat(&block[at])).collect();
    (heat(&found.means[at]), replicate_error(&replicates))
}

/// 100 repetitions with 16 blocks: widths scatter by 0.08 for normal deviations, and errors from 16 blocks make them 1.07.
#[test]
fn curves_have_exact_values_and_honest_errors_as_far_as_coverage_says() {
    let density = Density::eight();
    let sampled = [2.1, 2.27, 2.5, 2.8];
    let asked = [1.7, 1.9, 2.1, 2.2, 2.35, 2.6, 2.8, 3.1, 3.5];
    let betas: Vec<f64> = asked.iter().map(|t| 1.0 / t).collect();
    let (mut energies, mut heats) = (vec![Vec::new(); asked.len()], vec![Vec::new(); asked.len()]);
    let mut coverage = vec![0.0; asked.len()];
    for seed in 0..100 {
        let mut normal = Normal::new("reweight", seed);
        let runs: Vec<(f64, Vec<f64>)> =
            sampled.iter().map(|t| (1.0 / t, density.draw(1.0 / t, 4000, &mut normal))).collect();
        let found = collect(&runs, 16).reweight(&betas).expect("curves");
        for (at, beta) in betas.iter().enumerate() {
            let (mean, square) = density.exact(*beta);
            let own: Vec<f64> = found.replicates.iter().map(|block| block[at][0]).collect();
            energies[at].push((found.means[at][0] - mean) / replicate_error(&own));
            let (value, error) = heat(&found, at, *beta);
            heats[at].push((value - beta * beta * (square - mean * mean)) / error);
            coverage[at] += found.coverage[at] / 100.0;
        }
    }
    for (at, t) in asked.iter().enumerate() {
        for (name, pulls) in [("energy", &energies[at]), ("heat capacity", &heats[at])] {
            let (mean, width) = moments(pulls);
            let what = format!("{name} at {t}, coverage {}: {mean} {width}", coverage[at]);
            assert!(coverage[at] > 100.0 && mean.abs() < 0.6 && (0.75..1.45).contains(&width), "{what}");
        }
    }
    // Between runs more than one of them counts; beyond them the tail of one.
    assert!(coverage[3] > 4000.0 && coverage[0] < 4000.0 && coverage[8] < 2000.0, "{coverage:?}");
}

#[test]
fn coverage_of_one_run_is_kishs() {
    let table = Table::parse(include_str!("../../../tests/reference/worked_examples.csv"));
    let density = Density::four();
    let mut compared = 0;
    for row in table.rows().filter(|row| row.text("quantity") == "effective_sample_fraction") {
        let temperature = |part: &str| -> f64 {
            let at = row.text("input").find(part).expect("a temperature") + part.len();
            let text = &row.text("input")[at..];
            text.split(';').next().expect("a number").parse().expect("a number")
        };
        let (from, to) = (1.0 / temperature("T1="), 1.0 / temperature("T2="));
        // A sample with every energy in proportion to its probability; energies rarer than one in a million are left out.
        let count = 1_000_000.0;
        let energies: Vec<f64> = density
            .probabilities(from)
            .iter()
            .zip(&density.0)
            .flat_map(|(p, (e, _))| std::iter::repeat_n(*e, (p * count).round() as usize))
            .collect();
        let found = collect(&[(from, energies.clone())], 2).reweight(&[to]).expect("a curve");
        let fraction = found.coverage[0] / energies.len() as f64;
        assert!((fraction / row.number("value") - 1.0).abs() < 3e-3, "{fraction} {}", row.number("value"));
        let (mean, _) = density.exact(to);
        assert!((found.means[0][0] / mean - 1.0).abs() < 1e-3);
        compared += 1;
    }
    assert_eq!(compared, 3);
}

#[test]
fn free_energies_are_those_of_the_density() {
    let density = Density::eight();
    let mut normal = Normal::new("free", 1);
    // Out of order, and one temperature twice.
    let temperatures = [2.5, 2.0, 3.0, 2.5, 4.0];
    let runs: Vec<(f64, Vec<f64>)> =
        temperatures.iter().map(|t| (1.0 / t, density.draw(1.0 / t, 20_000, &mut normal))).collect();
    let found = collect(&runs, 8).reweight(&[0.4]).expect("curves");
    let log_z = |beta: f64| ln(density.0.iter().map(|(e, g)| exp(g - beta * e - 100.0)).sum()) + 100.0;
    for (own, t) in found.free_energies.iter().zip(temperatures) {
        let expected = -(log_z(1.0 / t) - log_z(1.0 / temperatures[0]));
        assert!((own - found.free_energies[0] - expected).abs() < 0.05, "{t}: {own} {expected}");
    }
    assert!((found.free_energies[3] - found.free_energies[0]).abs() < 1e-9);
}

#[test]
fn binning_changes_nothing() {
    let density = Density::eight();
    let mut normal = Normal::new("binning", 1);
    let runs: Vec<(f64, Vec<f64>)> =
        [2.2, 2.6].iter().map(|t| (1.0 / t, density.draw(1.0 / t, 1000, &mut normal))).collect();
    // Every measurement at an energy of its own.
    let apart: Vec<(f64, Vec<f64>)> = runs
        .iter()
        .map(|(beta, energies)| (*beta, energies.iter().map(|e| e + 1e-3 * normal.uniform()).collect()))
        .collect();
    let betas = [1.0 / 2.1, 1.0 / 2.4, 1.0 / 2.9];
    let binned = collect(&runs, 10).reweight(&betas).expect("curves");
    let single = collect(&apart, 10).reweight(&betas).expect("curves");
    assert!(binned.levels < 60 && single.levels > 1990, "{} {}", binned.levels, single.levels);
    for (at, beta) in betas.into_iter().enumerate() {
        assert!((binned.means[at][0] - single.means[at][0]).abs() < 2e-3);
        assert!((binned.coverage[at] / single.coverage[at] - 1.0).abs() < 1e-3);
        assert!((heat(&binned, at, beta).1 / heat(&single, at, beta).1 - 1.0).abs() < 1e-3);
    }
}

#[test]
fn histograms_that_do_not_touch_keep_to_themselves() {
    // Two peaks with nothing between: at each temperature its own run decides, and between them hardly anything is covered.
    let mut normal = Normal::new("apart", 1);
    let mut peak = |centre: f64| -> Vec<f64> { (0..4000).map(|_| (centre + 10.0 * normal.next()).round()).collect() };
    let runs = [(1.0, peak(-1000.0)), (2.0, peak(-5000.0))];
    let found = collect(&runs, 8).reweight(&[1.0, 1.5, 2.0]).expect("curves");
    assert!((found.means[0][0] + 1000.0).abs() < 1.0 && (found.means[2][0] + 5000.0).abs() < 1.0);
    assert!(
        found.coverage[0] > 3900.0 && found.coverage[2] > 3900.0 && found.coverage[1] < 20.0,
        "{:?}",
        found.coverage
    );
    // Hardly touching: a few measurements in common are enough for Newton's method.
    let mut peak = |centre: f64| -> Vec<f64> { (0..4000).map(|_| (centre + 10.0 * normal.next()).round()).collect() };
    let runs = [(1.0, peak(-1000.0)), (1.6, peak(-1060.0)), (2.2, peak(-1120.0))];
    let found = collect(&runs, 8).reweight(&[1.0, 1.3, 2.2]).expect("curves");
    assert!(found.coverage[1] < found.coverage[0]);
}

#[test]
fn long_autocorrelation_counts_less() {
    let density = Density::eight();
    let mut normal = Normal::new("tau", 1);
    let energies = density.draw(0.4, 5000, &mut normal);
    let mut histograms = Histograms::new(0, 4);
    histograms.add(0.4, 25.0, &energies, |_, _| {}).expect("a run");
    let found = histograms.reweight(&[0.4]).expect("a curve");
    assert!((found.coverage[0] - 100.0).abs() < 1e-9, "{:?}", found.coverage);
}

#[test]
fn what_cannot_be_is_refused() {
    let none = Histograms::new(0, 4).reweight(&[1.0]);
    assert_eq!(none, Err(ReweightError::NoRuns));
    let mut histograms = Histograms::new(1, 4);
    let short = histograms.add(1.0, 0.5, &[1.0; 3], |_, out| out[0] = 0.0);
    assert_eq!(short, Err(ReweightError::TooShort { rows: 3, blocks: 4 }));
    let nan = histograms.add(1.0, 0.5, &[f64::NAN; 8], |_, out| out[0] = 0.0);
    assert_eq!(nan, Err(ReweightError::NotFinite));
    let nan = Histograms::new(1, 4).add(1.0, 0.5, &[1.0; 8], |_, out| out[0] = f64::NAN);
    assert_eq!(nan, Err(ReweightError::NotFinite));
    let zero = histograms.add(1.0, 0.0, &[1.0; 8], |_, out| out[0] = 0.0);
    assert_eq!(zero, Err(ReweightError::NotFinite));
    let mut frozen = Histograms::new(0, 2);
    frozen.add(1.0, 0.5, &[-3.0; 8], |_, _| {}).expect("a run");
    frozen.add(2.0, 0.5, &[-3.0; 8], |_, _| {}).expect("a run");
    assert_eq!(frozen.reweight(&[1.5]).expect("a curve").levels, 1);
    assert_eq!(frozen.reweight(&[f64::NAN]), Err(ReweightError::NotFinite));
}
