//! What all lattices share: a unit cell repeated over a box.
//!
//! A lattice is a [`Shape`]: primitive vectors, the sites of a cell, and bonds and faces as offsets between cells. A [`Brick`] is a shape
//! with an extent and a boundary in each direction; building it walks the cells with the last direction fastest, the sites of a cell
//! innermost.

use super::boundary::{self, Boundary};
use super::place::{Place, Walk};
use spinledger_sdk::{ClassIndex, Error, LatticeBuilder, Params, Result};
use std::collections::BTreeMap;

/// A bond of every cell.
#[derive(Debug)]
pub(crate) struct Step {
    /// Name of its class.
    pub(crate) class: &'static str,
    /// Site of the cell at which it begins.
    pub(crate) from: usize,
    /// Site of the other cell at which it ends.
    pub(crate) to: usize,
    /// The other cell.
    pub(crate) offset: &'static [i64],
}

/// A corner of a face: offset of the cell, and which of its sites.
pub(crate) type Corner = (&'static [i64], usize);

/// A candidate colouring: colour of a site of a cell. [`Brick::build`] takes the first candidate that turns out proper, so that a
/// candidate need not know when it is.
pub(crate) type Colouring = fn(cell: &[i64], site: usize, sides: &[Side]) -> u32;

/// A unit cell and how it is joined to others.
#[derive(Debug)]
pub(crate) struct Shape {
    /// Primitive vectors in nearest-neighbour distances.
    pub(crate) vectors: &'static [&'static [f64]],
    /// Positions of the sites of a cell.
    pub(crate) basis: &'static [&'static [f64]],
    /// Bonds of a cell, each bond of the lattice once; those of a class stand together.
    pub(crate) steps: &'static [Step],
    /// Faces of a cell, corners in order around.
    pub(crate) faces: &'static [&'static [Corner]],
    /// Candidate colourings, best first.
    pub(crate) colourings: &'static [Colouring],
}

/// Cells and boundary of a direction.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Side {
    /// Number of cells.
    pub(crate) cells: i64,
    /// What happens at the ends.
    pub(crate) boundary: Boundary,
}

/// A shape over a box.
#[derive(Debug)]
pub(crate) struct Brick {
    shape: &'static Shape,
    sides: Vec<Side>,
}

/// Largest number of entries in the host's adjacency, whose offsets have 32 bits.
const MOST_ENTRIES: u64 = u32::MAX as u64;

impl Brick {
    /// From the parameters `size` and `boundary`.
    ///
    /// # Errors
    /// Where they do not fit the number of directions, a period of one is antiperiodic, or there are too many bonds to be numbered.
    pub(crate) fn new(params: &Params, shape: &'static Shape) -> Result<Self> {
        let directions = shape.vectors.len();
        let sizes = params.counts_per_direction("size", directions)?;
        let boundaries = params.words_per_direction("boundary", directions)?;
        let mut sides = Vec::with_capacity(directions);
        let mut entries = 2 * shape.steps.len().max(shape.basis.len()) as u64;
        for (size, word) in sizes.into_iter().zip(&boundaries) {
            let boundary = boundary::parse(word)?;
            if size == 0 {
                return Err(Error::new("`size` must be at least 1"));
            }
            if size == 1 && boundary == Boundary::Antiperiodic {
                return Err(Error::new(
                    "an antiperiodic direction needs at least 2 cells: a spin cannot be minus itself",
                ));
            }
            entries = entries.saturating_mul(size as u64);
            sides.push(Side { cells: size as i64, boundary });
        }
        if entries > MOST_ENTRIES {
            return Err(Error::new(format!(
                "this lattice has more than the {MOST_ENTRIES} bond ends that can be numbered"
            )));
        }
        Ok(Brick { shape, sides })
    }

