//! One point of several with equal columns.

use crate::fill::{Draft, value_at};
use crate::point::Change;
use crate::step::Step;
use spinledger_terms::{Path, Problem, Value};
use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

/// Address and place of an axis.
type Shared = (Arc<[String]>, Arc<Path>);

/// Makes one point of several with equal columns.
pub(crate) struct Merge<'a> {
    step: &'a Step,
    /// Addresses that make no column, with whether the larger value wins.
    loose: BTreeMap<Vec<String>, bool>,
    pub(crate) problems: Vec<Problem>,
    told: BTreeSet<(Vec<String>, usize, usize)>,
    /// The addresses and places of each block's axes, shared by its points.
    shared: Vec<Vec<Shared>>,
}

impl<'a> Merge<'a> {
    pub(crate) fn new(step: &'a Step) -> Self {
        let scan = step.spec.scan.clone().unwrap_or_default();
        let loose = step.scan.iter().flat_map(|block| &block.axes).map(|axis| (axis.path(), axis.address.clone()));
        let loose = loose.filter(|(path, _)| scan.no_column.contains(path));
        let loose = loose.map(|(path, address)| (address, scan.larger.contains(&path))).collect();
        let shared = step
            .scan
            .iter()
            .map(|b| b.axes.iter().map(|axis| (axis.address.clone().into(), axis.place.clone().into())).collect())
            .collect();
        Merge { step, loose, problems: Vec::new(), told: BTreeSet::new(), shared }
    }

    /// The block and the changes of the point that a group of drafts with equal columns is.
    pub(crate) fn group(&mut self, group: &[Draft]) -> (usize, Vec<Change>) {
        // Of `8` and `[8, 8]`, the same by columns, the number stands for both, whichever is named first.
        let lists = |draft: &&Draft| draft.values.iter().filter(|(v, _)| matches!(v, Value::List(_))).count();
        let Some(first) = group.iter().min_by_key(lists) else { return (0, Vec::new()) };
        let block = &self.step.scan[first.block];
        let mut changes: Vec<Change> = block
            .axes
            .iter()
            .zip(&first.values)
            .zip(&self.shared[first.block])
            .map(|((axis, (value, number)), (address, place))| Change {
                address: address.clone(),
                value: value.clone(),
                place: place.clone(),
                element: axis.each.then_some(*number),
            })
            .collect();
        if group.len() == 1 {
            return (first.block, changes);
        }
        for (address, larger) in self.loose.clone() {
            let mut best = self.loose(first, &address);
            for other in group {
                let new = self.loose(other, &address);
                if new.value == best.value {
                    continue;
                }
                let number = |loose: &Loose| loose.value.as_ref().and_then(Value::as_f64);
                match number(&best).zip(number(&new)) {
                    Some((a, b)) if larger && b > a => best = new,
                    Some(_) if larger => {}
                    _ => self.differ(&address, (first.block, other.block), &best, &new),
                }
            }
            let Loose { value: Some(value), place, element } = best else { continue };
            changes.retain(|c| *c.address != *address);
            changes.push(Change { address: address.into(), value, place: place.into(), element });
        }
        (first.block, changes)
    }

    /// The value of a draft at an address.
    fn loose(&self, draft: &Draft, address: &[String]) -> Loose {
        let block = &self.step.scan[draft.block];
        for (axis, (value, number)) in block.axes.iter().zip(&draft.values) {
            if axis.address == address {
                let element = axis.each.then_some(*number);
                return Loose { value: Some(value.clone()), place: axis.place.clone(), element };
            }
        }
        let place = self.step.path.dotted(&address.join("."));
        Loose { value: value_at(block, draft, address), place, element: None }
    }

    /// Says that a point is named twice with different values; once for a pair of blocks, since it mostly concerns many points.
    fn differ(&mut self, address: &[String], blocks: (usize, usize), a: &Loose, b: &Loose) {
        if !self.told.insert((address.to_vec(), blocks.0, blocks.1)) {
            return;
        }
        let path = address.join(".");
        let message = format!("`{path}` is {} here and {} elsewhere for one and the same point", b.text(), a.text());
        let problem = Problem::at_value(&b.place(), message).other(a.place(), format!("{} here", a.text()));
        self.problems.push(problem.expected(format!("blocks that share no point, or the same `{path}` in both")));
    }
}

/// A value that makes no column, and where it stands.
struct Loose {
    value: Option<Value>,
    place: Path,
    element: Option<usize>,
}

impl Loose {
    fn text(&self) -> String {
        self.value.as_ref().map_or("nothing".to_owned(), Value::canonical)
    }

    fn place(&self) -> Path {
        match self.element {
            Some(index) => self.place.index(index),
            None => self.place.clone(),
        }
    }
}
