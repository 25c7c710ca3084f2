//! Counts, colourings, wraps, rims and faces on small lattices of all boundaries.

use crate::standard::{Bcc, Chain, Cubic, Diamond, Fcc, Honeycomb, Kagome, Square, Triangular};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Graph, Lattice, Model, ModelBuilder, ModelSpec, Params, Result};
use std::collections::BTreeSet;

/// Nothing but spins, so that a bench can be made.
struct Free;

impl Model for Free {
    const SPEC: ModelSpec = ModelSpec { name: "free", states: 2, ..ModelSpec::EMPTY };

    fn new(_: &Params) -> Result<Self> {
        Ok(Free)
    }

    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()> {
        builder.spins(2, &[1.0, -1.0], &[1, 0], Some(0), Some(1));
        (0..graph.class_names.len()).for_each(|class| builder.pair(class as u16, &[-1.0, 1.0, 1.0, -1.0]));
        Ok(())
    }
}

const BOUNDARIES: [&str; 5] = ["periodic", "free", "plus", "minus", "antiperiodic"];

fn try_bench<L: Lattice>(sizes: &[usize], boundaries: &[&str]) -> Result<Bench> {
    let boundaries: Vec<String> = boundaries.iter().map(|b| format!("\"{b}\"")).collect();
    let text = format!(r#"{{"size": {sizes:?}, "boundary": [{}]}}"#, boundaries.join(", "));
    Bench::try_new::<L, Free>(&params(&text), &params("{}"))
}

fn bench<L: Lattice>(sizes: &[usize], boundaries: &[&str]) -> Bench {
    try_bench::<L>(sizes, boundaries).unwrap_or_else(|error| panic!("{sizes:?} {boundaries:?}: {error}"))
}

/// Every choice of `count` values.
fn choices<T: Copy>(values: &[T], count: usize) -> Vec<Vec<T>> {
    (0..count).fold(vec![vec![]], |all, _| {
        all.iter().flat_map(|head| values.iter().map(|v| [head.as_slice(), &[*v]].concat())).collect()
    })
}

/// What must hold for every lattice.
fn check_soundness(graph: &Graph<'_>, colours: usize, colour_sites: &[u32], colour_offsets: &[u32], label: &str) {
    let mut colour = vec![usize::MAX; graph.sites];
    for c in 0..colours {
        for &site in &colour_sites[colour_offsets[c] as usize..colour_offsets[c + 1] as usize] {
            colour[site as usize] = c;
        }
    }
    assert!(colour.iter().all(|c| *c < colours), "{label}: every free site has a colour");
    for (number, bond) in graph.bonds.iter().enumerate() {
        let (i, j) = (bond.i as usize, bond.j as usize);
        if i != j && j < graph.sites {
            assert_ne!(colour[i], colour[j], "{label}: bond {i} {j}");
        }
        // The vector of a bond, wraps undone, has length 1: this checks offsets, wraps and positions against each other.
        let d = graph.dimension;
        let length: f64 = (0..d)
            .map(|c| {
                let mut step = graph.positions[j * d + c] - graph.positions[i * d + c];
                for k in 0..d {
                    let period = graph.wraps[number * d + k] as f64 * graph.cells[k] as f64;
                    step += period * graph.vectors[k * d + c];
                }
                step * step
            })
            .sum();
        assert!((length - 1.0).abs() < 1e-12, "{label}: bond {i} {j} has length {}", length.sqrt());
    }
    for site in graph.sites..graph.total {
        assert!(graph.bonds.iter().any(|b| b.j as usize == site), "{label}: pinned site {site} touches no free site");
    }
    for face in graph.face_offsets.windows(2) {
        let corners = &graph.face_sites[face[0] as usize..face[1] as usize];
        let joined = |a: u32, b: u32| graph.neighbours_of(a as usize).contains(&b);
        assert!(
            (0..corners.len()).all(|k| joined(corners[k], corners[(k + 1) % corners.len()])),
            "{label}: face {corners:?}"
        );
        assert_eq!(corners.iter().collect::<BTreeSet<_>>().len(), corners.len(), "{label}: face {corners:?}");
    }
}

fn check_all<L: Lattice>(directions: usize, sizes: &[usize], coordination: usize) {
    for sizes in choices(sizes, directions) {
        for boundaries in choices(&BOUNDARIES, directions) {
            let label = format!("{} {sizes:?} {boundaries:?}", L::SPEC.name);
            let folded = sizes.iter().zip(&boundaries).any(|(s, b)| *s == 1 && *b == "antiperiodic");
            let bench = match try_bench::<L>(&sizes, &boundaries) {
                Err(error) => {
                    assert!(folded && error.0.contains("antiperiodic"), "{label}: {error}");
                    continue;
                }
                Ok(bench) => bench,
            };
            assert!(!folded, "{label} must be refused");
            let (graph, energy) = (bench.graph(), bench.energy());
            let sites = sizes.iter().product::<usize>() * L::SPEC.sites_per_cell as usize;
            assert_eq!(graph.sites, sites, "{label}");
            check_soundness(&graph, energy.colours(), energy.colour_sites, energy.colour_offsets, &label);
            let closed = |b: &str| b == "periodic" || b == "antiperiodic";
            if boundaries.iter().all(|b| closed(b)) {
                assert_eq!(graph.bonds.len(), sites * coordination / 2, "{label}");
                assert!((0..sites).all(|s| graph.neighbours_of(s).len() == coordination), "{label}");
                let hypercubic = L::SPEC.sites_per_cell == 1 && coordination == 2 * directions;
                if sizes.iter().all(|s| s % 2 == 0) && hypercubic {
                    assert_eq!(energy.colours(), 2, "{label}");
                } else if sizes.iter().all(|s| *s > 1) && hypercubic {
                    assert_eq!(energy.colours(), 3, "{label}");
                }
            }
            if boundaries.iter().all(|b| closed(b) || *b == "plus" || *b == "minus") {
                assert!(
                    (0..sites).all(|s| graph.neighbours_of(s).len() == coordination),
                    "{label}: with the rim, all have z neighbours"
                );
            }
            for (bond, wraps) in graph.bonds.iter().zip(graph.wraps.chunks(directions)) {
                let seams: i32 =
                    wraps.iter().zip(&boundaries).filter(|(_, b)| **b == "antiperiodic").map(|(w, _)| w.abs()).sum();
                assert_eq!(bond.sign, if seams % 2 == 0 { 1 } else { -1 }, "{label}: {bond:?}");
            }
        }
    }
}

#[test]
fn chains_are_sound() {
    check_all::<Chain>(1, &[1, 2, 3, 4, 5, 6, 7], 2);
}

#[test]
fn square_lattices_are_sound() {
    check_all::<Square>(2, &[1, 2, 3, 4, 5, 6, 7], 4);
}

#[test]
fn triangular_lattices_are_sound() {
    check_all::<Triangular>(2, &[1, 2, 3, 4, 5, 6, 7], 6);
}

#[test]
fn cubic_lattices_are_sound() {
    check_all::<Cubic>(3, &[1, 2, 3], 6);
    for sizes in choices(&[1, 2, 3, 4, 5, 6, 7], 3) {
        let bench = bench::<Cubic>(&sizes, &["periodic"; 3]);
        let (graph, energy) = (bench.graph(), bench.energy());
        check_soundness(&graph, energy.colours(), energy.colour_sites, energy.colour_offsets, &format!("{sizes:?}"));
    }
}

#[test]
fn lattices_with_several_sites_a_cell_are_sound() {
    check_all::<Honeycomb>(2, &[1, 2, 3, 4, 5], 3);
    check_all::<Kagome>(2, &[1, 2, 3, 4, 5], 4);
    check_all::<Bcc>(3, &[1, 2, 3], 8);
    check_all::<Fcc>(3, &[1, 2, 3], 12);
    check_all::<Diamond>(3, &[1, 2, 3], 4);
    let colours = |bench: Bench| bench.energy().colours();
    for size in [1, 2, 3] {
        assert_eq!(colours(bench::<Honeycomb>(&[size; 2], &["periodic"; 2])), 2);
        assert_eq!(colours(bench::<Kagome>(&[size; 2], &["periodic"; 2])), 3);
        assert_eq!(colours(bench::<Bcc>(&[size; 3], &["periodic"; 3])), 2);
        assert_eq!(colours(bench::<Fcc>(&[size; 3], &["periodic"; 3])), 4);
        assert_eq!(colours(bench::<Diamond>(&[size; 3], &["periodic"; 3])), 2);
    }
}

/// Rings of a lattice tell it from others of the same coordination: closed walks of n steps from a site, counted by hand. Honeycomb: 3 of two steps,
/// 15 of four, none odd. Kagome: each site stands in two triangles. Face-centred: each of twelve neighbours shares four with the site. Diamond: as
/// the honeycomb, twelve hexagons through a site make 24 more walks of six steps than the tree of four branches has (its 4, 28, 232).
#[test]
fn closed_walks_are_those_of_the_lattice() {
    let walks = |bench: &Bench, steps: usize| {
        let graph = bench.graph();
        let mut here = vec![0u64; graph.sites];
        here[0] = 1;
        for _ in 0..steps {
            let mut next = vec![0; graph.sites];
            for (site, count) in here.iter().enumerate() {
                graph.neighbours_of(site).iter().for_each(|other| next[*other as usize] += count);
            }
            here = next;
        }
        here[0]
    };
    let honeycomb = bench::<Honeycomb>(&[7, 7], &["periodic"; 2]);
    assert_eq!([2, 3, 4, 5, 6].map(|n| walks(&honeycomb, n)), [3, 0, 15, 0, 87 + 6]);
    let kagome = bench::<Kagome>(&[7, 7], &["periodic"; 2]);
    assert_eq!([2, 3].map(|n| walks(&kagome, n)), [4, 4]);
    let bcc = bench::<Bcc>(&[5; 3], &["periodic"; 3]);
    assert_eq!([2, 3, 4].map(|n| walks(&bcc, n)), [8, 0, 216]);
    let fcc = bench::<Fcc>(&[4; 3], &["periodic"; 3]);
    assert_eq!([2, 3].map(|n| walks(&fcc, n)), [12, 48]);
    let diamond = bench::<Diamond>(&[4; 3], &["periodic"; 3]);
    assert_eq!([2, 3, 4, 6].map(|n| walks(&diamond, n)), [4, 0, 28, 232 + 24]);
}

#[test]
fn triangular_lattices_have_three_colours_where_they_can() {
    assert_eq!(bench::<Triangular>(&[3, 6], &["periodic"; 2]).energy().colours(), 3);
    assert_eq!(bench::<Triangular>(&[4, 5], &["free"; 2]).energy().colours(), 3);
    assert_eq!(bench::<Triangular>(&[6, 5], &["periodic", "plus"]).energy().colours(), 3);
    assert_eq!(bench::<Triangular>(&[4, 8], &["periodic"; 2]).energy().colours(), 4);
}

#[test]
fn sites_are_numbered_with_the_last_direction_fastest() {
    let bench = bench::<Cubic>(&[2, 3, 4], &["free"; 3]);
    assert_eq!(bench.graph().positions[3 * (12 + 2 * 4 + 3)..][..3], [1.0, 2.0, 3.0]);
    let texts: Vec<&str> = bench.graph().class_names.clone();
    assert_eq!(texts, ["first.x", "first.y", "first.z"]);
}

#[test]
fn a_period_of_two_keeps_both_bonds() {
    let bench = bench::<Square>(&[2, 2], &["periodic"; 2]);
    let graph = bench.graph();
    let pairs: Vec<(u32, u32)> = graph.bonds.iter().map(|b| (b.i.min(b.j), b.i.max(b.j))).collect();
    assert_eq!(pairs.iter().filter(|p| **p == (0, 1)).count(), 2);
    assert_eq!(pairs.iter().filter(|p| **p == (0, 2)).count(), 2);
    // Across an antiperiodic seam the two have opposite signs.
    let bench = try_bench::<Chain>(&[2], &["antiperiodic"]).unwrap();
    assert_eq!(bench.graph().bonds.iter().map(|b| b.sign).collect::<Vec<_>>(), [1, -1]);
}

#[test]
fn rims_have_the_sites_that_free_sites_touch() {
    let bench = bench::<Square>(&[3, 4], &["plus", "plus"]);
    let graph = bench.graph();
    assert_eq!(graph.total - graph.sites, 2 * (3 + 4), "no corners");
    assert_eq!(graph.bonds.len(), 2 * 4 + 3 * 3 + 2 * (3 + 4));
    assert!(graph.directions.iter().all(|d| *d == 1));
    let bench = self::bench::<Square>(&[3, 4], &["periodic", "minus"]);
    let graph = bench.graph();
    assert_eq!(graph.total - graph.sites, 2 * 3);
    assert_eq!(graph.bonds.len(), 3 * 4 + 3 * 3 + 2 * 3);
    assert!(graph.directions.iter().all(|d| *d == -1));
    // One free site of the triangular lattice: six pinned neighbours; beyond both ends the first direction decides.
    let bench = self::bench::<Triangular>(&[1, 1], &["plus", "minus"]);
    let graph = bench.graph();
    assert_eq!((graph.total - graph.sites, graph.bonds.len()), (6, 6));
    assert_eq!(graph.directions.iter().filter(|d| **d == 1).count(), 4);
}

#[test]
fn faces_are_counted() {
    let count = |bench: &Bench| bench.graph().face_offsets.len().saturating_sub(1);
    assert_eq!(count(&bench::<Square>(&[4, 5], &["periodic"; 2])), 20);
    assert_eq!(count(&bench::<Square>(&[4, 5], &["free"; 2])), 12);
    assert_eq!(count(&bench::<Square>(&[4, 5], &["periodic", "free"])), 16);
    assert_eq!(count(&bench::<Triangular>(&[3, 4], &["periodic"; 2])), 24);
    assert_eq!(count(&bench::<Triangular>(&[3, 4], &["free"; 2])), 12);
    assert_eq!(count(&bench::<Cubic>(&[3, 4, 2], &["periodic"; 3])), 72);
    assert_eq!(count(&bench::<Chain>(&[5], &["periodic"])), 0);
    // Euler's relation on the torus: sites - bonds + faces = 0.
    assert_eq!(count(&bench::<Honeycomb>(&[3, 4], &["periodic"; 2])), 12);
    assert_eq!(count(&bench::<Kagome>(&[3, 4], &["periodic"; 2])), 36);
    assert_eq!(count(&bench::<Square>(&[1, 5], &["periodic"; 2])), 0, "a period of one folds every face");
}

#[test]
fn wrong_parameters_are_refused() {
    let wrong = |text: &str| Bench::try_new::<Square, Free>(&params(text), &params("{}")).unwrap_err().0;
    assert!(wrong(r#"{"size": [3, 3, 3]}"#).contains("list of 2"));
    assert!(wrong(r#"{"size": 3, "boundary": "open"}"#).contains("not a boundary"));
    assert!(wrong(r#"{"size": 1, "boundary": "antiperiodic"}"#).contains("at least 2"));
    assert!(wrong(r#"{"size": 100000}"#).contains("more than"));
}
