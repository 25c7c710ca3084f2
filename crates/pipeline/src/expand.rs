//! From a scan to its points.

use crate::address;
use crate::columns::{self, cell, compare, part, size_parts, unify};
use crate::point::{Change, Point};
use crate::scan::{Axis, AxisValues, Block, FromStep, named, nearest_axis};
use crate::step::Step;
use spinledger_terms::{Admission, ItemKind, Problem, Value, Vocabulary, admit};
use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

/// Most points of a step.
pub const MOST_POINTS: usize = 1_000_000;

/// The points of a step, or what they wait for.
#[derive(Clone, Debug)]
pub enum Expansion {
    /// Every point once, ordered by its columns.
    Points(Vec<Point>),
    /// The steps whose tables are not there yet.
    Waits(Vec<String>),
}

/// A point on its way: its block, the values of the block's axes with their numbers in their lists, its cells.
struct Draft {
    block: usize,
    values: Vec<(Value, usize)>,
    cells: Vec<Value>,
}

/// A column on its way.
struct Column {
    address: Vec<String>,
    name: String,
    size: bool,
}

impl Step {
    /// The points of the step: every combination of each block once, with complete canonical parameters.
    ///
    /// `lookup` gives the values that an axis takes from a step's table, None where the table is not there yet. Columns are ordered: `size`
    /// and its parts, then by name, then `temperature` or `inverse_temperature`; points by their columns, ascending. Points with
    /// equal columns are one, whose lengths (`larger` in the step's specification) are the largest named.
    ///
    /// # Errors
    /// More than [`MOST_POINTS`] points; a table without values, or with values that the parameter cannot have; two namings of one
    /// point that differ in something that makes no column; a followed parameter that is not scanned.
    ///
    /// Cost: some 10 microseconds a point.
    pub fn expand(
        &self,
        lookup: &dyn Fn(&FromStep) -> Option<Vec<Value>>,
        vocabulary: &Vocabulary,
    ) -> Result<Expansion, Vec<Problem>> {
        if self.scan.is_empty() {
            return Ok(Expansion::Points(vec![Point::alone(self.path.clone(), self.base.clone())]));
        }
        let mut columns = self.columns();
        let mut drafts = Vec::new();
        let (mut problems, mut waits) = (Vec::new(), BTreeSet::new());
        for (index, block) in self.scan.iter().enumerate() {
            let mut fill = Fill { step: self, block, index, columns: &columns, vocabulary, lookup };
            fill.run(&mut drafts, &mut waits, &mut problems);
            if drafts.len() > MOST_POINTS {
                problems.push(too_many(self));
            }
            if !problems.is_empty() {
                return Err(problems);
            }
        }
        if !waits.is_empty() {
            return Ok(Expansion::Waits(waits.into_iter().collect()));
        }
        self.positions(&mut columns, &mut drafts)?;
        self.size_columns(&mut columns, &mut drafts, vocabulary);
        for column in 0..columns.len() {
            let mut cells: Vec<Value> =
                drafts.iter_mut().map(|d| std::mem::replace(&mut d.cells[column], Value::Null)).collect();
            unify(&mut cells);
            for (draft, cell) in drafts.iter_mut().zip(cells) {
                draft.cells[column] = cell;
            }
        }
        let mut order: Vec<usize> = (0..columns.len()).collect();
        order.sort_by_key(|c| columns::rank(&columns[*c].name));
        let by_columns = |a: &Draft, b: &Draft| {
            order
                .iter()
                .map(|c| compare(&a.cells[*c], &b.cells[*c]))
                .find(|o| o.is_ne())
                .unwrap_or(std::cmp::Ordering::Equal)
        };
        // Stable: of equal points the one named first comes first.
        drafts.sort_by(by_columns);
        let mut merge = Merge::new(self);
        let mut points = Vec::new();
        for group in drafts.chunk_by(|a, b| by_columns(a, b).is_eq()) {
            let changes = merge.group(group);
            let cells = order.iter().map(|c| (columns[*c].name.clone(), group[0].cells[*c].clone())).collect();
            points.push(Point::new(self.path.clone(), self.scan[group[0].block].base.clone(), changes, cells));
        }
        if merge.problems.is_empty() { Ok(Expansion::Points(points)) } else { Err(merge.problems) }
    }

