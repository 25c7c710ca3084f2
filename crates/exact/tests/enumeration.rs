//! Enumeration against published counts and closed forms.

#[allow(dead_code, reason = "shared by the tests of several crates")]
#[path = "../../../tests/reference/table.rs"]
mod table;

use std::collections::BTreeMap;

use proptest::prelude::*;
use spinledger_exact::closed::{ring, torus};
use spinledger_exact::enumeration::{Degeneracies, EnumerationError, Order, PairSystem};
use table::Table;

/// Bonds of a box with open or closed directions; extra steps are added where they stay inside or wrap.
fn grid(shape: &[usize], periodic: bool, extra: &[&[i64]]) -> Vec<(u32, u32)> {
    let sites: usize = shape.iter().product();
    let mut steps: Vec<Vec<i64>> = (0..shape.len())
        .map(|direction| (0..shape.len()).map(|other| i64::from(other == direction)).collect())
        .collect();
    steps.extend(extra.iter().map(|step| step.to_vec()));
    let mut bonds = Vec::new();
    for site in 0..sites {
        let mut place = vec![0; shape.len()];
        let mut rest = site;
        for (coordinate, size) in place.iter_mut().zip(shape).rev() {
            *coordinate = (rest % size) as i64;
            rest /= size;
        }
        for step in &steps {
            let moved: Vec<i64> = place.iter().zip(step).map(|(x, d)| x + d).collect();
            let inside = moved.iter().zip(shape).all(|(x, size)| (0..*size as i64).contains(x));
            if periodic || inside {
                let index = moved
                    .iter()
                    .zip(shape)
                    .fold(0, |index, (x, size)| index * *size as i64 + x.rem_euclid(*size as i64));
                bonds.push((site as u32, index as u32));
            }
        }
    }
    bonds
}

fn simple(bonds: Vec<(u32, u32)>) -> Vec<(u32, u32)> {
    let mut bonds: Vec<(u32, u32)> = bonds.into_iter().map(|(i, j)| (i.min(j), i.max(j))).collect();
    bonds.sort_unstable();
    bonds.dedup();
    bonds
}

fn ising_table(coupling: f64) -> Vec<f64> {
    vec![-coupling, coupling, coupling, -coupling]
}

fn ising(sites: usize, bonds: &[(u32, u32)]) -> PairSystem {
    PairSystem {
        bonds: bonds.iter().map(|(i, j)| (*i, *j, 0)).collect(),
        tables: vec![ising_table(1.0)],
        ..PairSystem::new(2, sites, Order::Values(vec![vec![-1.0, 1.0]]))
    }
}

fn potts(q: usize, sites: usize, bonds: &[(u32, u32)]) -> PairSystem {
    PairSystem {
        bonds: bonds.iter().map(|(i, j)| (*i, *j, 0)).collect(),
        tables: vec![(0..q * q).map(|pair| if pair / q == pair % q { -1.0 } else { 0.0 }).collect()],
        ..PairSystem::new(q, sites, Order::Colours)
    }
}

fn system(name: &str) -> Option<PairSystem> {
    Some(match name {
        "square_4x4_periodic" => ising(16, &grid(&[4, 4], true, &[])),
        "square_3x3_free" => ising(9, &grid(&[3, 3], false, &[])),
        "square_4x4_plus_ring" => plus_ring(),
        "square_2x2_periodic_double" => ising(4, &grid(&[2, 2], true, &[])),
        "square_2x2_periodic_simple" => ising(4, &simple(grid(&[2, 2], true, &[]))),
        "square_2x4_periodic_double" => ising(8, &grid(&[2, 4], true, &[])),
        "square_2x4_periodic_simple" => ising(8, &simple(grid(&[2, 4], true, &[]))),
        "cubic_2x2x3_free" => ising(12, &grid(&[2, 2, 3], false, &[])),
        "triangular_4x4_periodic" => ising(16, &grid(&[4, 4], true, &[&[1, -1]])),
        "square_4x4_pmj_seed1" | "square_4x4_fully_frustrated" => listed(name),
        "potts3_3x3_periodic" => potts(3, 9, &grid(&[3, 3], true, &[])),
        "potts3_2x2_free" => potts(3, 4, &grid(&[2, 2], false, &[])),
        _ => return None,
    })
}

