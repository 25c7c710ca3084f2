//! Curves from the tables of a `reweight` step.

use super::{CONCLUDED, Rest, Set};
use crate::steps::{StepError, Task};
use spinledger_stats::crossing::{CrossingInfo, Curve, Replicates};
use spinledger_terms::{Table, Value};
use std::collections::{BTreeMap, BTreeSet};

/// Columns of the tables that are not of the scan.
const OWN: [&str; 7] = ["quantity", "value", "error", "coverage", "flags", "block", "binder"];

/// A curve in the making: by bits of the temperature, which is positive, so that they are in order.
#[derive(Default)]
struct Points {
    /// Value, and whether histograms cover it.
    values: BTreeMap<u64, (f64, bool)>,
    /// By block, then as the values.
    blocks: BTreeMap<i64, BTreeMap<u64, f64>>,
}

/// A set in the making: what tells it from others, flags that concern all of it, curves by size.
type Making = (Rest, BTreeSet<String>, BTreeMap<u64, Points>);

/// The curves of each set, and the unit of temperatures.
///
/// # Errors
/// Where tables have not what is needed.
pub(super) fn sets(task: &Task<'_>) -> Result<(Vec<Set>, String), StepError> {
    let quantity = task.parameters.get("quantity").and_then(Value::as_str).unwrap_or("binder");
    let main = task.table("of", "main")?;
    let replicates = task.table("of", "replicates")?;
    let unit = main.column("temperature").map(|column| column.unit.clone()).unwrap_or_default();
    let mut sets: BTreeMap<String, Making> = BTreeMap::new();
    for row in (0..main.rows()).filter(|row| main.text("quantity", *row) == Some(quantity)) {
        let rest = rest(&main, row);
        let (_, flags, sizes) = sets.entry(label(&rest)).or_insert_with(|| (rest, BTreeSet::new(), BTreeMap::new()));
        let mut covered = true;
        for word in main.text("flags", row).unwrap_or_default().split(';').filter(|word| !word.is_empty()) {
            if word == "poor-overlap" {
                covered = false;
            } else if word != "not-finite" {
                flags.insert(word.to_owned());
            }
        }
        let points = sizes.entry(size(&main, row)?).or_default();
        if let (Some(x), Some(y)) = (number(&main, "temperature", row), number(&main, "value", row)) {
            points.values.insert(x.to_bits(), (y, covered));
        }
    }
    if sets.is_empty() {
        let message =
            format!("the curves have no `{quantity}`: it needs `magnetisation` or `order-parameter` observed");
        return Err(StepError(message));
    }
    for row in 0..replicates.rows() {
        let Some((_, _, sizes)) = sets.get_mut(&label(&rest(&replicates, row))) else { continue };
        let Some(points) = sizes.get_mut(&size(&replicates, row)?) else { continue };
        let cells = (number(&replicates, "temperature", row), number(&replicates, "block", row));
        if let ((Some(x), Some(block)), Some(y)) = (cells, number(&replicates, quantity, row)) {
            points.blocks.entry(block as i64).or_default().insert(x.to_bits(), y);
        }
    }
    let set = |(rest, flags, sizes): Making| {
        let mut set = Set { rest, flags: flags.into_iter().collect(), ..Set::default() };
        for (size, points) in sizes {
            let (curve, uncovered) = points.curve(size);
            set.curves.push(curve);
            set.uncovered.push(uncovered);
        }
        set
    };
    Ok((sets.into_values().map(set).collect(), unit))
}

impl Points {
    /// The curve, and which of its points histograms do not cover. At both ends such points are left out; between covered ones they
    /// stay, since a curve that jumps over a gap would look better than it is.
    fn curve(self, size: u64) -> (Curve, Vec<f64>) {
        let complete = |bits: &u64| self.blocks.values().all(|block| block.contains_key(bits));
        let all: Vec<(u64, f64, bool)> =
            self.values.iter().filter(|(bits, _)| complete(bits)).map(|(bits, (y, c))| (*bits, *y, *c)).collect();
        let ends = (all.iter().position(|point| point.2), all.iter().rposition(|point| point.2));
        let kept = match ends {
            (Some(first), Some(last)) if last > first => &all[first..=last],
            _ => &all[..],
        };
        let uncovered = kept.iter().filter(|point| !point.2).map(|point| f64::from_bits(point.0)).collect();
        let row = |block: &BTreeMap<u64, f64>| kept.iter().filter_map(|point| block.get(&point.0).copied()).collect();
        let curve = Curve {
            size: size as f64,
            x: kept.iter().map(|point| f64::from_bits(point.0)).collect(),
            y: kept.iter().map(|point| point.1).collect(),
            replicates: Replicates::Joint(self.blocks.values().map(row).collect()),
        };
        (curve, uncovered)
    }
}

/// Whether a crossing rests on points that histograms do not cover, or one was missed where there are such points.
pub(super) fn overlap_is_poor(set: &Set, found: &CrossingInfo) -> bool {
    let missed = found.pairs.len() + 1 < set.curves.len() && set.uncovered.iter().any(|places| !places.is_empty());
    let rests = |size: f64, place: f64| {
        let curve = set.curves.iter().zip(&set.uncovered).find(|(curve, _)| curve.size == size);
        curve.is_some_and(|(curve, uncovered)| {
            // The cubic at a place goes through two points on either side.
            let right = curve.x.partition_point(|x| *x < place);
            let used = &curve.x[right.saturating_sub(2)..(right + 2).min(curve.x.len())];
            used.iter().any(|x| uncovered.contains(x))
        })
    };
    missed || found.pairs.iter().any(|pair| rests(pair.size, pair.place) || rests(pair.partner, pair.place))
}

fn number(table: &Table, column: &str, row: usize) -> Option<f64> {
    table.column(column).and_then(|column| column.cells.number(row))
}

fn size(table: &Table, row: usize) -> Result<u64, StepError> {
    let size = table.column("size").map(|column| column.cells.value(row));
    let size = size.as_ref().and_then(Value::as_i64).and_then(|size| u64::try_from(size).ok());
    size.ok_or_else(|| StepError("a crossing needs sizes that are one number each".into()))
}

/// Scan columns that tell one set of curves from another.
fn rest(table: &Table, row: usize) -> Rest {
    let scanned = |name: &str| !OWN.contains(&name) && !CONCLUDED.contains(&name);
    let columns = table.columns.iter().filter(|column| scanned(&column.name));
    columns.map(|column| (column.name.clone(), column.cells.value(row))).collect()
}

fn label(rest: &Rest) -> String {
    Value::Map(rest.iter().cloned().collect()).canonical()
}
