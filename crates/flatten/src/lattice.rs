//! A lattice as a plugin says it, call by call.

use crate::colouring::{compact, greedy};
use crate::unsound::ensure;
use crate::{GraphData, Result};
use spinledger_abi::SlBond;

/// Most directions that a lattice may have; a guard against garbage rather than a physical limit.
const MOST_DIRECTIONS: usize = 16;

/// Collects a lattice; calls come in the order geometry, sites, pinned, class names, bonds, then the rest.
#[derive(Debug, Default)]
pub struct LatticeParts {
    dimension: usize,
    vectors: Vec<f64>,
    cells: Vec<i64>,
    periods: Vec<i64>,
    positions: Vec<f64>,
    sublattices: Vec<u32>,
    free: usize,
    directions: Vec<i32>,
    class_names: Vec<String>,
    bonds: Vec<SlBond>,
    wraps: Vec<i32>,
    colours: Option<Vec<u32>>,
    face_offsets: Vec<u32>,
    face_sites: Vec<u32>,
}

impl LatticeParts {
    /// Number of directions; 0 before [`LatticeParts::geometry`].
    pub fn dimension(&self) -> usize {
        self.dimension
    }

    /// Number of free sites so far.
    pub fn free(&self) -> usize {
        self.free
    }

    /// A number of directions that a lattice may have.
    ///
    /// # Errors
    /// Other than 1 to 16.
    pub fn checked_dimension(dimension: usize) -> Result<usize> {
        ensure!(
            (1..=MOST_DIRECTIONS).contains(&dimension),
            "a lattice has 1 to {MOST_DIRECTIONS} directions, not {dimension}"
        );
        Ok(dimension)
    }

    /// Primitive vectors (a row each), unit cells per direction, and whether each is periodic.
    ///
    /// # Errors
    /// Called twice, lengths that do not fit, a direction without cells, components that are not finite.
    pub fn geometry(&mut self, vectors: &[f64], cells: &[i64], periodic: &[bool]) -> Result<()> {
        ensure!(self.dimension == 0, "the geometry is given twice");
        let dimension = Self::checked_dimension(cells.len())?;
        ensure!(
            vectors.len() == dimension * dimension && periodic.len() == dimension,
            "the geometry does not have {dimension} directions throughout"
        );
        ensure!(vectors.iter().all(|x| x.is_finite()), "a primitive vector is not finite");
        ensure!(cells.iter().all(|&c| c >= 1), "a direction has no unit cell");
        self.dimension = dimension;
        self.vectors = vectors.to_vec();
        self.cells = cells.to_vec();
        self.periods = cells.iter().zip(periodic).map(|(&c, &p)| if p { c } else { 0 }).collect();
        Ok(())
    }

    /// Free sites.
    ///
    /// # Errors
    /// Before the geometry or after pinned sites, lengths that do not fit, positions that are not finite.
    pub fn sites(&mut self, positions: &[f64], sublattices: &[u32]) -> Result<()> {
        ensure!(self.directions.is_empty(), "free sites are given after pinned ones");
        self.place(positions, sublattices)?;
        self.free += sublattices.len();
        Ok(())
    }

    /// Pinned sites, each with the direction (+1 or -1) that it points to.
    ///
    /// # Errors
    /// Lengths that do not fit, positions that are not finite, other directions.
    pub fn pinned(&mut self, positions: &[f64], sublattices: &[u32], directions: &[i32]) -> Result<()> {
        ensure!(directions.len() == sublattices.len(), "pinned sites and their directions differ in number");
        if let Some(other) = directions.iter().find(|d| d.abs() != 1) {
            ensure!(false, "a pinned site points to {other} instead of 1 or -1");
        }
        self.place(positions, sublattices)?;
        self.directions.extend_from_slice(directions);
        Ok(())
    }

    fn place(&mut self, positions: &[f64], sublattices: &[u32]) -> Result<()> {
        ensure!(self.dimension > 0, "sites are given before the geometry");
        ensure!(self.bonds.is_empty(), "sites are given after bonds");
        ensure!(
            positions.len() == sublattices.len() * self.dimension,
            "positions do not have {} components",
            self.dimension
        );
        if let Some(k) = positions.iter().position(|x| !x.is_finite()) {
            let site = self.sublattices.len() + k / self.dimension;
            ensure!(false, "the position of site {site} is not finite");
        }
        ensure!(self.sublattices.len() + sublattices.len() < u32::MAX as usize, "there are too many sites");
        self.positions.extend_from_slice(positions);
        self.sublattices.extend_from_slice(sublattices);
        Ok(())
    }

    /// Names the next bond class.
    ///
    /// # Errors
    /// An empty or repeated name, or more than 65535 classes.
    pub fn class_name(&mut self, name: &str) -> Result<()> {
        ensure!(!name.is_empty(), "a bond class has no name");
        ensure!(!self.class_names.iter().any(|n| n == name), "the bond class `{name}` is named twice");
        ensure!(self.class_names.len() < usize::from(u16::MAX), "there are too many bond classes");
        self.class_names.push(name.to_owned());
        Ok(())
    }