/// Sixteen free spins inside a frame of spins pinned up.
fn plus_ring() -> PairSystem {
    let mut bonds = grid(&[4, 4], false, &[]);
    for site in 0..16u32 {
        for edge in [site / 4, site % 4] {
            if edge == 0 || edge == 3 {
                bonds.push((site, 16 + (bonds.len() % 3) as u32));
            }
        }
    }
    PairSystem { pinned: vec![1; 3], ..ising(16, &bonds) }
}

fn listed(name: &str) -> PairSystem {
    let table = Table::parse(include_str!("../../../tests/reference/bond_lists.csv"));
    let rows = table.rows().filter(|row| row.text("system") == name);
    let site = |text: &str| text.parse::<u32>().expect("a site");
    let bonds: Vec<(u32, u32, u32)> =
        rows.map(|row| (site(row.text("i")), site(row.text("j")), u32::from(row.text("coupling") == "-1"))).collect();
    assert_eq!(bonds.len(), 32);
    PairSystem { bonds, tables: vec![ising_table(1.0), ising_table(-1.0)], ..ising(16, &[]) }
}

fn published(text: &str) -> BTreeMap<String, Vec<(i64, i64, u64)>> {
    let mut systems: BTreeMap<String, Vec<(i64, i64, u64)>> = BTreeMap::new();
    for row in Table::parse(text).rows() {
        let level = (row.number("E") as i64, row.number("M") as i64, row.text("g").parse().expect("a count"));
        systems.entry(row.text("system").to_owned()).or_default().push(level);
    }
    systems.values_mut().for_each(|levels| levels.sort_unstable());
    systems
}

fn counted(levels: &Degeneracies) -> Vec<(i64, i64, u64)> {
    // Orders beside the first (squares of colour counts) are added over.
    let mut found: BTreeMap<(i64, i64), u64> = BTreeMap::new();
    for level in levels.levels() {
        assert_eq!((level.energy.fract(), level.order[0].fract()), (0.0, 0.0), "integer couplings are exact");
        *found.entry((level.energy as i64, level.order[0] as i64)).or_insert(0) += level.count;
    }
    found.into_iter().map(|((energy, order), count)| (energy, order, count)).collect()
}

#[test]
fn degeneracies_of_small_systems() {
    let plain = published(include_str!("../../../tests/reference/density_of_states.csv"));
    let glass = published(include_str!("../../../tests/reference/density_of_states_glass.csv"));
    assert_eq!((plain.len(), glass.len()), (11, 2));
    for (name, expected) in plain.into_iter().chain(glass) {
        let found = system(&name).expect("a known system").degeneracies().expect("small");
        assert_eq!(counted(&found), expected, "{name}");
    }
}

#[test]
fn canonical_averages_of_small_systems() {
    let table = Table::parse(include_str!("../../../tests/reference/small_system_observables.csv"));
    let mut known: BTreeMap<&str, Degeneracies> = BTreeMap::new();
    for row in table.rows() {
        let name = row.text("system");
        let levels =
            known.entry(name).or_insert_with(|| system(name).expect("a known system").degeneracies().expect("small"));
        let found = levels.averages(1.0 / row.number("T"));
        let check = |column: &str, value: f64| {
            let expected = row.number(column);
            assert!((value - expected).abs() <= 1e-12 * expected.abs().max(1.0), "{name} {column}: {value} {expected}");
        };
        check("log_z", found.log_z);
        check("energy", found.energy);
        check("specific_heat", found.heat_capacity);
        check("m", found.order[0]);
        check("abs_m", found.order_abs);
        check("m2", found.order_squared);
        check("m4", found.order_fourth);
        check("binder_u4", found.binder.expect("an order parameter"));
    }
    assert_eq!(known.len(), 11);
}

