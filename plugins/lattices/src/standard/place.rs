//! Cells of a box, and where a cell beyond its ends really is.

use super::brick::Side;

/// Where a site is.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) enum Place {
    /// A free site, by number.
    Free(u32),
    /// Beyond a pinned end.
    Rim {
        /// The cell, inside in periodic directions.
        cell: Vec<i64>,
        /// Which of its sites.
        site: usize,
        /// Where it points to, +1 or -1. Beyond two pinned ends at once, the first direction decides.
        direction: i32,
    },
    /// Beyond a free end.
    Nowhere,
}

impl Place {
    /// Finds site `site` of the cell `target`, with `basis` sites a cell; `wraps` receives how often each direction was wrapped around.
    pub(crate) fn find(sides: &[Side], basis: usize, target: &[i64], site: usize, wraps: &mut [i32]) -> Place {
        let mut number = 0;
        let mut pinned = None;
        for ((side, coordinate), wrap) in sides.iter().zip(target).zip(wraps.iter_mut()) {
            *wrap = 0;
            let mut inside = *coordinate;
            if !(0..side.cells).contains(coordinate) {
                if side.boundary.is_periodic() {
                    *wrap = coordinate.div_euclid(side.cells) as i32;
                    inside = coordinate.rem_euclid(side.cells);
                } else if let Some(direction) = side.boundary.pinned_direction() {
                    pinned = pinned.or(Some(direction));
                } else {
                    return Place::Nowhere;
                }
            }
            number = number * side.cells + inside;
        }
        match pinned {
            None => Place::Free(number as u32 * basis as u32 + site as u32),
            Some(direction) => Place::Rim { cell: inside(sides, target), site, direction },
        }
    }
}

/// The cell with its periodic coordinates brought inside.
fn inside(sides: &[Side], target: &[i64]) -> Vec<i64> {
    let fold = |(side, x): (&Side, &i64)| if side.boundary.is_periodic() { x.rem_euclid(side.cells) } else { *x };
    sides.iter().zip(target).map(fold).collect()
}

/// Goes through the cells of a box, last direction fastest.
pub(crate) struct Walk<'a> {
    sides: &'a [Side],
    cell: Vec<i64>,
    begun: bool,
}

impl<'a> Walk<'a> {
    /// Before the first cell.
    pub(crate) fn new(sides: &'a [Side]) -> Self {
        Walk { sides, cell: vec![0; sides.len()], begun: false }
    }

    /// The next cell. Not an iterator, since it lends its own memory.
    pub(crate) fn next(&mut self) -> Option<&[i64]> {
        if !self.begun {
            self.begun = true;
            return Some(&self.cell);
        }
        for (coordinate, side) in self.cell.iter_mut().zip(self.sides).rev() {
            *coordinate += 1;
            if *coordinate < side.cells {
                return Some(&self.cell);
            }
            *coordinate = 0;
        }
        None
    }
}
