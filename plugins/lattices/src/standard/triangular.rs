//! The triangular lattice.

use super::boundary::{BOUNDARY_2, SIZE_2, boundary_parameter, size_parameter};
use super::brick::{Brick, Shape, Side, Step};
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};

/// sqrt(3)/2, the height of a triangle of side 1.
const HEIGHT: f64 = 0.866_025_403_784_438_6;

// The vectors enclose 60 degrees, so that the third neighbour at distance 1 is at a_1 - a_2 and not at a_1 + a_2.
static SHAPE: Shape = Shape {
    vectors: &[&[1.0, 0.0], &[0.5, HEIGHT]],
    basis: &[&[0.0, 0.0]],
    steps: &[
        Step { class: "first.x", from: 0, to: 0, offset: &[1, 0] },
        Step { class: "first.y", from: 0, to: 0, offset: &[0, 1] },
        Step { class: "first.xy", from: 0, to: 0, offset: &[1, -1] },
    ],
    faces: &[&[(&[0, 0], 0), (&[1, 0], 0), (&[0, 1], 0)], &[(&[1, 0], 0), (&[1, 1], 0), (&[0, 1], 0)]],
    colourings: &[thirds, quarters],
};

/// The three sublattices; proper where periods are multiples of three. The bonds change x + 2 y by 1, 2 and -1.
fn thirds(cell: &[i64], _site: usize, _sides: &[Side]) -> u32 {
    ((cell[0] + 2 * cell[1]) % 3) as u32
}

/// Four colours by the parities of x and y; proper where periods are even. Every bond changes at least one parity.
fn quarters(cell: &[i64], _site: usize, _sides: &[Side]) -> u32 {
    (cell[0] % 2 + 2 * (cell[1] % 2)) as u32
}

/// The triangular lattice: six neighbours a site; triangles as faces.
#[derive(Debug)]
pub(crate) struct Triangular(Brick);

impl Lattice for Triangular {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "triangular",
        about: "triangular lattice in rhombic cells, six nearest neighbours",
        formula: "sites x a_1 + y a_2 with a_1 = (1, 0), a_2 = (1/2, sqrt(3)/2); bonds first.x from (x, y) to (x + 1, y), first.y to \
                  (x, y + 1), first.xy to (x + 1, y - 1)",
        parameters: &[size_parameter(SIZE_2), boundary_parameter(BOUNDARY_2)],
        dimension: 2,
        size: "size",
        classes: &["first.x", "first.y", "first.xy"],
        boundary: "boundary",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Brick::new(params, &SHAPE).map(Triangular)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        self.0.build(builder)
    }
}