    /// Bonds, with how often each wraps around each direction (not at all without).
    ///
    /// # Errors
    /// A bond that names a site or class that does not exist, begins at a pinned site, has another sign than 1 and -1, wraps around a
    /// direction that is not periodic, or joins a site with itself without wrapping or across an antiperiodic seam.
    pub fn bonds(&mut self, bonds: &[SlBond], wraps: Option<&[i32]>) -> Result<()> {
        let (d, total) = (self.dimension, self.sublattices.len());
        ensure!(d > 0, "bonds are given before the geometry");
        ensure!(wraps.is_none_or(|w| w.len() == bonds.len() * d), "wraps do not have {d} entries a bond");
        for (k, bond) in bonds.iter().enumerate() {
            let (number, wrap) = (self.bonds.len() + k, wraps.map(|w| &w[k * d..(k + 1) * d]));
            let (i, j) = (bond.i as usize, bond.j as usize);
            ensure!(i < total && j < total, "bond {number} joins sites {i} and {j} of {total}");
            ensure!(i < self.free, "bond {number} from {i} to {j} does not begin at a free site");
            ensure!(
                usize::from(bond.class_index) < self.class_names.len(),
                "bond {number} is of class {}, which has no name",
                bond.class_index
            );
            ensure!(matches!(bond.sign, 1 | -1), "bond {number} has sign {}", bond.sign);
            let around = |wrap: &[i32]| wrap.iter().any(|&w| w != 0);
            if let Some(a) = wrap.and_then(|w| w.iter().zip(&self.periods).position(|(&w, &p)| w != 0 && p == 0)) {
                ensure!(false, "bond {number} wraps around direction {a}, which is not periodic");
            }
            if i == j {
                ensure!(wrap.is_some_and(around), "bond {number} joins site {i} with itself without wrapping");
                ensure!(bond.sign == 1, "bond {number} joins site {i} with itself across an antiperiodic seam");
            }
        }
        // Offsets count each bond twice and are 32 bits wide.
        ensure!(self.bonds.len() + bonds.len() <= (u32::MAX / 2) as usize, "there are too many bonds");
        self.bonds.extend(bonds.iter().map(|bond| SlBond { reserved: 0, ..*bond }));
        match wraps {
            Some(wraps) => self.wraps.extend_from_slice(wraps),
            None => self.wraps.resize(self.bonds.len() * d, 0),
        }
        Ok(())
    }

    /// Colour of each free site.
    ///
    /// # Errors
    /// Another number of colours than of free sites.
    pub fn colours(&mut self, colours: &[u32]) -> Result<()> {
        ensure!(colours.len() == self.free, "there are {} colours for {} free sites", colours.len(), self.free);
        self.colours = Some(colours.to_vec());
        Ok(())
    }

    /// Faces: number of sites of each, and all their sites in order around.
    ///
    /// # Errors
    /// A face with fewer than three corners, or a site that does not exist.
    pub fn faces(&mut self, lengths: &[u32], sites: &[u32]) -> Result<()> {
        let total = self.sublattices.len();
        ensure!(lengths.iter().all(|&n| n >= 3), "a face has fewer than three corners");
        let count: u64 = lengths.iter().map(|&n| u64::from(n)).sum();
        ensure!(
            count == sites.len() as u64,
            "the faces have {count} corners in all, and {} sites are given",
            sites.len()
        );
        ensure!(self.face_sites.len() as u64 + count <= u64::from(u32::MAX), "there are too many faces");
        if let Some(site) = sites.iter().find(|&&s| s as usize >= total) {
            ensure!(false, "a face has site {site} of {total} as a corner");
        }
        if self.face_offsets.is_empty() {
            self.face_offsets.push(0);
        }
        let mut end = self.face_sites.len() as u32;
        for &n in lengths {
            end += n;
            self.face_offsets.push(end);
        }
        self.face_sites.extend_from_slice(sites);
        Ok(())
    }

    /// The checked lattice: neighbours in the order of bonds, and the plugin's colours, or greedy ones in the order of sites where it gives none.
    ///
    /// Cost: proportional to bonds and sites.
    ///
    /// # Errors
    /// A lattice without geometry or free sites, or colours of which two neighbours share one.
    pub fn finish(self) -> Result<GraphData> {
        ensure!(self.dimension > 0, "the lattice has no geometry");
        ensure!(self.free > 0, "the lattice has no free site");
        let (sites, total) = (self.free, self.sublattices.len());
        let ends = |bond: &SlBond| [(bond.i, bond.j), (bond.j, bond.i)];
        let mut offsets = vec![0u32; sites + 1];
        for (site, _) in self.bonds.iter().flat_map(ends).filter(|&(site, _)| (site as usize) < sites) {
            offsets[site as usize + 1] += 1;
        }
        for s in 0..sites {
            offsets[s + 1] += offsets[s];
        }
        let mut next = offsets.clone();
        let entries = offsets[sites] as usize;
        let (mut neighbours, mut neighbour_bonds) = (vec![0; entries], vec![0; entries]);
        for (number, bond) in self.bonds.iter().enumerate() {
            for (site, other) in ends(bond).into_iter().filter(|&(site, _)| (site as usize) < sites) {
                let place = &mut next[site as usize];
                neighbours[*place as usize] = other;
                neighbour_bonds[*place as usize] = number as u32;
                *place += 1;
            }
        }
        let adjacent = |site: usize| {
            let range = offsets[site] as usize..offsets[site + 1] as usize;
            neighbours[range].iter().copied().filter(move |&n| (n as usize) < sites && n as usize != site)
        };
        let colours = match self.colours {
            None => greedy(sites, adjacent),
            Some(colours) => {
                for site in 0..sites {
                    if let Some(n) = adjacent(site).find(|&n| colours[n as usize] == colours[site]) {
                        ensure!(false, "sites {site} and {n} are joined by a bond and have one colour");
                    }
                }
                compact(colours)
            }
        };
        Ok(GraphData {
            dimension: self.dimension,
            sites,
            total,
            bonds: self.bonds,
            wraps: self.wraps,
            offsets,
            neighbours,
            neighbour_bonds,
            positions: self.positions,
            sublattices: self.sublattices,
            directions: self.directions,
            vectors: self.vectors,
            periods: self.periods,
            cells: self.cells,
            class_names: self.class_names,
            face_offsets: self.face_offsets,
            face_sites: self.face_sites,
            colours,
        })
    }
}
