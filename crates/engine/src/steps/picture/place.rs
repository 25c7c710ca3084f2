//! Which configuration is meant, and where its sites are in the plane.

use super::{dual, *};
use spinledger_host::Graph;

/// A kept configuration, as far as it matters which is meant.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Seen {
    /// The start that its chain began from.
    pub(crate) start: String,
    /// The chain.
    pub(crate) chain: u32,
    /// The sweep.
    pub(crate) sweep: u64,
}

/// The point that `where` means among points with these columns.
///
/// # Errors
/// In words, with what there is, where it is not one.
fn point(filter: &BTreeMap<String, Value>, columns: &[Vec<(String, Value)>]) -> Result<usize, String> {
    let cell = |at: usize, name: &str| columns[at].iter().find(|(column, _)| column == name).map(|(_, value)| value);
    for name in filter.keys() {
        if (0..columns.len()).any(|at| cell(at, name).is_none()) {
            let known: Vec<&str> = columns.iter().flatten().map(|(name, _)| name.as_str()).collect();
            let known: BTreeSet<&str> = known.into_iter().collect();
            let known: Vec<&str> = known.into_iter().collect();
            return Err(format!("there is no column `{name}`; there are: {}", known.join(", ")));
        }
    }
    let fits = |at: usize| filter.iter().all(|(name, wanted)| cell(at, name).is_some_and(|value| same(value, wanted)));
    let found: Vec<usize> = (0..columns.len()).filter(|at| fits(*at)).collect();
    let wanted: Vec<(String, Value)> = filter.iter().map(|(name, value)| (name.clone(), value.clone())).collect();
    match found.as_slice() {
        [one] => Ok(*one),
        [] => {
            let all: Vec<&[(String, Value)]> = columns.iter().map(Vec::as_slice).collect();
            Err(format!("no point matches ({}); points differ in {}", conditions_words(&wanted), differing(&all)))
        }
        several => {
            let left: Vec<&[(String, Value)]> = several.iter().map(|at| columns[*at].as_slice()).collect();
            let count = several.len();
            Err(format!(
                "{count} points match where one must; narrow it with `where`: they differ in {}",
                differing(&left)
            ))
        }
    }
}

/// The configuration that is meant: of which point, and which of those that are kept there.
///
/// # Errors
/// In words, with what there is, where it is not exactly one.
pub(crate) fn chosen(
    parameters: &Value,
    columns: &[Vec<(String, Value)>],
    kept: &dyn Fn(usize) -> Vec<Seen>,
) -> Result<(usize, usize), String> {
    let filter = parameters.get("where").and_then(Value::as_map).cloned().unwrap_or_default();
    let at = point(&filter, columns)?;
    let kept = kept(at);
    let starts: BTreeSet<&str> = kept.iter().map(|k| k.start.as_str()).collect();
    let asked = parameters.get("start").and_then(Value::as_str);
    let start = match (asked, starts.len()) {
        (Some(asked), n) if n > 1 && starts.contains(asked) => Some(asked),
        (None, n) if n > 1 => {
            let starts: Vec<&str> = starts.into_iter().collect();
            return Err(format!("chains began from both; name one with `start`: {}", starts.join(", ")));
        }
        (Some(_), 0 | 1) => return Err("`start` tells chains apart only where they began from both".into()),
        (asked, _) => asked,
    };
    let of_start = |k: &&(usize, &Seen)| start.is_none_or(|start| k.1.start == start);
    let numbered: Vec<(usize, &Seen)> = kept.iter().enumerate().collect();
    let numbered: Vec<&(usize, &Seen)> = numbered.iter().filter(of_start).collect();
    let chain = parameters.get("chain").and_then(Value::as_i64).unwrap_or(0);
    let own: Vec<&(usize, &Seen)> = numbered.iter().copied().filter(|k| i64::from(k.1.chain) == chain).collect();
    if own.is_empty() {
        let chains: BTreeSet<u32> = numbered.iter().map(|k| k.1.chain).collect();
        return Err(format!(
            "nothing is kept of chain {chain}; there are chains {}",
            listed(chains.into_iter().map(u64::from))
        ));
    }
    let found = match parameters.get("sweep").and_then(Value::as_i64) {
        None => own.iter().max_by_key(|k| k.1.sweep),
        Some(sweep) => own.iter().find(|k| i64::try_from(k.1.sweep) == Ok(sweep)),
    };
    match found {
        Some(found) => Ok((at, found.0)),
        None => {
            let sweep = parameters.get("sweep").map(Value::canonical).unwrap_or_default();
            let sweeps = listed(own.iter().map(|k| k.1.sweep));
            Err(format!("nothing is kept at sweep {sweep}; there are sweeps {sweeps}"))
        }
    }
}

