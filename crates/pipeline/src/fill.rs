//! The points of one block of a scan, before those that are named twice are made one.

use crate::address;
use crate::columns::{cell, size_parts};
use crate::expand::{Column, MOST_POINTS, too_many};
use crate::scan::{Axis, AxisValues, Block, FromStep};
use crate::step::Step;
use spinledger_terms::{Admission, Problem, Value, Vocabulary, admit};
use std::collections::BTreeSet;

/// A point on its way: its block, the values of the block's axes with their numbers in their lists, its cells.
pub(crate) struct Draft {
    pub(crate) block: usize,
    pub(crate) values: Vec<(Value, usize)>,
    pub(crate) cells: Vec<Value>,
}

/// The value at an address in a point that is not built yet.
pub(crate) fn value_at(block: &Block, draft: &Draft, address: &[String]) -> Option<Value> {
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
pub(crate) struct Fill<'a> {
    pub(crate) step: &'a Step,
    pub(crate) block: &'a Block,
    pub(crate) index: usize,
    pub(crate) columns: &'a [Column],
    pub(crate) vocabulary: &'a Vocabulary,
    pub(crate) lookup: &'a dyn Fn(&FromStep) -> Option<Vec<Value>>,
}

impl Fill<'_> {
    pub(crate) fn run(&self, drafts: &mut Vec<Draft>, waits: &mut BTreeSet<String>, problems: &mut Vec<Problem>) {
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
                    if let Some(values) = self.table_values(axis, from, &p, waits, problems) {
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

    fn table_values(
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
