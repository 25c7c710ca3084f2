//! The chain.

use super::boundary::{BOUNDARY_1, SIZE_1, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Step};
use super::colouring;
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

static SHAPE: Shape = Shape {
    vectors: &[&[1.0]],
    basis: &[&[0.0]],
    steps: &[Step { class: "first.x", from: 0, to: 0, offset: &[1] }],
    faces: &[],
    colourings: &[colouring::parity, colouring::thirds],
};

/// The chain: two neighbours a site; a ring when periodic.
#[derive(Debug)]
pub(crate) struct Chain(Brick);

impl Lattice for Chain {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "chain",
        about: "chain, two nearest neighbours",
        formula: "sites x; bonds first.x from x to x + 1",
        parameters: &[size_parameter(SIZE_1), boundary_parameter(BOUNDARY_1)],
        dimension: 1,
        size: "size",
        classes: &["first.x"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Chain)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
