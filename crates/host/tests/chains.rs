//! Chains under rules: sampling, saved states, observables, and rules that go wrong.

mod common;

use common::{Bench, all_states, json, key, plugins};
use spinledger_host::{
    Configuration, Energy, Graph, HostError, Observer, Sampler, energy_scale, energy_total, measure_all,
    measure_all_pair, random_start,
};
use spinledger_numerics::elementary::exp;
use spinledger_terms::ItemKind;
use std::sync::Arc;

const ISING: &str = r#"{"coupling": 1, "field": 0.2, "tilt": 0, "uneven": true}"#;

/// Chains with random starts.
fn sampler(bench: &Bench, rule: &str, graph: &Arc<Graph>, energy: &Arc<Energy>, beta: f64, lanes: u32) -> Sampler {
    let rule = bench.loader.update(&bench.identity(ItemKind::Update, rule), &json("{}")).unwrap();
    let keys: Vec<_> = (0..lanes).map(|lane| key("chains").lane(lane)).collect();
    let mut sampler = rule.prepare(graph, energy, beta, &keys, key("group")).unwrap();
    for lane in 0..lanes {
        let start = random_start(energy, graph, &key("start").lane(lane));
        sampler.import(lane as usize, &start).unwrap();
        assert_eq!(sampler.export(lane as usize).unwrap(), start);
    }
    sampler
}

fn observer(bench: &Bench, name: &str, graph: &Arc<Graph>, energy: &Arc<Energy>) -> Observer {
    let observable = bench.loader.observable(&bench.identity(ItemKind::Observable, name), &json("{}")).unwrap();
    observable.prepare(graph, energy).unwrap()
}

