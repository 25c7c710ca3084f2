//! The kagome lattice.

use super::boundary::{BOUNDARY_2, SIZE_2, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Step};
use super::colouring;
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

/// sqrt(3)/2, the height of a triangle of side 1.
const HEIGHT: f64 = 0.866_025_403_784_438_6;

static SHAPE: Shape = Shape {
    vectors: &[&[2.0, 0.0], &[1.0, 2.0 * HEIGHT]],
    basis: &[&[0.0, 0.0], &[1.0, 0.0], &[0.5, HEIGHT]],
    steps: &[
        Step { class: "first.x", from: 0, to: 1, offset: &[0, 0] },
        Step { class: "first.x", from: 0, to: 1, offset: &[-1, 0] },
        Step { class: "first.y", from: 0, to: 2, offset: &[0, 0] },
        Step { class: "first.y", from: 0, to: 2, offset: &[0, -1] },
        Step { class: "first.xy", from: 1, to: 2, offset: &[0, 0] },
        Step { class: "first.xy", from: 1, to: 2, offset: &[1, -1] },
    ],
    faces: &[
        &[(&[0, 0], 0), (&[0, 0], 1), (&[0, 0], 2)],
        &[(&[0, 0], 0), (&[-1, 0], 1), (&[0, -1], 2)],
        &[(&[0, 0], 1), (&[1, 0], 0), (&[1, 0], 2), (&[0, 1], 1), (&[0, 1], 0), (&[0, 0], 2)],
    ],
    colourings: &[colouring::sublattice],
};

/// The kagome lattice: four neighbours a site; triangles and hexagons as faces.
#[derive(Debug)]
pub(crate) struct Kagome(Brick);

impl Lattice for Kagome {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "kagome",
        about: "kagome lattice in rhombic cells of three sites, four nearest neighbours",
        formula: "sites A at x a_1 + y a_2, B at A + (1, 0), C at A + (1/2, sqrt(3)/2), with a_1 = (2, 0), a_2 = (1, sqrt(3)); bonds first.x along a_1 (A to B), first.y along a_2 (A to C), first.xy along a_1 - a_2 (B to C)",
        parameters: &[size_parameter(SIZE_2), boundary_parameter(BOUNDARY_2)],
        dimension: 2,
        size: "size",
        sites_per_cell: 3,
        classes: &["first.x", "first.y", "first.xy"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Kagome)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