    /// Writes the lattice. Cost: proportional to the number of sites times bonds a cell.
    ///
    /// # Errors
    /// None at present: what cannot be built was refused by [`Brick::new`].
    pub(crate) fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        let shape = self.shape;
        let vectors: Vec<Vec<f64>> = shape.vectors.iter().map(|v| v.to_vec()).collect();
        let cells: Vec<usize> = self.sides.iter().map(|s| s.cells as usize).collect();
        let periodic: Vec<bool> = self.sides.iter().map(|s| s.boundary.is_periodic()).collect();
        builder.geometry(&vectors, &cells, &periodic);
        let classes = self.name_classes(builder);
        self.place_sites(builder);
        let rim = self.place_rim(builder);
        let colours = self.join(builder, &classes, &rim);
        if let Some(colours) = colours {
            builder.colours(colours);
        }
        self.draw_faces(builder);
        Ok(())
    }

    /// Names the classes in order of first use; returns that of each step.
    fn name_classes(&self, builder: &mut LatticeBuilder) -> Vec<ClassIndex> {
        let mut named: Vec<(&str, ClassIndex)> = Vec::new();
        let mut classes = Vec::with_capacity(self.shape.steps.len());
        for step in self.shape.steps {
            let known = named.iter().find(|(name, _)| *name == step.class).map(|(_, class)| *class);
            let class = known.unwrap_or_else(|| builder.class(step.class));
            if known.is_none() {
                named.push((step.class, class));
            }
            classes.push(class);
        }
        classes
    }

    fn place_sites(&self, builder: &mut LatticeBuilder) {
        let mut position = vec![0.0; self.sides.len()];
        let mut walk = Walk::new(&self.sides);
        while let Some(cell) = walk.next() {
            for site in 0..self.shape.basis.len() {
                self.position(cell, site, &mut position);
                builder.site(&position, site as u32);
            }
        }
    }

    /// Adds the pinned sites that some bond reaches, ordered like free sites; returns their numbers.
    fn place_rim(&self, builder: &mut LatticeBuilder) -> BTreeMap<(Vec<i64>, usize), u32> {
        let mut rim = BTreeMap::new();
        if self.sides.iter().any(|s| s.boundary.pinned_direction().is_some()) {
            self.visit_ends(|end| {
                if let Place::Rim { cell, site, direction } = end.place {
                    rim.insert((cell, site), direction);
                }
            });
        }
        let mut position = vec![0.0; self.sides.len()];
        rim.into_iter()
            .map(|((cell, site), direction)| {
                self.position(&cell, site, &mut position);
                let number = builder.pinned(&position, site as u32, direction);
                ((cell, site), number)
            })
            .collect()
    }

    /// Adds the bonds; returns the first candidate colouring that is proper. With a bond from a site to itself (period one) there is no
    /// proper colouring in the strict sense, and the choice is left to the host.
    fn join(
        &self,
        builder: &mut LatticeBuilder,
        classes: &[ClassIndex],
        rim: &BTreeMap<(Vec<i64>, usize), u32>,
    ) -> Option<Vec<u32>> {
        let mut candidates: Vec<Option<Vec<u32>>> =
            self.shape.colourings.iter().map(|c| Some(self.colour(*c))).collect();
        self.visit_ends(|end| {
            let class = classes[end.step];
            let (other, free) = match end.place {
                Place::Free(other) => (other, true),
                Place::Rim { cell, site, .. } => (rim[&(cell, site)], false),
                Place::Nowhere => return,
            };
            if end.wraps.iter().all(|w| *w == 0) {
                builder.bond(end.from, other, class);
            } else {
                builder.bond_across(end.from, other, class, end.wraps, end.sign);
            }
            if free {
                for candidate in &mut candidates {
                    if candidate.as_ref().is_some_and(|c| c[end.from as usize] == c[other as usize]) {
                        *candidate = None;
                    }
                }
            }
        });
        candidates.into_iter().flatten().next()
    }

    fn colour(&self, colouring: Colouring) -> Vec<u32> {
        let mut colours = Vec::new();
        let mut walk = Walk::new(&self.sides);
        while let Some(cell) = walk.next() {
            colours.extend((0..self.shape.basis.len()).map(|site| colouring(cell, site, &self.sides)));
        }
        colours
    }

    /// Adds the faces whose corners are free sites, all different: none across free or pinned ends, none that a period of one folds.
    fn draw_faces(&self, builder: &mut LatticeBuilder) {
        let mut corners = Vec::new();
        let mut target = vec![0; self.sides.len()];
        let mut wraps = vec![0; self.sides.len()];
        let mut walk = Walk::new(&self.sides);
        while let Some(cell) = walk.next() {
            'faces: for face in self.shape.faces {
                corners.clear();
                for (offset, site) in *face {
                    shift(cell, offset, 1, &mut target);
                    match Place::find(&self.sides, self.shape.basis.len(), &target, *site, &mut wraps) {
                        Place::Free(number) if !corners.contains(&number) => corners.push(number),
                        _ => continue 'faces,
                    }
                }
                builder.face(&corners);
            }
        }
    }

    /// Shows every bond once, seen from a free site: those that begin there, and those that come in from a pinned site. The order is
    /// by site, then by step, out before in; it is the order of bonds in the lattice.
    fn visit_ends(&self, mut visit: impl FnMut(End<'_>)) {
        let basis = self.shape.basis.len();
        let mut target = vec![0; self.sides.len()];
        let mut wraps = vec![0; self.sides.len()];
        let mut first = 0;
        let mut walk = Walk::new(&self.sides);
        while let Some(cell) = walk.next() {
            for site in 0..basis {
                for (number, step) in self.shape.steps.iter().enumerate() {
                    if step.from == site {
                        shift(cell, step.offset, 1, &mut target);
                        let place = Place::find(&self.sides, basis, &target, step.to, &mut wraps);
                        let sign = self.sign(&wraps);
                        visit(End { from: first + site as u32, step: number, place, wraps: &wraps, sign });
                    }
                    if step.to == site {
                        shift(cell, step.offset, -1, &mut target);
                        let place = Place::find(&self.sides, basis, &target, step.from, &mut wraps);
                        if matches!(place, Place::Rim { .. }) {
                            let sign = self.sign(&wraps);
                            visit(End { from: first + site as u32, step: number, place, wraps: &wraps, sign });
                        }
                    }
                }
            }
            first += basis as u32;
        }
    }

    /// -1 where an odd number of antiperiodic seams is crossed.
    fn sign(&self, wraps: &[i32]) -> i8 {
        let crossed = self.sides.iter().zip(wraps).filter(|(side, _)| side.boundary == Boundary::Antiperiodic);
        if crossed.map(|(_, wrap)| wrap).sum::<i32>() % 2 == 0 { 1 } else { -1 }
    }

    fn position(&self, cell: &[i64], site: usize, position: &mut [f64]) {
        position.copy_from_slice(self.shape.basis[site]);
        for (count, vector) in cell.iter().zip(self.shape.vectors) {
            for (component, step) in position.iter_mut().zip(*vector) {
                *component += *count as f64 * step;
            }
        }
    }
}

/// A bond as seen from a free site.
struct End<'a> {
    from: u32,
    step: usize,
    place: Place,
    wraps: &'a [i32],
    sign: i8,
}

/// `target` = `cell` + `sense` x `offset`.
fn shift(cell: &[i64], offset: &[i64], sense: i64, target: &mut [i64]) {
    for ((target, cell), offset) in target.iter_mut().zip(cell).zip(offset) {
        *target = cell + sense * offset;
    }
}