#[test]
fn blume_capel_with_site_energies() {
    // Every level of the table, moved by the anisotropy that it leaves out.
    let table = Table::parse(include_str!("../../../tests/reference/density_of_states_blume_capel.csv"));
    let anisotropy = 0.625;
    for (name, sites, bonds) in
        [("blume_capel_2x3_free", 6, grid(&[2, 3], false, &[])), ("blume_capel_1x6_ring", 6, grid(&[6], true, &[]))]
    {
        let mut expected: BTreeMap<(i64, i64), u64> = BTreeMap::new();
        for row in table.rows().filter(|row| row.text("system") == name) {
            let energy = row.number("E") + anisotropy * (sites as f64 - row.number("zeros"));
            let key = ((8.0 * energy) as i64, row.number("M") as i64);
            *expected.entry(key).or_insert(0) += row.text("g").parse::<u64>().expect("a count");
        }
        assert!(!expected.is_empty());
        let spins = [-1.0, 0.0, 1.0];
        let found = PairSystem {
            bonds: bonds.iter().map(|(i, j)| (*i, *j, 0)).collect(),
            tables: vec![spins.iter().flat_map(|a| spins.iter().map(move |b| -a * b)).collect()],
            site_tables: vec![spins.iter().map(|s| anisotropy * s * s).collect()],
            classes: vec![0; sites],
            ..PairSystem::new(3, sites, Order::Values(vec![spins.to_vec()]))
        }
        .degeneracies()
        .expect("small");
        let found: BTreeMap<(i64, i64), u64> = found
            .levels()
            .iter()
            .map(|level| (((8.0 * level.energy) as i64, level.order[0] as i64), level.count))
            .collect();
        assert_eq!(found, expected, "{name}");
    }
}

#[test]
fn averages_agree_with_closed_forms() {
    // A ring with couplings and fields that are not dyadic.
    let (k, h, n) = (0.3, 0.7, 9);
    let system = PairSystem {
        tables: vec![ising_table(k)],
        site_tables: vec![vec![h, -h]],
        classes: vec![0; n],
        ..ising(n, &grid(&[n], true, &[]))
    };
    let found = system.degeneracies().expect("small").averages(1.0);
    let exact = ring(n, k, h);
    assert!((found.log_z - exact.log_z).abs() < 1e-12);
    assert!((found.order[0] - exact.magnetisation).abs() < 1e-13);
    assert!((found.energy + k * exact.neighbour_correlation + h * exact.magnetisation).abs() < 1e-13);
    // Energies are k (2 b - 9) + h (9 - 2 d) for b broken bonds: rounding does not split levels that are one.
    assert_eq!(system.degeneracies().expect("small").levels().len(), {
        let walls = |down: usize| if down == 0 || down == n { 1 } else { down.min(n - down) };
        (0..=n).map(walls).sum::<usize>()
    });
    // A torus, and the largest system of the tests: 2^20 states.
    let found = ising(20, &grid(&[5, 4], true, &[])).degeneracies().expect("small").averages(0.4);
    let exact = torus(5, 4, 0.4);
    assert!((found.log_z - exact.log_z).abs() < 1e-12 && (found.energy - exact.energy).abs() < 1e-12);
    assert!((found.heat_capacity - exact.heat_capacity).abs() < 1e-12);
    assert!((found.free_energy.expect("finite") + exact.log_z / 8.0).abs() < 1e-12);
    assert!((found.entropy - (exact.log_z / 20.0 + 0.4 * exact.energy)).abs() < 1e-12);
}

