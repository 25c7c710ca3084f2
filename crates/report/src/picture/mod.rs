//! Pictures of configurations: a state at each site, and the walls between domains.

mod grid;
mod sites;
mod walls;

use crate::drawing::{Anchor, Drawing, Lettering};
use crate::font::{self, Weight};
use crate::ink::{Ink, STATES};
use crate::path::Path;

/// A configuration to be drawn.
#[derive(Clone, Debug, PartialEq)]
pub struct Picture {
    /// Stands above it.
    pub title: String,
    /// Where the states are.
    pub sites: Sites,
    /// The state of each site, from 0; for Ising spins 0 is down and 1 is up.
    pub states: Vec<u16>,
    /// Names of the states, for the key below; empty for none.
    pub names: Vec<String>,
    /// How states are shaded.
    pub shades: Shades,
}

/// Where sites are.
#[derive(Clone, Debug, PartialEq)]
pub enum Sites {
    /// A rectangle of cells, row by row from the top; walls are found by comparing neighbours. Where `states` is longer or shorter
    /// than the rectangle, what is missing stays empty and what is too much is left out.
    Grid {
        /// Cells across.
        columns: usize,
        /// Rows of cells.
        rows: usize,
        /// Whether walls are drawn.
        walls: bool,
    },
    /// A chain from left to right, as a band: as many cells of it one above the other as `rows` says.
    Strip {
        /// Height of the band in cells.
        rows: usize,
        /// Whether walls are drawn.
        walls: bool,
    },
    /// Sites anywhere in the plane, drawn as discs.
    Plane {
        /// `x` to the right, `y` up, in nearest-neighbour distances. Sites beyond the shorter of this and `states` are left out.
        positions: Vec<[f64; 2]>,
        /// Where walls are.
        walls: Walls,
    },
}

/// Walls between domains of sites in the plane.
#[derive(Clone, Debug, PartialEq)]
pub enum Walls {
    /// From where to where: x0, y0, x1, y1.
    Segments(Vec<[f64; 4]>),
    /// Neighbours by their places in the list of sites; where their states differ, a wall stands across the middle between them.
    Pairs {
        /// The neighbours. Those that are not neighbours in the plane (bonds around a period) must be left out by the caller.
        pairs: Vec<[u32; 2]>,
        /// Length of a wall as a share of the distance: 1 on the square lattice, 1/√3 on the triangular, √3 on the honeycomb.
        length: f64,
    },
}

/// How states are shaded.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Shades {
    /// Six shades that differ in lightness, for states without an order; they come again after six.
    Apart,
    /// A closed ring of this many shades, for angles.
    Ring(u16),
}

impl Picture {
    /// Draws the picture, `side` drawing units along the longer side at most (60 to 4000). In a grid each cell is a whole number of
    /// units across where that is possible, so that the pixels of a PNG are whole cells.
    ///
    /// In a grid or a strip, angles ([`Shades::Ring`]) get no walls, nor do cells of less than 4 units between which there would be more than 20 000 lines:
    /// nothing else would be seen.
    ///
    /// Cost: about 15 bytes of SVG for each run of equal states in a grid, and about 10 for each site in the plane.
    pub fn draw(&self, side: f64) -> Drawing {
        let side = side.clamp(60.0, 4000.0);
        match &self.sites {
            Sites::Grid { columns, rows, walls } => grid::draw(self, *columns, *rows, side, *walls),
            Sites::Strip { rows, walls } => {
                let columns = self.states.len();
                let band = Picture { states: self.states.repeat((*rows).max(1)), ..self.clone() };
                grid::draw(&band, columns, (*rows).max(1), side, *walls)
            }
            Sites::Plane { positions, walls } => sites::draw(self, positions, walls, side),
        }
    }

    fn ink(&self, state: u16) -> Ink {
        match self.shades {
            Shades::Apart => Ink::State((usize::from(state) % STATES) as u8),
            Shades::Ring(count) => Ink::Fixed(ring(state, count.max(1))),
        }
    }

