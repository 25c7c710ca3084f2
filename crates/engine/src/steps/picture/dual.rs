//! Where walls stand in the plane: across a bond, from the middle of the face on one side to the middle of that on the other.

use spinledger_host::Graph;
use std::collections::BTreeMap;

/// For each bond of a plane lattice, where its wall ends, seen from the middle of the bond. None for bonds whose ends are not known: those beside no
/// face, and those of periods so short that a face could be at either of two bonds.
pub(super) fn ends(graph: &Graph) -> Vec<Option<[[f64; 2]; 2]>> {
    let steps = steps(graph);
    // Bonds by their ends; several where a period is short.
    let mut bonds: BTreeMap<(u32, u32), Vec<usize>> = BTreeMap::new();
    for (number, bond) in graph.bonds.iter().enumerate() {
        bonds.entry((bond.i.min(bond.j), bond.i.max(bond.j))).or_default().push(number);
    }
    let mut found: Vec<Vec<[f64; 2]>> = vec![Vec::new(); graph.bonds.len()];
    for face in graph.face_offsets.windows(2) {
        let sites = &graph.face_sites[face[0] as usize..face[1] as usize];
        let sides = sites.iter().zip(sites.iter().cycle().skip(1)).map(|(a, b)| {
            let [bond] = bonds.get(&(*a.min(b), *a.max(b)))?.as_slice() else { return None };
            let step = steps[*bond]?;
            Some((*bond, if graph.bonds[*bond].i == *a { step } else { [-step[0], -step[1]] }))
        });
        let Some(sides) = sides.collect::<Option<Vec<_>>>() else { continue };
        // Corners one after another around the face, and their middle.
        let mut corners = vec![[0.0, 0.0]];
        for (_, step) in &sides {
            let [x, y] = corners[corners.len() - 1];
            corners.push([x + step[0], y + step[1]]);
        }
        let closed = corners.pop().is_some_and(|[x, y]| x.abs() < 1e-6 && y.abs() < 1e-6);
        if !closed {
            continue;
        }
        let count = corners.len() as f64;
        let middle = [0, 1].map(|k| corners.iter().map(|c| c[k]).sum::<f64>() / count);
        for ((bond, step), corner) in sides.iter().zip(&corners) {
            found[*bond].push([0, 1].map(|k| middle[k] - corner[k] - step[k] / 2.0));
        }
    }
    let both = |middles: &Vec<[f64; 2]>| match middles.as_slice() {
        [a, b] => Some([*a, *b]),
        // At a rim: as far beyond it as on this side.
        [a] => Some([*a, [-a[0], -a[1]]]),
        _ => None,
    };
    found.iter().map(both).collect()
}

/// The way along each bond from its first end to its second. None where that is not known.
fn steps(graph: &Graph) -> Vec<Option<[f64; 2]>> {
    let position = |site: u32, k: usize| graph.positions.get(site as usize * 2 + k).copied();
    let way = |number: usize| {
        let bond = &graph.bonds[number];
        let mut way = [position(bond.j, 0)? - position(bond.i, 0)?, position(bond.j, 1)? - position(bond.i, 1)?];
        for direction in 0..2 {
            let around = graph.wraps.get(number * 2 + direction).copied().unwrap_or(0);
            let period = graph.periods.get(direction).copied().unwrap_or(0);
            for (k, component) in way.iter_mut().enumerate() {
                let vector = graph.vectors.get(direction * 2 + k).copied()?;
                *component += f64::from(around) * period as f64 * vector;
            }
        }
        Some(way)
    };
    (0..graph.bonds.len()).map(way).collect()
}