#[test]
fn energies_of_the_8x8_torus_give_the_closed_form() {
    // Counts too large to enumerate here, by the same sum as the averages: an independent check of the closed form.
    let table = Table::parse(include_str!("../../../tests/reference/density_of_states_8x8.csv"));
    let levels: Vec<(f64, f64)> = table.rows().map(|row| (row.number("E"), row.number("g"))).collect();
    for k in [0.2, 0.440_686_793_509_771_5, 0.7] {
        let weight = |power: i32| levels.iter().map(|(e, g)| g * (-k * (e + 128.0)).exp() * e.powi(power)).sum::<f64>();
        let (z, first, second) = (weight(0), weight(1), weight(2));
        let exact = torus(8, 8, k);
        assert!((z.ln() + 128.0 * k - exact.log_z).abs() < 1e-11);
        assert!((first / z / 64.0 - exact.energy).abs() < 1e-11);
        assert!((k * k * (second / z - first / z * (first / z)) / 64.0 - exact.heat_capacity).abs() < 1e-9);
    }
}

#[test]
fn factors_and_colours() {
    // Plaquettes on a 2 x 3 free grid: E = -sum of products over two faces that share a bond. Independent faces:
    // Z = 2^6 cosh(K)^2.
    let product = |pattern: usize| if pattern.count_ones().is_multiple_of(2) { -1.0 } else { 1.0 };
    let plaquettes = PairSystem {
        factors: vec![(0, vec![0, 1, 3, 4]), (0, vec![1, 2, 4, 5])],
        factor_tables: vec![(0..16).map(product).collect()],
        ..ising(6, &[])
    };
    let found = plaquettes.degeneracies().expect("small").averages(0.8);
    assert!((found.log_z - (64f64.ln() + 2.0 * 0.8f64.cosh().ln())).abs() < 1e-13);
    // A factor over two sites is a bond, over a pinned site a field.
    let bonds = grid(&[4], true, &[]);
    let as_factors = PairSystem {
        factors: bonds.iter().map(|(i, j)| (0, vec![*i, *j])).chain([(0, vec![4, 2])]).collect(),
        factor_tables: vec![ising_table(1.0)],
        pinned: vec![1],
        ..ising(4, &[])
    };
    let mut as_bonds = ising(4, &bonds);
    as_bonds.pinned = vec![1];
    as_bonds.bonds.push((4, 2, 0));
    assert_eq!(as_factors.degeneracies(), as_bonds.degeneracies());
    // Two colours are an Ising model with E = (E_ising - bonds)/2 and order_squared = m^2.
    let bonds = grid(&[3, 3], true, &[]);
    let (two, spins) =
        (potts(2, 9, &bonds).degeneracies().expect("small"), ising(9, &bonds).degeneracies().expect("small"));
    let (two, spins) = (two.averages(1.2), spins.averages(0.6));
    assert!((two.energy - 0.5 * (spins.energy - 2.0)).abs() < 1e-14);
    for (a, b) in [
        (two.order_abs, spins.order_abs),
        (two.order[0], spins.order_abs),
        (two.order_squared, spins.order_squared),
        (two.order_fourth, spins.order_fourth),
    ] {
        assert!((a - b).abs() < 1e-14, "{a} {b}");
    }
    // A four-state clock is two Ising spins: components (1, 0), (0, 1), (-1, 0), (0, -1).
    let clock = PairSystem::new(4, 3, Order::Values(vec![vec![1.0, 0.0, -1.0, 0.0], vec![0.0, 1.0, 0.0, -1.0]]));
    let free = clock.degeneracies().expect("small").averages(0.0);
    assert!((free.order_squared - 1.0 / 3.0).abs() < 1e-15 && free.order[1].abs() < 1e-16);
    assert_eq!(free.free_energy, None);
}

