//! The diamond lattice.

use super::boundary::{BOUNDARY_3, SIZE_3, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Side, Step};
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

/// 4/sqrt(3), the edge of a cell.
const EDGE: f64 = 2.309_401_076_758_503;

static SHAPE: Shape = Shape {
    vectors: &[&[EDGE, 0.0, 0.0], &[0.0, EDGE, 0.0], &[0.0, 0.0, EDGE]],
    basis: &[
        &[0.0, 0.0, 0.0],
        &[0.0, EDGE / 2.0, EDGE / 2.0],
        &[EDGE / 2.0, 0.0, EDGE / 2.0],
        &[EDGE / 2.0, EDGE / 2.0, 0.0],
        &[EDGE / 4.0, EDGE / 4.0, EDGE / 4.0],
        &[EDGE / 4.0, 3.0 * EDGE / 4.0, 3.0 * EDGE / 4.0],
        &[3.0 * EDGE / 4.0, EDGE / 4.0, 3.0 * EDGE / 4.0],
        &[3.0 * EDGE / 4.0, 3.0 * EDGE / 4.0, EDGE / 4.0],
    ],
    steps: &[
        Step { class: "first", from: 0, to: 4, offset: &[0, 0, 0] },
        Step { class: "first", from: 0, to: 5, offset: &[0, -1, -1] },
        Step { class: "first", from: 0, to: 6, offset: &[-1, 0, -1] },
        Step { class: "first", from: 0, to: 7, offset: &[-1, -1, 0] },
        Step { class: "first", from: 1, to: 5, offset: &[0, 0, 0] },
        Step { class: "first", from: 1, to: 4, offset: &[0, 0, 0] },
        Step { class: "first", from: 1, to: 7, offset: &[-1, 0, 0] },
        Step { class: "first", from: 1, to: 6, offset: &[-1, 0, 0] },
        Step { class: "first", from: 2, to: 6, offset: &[0, 0, 0] },
        Step { class: "first", from: 2, to: 7, offset: &[0, -1, 0] },
        Step { class: "first", from: 2, to: 4, offset: &[0, 0, 0] },
        Step { class: "first", from: 2, to: 5, offset: &[0, -1, 0] },
        Step { class: "first", from: 3, to: 7, offset: &[0, 0, 0] },
        Step { class: "first", from: 3, to: 6, offset: &[0, 0, -1] },
        Step { class: "first", from: 3, to: 5, offset: &[0, 0, -1] },
        Step { class: "first", from: 3, to: 4, offset: &[0, 0, 0] },
    ],
    faces: &[],
    colourings: &[halves],
};

/// The two face-centred halves, which bonds join.
fn halves(_cell: &[i64], site: usize, _sides: &[Side]) -> u32 {
    u32::from(site > 3)
}

/// The diamond lattice: four neighbours a site. It has no faces.
#[derive(Debug)]
pub(crate) struct Diamond(Brick);

impl Lattice for Diamond {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "diamond",
        about: "diamond lattice in cubic cells of eight sites, four nearest neighbours",
        formula: "sites at a (x, y, z) + (0, 0, 0), (0, a/2, a/2), (a/2, 0, a/2), (a/2, a/2, 0), and the same shifted by (a/4, a/4, a/4), a = 4/sqrt(3); bonds first to the four sites at distance 1",
        parameters: &[size_parameter(SIZE_3), boundary_parameter(BOUNDARY_3)],
        dimension: 3,
        size: "size",
        sites_per_cell: 8,
        classes: &["first"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Diamond)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
