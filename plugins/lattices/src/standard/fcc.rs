//! The face-centred cubic lattice.

use super::boundary::{BOUNDARY_3, SIZE_3, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Step};
use super::colouring;
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

/// sqrt(2), the edge of a cell.
const EDGE: f64 = std::f64::consts::SQRT_2;

static SHAPE: Shape = Shape {
    vectors: &[&[EDGE, 0.0, 0.0], &[0.0, EDGE, 0.0], &[0.0, 0.0, EDGE]],
    basis: &[
        &[0.0, 0.0, 0.0],
        &[0.0, EDGE / 2.0, EDGE / 2.0],
        &[EDGE / 2.0, 0.0, EDGE / 2.0],
        &[EDGE / 2.0, EDGE / 2.0, 0.0],
    ],
    steps: &[
        Step { class: "first", from: 0, to: 1, offset: &[0, 0, 0] },
        Step { class: "first", from: 0, to: 1, offset: &[0, 0, -1] },
        Step { class: "first", from: 0, to: 1, offset: &[0, -1, 0] },
        Step { class: "first", from: 0, to: 1, offset: &[0, -1, -1] },
        Step { class: "first", from: 0, to: 2, offset: &[0, 0, 0] },
        Step { class: "first", from: 0, to: 2, offset: &[0, 0, -1] },
        Step { class: "first", from: 0, to: 2, offset: &[-1, 0, 0] },
        Step { class: "first", from: 0, to: 2, offset: &[-1, 0, -1] },
        Step { class: "first", from: 0, to: 3, offset: &[0, 0, 0] },
        Step { class: "first", from: 0, to: 3, offset: &[0, -1, 0] },
        Step { class: "first", from: 0, to: 3, offset: &[-1, 0, 0] },
        Step { class: "first", from: 0, to: 3, offset: &[-1, -1, 0] },
        Step { class: "first", from: 1, to: 2, offset: &[0, 1, 0] },
        Step { class: "first", from: 1, to: 2, offset: &[0, 0, 0] },
        Step { class: "first", from: 1, to: 2, offset: &[-1, 1, 0] },
        Step { class: "first", from: 1, to: 2, offset: &[-1, 0, 0] },
        Step { class: "first", from: 1, to: 3, offset: &[0, 0, 1] },
        Step { class: "first", from: 1, to: 3, offset: &[0, 0, 0] },
        Step { class: "first", from: 1, to: 3, offset: &[-1, 0, 1] },
        Step { class: "first", from: 1, to: 3, offset: &[-1, 0, 0] },
        Step { class: "first", from: 2, to: 3, offset: &[0, 0, 1] },
        Step { class: "first", from: 2, to: 3, offset: &[0, 0, 0] },
        Step { class: "first", from: 2, to: 3, offset: &[0, -1, 1] },
        Step { class: "first", from: 2, to: 3, offset: &[0, -1, 0] },
    ],
    faces: &[],
    colourings: &[colouring::sublattice],
};

/// The face-centred cubic lattice: twelve neighbours a site. It has no faces.
#[derive(Debug)]
pub(crate) struct Fcc(Brick);

impl Lattice for Fcc {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "fcc",
        about: "face-centred cubic lattice in cubic cells of four sites, twelve nearest neighbours",
        formula: "sites at a (x, y, z) + (0, 0, 0), (0, a/2, a/2), (a/2, 0, a/2), (a/2, a/2, 0), a = sqrt(2); bonds first to the twelve sites at distance 1",
        parameters: &[size_parameter(SIZE_3), boundary_parameter(BOUNDARY_3)],
        dimension: 3,
        size: "size",
        sites_per_cell: 4,
        classes: &["first"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Fcc)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
