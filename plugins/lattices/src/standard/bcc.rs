//! The body-centred cubic lattice.

use super::boundary::{BOUNDARY_3, SIZE_3, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Step};
use super::colouring;
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

/// 2/sqrt(3), the edge of a cell.
const EDGE: f64 = 1.154_700_538_379_251_5;

static SHAPE: Shape = Shape {
    vectors: &[&[EDGE, 0.0, 0.0], &[0.0, EDGE, 0.0], &[0.0, 0.0, EDGE]],
    basis: &[&[0.0, 0.0, 0.0], &[EDGE / 2.0, EDGE / 2.0, EDGE / 2.0]],
    steps: &[
        Step { class: "first", from: 0, to: 1, offset: &[0, 0, 0] },
        Step { class: "first", from: 0, to: 1, offset: &[0, 0, -1] },
        Step { class: "first", from: 0, to: 1, offset: &[0, -1, 0] },
        Step { class: "first", from: 0, to: 1, offset: &[0, -1, -1] },
        Step { class: "first", from: 0, to: 1, offset: &[-1, 0, 0] },
        Step { class: "first", from: 0, to: 1, offset: &[-1, 0, -1] },
        Step { class: "first", from: 0, to: 1, offset: &[-1, -1, 0] },
        Step { class: "first", from: 0, to: 1, offset: &[-1, -1, -1] },
    ],
    faces: &[],
    colourings: &[colouring::sublattice],
};

/// The body-centred cubic lattice: eight neighbours a site. It has no faces.
#[derive(Debug)]
pub(crate) struct Bcc(Brick);

impl Lattice for Bcc {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "bcc",
        about: "body-centred cubic lattice in cubic cells of two sites, eight nearest neighbours",
        formula: "corners at a (x, y, z), centres at a (x + 1/2, y + 1/2, z + 1/2), a = 2/sqrt(3); bonds first from a corner to the eight centres around it",
        parameters: &[size_parameter(SIZE_3), boundary_parameter(BOUNDARY_3)],
        dimension: 3,
        size: "size",
        sites_per_cell: 2,
        classes: &["first"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Bcc)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