    /// States in use, smallest first, with how many sites have them.
    fn counts(&self, sites: usize) -> Vec<(u16, usize)> {
        let mut counts = std::collections::BTreeMap::new();
        for &state in self.states.iter().take(sites) {
            *counts.entry(state).or_insert(0) += 1;
        }
        counts.into_iter().collect()
    }

    fn description(&self, sites: usize) -> String {
        let mut words = format!("A configuration of {} sites.", self.states.len().min(sites));
        let counts = self.counts(sites);
        if counts.len() <= 12 {
            for (state, count) in counts {
                words += &format!(" {}: {count} sites.", self.name(state));
            }
        }
        words
    }

    fn name(&self, state: u16) -> String {
        self.names.get(usize::from(state)).cloned().unwrap_or_else(|| format!("state {state}"))
    }

    /// A drawing with title and key around a body of a size; returns it and where the body begins.
    fn frame(&self, width: f64, height: f64, sites: usize) -> (Drawing, f64, f64) {
        const RIM: f64 = 12.0;
        const TITLE: f64 = 14.0;
        const KEY: f64 = 12.0;
        let whole = (width + 2.0 * RIM).max(220.0);
        let title = font::wrapped(&self.title, TITLE, Weight::Heavy, whole - 2.0 * RIM, 3);
        let top = RIM + if title.is_empty() { 0.0 } else { TITLE * 1.3 * title.len() as f64 + 6.0 };
        let left = (whole - width) / 2.0;

        let mut rows: Vec<Vec<(u16, f64, String)>> = Vec::new();
        let mut at = f64::INFINITY;
        if !self.names.is_empty() {
            for (state, _) in self.counts(sites).into_iter().take(36) {
                let name = font::fitted(&self.name(state), KEY, Weight::Regular, whole - 2.0 * RIM - 18.0);
                let room = 18.0 + font::width(&name, KEY, Weight::Regular);
                if at + room > whole - 2.0 * RIM {
                    rows.push(Vec::new());
                    at = 0.0;
                }
                if let Some(row) = rows.last_mut() {
                    row.push((state, at, name));
                }
                at += room + 16.0;
            }
        }
        let key = if rows.is_empty() { 0.0 } else { 8.0 + 18.0 * rows.len() as f64 };
        let mut drawing = Drawing::new(whole, top + height + key + RIM, &self.title, self.description(sites));
        let heavy = Lettering { size: TITLE, weight: Weight::Heavy, ink: Ink::Text, halo: false };
        for (i, line) in title.iter().enumerate() {
            drawing.text(line, (RIM, RIM + TITLE * (0.95 + 1.3 * i as f64)), Anchor::Begin, heavy);
        }
        for (i, row) in rows.iter().enumerate() {
            let y = top + height + 8.0 + 18.0 * (i as f64 + 0.5);
            for (state, x, name) in row {
                let mut square = Path::new();
                square.rectangle(RIM + x, y - 5.5, 11.0, 11.0);
                let rim = crate::drawing::Stroke::solid(Ink::Soft, 0.8);
                drawing.fill_and_stroke(square, self.ink(*state), rim);
                drawing.text(name, (RIM + x + 18.0, y + KEY * 0.36), Anchor::Begin, Lettering::plain(KEY, Ink::Text));
            }
        }
        (drawing, left, top)
    }
}

/// A shade on a ring through dark petrol, stone, copper and sand: opposite places differ in lightness, neighbours little.
fn ring(state: u16, count: u16) -> [u8; 3] {
    const ANCHORS: [[i32; 3]; 6] = [
        [0x1c, 0x4c, 0x63],
        [0x4f, 0x8f, 0x99],
        [0xb9, 0xcd, 0xc4],
        [0xf0, 0xdc, 0xb4],
        [0xc8, 0x86, 0x4a],
        [0x6c, 0x36, 0x2e],
    ];
    let place = usize::from(state % count) * 6 * 256 / usize::from(count);
    let (a, b, part) = (ANCHORS[place / 256 % 6], ANCHORS[(place / 256 + 1) % 6], (place % 256) as i32);
    [0, 1, 2].map(|i| ((a[i] * (256 - part) + b[i] * part) / 256) as u8)
}
