//! The square lattice.

use super::boundary::{BOUNDARY_2, SIZE_2, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Step};
use super::colouring;
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

static SHAPE: Shape = Shape {
    vectors: &[&[1.0, 0.0], &[0.0, 1.0]],
    basis: &[&[0.0, 0.0]],
    steps: &[
        Step { class: "first.x", from: 0, to: 0, offset: &[1, 0] },
        Step { class: "first.y", from: 0, to: 0, offset: &[0, 1] },
    ],
    faces: &[&[(&[0, 0], 0), (&[1, 0], 0), (&[1, 1], 0), (&[0, 1], 0)]],
    colourings: &[colouring::parity, colouring::thirds],
};

/// The square lattice: four neighbours a site; plaquettes as faces.
#[derive(Debug)]
pub(crate) struct Square(Brick);

impl Lattice for Square {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "square",
        about: "square lattice, four nearest neighbours",
        formula: "sites (x, y); bonds first.x from (x, y) to (x + 1, y), first.y to (x, y + 1)",
        parameters: &[size_parameter(SIZE_2), boundary_parameter(BOUNDARY_2)],
        dimension: 2,
        size: "size",
        classes: &["first.x", "first.y"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Square)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