#[test]
fn systems_that_cannot_be_counted() {
    let refused = |system: PairSystem| system.degeneracies().expect_err("refused");
    assert_eq!(refused(ising(31, &[])), EnumerationError::TooManyStates { states: 2, sites: 31 });
    assert_eq!(refused(ising(usize::MAX, &[])), EnumerationError::TooManyStates { states: 2, sites: usize::MAX });
    assert_eq!(refused(ising(0, &[])), EnumerationError::Shape);
    assert_eq!(refused(PairSystem { states: 0, ..ising(2, &[]) }), EnumerationError::Shape);
    assert_eq!(refused(ising(2, &[(0, 1), (0, 2)])), EnumerationError::Reference { what: "bond", index: 1 });
    let short = PairSystem { tables: vec![vec![0.0; 3]], ..ising(2, &[(0, 1)]) };
    assert_eq!(refused(short), EnumerationError::TableSize { what: "pair table", index: 0, found: 3, expected: 4 });
    let infinite = PairSystem { tables: vec![vec![f64::INFINITY; 4]], ..ising(2, &[(0, 1)]) };
    assert_eq!(refused(infinite), EnumerationError::NotFinite { what: "pair table", index: 0 });
    let pinned = PairSystem { pinned: vec![2], ..ising(2, &[]) };
    assert_eq!(refused(pinned), EnumerationError::Reference { what: "pinned site", index: 0 });
    let classes = PairSystem { classes: vec![0, 0], ..ising(2, &[]) };
    assert_eq!(refused(classes), EnumerationError::Reference { what: "site class", index: 0 });
    let classes = PairSystem { classes: vec![0], site_tables: vec![vec![0.0; 2]], ..ising(2, &[]) };
    assert!(matches!(refused(classes), EnumerationError::Reference { what: "site class", .. }));
    let factor = |sites: Vec<u32>, entries: usize| PairSystem {
        factors: vec![(0, sites)],
        factor_tables: vec![vec![0.0; entries]],
        ..ising(2, &[])
    };
    assert!(matches!(refused(factor(vec![0, 1], 8)), EnumerationError::TableSize { what: "factor table", .. }));
    assert_eq!(refused(factor(vec![0, 7], 4)), EnumerationError::Reference { what: "factor", index: 0 });
    assert!(factor(vec![0, 0], 4).degeneracies().is_ok());
    assert!(PairSystem::new(1, 100, Order::Colours).degeneracies().is_ok());
}

proptest! {
    // Failing inputs are printed; a file of them would be written beside the sources.
    #![proptest_config(ProptestConfig { failure_persistence: None, cases: 64, ..ProptestConfig::default() })]

    /// The incremental walk against plain summation over all states.
    #[test]
    fn any_pair_system_has_the_partition_function_of_its_definition(
        q in 1..4usize,
        free in 1..5usize,
        pinned in proptest::collection::vec(0..1u8, 0..2),
        entries in proptest::collection::vec(-2.0..2.0f64, 18),
        bonds in proptest::collection::vec((0..9u32, 0..9u32, 0..2u32), 0..8),
        beta in -1.0..2.0f64,
    ) {
        let sites = (free + pinned.len()) as u32;
        let bonds: Vec<(u32, u32, u32)> = bonds.iter().map(|(i, j, t)| (i % sites, j % sites, *t)).collect();
        let tables = vec![entries[..q * q].to_vec(), entries[9..9 + q * q].to_vec()];
        let states = (q as u64).pow(free as u32);
        let mut z = 0.0;
        for number in 0..states {
            let mut rest = number;
            let mut state: Vec<usize> = (0..free).map(|_| { let digit = rest % q as u64; rest /= q as u64; digit as usize }).collect();
            state.extend(pinned.iter().map(|state| usize::from(*state)));
            let energy: f64 = bonds.iter().map(|(i, j, t)| tables[*t as usize][state[*i as usize] * q + state[*j as usize]]).sum();
            z += (-beta * energy).exp();
        }
        let system = PairSystem { pinned, bonds, tables, ..PairSystem::new(q, free, Order::Colours) };
        let levels = system.degeneracies().expect("small");
        prop_assert_eq!(levels.levels().iter().map(|level| level.count).sum::<u64>(), states);
        prop_assert!((levels.averages(beta).log_z - z.ln()).abs() < 1e-11);
        prop_assert!((levels.probabilities(beta).iter().sum::<f64>() - 1.0).abs() < 1e-13);
    }
}
