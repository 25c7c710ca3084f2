//! What is refused, in the words of the message, and tables of small systems.

use spinledger_abi::SlBond;
use spinledger_flatten::{GraphData, LatticeParts, ModelParts, Result};

fn bond(i: u32, j: u32, sign: i8) -> SlBond {
    SlBond { i, j, class_index: 0, sign, reserved: 0 }
}

/// A ring of `n` sites; its last bond has this sign.
fn ring(n: usize, sign: i8) -> LatticeParts {
    let mut parts = LatticeParts::default();
    parts.geometry(&[1.0], &[n as i64], &[true]).unwrap();
    let positions: Vec<f64> = (0..n).map(|x| x as f64).collect();
    parts.sites(&positions, &vec![0; n]).unwrap();
    parts.class_name("first").unwrap();
    for s in 0..n {
        let last = s + 1 == n;
        let sign = if last { sign } else { 1 };
        parts.bonds(&[bond(s as u32, ((s + 1) % n) as u32, sign)], Some(&[i32::from(last)])).unwrap();
    }
    parts
}

fn says<T: std::fmt::Debug>(outcome: Result<T>, what: &str) {
    let text = outcome.expect_err(what).to_string();
    assert!(text.contains(what), "`{text}` does not say `{what}`");
}

fn ising(graph: &GraphData) -> ModelParts {
    let mut parts = ModelParts::new(graph);
    parts.spins(2, Some(&[1.0, -1.0]), Some(&[1, 0]), 0, 1).unwrap();
    parts
}

#[test]
fn a_bond_of_a_site_with_itself_stands_twice_in_its_row() {
    let graph = ring(1, 1).finish().unwrap();
    assert_eq!((graph.offsets.as_slice(), graph.neighbours.as_slice()), (&[0, 2][..], &[0, 0][..]));
    assert_eq!(graph.colours, [0]);
    let mut model = ising(&graph);
    model.pair(0, &[0.0, 1.0, 2.0, 3.0]).unwrap();
    let energy = model.finish(&graph, None).unwrap();
    assert_eq!((energy.neighbour_tables.as_slice(), energy.bond_tables.as_slice()), (&[0, 1][..], &[0][..]));
    assert_eq!(energy.pair_tables, [0.0, 1.0, 2.0, 3.0, 0.0, 2.0, 1.0, 3.0]);
}

#[test]
fn both_bonds_of_a_period_of_two_stay() {
    let graph = ring(2, 1).finish().unwrap();
    assert_eq!(graph.bonds.len(), 2);
    assert_eq!(graph.neighbours, [1, 1, 0, 0]);
    assert_eq!(graph.neighbour_bonds, [0, 1, 0, 1]);
}

#[test]
fn lattices_that_cannot_be() {
    says(LatticeParts::default().finish(), "no geometry");
    says(LatticeParts::default().geometry(&[], &[], &[]), "1 to 16 directions");
    says(LatticeParts::default().geometry(&[f64::NAN], &[1], &[true]), "not finite");
    says(LatticeParts::default().geometry(&[1.0], &[0], &[true]), "no unit cell");
    let mut parts = ring(3, 1);
    says(parts.sites(&[0.0], &[0]), "after bonds");
    says(parts.class_name("first"), "named twice");
    says(parts.bonds(&[bond(0, 3, 1)], None), "bond 3 joins sites 0 and 3 of 3");
    says(parts.bonds(&[bond(0, 1, 0)], None), "sign 0");
    says(parts.bonds(&[SlBond { class_index: 1, ..bond(0, 1, 1) }], None), "class 1, which has no name");
    says(parts.bonds(&[bond(0, 0, 1)], Some(&[0])), "with itself without wrapping");
    says(parts.bonds(&[bond(0, 0, -1)], Some(&[1])), "across an antiperiodic seam");
    says(parts.colours(&[0]), "1 colours for 3 free sites");
    says(parts.faces(&[2], &[0, 1]), "fewer than three corners");
    says(parts.faces(&[3], &[0, 1, 3]), "site 3 of 3");
    says(parts.faces(&[3], &[0, 1]), "3 corners in all, and 2 sites");
    parts.colours(&[0, 1, 1]).unwrap();
    says(parts.finish(), "sites 1 and 2 are joined by a bond and have one colour");
    let mut open = LatticeParts::default();
    open.geometry(&[1.0], &[2], &[false]).unwrap();
    open.sites(&[0.0, 1.0], &[0, 0]).unwrap();
    open.class_name("first").unwrap();
    says(open.bonds(&[bond(0, 1, 1)], Some(&[1])), "direction 0, which is not periodic");
}

