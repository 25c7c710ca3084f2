//! The simple cubic lattice.

use super::boundary::{BOUNDARY_3, SIZE_3, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Step};
use super::colouring;
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

static SHAPE: Shape = Shape {
    vectors: &[&[1.0, 0.0, 0.0], &[0.0, 1.0, 0.0], &[0.0, 0.0, 1.0]],
    basis: &[&[0.0, 0.0, 0.0]],
    steps: &[
        Step { class: "first.x", from: 0, to: 0, offset: &[1, 0, 0] },
        Step { class: "first.y", from: 0, to: 0, offset: &[0, 1, 0] },
        Step { class: "first.z", from: 0, to: 0, offset: &[0, 0, 1] },
    ],
    faces: &[
        &[(&[0, 0, 0], 0), (&[1, 0, 0], 0), (&[1, 1, 0], 0), (&[0, 1, 0], 0)],
        &[(&[0, 0, 0], 0), (&[0, 1, 0], 0), (&[0, 1, 1], 0), (&[0, 0, 1], 0)],
        &[(&[0, 0, 0], 0), (&[0, 0, 1], 0), (&[1, 0, 1], 0), (&[1, 0, 0], 0)],
    ],
    colourings: &[colouring::parity, colouring::thirds],
};

/// The simple cubic lattice: six neighbours a site; plaquettes of all three orientations as faces.
#[derive(Debug)]
pub(crate) struct Cubic(Brick);

impl Lattice for Cubic {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "cubic",
        about: "simple cubic lattice, six nearest neighbours",
        formula: "sites (x, y, z); bonds first.x, first.y, first.z to the next site in each direction",
        parameters: &[size_parameter(SIZE_3), boundary_parameter(BOUNDARY_3)],
        dimension: 3,
        size: "size",
        classes: &["first.x", "first.y", "first.z"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Cubic)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