    /// The columns that scanned paths make, in byte order of their paths.
    fn columns(&self) -> Vec<Column> {
        let none = |path: &str| self.spec.scan.as_ref().is_some_and(|scan| scan.no_column.iter().any(|p| p == path));
        let axes = self.scan.iter().flat_map(|block| &block.axes).filter(|axis| !none(&axis.path()));
        let addresses: BTreeSet<&Vec<String>> = axes.map(|axis| &axis.address).collect();
        let addresses: Vec<Vec<String>> = addresses.into_iter().cloned().collect();
        let names = columns::names(&addresses);
        let size = |address: &[String]| address.last().is_some_and(|word| word == "size");
        addresses.into_iter().zip(names).map(|(address, name)| Column { size: size(&address), address, name }).collect()
    }

    /// The column `position`, where a scanned parameter is followed: repeated values are then points of their own.
    fn positions(&self, columns: &mut Vec<Column>, drafts: &mut [Draft]) -> Result<(), Vec<Problem>> {
        let Some(follow) = self.spec.scan.as_ref().map(|scan| scan.follow.as_str()).filter(|f| !f.is_empty()) else {
            return Ok(());
        };
        let mut offset = 0;
        let mut any = false;
        for (index, block) in self.scan.iter().enumerate() {
            let word = block.base.at(follow).and_then(Value::as_str);
            let Some(word) = word else { continue };
            let Some((axis, _)) = named(&block.axes, word) else {
                let message = format!("`{follow}` names `{word}`, which is not scanned");
                let scanned: Vec<&str> = block.axes.iter().map(|axis| axis.path.as_str()).collect();
                let problem = Problem::at_value(&self.path.key(follow), message);
                let problem = problem.expected(format!("one of: {}", scanned.join(", ")));
                return Err(vec![problem.nearest(nearest_axis(&self.scan, word))]);
            };
            any = true;
            let mut length = 0;
            for draft in drafts.iter_mut().filter(|d| d.block == index) {
                let position = draft.values[axis].1;
                length = length.max(position + 1);
                draft.cells.push(Value::Integer((offset + position) as i64));
            }
            offset += length;
        }
        if any {
            let width = columns.len() + 1;
            drafts.iter_mut().for_each(|draft| draft.cells.resize(width, Value::Null));
            columns.push(Column { address: Vec::new(), name: "position".to_owned(), size: false });
        }
        Ok(())
    }

    /// Where any size is a list, all sizes become text, with a column for each direction beside.
    fn size_columns(&self, columns: &mut Vec<Column>, drafts: &mut [Draft], vocabulary: &Vocabulary) {
        for c in 0..columns.len() {
            let is_list = |draft: &Draft| matches!(draft.cells[c], Value::List(_));
            if !columns[c].size || !drafts.iter().any(is_list) {
                continue;
            }
            let address = columns[c].address.clone();
            let split: Vec<_> = drafts
                .iter()
                .map(|draft| size_parts(&draft.cells[c], self.dimension(draft, &address, vocabulary)))
                .collect();
            let most = split.iter().flatten().map(|(_, parts)| parts.len()).max().unwrap_or(0);
            for (draft, split) in drafts.iter_mut().zip(split) {
                let (text, parts) = split.unzip();
                draft.cells[c] = text.map_or(Value::Null, Value::Text);
                let parts = parts.unwrap_or_default();
                draft.cells.extend((0..most).map(|i| parts.get(i).map_or(Value::Null, |n| Value::Integer(*n))));
            }
            for direction in 0..most {
                let name = format!("{}_{}", columns[c].name, part(direction));
                columns.push(Column { address: Vec::new(), name, size: false });
            }
        }
    }