/// Numbers, the first of them where there are many.
fn listed(numbers: impl Iterator<Item = u64>) -> String {
    const MOST: usize = 12;
    let numbers: Vec<String> = numbers.map(|n| n.to_string()).collect();
    let more = if numbers.len() > MOST { format!(" ... {}", numbers[numbers.len() - 1]) } else { String::new() };
    numbers[..numbers.len().min(MOST)].join(", ") + &more
}

/// Checks which configuration is meant, as far as that is known before anything is computed: the point.
pub(super) fn check(step: &Checked<'_>, problems: &mut Vec<Mistake>) {
    let Some(own) = step.points.first() else { return };
    let name = own.get("of");
    let Some(points) = name.as_ref().and_then(|name| step.earlier.get(name.as_str()?)) else { return };
    if points.is_empty() || name.and_then(|name| step.kinds.get(name.as_str()?)).is_none_or(|does| does != "sample") {
        return;
    }
    let place = |point: &spinledger_pipeline::Point| {
        Some(crate::planning::starts::Place::of(point, step.pipeline, step.vocabulary)?.columns)
    };
    let Some(mut columns) = points.iter().map(place).collect::<Option<Vec<_>>>() else { return };
    // Known only to the loaded lattice.
    columns.iter_mut().for_each(|columns| columns.push(("sites".into(), Value::Null)));
    let filter = own.get("where").and_then(|filter| filter.as_map().cloned()).unwrap_or_default();
    if filter.contains_key("sites") {
        return;
    }
    if let Err(message) = point(&filter, &columns) {
        let at = if filter.is_empty() { own.place("of") } else { own.place("where") };
        problems.push(Mistake::at_value(&at, message).expected("`where` with the columns and values of one point"));
    }
}

/// Sites in the plane.
#[derive(Debug, PartialEq)]
pub(crate) struct Placed {
    /// The sites that are seen, ascending.
    pub(crate) sites: Vec<usize>,
    /// Where they are, in nearest-neighbour distances.
    pub(crate) positions: Vec<[f64; 2]>,
    /// Neighbours in the plane, by their places among the sites, and the wall between them: x0, y0, x1, y1.
    neighbours: Vec<([usize; 2], [f64; 4])>,
}