/// A lattice, a model and a rule for every form of energy.
fn cases() -> Vec<(Bench, &'static str, &'static str, &'static str, &'static str, &'static str)> {
    let c = || Bench::new(&[plugins::c_forms()]);
    let grid = r#"{"size": [2, 3], "boundary": ["plus", "periodic"]}"#;
    let closed = r#"{"size": [2, 3], "boundary": "periodic"}"#;
    vec![
        (Bench::forms(), "test-grid", grid, "test-ising", ISING, "probe-pair"),
        (Bench::forms(), "test-grid", closed, "test-four-spin", r#"{"coupling": 0.7}"#, "probe-factors"),
        (Bench::forms(), "test-grid", closed, "test-chain-term", r#"{"coupling": 0.5, "triple": 0.4}"#, "probe-custom"),
        (c(), "c-ring", r#"{"size": 6}"#, "c-triple", r#"{"triple": 0.4}"#, "c-heat-bath"),
    ]
}

/// Exact enumeration against a long chain: the frequencies of all 64 configurations, by chi-squared. Measurements are 8 sweeps apart, at
/// temperatures where a few sweeps decorrelate; the threshold is the quantile of 1e-6 of chi-squared with 63 degrees, for four cases
/// with fixed seeds.
#[test]
fn rules_sample_the_distribution_that_the_energies_give() {
    for (bench, lattice, size, model, parameters, rule) in cases() {
        let graph = bench.graph(lattice, size);
        let energy = bench.energy(model, parameters, &graph);
        let beta = 0.3;
        let with_rim = |mut states: Vec<u8>| {
            states.extend_from_slice(&energy.pinned_states);
            Configuration::States(states)
        };
        let weights: Vec<f64> = all_states(2, 6)
            .map(|states| exp(-beta * energy_total(&graph, &energy, &with_rim(states)).unwrap()))
            .collect();
        let z: f64 = weights.iter().sum();
        let mut chain = sampler(&bench, rule, &graph, &energy, beta, 1);
        chain.sweep(100).unwrap();
        let (mut counts, draws) = (vec![0u32; 64], 20_000);
        for _ in 0..draws {
            chain.sweep(8).unwrap();
            let Configuration::States(states) = chain.export(0).unwrap() else { panic!("states") };
            counts[(0..6).map(|s| usize::from(states[s]) << s).sum::<usize>()] += 1;
        }
        let chi_squared: f64 = counts
            .iter()
            .zip(&weights)
            .map(|(&count, weight)| {
                let expected = f64::from(draws) * weight / z;
                (f64::from(count) - expected).powi(2) / expected
            })
            .sum();
        assert!(chi_squared < 131.0, "{model} under {rule}: chi-squared {chi_squared} with 63 degrees");
    }
}

#[test]
fn tracked_energies_are_those_of_the_definition() {
    for (bench, lattice, size, model, parameters, rule) in cases() {
        let graph = bench.graph(lattice, size);
        let energy = bench.energy(model, parameters, &graph);
        let mut chain = sampler(&bench, rule, &graph, &energy, 0.5, 1);
        chain.sweep(500).unwrap();
        let total = energy_total(&graph, &energy, &chain.export(0).unwrap()).unwrap();
        let tallies = chain.tallies(0).unwrap();
        if rule == "c-heat-bath" {
            assert_eq!(tallies, Default::default(), "a rule without `tallies` has none");
            continue;
        }
        let tracked = tallies.energy.unwrap();
        let tolerance = 1e-12 * (1.0 + energy_scale(&energy, &graph));
        assert!((tracked - total).abs() <= tolerance, "{model}: {tracked} and {total}");
        let (proposed, accepted) = tallies.acceptance.unwrap();
        assert!(proposed == 500 * 6 && accepted > 0 && accepted < proposed, "{model}: {accepted} of {proposed}");
    }
}

/// The mean of cos(angle) of one planar vector in a field: I1(x)/I0(x) with x = h/T, by series.
#[test]
fn a_vector_in_a_field_has_the_mean_of_the_bessel_functions() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [16, 16], "boundary": "free"}"#);
    let energy = bench.energy("test-rotor", r#"{"coupling": 0, "field": 1, "anisotropy": 0}"#, &graph);
    let x: f64 = 1.5;
    let mut chain = sampler(&bench, "probe-vectors", &graph, &energy, x, 1);
    let mut mean = observer(&bench, "probe-mean", &graph, &energy);
    chain.sweep(50).unwrap();
    let (mut sum, draws, mut out) = (0.0, 400, [0.0]);
    for _ in 0..draws {
        chain.sweep(20).unwrap();
        mean.measure(&mut chain, &[0], &mut out).unwrap();
        sum += out[0];
    }
    let (mut i0, mut i1, mut term) = (0.0, 0.0, 1.0);
    for k in 1..40 {
        i0 += term;
        i1 += term * (x / 2.0) / f64::from(k);
        term *= (x / 2.0).powi(2) / f64::from(k * k);
    }
    let (found, expected) = (sum / f64::from(draws), i1 / i0);
    // One spin's cosine has a variance of 1 - m/x - m^2; 102400 of them, 20 sweeps apart. Five standard errors: false alarm 6e-7.
    let error = ((1.0 - expected / x - expected * expected) / 102_400.0).sqrt();
    assert!((found - expected).abs() < 5.0 * error, "{found} and {expected} +- {error}");
}

/// A chain that is saved, taken up by another instance and continued has the bits of one that was not interrupted.
#[test]
fn saved_states_continue_to_the_bit() {
    let vectors = ("test-rotor", r#"{"coupling": 1, "field": 0.3, "anisotropy": 0.2}"#, "probe-vectors");
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [4, 3], "boundary": "periodic"}"#);
    let mut list: Vec<_> = cases().into_iter().map(|(b, l, s, m, p, r)| (b.graph(l, s), b, m, p, r)).collect();
    list.push((graph, bench, vectors.0, vectors.1, vectors.2));
    for (graph, bench, model, parameters, rule) in list {
        let energy = bench.energy(model, parameters, &graph);
        let lanes = if rule == "c-heat-bath" { 1 } else { 3 };
        let mut chains = sampler(&bench, rule, &graph, &energy, 0.4, lanes);
        chains.sweep(17).unwrap();
        let saved = chains.save().unwrap();
        chains.sweep(23).unwrap();
        let mut again = sampler(&bench, rule, &graph, &energy, 0.4, lanes);
        again.restore(&saved).unwrap();
        again.sweep(23).unwrap();
        for lane in 0..lanes as usize {
            assert_eq!(chains.export(lane).unwrap(), again.export(lane).unwrap(), "{rule} {lane}");
            assert_eq!(chains.tallies(lane).unwrap(), again.tallies(lane).unwrap(), "{rule} {lane}");
        }
        assert_eq!(chains.save().unwrap(), again.save().unwrap());
    }
}

#[test]
fn a_state_of_something_else_is_not_taken_up() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [2, 3], "boundary": "periodic"}"#);
    let energy = bench.energy("test-ising", ISING, &graph);
    let mut chain = sampler(&bench, "probe-pair", &graph, &energy, 0.4, 1);
    let saved = chain.save().unwrap();
    let other_energy = bench.energy("test-ising", &ISING.replace("0.2", "0.3"), &graph);
    let other_graph = bench.graph("test-grid", r#"{"size": [3, 2], "boundary": "periodic"}"#);
    let rotated = bench.energy("test-ising", ISING, &other_graph);
    let others = [
        sampler(&bench, "probe-factors", &graph, &energy, 0.4, 1),
        sampler(&bench, "probe-pair", &graph, &energy, 0.5, 1),
        sampler(&bench, "probe-pair", &graph, &energy, 0.4, 2),
        sampler(&bench, "probe-pair", &graph, &other_energy, 0.4, 1),
        sampler(&bench, "probe-pair", &other_graph, &rotated, 0.4, 1),
    ];
    for mut other in others {
        let error = other.restore(&saved).unwrap_err();
        assert!(matches!(error, HostError::Saved { .. }) && error.to_string().contains("starts anew"), "{error}");
    }
    let error = chain.restore(&saved[..saved.len() - 1]).unwrap_err();
    assert!(error.to_string().contains("damaged"), "{error}");
    chain.restore(&saved).unwrap();
}

#[test]
fn one_chain_and_two_are_measured_from_one_sampler_and_from_two() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [4, 3], "boundary": ["periodic", "plus"]}"#);
    let energy = bench.energy("test-ising", ISING, &graph);
    let mut chains = sampler(&bench, "probe-pair", &graph, &energy, 0.4, 2);
    let mut others = sampler(&bench, "probe-pair", &graph, &energy, 0.4, 2);
    others.sweep(5).unwrap();
    let spins = |c: Configuration| match c {
        Configuration::States(s) => s[..12].iter().map(|&s| 1.0 - 2.0 * f64::from(s)).collect::<Vec<f64>>(),
        Configuration::Vectors(_) => panic!("states"),
    };
    let (a, b, c) =
        (spins(chains.export(0).unwrap()), spins(chains.export(1).unwrap()), spins(others.export(1).unwrap()));
    let overlap = |x: &[f64], y: &[f64]| x.iter().zip(y).map(|(x, y)| x * y).sum::<f64>() / 12.0;

    let mut pair = observer(&bench, "probe-overlap", &graph, &energy);
    assert_eq!(
        (pair.chains(), pair.columns()[0].name.as_str(), pair.columns()[0].invariant),
        (2, "probe_overlap", false)
    );
    let mut out = [f64::NAN];
    pair.measure(&mut chains, &[0, 1], &mut out).unwrap();
    assert_eq!(out[0], overlap(&a, &b));
    pair.measure_pair((&mut chains, 0), (&mut others, 1), &mut out).unwrap();
    assert_eq!(out[0], overlap(&a, &c));
    let mut pairs = [pair, observer(&bench, "probe-overlap", &graph, &energy)];
    let mut two = [f64::NAN; 2];
    measure_all_pair(&mut pairs, (&mut chains, 1), (&mut others, 1), &mut two).unwrap();
    assert_eq!(two, [overlap(&b, &c); 2]);

    let mut singles =
        [observer(&bench, "probe-mean", &graph, &energy), observer(&bench, "probe-mean", &graph, &energy)];
    measure_all(&mut singles, &mut chains, 1, &mut two).unwrap();
    assert_eq!(two, [b.iter().sum::<f64>() / 12.0; 2]);
    assert!(pairs[0].measure(&mut chains, &[0], &mut out).unwrap_err().to_string().contains("2 chains"));
    assert!(measure_all(&mut singles, &mut chains, 0, &mut out).unwrap_err().to_string().contains("no room"));
    assert!(singles[0].measure(&mut chains, &[2], &mut out).unwrap_err().to_string().contains("no chain 2"));
}