    /// Number of directions of the lattice that a size belongs to.
    fn dimension(&self, draft: &Draft, size: &[String], vocabulary: &Vocabulary) -> Option<usize> {
        let (word, above) = size.split_last()?;
        let block = &self.scan[draft.block];
        let mut plugin = above.to_vec();
        plugin.push("plugin".to_owned());
        let name = value_at(block, draft, &plugin)?;
        let (_, item) = vocabulary.item(ItemKind::Lattice, name.as_str()?)?;
        let traits = item.lattice.as_ref().filter(|l| l.size == *word)?;
        usize::try_from(traits.dimension).ok()
    }
}

impl Axis {
    /// Its address, dotted.
    pub(crate) fn path(&self) -> String {
        self.address.join(".")
    }
}

fn too_many(step: &Step) -> Problem {
    let message = format!("the scan has more than {MOST_POINTS} points");
    Problem::at_key(&step.path.key("scan"), message).expected(format!("at most {MOST_POINTS} points in a step"))
}

/// The value at an address in a point that is not built yet.
fn value_at(block: &Block, draft: &Draft, address: &[String]) -> Option<Value> {
    for (axis, (value, _)) in block.axes.iter().zip(&draft.values) {
        if let Some(rest) = address.strip_prefix(axis.address.as_slice()) {
            return address::get(value, rest).cloned();
        }
    }
    let mut value = address::get(&block.base, address)?.clone();
    for (axis, (new, _)) in block.axes.iter().zip(&draft.values) {
        if let Some(rest) = axis.address.strip_prefix(address) {
            address::set(&mut value, rest, new.clone());
        }
    }
    Some(value)
}

/// The points of one block.
struct Fill<'a> {
    step: &'a Step,
    block: &'a Block,
    index: usize,
    columns: &'a [Column],
    vocabulary: &'a Vocabulary,
    lookup: &'a dyn Fn(&FromStep) -> Option<Vec<Value>>,
}

