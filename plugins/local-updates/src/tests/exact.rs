//! Samples of small systems against the Boltzmann distribution, enumerated. Also compiled into the tests of the cluster rules.

use spinledger_sdk::testing::Bench;
use spinledger_sdk::{Spins, UpdateInstance, View};
use std::collections::BTreeMap;

/// False-alarm rate of each chi-squared test, by the quantile of the normal distribution that belongs to it: P(z > 3.719) = 1e-4.
const QUANTILE: f64 = 3.719;
/// Classes that are expected less often are merged.
const FEWEST: f64 = 10.0;

/// All configurations of a small system.
pub(crate) struct Enumeration {
    /// Number of states of a spin.
    states: usize,
    sites: usize,
    total: usize,
    pinned: Vec<u8>,
    /// Boltzmann probability of each configuration; the number of a configuration has site 0 as its most significant digit.
    probabilities: Vec<f64>,
    /// Class of each configuration by energy and numbers of sites in each state.
    classes: Vec<usize>,
}

impl Enumeration {
    /// Enumerates a bench.
    pub(crate) fn new(bench: &Bench, inverse_temperature: f64) -> Self {
        let (graph, energy) = (bench.graph(), bench.energy());
        let count = energy.states.pow(graph.sites as u32);
        assert!(count <= 1 << 12, "small systems only");
        let mut enumeration = Enumeration {
            states: energy.states,
            sites: graph.sites,
            total: graph.total,
            pinned: energy.pinned_states.to_vec(),
            probabilities: Vec::new(),
            classes: Vec::new(),
        };
        let mut known = BTreeMap::new();
        for number in 0..count {
            let states = enumeration.configuration(number);
            let energy = bench.total(&states);
            enumeration.probabilities.push((-inverse_temperature * energy).exp());
            let mut occupation = vec![0; enumeration.states];
            states[..graph.sites].iter().for_each(|s| occupation[*s as usize] += 1);
            let next = known.len();
            // Energies that differ by rounding only are one.
            enumeration.classes.push(*known.entry(((energy * 1e9).round() as i64, occupation)).or_insert(next));
        }
        let sum: f64 = enumeration.probabilities.iter().sum();
        enumeration.probabilities.iter_mut().for_each(|p| *p /= sum);
        enumeration
    }

    fn configuration(&self, mut number: usize) -> Vec<u8> {
        let mut states = vec![0; self.sites];
        for state in states.iter_mut().rev() {
            *state = (number % self.states) as u8;
            number /= self.states;
        }
        states.extend_from_slice(&self.pinned);
        states
    }

    fn number(&self, view: &View<'_>) -> usize {
        assert_eq!(view.sites(), self.total);
        (0..self.sites).fold(0, |number, site| number * self.states + view.state(site) as usize)
    }
}

/// How to sample.
#[derive(Clone, Copy)]
pub(crate) struct Effort {
    /// Chains.
    pub(crate) lanes: usize,
    /// Samples, of all chains together.
    pub(crate) samples: usize,
}

/// Chi-squared over its critical value, by classes of energy and occupation, and by configurations. Above 1: not the same distribution, but
/// for false alarms at a rate of 1e-4 each. Between two samples of a chain lie at least 20 autocorrelation times.
pub(crate) fn excess(
    exact: &Enumeration,
    bench: &Bench,
    instance: &mut impl UpdateInstance,
    effort: Effort,
) -> [f64; 2] {
    for lane in 0..effort.lanes {
        instance.import(lane, &View::bytes(&bench.random_states(lane as u64))).expect("a configuration that fits");
    }
    instance.sweep(1000).expect("sweeps");
    let thin = (20.0 * slowest(exact, bench, instance)).ceil() as u64;
    assert!(thin <= 2000, "too slow a system for this test: 20 autocorrelation times are {thin} sweeps");
    let mut counts = vec![0_u64; exact.probabilities.len()];
    let rounds = effort.samples / effort.lanes;
    for _ in 0..rounds {
        instance.sweep(thin).expect("sweeps");
        for lane in 0..effort.lanes {
            counts[exact.number(&instance.view(lane))] += 1;
        }
    }
    let classes = exact.classes.iter().max().map_or(0, |c| c + 1);
    let mut by_class = (vec![0.0; classes], vec![0_u64; classes]);
    for ((class, probability), count) in exact.classes.iter().zip(&exact.probabilities).zip(&counts) {
        by_class.0[*class] += probability;
        by_class.1[*class] += count;
    }
    [chi_squared(&by_class.0, &by_class.1), chi_squared(&exact.probabilities, &counts)]
}

/// The longest autocorrelation time among those of energy, occupation of state 0 and the first spin, from one chain measured at every sweep.
fn slowest(exact: &Enumeration, bench: &Bench, instance: &mut impl UpdateInstance) -> f64 {
    let mut series = vec![Vec::new(); 3];
    let mut states = vec![0; exact.total];
    for _ in 0..10_000 {
        instance.sweep(1).expect("sweeps");
        instance.export(0, &mut Spins::States(&mut states));
        series[0].push(bench.total(&states));
        series[1].push(states[..exact.sites].iter().filter(|s| **s == 0).count() as f64);
        series[2].push(f64::from(states[0]));
    }
    series.iter().map(|series| autocorrelation_time(series)).fold(0.5, f64::max)
}

/// 1/2 plus the sum of autocorrelations up to the first that is lost in noise.
fn autocorrelation_time(series: &[f64]) -> f64 {
    let n = series.len() as f64;
    let mean = series.iter().sum::<f64>() / n;
    let covariance =
        |lag: usize| series.iter().zip(&series[lag..]).map(|(a, b)| (a - mean) * (b - mean)).sum::<f64>() / n;
    let variance = covariance(0);
    if variance < 1e-12 {
        return 0.5;
    }
    0.5 + (1..1000).map(|lag| covariance(lag) / variance).take_while(|rho| *rho > 0.05).sum::<f64>()
}

/// Chi-squared over its critical value; classes too rare for the limit of large numbers are merged.
fn chi_squared(probabilities: &[f64], counts: &[u64]) -> f64 {
    let n = counts.iter().sum::<u64>() as f64;
    let (mut sum, mut cells) = (0.0, 0_u32);
    let (mut rare_expected, mut rare_count) = (0.0, 0.0);
    let mut add = |expected: f64, count: f64| {
        sum += (count - expected) * (count - expected) / expected;
        cells += 1;
    };
    for (probability, count) in probabilities.iter().zip(counts) {
        if probability * n < FEWEST {
            rare_expected += probability * n;
            rare_count += *count as f64;
        } else {
            add(probability * n, *count as f64);
        }
    }
    if rare_expected >= FEWEST {
        add(rare_expected, rare_count);
    }
    assert!(cells > 1, "one class says nothing");
    let degrees = f64::from(cells - 1);
    // Wilson & Hilferty 1931: the cube root of chi-squared is nearly normal.
    let spread = 2.0 / (9.0 * degrees);
    sum / (degrees * (1.0 - spread + QUANTILE * spread.sqrt()).powi(3))
}