/// A rule and an observable of two libraries, one in Rust and one in C.
#[test]
fn an_observable_in_c_reads_a_rule_in_rust() {
    let bench = Bench::new(&[plugins::forms(), plugins::c_forms()]);
    let graph = bench.graph("c-ring", r#"{"size": 9}"#);
    let energy = bench.energy("test-chain-term", r#"{"coupling": 1, "triple": 0.1}"#, &graph);
    let mut chain = sampler(&bench, "probe-custom", &graph, &energy, 0.4, 1);
    chain.sweep(3).unwrap();
    let mut observers = [observer(&bench, "c-mean", &graph, &energy), observer(&bench, "probe-mean", &graph, &energy)];
    let mut out = [f64::NAN; 2];
    measure_all(&mut observers, &mut chain, 0, &mut out).unwrap();
    assert!(out[0] == out[1] && out[0].abs() <= 1.0, "{out:?}");
    // It reads bytes, and says so before anything runs.
    let rotor = bench.energy("test-rotor", r#"{"coupling": 1, "field": 0, "anisotropy": 0}"#, &graph);
    let mean = bench.loader.observable(&bench.identity(ItemKind::Observable, "c-mean"), &json("{}")).unwrap();
    let error = mean.prepare(&graph, &rotor).unwrap_err();
    assert!(matches!(error, HostError::Unsuited { .. }) && error.to_string().contains("vector"), "{error}");
}

#[test]
fn the_example_of_an_observable_in_c_measures() {
    let bench = Bench::new(&[plugins::forms(), plugins::c_observable()]);
    let graph = bench.graph("test-grid", r#"{"size": [3, 4], "boundary": ["antiperiodic", "minus"]}"#);
    let energy = bench.energy("test-ising", ISING, &graph);
    let mut chain = sampler(&bench, "probe-pair", &graph, &energy, 0.2, 1);
    let mut product = observer(&bench, "neighbour-product", &graph, &energy);
    assert!(product.columns()[0].invariant);
    let mut out = [f64::NAN];
    product.measure(&mut chain, &[0], &mut out).unwrap();
    let Configuration::States(states) = chain.export(0).unwrap() else { panic!("states") };
    let spin = |site: u32| 1.0 - 2.0 * f64::from(states[site as usize]);
    let sum: f64 = graph.bonds.iter().map(|b| f64::from(b.sign) * spin(b.i) * spin(b.j)).sum();
    assert_eq!(out[0], sum / graph.bonds.len() as f64);
}

#[test]
fn a_panic_is_an_error_and_ends_the_chain() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": 2, "boundary": "periodic"}"#);
    let energy = bench.energy("test-ising", ISING, &graph);
    let mut chain = sampler(&bench, "faulty-panic", &graph, &energy, 0.4, 1);
    let error = chain.sweep(1).unwrap_err();
    assert!(matches!(error, HostError::Panicked { .. }), "{error}");
    assert!(error.to_string().contains("faulty-panic") && error.to_string().contains("this rule panics"), "{error}");
    assert!(matches!(chain.sweep(1).unwrap_err(), HostError::Broken { .. }));
    assert!(matches!(chain.export(0).unwrap_err(), HostError::Broken { .. }));
}

/// The panic of the lowest tile is the one that is told, whoever ran it.
#[test]
fn a_panic_in_a_parallel_loop_is_an_error_too() {
    for threads in [1, 3] {
        let bench = Bench::with_threads(&[plugins::forms(), plugins::faulty()], threads);
        let graph = bench.graph("test-grid", r#"{"size": 2, "boundary": "periodic"}"#);
        let energy = bench.energy("test-ising", ISING, &graph);
        let mut chain = sampler(&bench, "faulty-tile", &graph, &energy, 0.4, 1);
        let error = chain.sweep(1).unwrap_err();
        assert!(matches!(&error, HostError::Panicked { message, .. } if message == "tile 3 panics"), "{error}");
    }
}

#[test]
fn a_rule_that_asks_whether_it_should_stop_is_stopped() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": 2, "boundary": "periodic"}"#);
    let energy = bench.energy("test-ising", ISING, &graph);
    let mut chain = sampler(&bench, "faulty-patient", &graph, &energy, 0.4, 1);
    std::thread::scope(|scope| {
        let sweeping = scope.spawn(|| chain.sweep(1).unwrap_err());
        bench.loader.set_cancelled(true);
        let error = sweeping.join().unwrap();
        assert!(matches!(error, HostError::Cancelled { .. }), "{error}");
    });
    // Nobody knows how far it came: it must not be saved as if it had come to the end.
    bench.loader.set_cancelled(false);
    assert!(matches!(chain.save(), Err(HostError::Broken { .. })));
    assert!(matches!(chain.sweep(1), Err(HostError::Broken { .. })));
}

/// Bits of a measurement that runs in a parallel loop, and the line that the observable logs.
#[test]
fn threads_change_no_bits_and_lines_arrive() {
    use std::sync::Mutex;
    static LINES: Mutex<Vec<String>> = Mutex::new(Vec::new());
    let bits = [0, 1, 2, 4].map(|threads| {
        let mut bench = Bench::with_threads(&[plugins::forms()], threads);
        let log = Box::new(|_: spinledger_host::Level, line: &str| LINES.lock().unwrap().push(line.to_owned()));
        bench.loader = spinledger_host::Loader::new(spinledger_host::Services { threads, log }).unwrap();
        let graph = bench.graph("test-grid", r#"{"size": [13, 17], "boundary": "periodic"}"#);
        let energy = bench.energy("test-rotor", r#"{"coupling": 1, "field": 0.1, "anisotropy": 0}"#, &graph);
        let mut chain = sampler(&bench, "probe-vectors", &graph, &energy, 0.8, 1);
        chain.sweep(5).unwrap();
        let mut out = [0.0];
        observer(&bench, "probe-mean", &graph, &energy).measure(&mut chain, &[0], &mut out).unwrap();
        out[0].to_bits()
    });
    assert!(bits.iter().all(|b| *b == bits[0]), "{bits:?}");
    assert_eq!(*LINES.lock().unwrap(), ["probe-mean is prepared"; 4]);
}

/// A rule says it, says nothing, or has a table from before there was anything to say.
#[test]
fn rules_tell_which_of_their_code_runs() {
    let forms = Bench::forms();
    let graph = forms.graph("test-grid", r#"{"size": 2, "boundary": "periodic"}"#);
    let energy = forms.energy("test-ising", ISING, &graph);
    assert_eq!(sampler(&forms, "probe-pair", &graph, &energy, 0.4, 1).path().unwrap(), "by colour");
    assert_eq!(sampler(&forms, "faulty-garbage", &graph, &energy, 0.4, 1).path().unwrap(), "");
    let c = Bench::new(&[plugins::c_forms()]);
    let graph = c.graph("c-ring", r#"{"size": 6}"#);
    let energy = c.energy("c-triple", r#"{"triple": 0.4}"#, &graph);
    assert_eq!(sampler(&c, "c-heat-bath", &graph, &energy, 0.4, 1).path().unwrap(), "");
}

#[test]
fn states_that_do_not_exist_are_noticed() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": 2, "boundary": "periodic"}"#);
    let energy = bench.energy("test-ising", ISING, &graph);
    let mut chain = sampler(&bench, "faulty-garbage", &graph, &energy, 0.4, 1);
    chain.sweep(1).unwrap();
    let error = chain.export(0).unwrap_err();
    assert!(matches!(error, HostError::Wrong { .. }) && error.to_string().contains("state 200"), "{error}");
}

#[test]
fn what_cannot_be_prepared_is_refused() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": 2, "boundary": "periodic"}"#);
    let same = bench.graph("test-grid", r#"{"size": 2, "boundary": "periodic"}"#);
    let energy = bench.energy("test-ising", ISING, &graph);
    let rule = bench.loader.update(&bench.identity(ItemKind::Update, "probe-pair"), &json("{}")).unwrap();
    let one = [key("a")];
    for (graph, beta, keys) in
        [(&same, 0.4, &one[..]), (&graph, -0.1, &one), (&graph, f64::NAN, &one), (&graph, 0.4, &[])]
    {
        let error = rule.prepare(graph, &energy, beta, keys, key("g")).unwrap_err();
        assert!(matches!(error, HostError::Unsuited { .. }), "{error}");
    }
}