impl Fill<'_> {
    fn run(&mut self, drafts: &mut Vec<Draft>, waits: &mut BTreeSet<String>, problems: &mut Vec<Problem>) {
        let axes = &self.block.axes;
        let count = axes.iter().try_fold(1_usize, |count, axis| match &axis.values {
            AxisValues::Listed(values) => count.checked_mul(values.len()),
            AxisValues::FromStep(_) => Some(count),
        });
        if count.is_none_or(|count| count > MOST_POINTS - drafts.len().min(MOST_POINTS)) {
            problems.push(too_many(self.step));
            return;
        }
        // Listed axes first: what a table gives may depend on them.
        let mut partial: Vec<Vec<Option<(Value, usize)>>> = vec![vec![None; axes.len()]];
        for (i, axis) in axes.iter().enumerate() {
            if let AxisValues::Listed(values) = &axis.values {
                partial = partial.into_iter().flat_map(|p| extend(p, i, values)).collect();
            }
        }
        for (i, axis) in axes.iter().enumerate() {
            if let AxisValues::FromStep(from) = &axis.values {
                let mut next = Vec::new();
                for p in partial {
                    if let Some(values) = self.from_step(axis, from, &p, waits, problems) {
                        next.extend(extend(p, i, &values));
                    }
                    if next.len() + drafts.len() > MOST_POINTS {
                        problems.push(too_many(self.step));
                        return;
                    }
                }
                partial = next;
            }
        }
        let fixed = self.fixed();
        for values in partial {
            let mut draft =
                Draft { block: self.index, values: values.into_iter().flatten().collect(), cells: Vec::new() };
            if draft.values.len() < axes.len() {
                continue;
            }
            draft.cells =
                self.columns.iter().zip(&fixed).map(|(column, fixed)| self.cell(column, fixed, &draft)).collect();
            drafts.push(draft);
        }
    }

    /// Where each column's cells come from.
    fn fixed(&self) -> Vec<Cell> {
        let of = |column: &Column| {
            if let Some(i) = self.block.axes.iter().position(|axis| axis.address == column.address) {
                return Cell::Axis(i);
            }
            let near = |axis: &Axis| {
                axis.address.starts_with(&column.address) || column.address.starts_with(axis.address.as_slice())
            };
            if self.block.axes.iter().any(near) {
                return Cell::Mixed;
            }
            let value = address::get(&self.block.base, &column.address);
            Cell::Fixed(value.map_or(Value::Null, |value| self.shown(column, value)))
        };
        self.columns.iter().map(of).collect()
    }

    fn cell(&self, column: &Column, cell: &Cell, draft: &Draft) -> Value {
        match cell {
            Cell::Axis(i) => self.shown(column, &draft.values[*i].0),
            Cell::Fixed(value) => value.clone(),
            Cell::Mixed => {
                value_at(self.block, draft, &column.address).map_or(Value::Null, |value| self.shown(column, &value))
            }
        }
    }

    /// Sizes stay lists until it is known whether all must be text.
    fn shown(&self, column: &Column, value: &Value) -> Value {
        if column.size && size_parts(value, None).is_some() {
            return value.clone();
        }
        let axes = self.step.scan.iter().flat_map(|block| &block.axes);
        let kind = axes.into_iter().find(|axis| axis.address == column.address).map(|axis| &axis.kind);
        cell(value, kind, self.vocabulary)
    }

    fn from_step(
        &self,
        axis: &Axis,
        from: &FromStep,
        partial: &[Option<(Value, usize)>],
        waits: &mut BTreeSet<String>,
        problems: &mut Vec<Problem>,
    ) -> Option<Vec<Value>> {
        let mut from = from.clone();
        for (axis, value) in self.block.axes.iter().zip(partial) {
            if let (Some(column), Some((value, _))) = (self.columns.iter().find(|c| c.address == axis.address), value) {
                from.beside.insert(column.name.clone(), self.shown(column, value));
            }
        }
        let Some(values) = (self.lookup)(&from) else {
            waits.insert(from.step);
            return None;
        };
        if values.is_empty() {
            let beside: Vec<String> = from.beside.iter().map(|(k, v)| format!("{k} {}", v.canonical())).collect();
            let at = if beside.is_empty() { String::new() } else { format!(" for {}", beside.join(", ")) };
            let message = format!("the table of `{}` gives no `{}`{at}", from.step, from.column);
            problems.push(Problem::at_value(&axis.place, message));
            return None;
        }
        let mut out = Vec::with_capacity(values.len());
        for value in values {
            let mut found = Vec::new();
            let mut admission =
                Admission { vocabulary: self.vocabulary, problems: &mut found, references: &mut Vec::new() };
            match admit(&axis.kind, &value, &axis.place, &mut admission) {
                Some(value) => out.push(value),
                None => {
                    let message =
                        format!("the table of `{}` gives `{}` the value {}", from.step, axis.path, value.canonical());
                    problems.push(Problem::at_value(&axis.place, message).expected(axis.kind.what()));
                    return None;
                }
            }
        }
        Some(out)
    }
}

/// Where a column's cells come from in one block.
enum Cell {
    /// The axis with this number.
    Axis(usize),
    /// The same for all points.
    Fixed(Value),
    /// A part of what an axis sets, or a whole of which an axis sets a part.
    Mixed,
}

fn extend(
    partial: Vec<Option<(Value, usize)>>,
    axis: usize,
    values: &[Value],
) -> impl Iterator<Item = Vec<Option<(Value, usize)>>> {
    values.iter().enumerate().map(move |(number, value)| {
        let mut new = partial.clone();
        new[axis] = Some((value.clone(), number));
        new
    })
}

