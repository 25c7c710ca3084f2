//! A square grid with any boundary, with faces.

use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Parameter, Params, Result};

/// A grid of `size` x `size` sites, or of two sizes.
pub struct Grid {
    size: Vec<usize>,
    boundary: Vec<String>,
}

impl Lattice for Grid {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "test-grid",
        about: "A square grid with faces, for tests.",
        parameters: &[
            Parameter::required(
                "size",
                r#"{"either":{"of":[{"integer":{"min":1}},{"list":{"of":{"integer":{"min":1}},"min":2,"max":2}}]}}"#,
                "Sites in each direction.",
            ),
            Parameter::optional(
                "boundary",
                r#"{"either":{"of":[{"word":{"of":["periodic","antiperiodic","free","plus","minus"]}},{"list":{"of":{"word":{"of":["periodic","antiperiodic","free","plus","minus"]}},"min":2,"max":2}}]}}"#,
                r#""periodic""#,
                "One boundary, or one a direction.",
            ),
        ],
        dimension: 2,
        size: "size",
        classes: &["first.x", "first.y"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        let size = params.counts_per_direction("size", 2)?;
        Ok(Grid { size, boundary: params.words_per_direction("boundary", 2)? })
    }

    fn build(&self, b: &mut LatticeBuilder) -> Result<()> {
        let [lx, ly] = [self.size[0], self.size[1]];
        let closed = [self.closed(0), self.closed(1)];
        b.geometry(&[vec![1.0, 0.0], vec![0.0, 1.0]], &self.size, &closed);
        let at = |x: usize, y: usize| ((x % lx) * ly + y % ly) as u32;
        for x in 0..lx {
            for y in 0..ly {
                b.site(&[x as f64, y as f64], 0);
            }
        }
        let classes = [b.class("first.x"), b.class("first.y")];
        // Pinned sites come after all free ones and before the bonds.
        let mut rim = Vec::new();
        for (d, &class) in classes.iter().enumerate() {
            let direction = match self.boundary[d].as_str() {
                "plus" => 1,
                "minus" => -1,
                _ => continue,
            };
            for k in 0..self.size[1 - d] {
                for (inside, outside) in [(0, -1.0), (self.size[d] - 1, self.size[d] as f64)] {
                    let (site, place) = if d == 0 {
                        (at(inside, k), [outside, k as f64])
                    } else {
                        (at(k, inside), [k as f64, outside])
                    };
                    rim.push((site, b.pinned(&place, 0, direction), class));
                }
            }
        }
        for x in 0..lx {
            for y in 0..ly {
                for (d, (nx, ny)) in [(x + 1, y), (x, y + 1)].into_iter().enumerate() {
                    let crosses = nx == lx || ny == ly;
                    if crosses && !closed[d] {
                        continue;
                    }
                    let wrap = [i32::from(nx == lx), i32::from(ny == ly)];
                    let sign = if crosses && self.boundary[d] == "antiperiodic" { -1 } else { 1 };
                    b.bond_across(at(x, y), at(nx, ny), classes[d], &wrap, sign);
                }
                if (x + 1 < lx || closed[0]) && (y + 1 < ly || closed[1]) {
                    b.face(&[at(x, y), at(x + 1, y), at(x + 1, y + 1), at(x, y + 1)]);
                }
            }
        }
        for (site, pinned, class) in rim {
            b.bond(site, pinned, class);
        }
        if (0..2).all(|d| !closed[d] || self.size[d].is_multiple_of(2)) {
            b.colours((0..lx * ly).map(|s| ((s / ly + s % ly) % 2) as u32).collect());
        }
        Ok(())
    }
}

impl Grid {
    fn closed(&self, d: usize) -> bool {
        self.boundary[d].ends_with("periodic")
    }
}
