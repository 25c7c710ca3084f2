//! The honeycomb lattice.

use super::boundary::{BOUNDARY_2, SIZE_2, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Step};
use super::colouring;
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

/// sqrt(3), the distance of equal sites.
const ROOT: f64 = 1.732_050_807_568_877_2;

static SHAPE: Shape = Shape {
    vectors: &[&[ROOT, 0.0], &[ROOT / 2.0, 1.5]],
    basis: &[&[0.0, 0.0], &[ROOT / 2.0, 0.5]],
    steps: &[
        Step { class: "first.x", from: 0, to: 1, offset: &[0, 0] },
        Step { class: "first.y", from: 0, to: 1, offset: &[-1, 0] },
        Step { class: "first.z", from: 0, to: 1, offset: &[0, -1] },
    ],
    faces: &[&[(&[0, 1], 0), (&[0, 0], 1), (&[1, 0], 0), (&[1, 0], 1), (&[1, 1], 0), (&[0, 1], 1)]],
    colourings: &[colouring::sublattice],
};

/// The honeycomb lattice: three neighbours a site; hexagons as faces.
#[derive(Debug)]
pub(crate) struct Honeycomb(Brick);

impl Lattice for Honeycomb {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "honeycomb",
        about: "honeycomb lattice in rhombic cells of two sites, three nearest neighbours",
        formula: "sites A at x a_1 + y a_2, B at A + (sqrt(3)/2, 1/2), with a_1 = (sqrt(3), 0), a_2 = (sqrt(3)/2, 3/2); bonds from A of cell (x, y) to B: first.x of (x, y), first.y of (x - 1, y), first.z of (x, y - 1)",
        parameters: &[size_parameter(SIZE_2), boundary_parameter(BOUNDARY_2)],
        dimension: 2,
        size: "size",
        sites_per_cell: 2,
        classes: &["first.x", "first.y", "first.z"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Honeycomb)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