/// Makes one point of several with equal columns.
struct Merge<'a> {
    step: &'a Step,
    /// Addresses that make no column, with whether the larger value wins.
    loose: BTreeMap<Vec<String>, bool>,
    problems: Vec<Problem>,
    told: BTreeSet<(Vec<String>, usize, usize)>,
    /// Addresses and places shared by all points of a block.
    shared: Vec<Vec<Arc<[String]>>>,
}

impl<'a> Merge<'a> {
    fn new(step: &'a Step) -> Self {
        let scan = step.spec.scan.clone().unwrap_or_default();
        let loose = step.scan.iter().flat_map(|block| &block.axes).map(|axis| (axis.path(), axis.address.clone()));
        let loose = loose.filter(|(path, _)| scan.no_column.contains(path));
        let loose = loose.map(|(path, address)| (address, scan.larger.contains(&path))).collect();
        let shared =
            step.scan.iter().map(|b| b.axes.iter().map(|axis| axis.address.clone().into()).collect()).collect();
        Merge { step, loose, problems: Vec::new(), told: BTreeSet::new(), shared }
    }

    /// The changes of the point that a group of drafts with equal columns is.
    fn group(&mut self, group: &[Draft]) -> Vec<Change> {
        let first = &group[0];
        let block = &self.step.scan[first.block];
        let mut changes: Vec<Change> = block
            .axes
            .iter()
            .zip(&first.values)
            .zip(&self.shared[first.block])
            .map(|((axis, (value, number)), address)| Change {
                address: address.clone(),
                value: value.clone(),
                place: axis.place.clone(),
                element: axis.each.then_some(*number),
            })
            .collect();
        if group.len() == 1 {
            return changes;
        }
        for (address, larger) in self.loose.clone() {
            let mut best = self.loose_value(first, &address);
            for other in &group[1..] {
                let new = self.loose_value(other, &address);
                if new.0 == best.0 {
                    continue;
                }
                let numbers = best.0.as_ref().and_then(Value::as_f64).zip(new.0.as_ref().and_then(Value::as_f64));
                match numbers {
                    Some((a, b)) if larger => {
                        if b > a {
                            best = new;
                        }
                    }
                    _ => self.differ(&address, (first, &best), (other, &new)),
                }
            }
            let (Some(value), change) = best else { continue };
            changes.retain(|c| *c.address != *address);
            let (place, element) = change;
            changes.push(Change { address: address.into(), value, place, element });
        }
        changes
    }

    /// The value of a draft at an address, and its place.
    fn loose_value(
        &self,
        draft: &Draft,
        address: &[String],
    ) -> (Option<Value>, (spinledger_terms::Path, Option<usize>)) {
        let block = &self.step.scan[draft.block];
        for (axis, (value, number)) in block.axes.iter().zip(&draft.values) {
            if axis.address == address {
                return (Some(value.clone()), (axis.place.clone(), axis.each.then_some(*number)));
            }
        }
        (value_at(block, draft, address), (self.step.path.dotted(&address.join(".")), None))
    }

    #[expect(clippy::type_complexity, reason = "what loose_value gives, twice")]
    fn differ(
        &mut self,
        address: &[String],
        (first, a): (&Draft, &(Option<Value>, (spinledger_terms::Path, Option<usize>))),
        (second, b): (&Draft, &(Option<Value>, (spinledger_terms::Path, Option<usize>))),
    ) {
        if !self.told.insert((address.to_vec(), first.block, second.block)) {
            return;
        }
        let text = |v: &Option<Value>| v.as_ref().map_or("nothing".to_owned(), Value::canonical);
        let place = |(path, element): &(spinledger_terms::Path, Option<usize>)| match element {
            Some(index) => path.index(*index),
            None => path.clone(),
        };
        let path = address.join(".");
        let message =
            format!("`{path}` is {} here and {} elsewhere for one and the same point", text(&b.0), text(&a.0));
        let problem = Problem::at_value(&place(&b.1), message).other(place(&a.1), format!("{} here", text(&a.0)));
        self.problems.push(problem.expected(format!("blocks that share no point, or the same `{path}` in both")));
    }
}
