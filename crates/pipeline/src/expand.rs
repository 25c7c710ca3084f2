//! From a scan to its points.

use crate::columns::{self, compare, part, size_parts, unify};
use crate::fill::{Draft, Fill, value_at};
use crate::merge::Merge;
use crate::point::Point;
use crate::scan::{Axis, FromStep, named, nearest_axis};
use crate::step::Step;
use spinledger_terms::{ItemKind, Problem, Value, Vocabulary};
use std::collections::{BTreeMap, BTreeSet};

/// Most points of a step.
pub const MOST_POINTS: usize = 1_000_000;

/// The column that numbers the points of a sequence.
const POSITION: &str = "position";

/// The points of a step, or what they wait for.
#[derive(Clone, Debug)]
pub enum Expansion {
    /// Every point once, ordered by its columns.
    Points(Vec<Point>),
    /// The steps whose tables are not there yet.
    Waits(Vec<String>),
}

/// A column on its way.
pub(crate) struct Column {
    pub(crate) address: Vec<String>,
    pub(crate) name: String,
    /// Whether it is a size, which may be a list.
    pub(crate) size: bool,
    /// Whether points are visited along it.
    pub(crate) followed: bool,
}

impl Step {
    /// The points of the step: every combination of each block once, with complete canonical parameters.
    ///
    /// `lookup` gives the values that an axis takes from a step's table, None where the table is not there yet. Columns are ordered: `size`
    /// and its parts, then by name, then `temperature` or `inverse_temperature`, then `position` and what is followed; points by their columns,
    /// ascending. Points with equal columns are one, whose lengths (`larger` in the step's specification) are the largest named.
    ///
    /// Where the step follows a parameter, points that agree in all other columns are a sequence, numbered by `position`: in the order of
    /// the values, block after block.
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
            let fill = Fill { step: self, block, index, columns: &columns, vocabulary, lookup };
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
        order.sort_by_key(|c| match &columns[*c] {
            Column { followed: true, name, .. } => (4, 0, name.as_str()),
            Column { name, .. } if self.follow().is_some() && name == POSITION => (3, 0, ""),
            Column { name, .. } => columns::rank(name),
        });
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
            let (block, changes) = merge.group(group);
            let cells = order.iter().map(|c| (columns[*c].name.clone(), group[0].cells[*c].clone())).collect();
            points.push(Point::new(self.path.clone(), self.scan[block].base.clone(), changes, cells));
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
        let followed = |address: &Vec<String>| {
            let axes = self.scan.iter().filter_map(|block| Some((block, block.base.at(self.follow()?)?.as_str()?)));
            axes.filter_map(|(block, word)| named(&block.axes, word)).any(|(_, axis)| axis.address == *address)
        };
        let column = |(address, name): (Vec<String>, String)| Column {
            size: size(&address),
            followed: followed(&address),
            address,
            name,
        };
        addresses.into_iter().zip(names).map(column).collect()
    }

    /// The parameter that names what is followed, where the kind of step has one.
    fn follow(&self) -> Option<&str> {
        self.spec.scan.as_ref().map(|scan| scan.follow.as_str()).filter(|follow| !follow.is_empty())
    }

    /// The columns along which points are visited: points that agree in all others, but for `position`, are a sequence. Empty where none is
    /// followed.
    pub fn followed(&self) -> Vec<String> {
        self.columns().into_iter().filter(|column| column.followed).map(|column| column.name).collect()
    }

    /// The paths of the parameters along which points are visited.
    pub fn followed_paths(&self) -> Vec<String> {
        self.columns().into_iter().filter(|column| column.followed).map(|column| column.address.join(".")).collect()
    }

    /// The column `position`, where a scanned parameter is followed: repeated values are then points of their own.
    fn positions(&self, columns: &mut Vec<Column>, drafts: &mut [Draft]) -> Result<(), Vec<Problem>> {
        let Some(follow) = self.follow() else { return Ok(()) };
        let mut any = false;
        // Where each sequence, by its other cells, has got to in the blocks before.
        let mut reached: BTreeMap<String, usize> = BTreeMap::new();
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
            let mut now: BTreeMap<String, usize> = BTreeMap::new();
            for draft in drafts.iter_mut().filter(|d| d.block == index) {
                let others = columns.iter().zip(&draft.cells).filter(|(column, _)| !column.followed);
                let sequence: Vec<String> = others.map(|(_, cell)| cell.canonical()).collect();
                let sequence = sequence.join(" ");
                let position = reached.get(&sequence).copied().unwrap_or(0) + draft.values[axis].1;
                draft.cells.push(Value::Integer(position as i64));
                let next = now.entry(sequence).or_default();
                *next = (*next).max(position + 1);
            }
            reached.append(&mut now);
        }
        if any {
            let width = columns.len() + 1;
            drafts.iter_mut().for_each(|draft| draft.cells.resize(width, Value::Null));
            columns.push(Column { address: Vec::new(), name: POSITION.to_owned(), size: false, followed: false });
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
                columns.push(Column { address: Vec::new(), name, size: false, followed: false });
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

pub(crate) fn too_many(step: &Step) -> Problem {
    let message = format!("the scan has more than {MOST_POINTS} points");
    Problem::at_key(&step.path.key("scan"), message).expected(format!("at most {MOST_POINTS} points in a step"))
}