impl Placed {
    /// The sites of a chain or a plane, or those of one layer of cells of a lattice in three dimensions, seen along the last direction.
    ///
    /// # Errors
    /// In words, where the lattice has other dimensions, no such layer, or no positions.
    pub(crate) fn of(graph: &Graph, layer: i64) -> Result<Placed, String> {
        let d = graph.dimension;
        if !(1..=3).contains(&d) || graph.positions.len() < graph.sites * d {
            return Err(format!(
                "a lattice of {d} dimensions has no picture; a chain, a plane or a layer of three has"
            ));
        }
        if d < 3 && layer != 0 {
            return Err(format!("a lattice of {d} dimensions has no layers"));
        }
        let position = |site: usize| &graph.positions[site * d..site * d + d];
        let mut sites: Vec<usize> = (0..graph.sites).collect();
        if d == 3 {
            let along = last_coordinates(graph).ok_or("the primitive vectors of the lattice do not span it")?;
            let count = graph.cells.get(2).copied().unwrap_or(0);
            if layer >= count.max(1) {
                return Err(format!("there is no layer {layer}; there are layers 0 to {}", count - 1));
            }
            sites.retain(|site| along[*site] == layer);
        }
        let (first, second) = axes(graph);
        let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
        let flat = |p: &[f64]| [dot(p, &first), dot(p, &second)];
        let positions: Vec<[f64; 2]> = sites.iter().map(|site| flat(position(*site))).collect();
        // Bonds around a period join sites that are not neighbours in the plane.
        let mut bonds: Vec<(f64, usize, [usize; 2])> = Vec::new();
        for (number, bond) in graph.bonds.iter().enumerate() {
            let wraps = graph.wraps.get(number * d..number * d + d).is_some_and(|wraps| wraps.iter().any(|w| *w != 0));
            let (Ok(i), Ok(j)) = (sites.binary_search(&(bond.i as usize)), sites.binary_search(&(bond.j as usize)))
            else {
                continue;
            };
            let step: Vec<f64> = position(sites[i]).iter().zip(position(sites[j])).map(|(a, b)| b - a).collect();
            let across = flat(&step);
            // Bonds that leave the plane are seen from above.
            let length = dot(&step, &step).sqrt();
            if !wraps && (dot(&across, &across).sqrt() - length).abs() < 1e-6 {
                bonds.push((length, number, [i, j]));
            }
        }
        let shortest = bonds.iter().map(|b| b.0).fold(f64::INFINITY, f64::min);
        bonds.retain(|b| b.0 < shortest * (1.0 + 1e-6));
        let mut degree = vec![0usize; sites.len()];
        bonds.iter().flat_map(|b| b.2).for_each(|site| degree[site] += 1);
        let length = wall_length(degree.into_iter().max().unwrap_or(0));
        let ends = if d == 2 { dual::ends(graph) } else { Vec::new() };
        let wall = |number: usize, [i, j]: [usize; 2]| {
            let ([ax, ay], [bx, by]) = (positions[i], positions[j]);
            let middle = [(ax + bx) / 2.0, (ay + by) / 2.0];
            let across = [(ay - by) * length / 2.0, (bx - ax) * length / 2.0];
            let [p, q] = ends.get(number).copied().flatten().unwrap_or([[-across[0], -across[1]], across]);
            [middle[0] + p[0], middle[1] + p[1], middle[0] + q[0], middle[1] + q[1]]
        };
        let neighbours = bonds.iter().map(|(_, number, pair)| (*pair, wall(*number, *pair))).collect();
        Ok(Placed { sites, positions, neighbours })
    }

    /// Walls between neighbours of different states: x0, y0, x1, y1. States by site.
    pub(crate) fn walls(&self, states: &[i64]) -> Vec<[f64; 4]> {
        let state = |place: usize| states.get(self.sites[place]);
        self.neighbours.iter().filter(|([i, j], _)| state(*i) != state(*j)).map(|(_, wall)| *wall).collect()
    }
}

/// Length of a wall between neighbours at distance 1 beside no face, by the largest number of neighbours: the side of the dual lattice of the regular
/// tiling with so many.
fn wall_length(neighbours: usize) -> f64 {
    match neighbours {
        3 => 3f64.sqrt(),
        5 | 6 => 1.0 / 3f64.sqrt(),
        _ => 1.0,
    }
}

/// Two perpendicular unit vectors in the plane of the first two primitive vectors; the first along the first of them. Where positions are plane
/// already, x and y.
fn axes(graph: &Graph) -> (Vec<f64>, Vec<f64>) {
    let d = graph.dimension;
    if d < 3 {
        let unit = |k: usize| (0..d).map(|i| if i == k { 1.0 } else { 0.0 }).collect();
        return (unit(0), unit(1));
    }
    let row = |k: usize| &graph.vectors[k * d..k * d + d];
    let norm = |v: &[f64]| v.iter().map(|x| x * x).sum::<f64>().sqrt();
    let first: Vec<f64> = row(0).iter().map(|x| x / norm(row(0))).collect();
    let along: f64 = row(1).iter().zip(&first).map(|(a, b)| a * b).sum();
    let rest: Vec<f64> = row(1).iter().zip(&first).map(|(a, b)| a - along * b).collect();
    let size = norm(&rest);
    (first, rest.iter().map(|x| x / size).collect())
}

/// The cell of each site along the last of three primitive vectors.
fn last_coordinates(graph: &Graph) -> Option<Vec<i64>> {
    let v: Vec<[f64; 3]> = graph.vectors.chunks_exact(3).map(|c| [c[0], c[1], c[2]]).collect();
    let [a, b, c] = v[..] else { return None };
    let cross = [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]];
    let dot = |p: &[f64], q: &[f64; 3]| p[0] * q[0] + p[1] * q[1] + p[2] * q[2];
    let volume = dot(&c, &cross);
    if volume == 0.0 {
        return None;
    }
    let of = |p: &[f64]| (dot(p, &cross) / volume + 1e-6).floor() as i64;
    Some(graph.positions.chunks_exact(3).take(graph.sites).map(of).collect())
}