#[test]
fn models_that_cannot_be() {
    let graph = ring(3, 1).finish().unwrap();
    let seam = ring(3, -1).finish().unwrap();
    says(ModelParts::new(&graph).finish(&graph, None), "the kind of spin is not given");
    says(ModelParts::new(&graph).pair(0, &[0.0; 4]), "without discrete spins");
    says(ModelParts::new(&graph).spins(1, None, None, 1, 1), "2 to 256 states");
    says(ModelParts::new(&graph).spins(3, None, Some(&[1, 2, 0]), 3, 3), "not its own inverse");
    says(ModelParts::new(&graph).spins(2, Some(&[1.0, 0.0]), Some(&[1, 0]), 2, 2), "sign of the value of state 0");
    says(ModelParts::new(&graph).vectors(&[1.0, 1.0]), "unit length");
    says(ising(&graph).spins(2, None, None, 2, 2), "given twice");
    says(ising(&graph).pair(1, &[0.0; 4]), "bond class 1 does not exist");
    says(ising(&graph).pair(0, &[0.0; 3]), "3 numbers, not 4");
    says(ising(&graph).pair(0, &[0.0, f64::INFINITY, 0.0, 0.0]), "not all finite");
    says(ising(&graph).coupling(0, &[0.0; 4]), "without vector spins");
    says(ising(&graph).bond_strengths(&[1.0]), "1 strengths for 3 bonds");
    says(ising(&graph).factor_table(9, &[]), "1 to 8 sites");
    says(ising(&graph).factors(0, &[0]), "factor table 0 does not exist");
    says(ising(&graph).involution(&[0, 1]), "moves no state");
    let mut factors = ising(&graph);
    factors.factor_table(2, &[0.0; 4]).unwrap();
    says(factors.factors(0, &[1, 1]), "site 1 twice");
    says(factors.factors(0, &[0, 3]), "site 3 of 3");

    let mut potts = ModelParts::new(&seam);
    potts.spins(3, None, None, 3, 3).unwrap();
    potts.pair(0, &[-1.0, 0.0, 0.0, 0.0, -1.0, 0.0, 0.0, 0.0, -1.0]).unwrap();
    says(potts.finish(&seam, None), "bond 2 is antiperiodic");
}

#[test]
fn pinned_sites_need_states_for_them() {
    let mut parts = LatticeParts::default();
    parts.geometry(&[1.0], &[1], &[false]).unwrap();
    parts.sites(&[0.0], &[0]).unwrap();
    parts.pinned(&[-1.0, 1.0], &[0, 0], &[1, -1]).unwrap();
    says(parts.pinned(&[2.0], &[0], &[0]), "points to 0");
    parts.class_name("first").unwrap();
    parts.bonds(&[bond(0, 1, 1), bond(0, 2, 1)], None).unwrap();
    says(parts.bonds(&[bond(1, 2, 1)], None), "does not begin at a free site");
    let graph = parts.finish().unwrap();
    assert_eq!(ising(&graph).finish(&graph, None).unwrap().pinned_states, [0, 1]);
    let mut without = ModelParts::new(&graph);
    without.spins(3, None, None, 3, 3).unwrap();
    says(without.finish(&graph, None), "pinned sites, and the model has no states for them");
}

#[test]
fn claimed_symmetries_are_checked_against_all_tables() {
    let graph = ring(4, 1).finish().unwrap();
    let claims = |change: &dyn Fn(&mut ModelParts)| {
        let mut parts = ising(&graph);
        parts.pair(0, &[-1.0, 1.0, 1.0, -1.0]).unwrap();
        change(&mut parts);
        parts.finish(&graph, None)
    };
    let energy = claims(&|parts| parts.involution(&[1, 0]).and(parts.permutations()).unwrap()).unwrap();
    assert!(energy.permutations && energy.involutions == [1, 0]);
    says(
        claims(&|p| p.site(0, &[-0.1, 0.1]).and(p.involution(&[1, 0])).unwrap()),
        "site class 0 it maps an energy of -0.1",
    );
    says(claims(&|p| p.site(0, &[-0.1, 0.1]).and(p.permutations()).unwrap()), "exchanging states 0 and 1");
    let cubic = [1.0, -1.0, -1.0, 1.0, -1.0, 1.0, 1.0, -1.0];
    says(claims(&|p| p.factor_table(3, &cubic).and(p.involution(&[1, 0])).unwrap()), "factor table 0");
}

/// Three states a, b, c on a ring, an involution that exchanges two of them, and a coupling between them that spoils it.
#[test]
fn an_involution_of_some_states() {
    let graph = ring(3, 1).finish().unwrap();
    let model = |spoil: f64| {
        let mut parts = ModelParts::new(&graph);
        parts.spins(3, None, None, 3, 3).unwrap();
        parts.pair(0, &[1.0, 2.0, 2.0, 2.0, 3.0, 4.0, 2.0 + spoil, 4.0, 3.0]).unwrap();
        parts.involution(&[0, 2, 1]).unwrap();
        parts.finish(&graph, None)
    };
    assert!(model(0.0).is_ok());
    assert!(model(1e-15).is_ok(), "a rounding is no broken symmetry");
    says(model(1e-6), "involution 0 is not a symmetry");
}

#[test]
fn footprints_are_made_mutual_and_colour_the_sites() {
    let graph = ring(6, 1).finish().unwrap();
    let mut parts = ising(&graph);
    parts.pair(0, &[-1.0, 1.0, 1.0, -1.0]).unwrap();
    parts.custom();
    // Said on one side only: 0 depends on 2.
    let mut footprints = vec![Vec::new(); 6];
    footprints[0].push(2);
    let energy = parts.finish(&graph, Some(&footprints)).unwrap();
    assert_eq!(graph.colours, [0, 1, 0, 1, 0, 1], "the bonds alone need two colours");
    assert_eq!(energy.colour_offsets, [0, 2, 4, 6]);
    assert_eq!(energy.colour_sites, [0, 3, 1, 4, 2, 5]);
}
