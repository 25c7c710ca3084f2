//! Colourings that several lattices share.

use super::brick::Side;

/// Two colours by the parity of the sum of coordinates; proper on hypercubic lattices whose periods are all even.
pub(crate) fn parity(cell: &[i64], _site: usize, _sides: &[Side]) -> u32 {
    (cell.iter().sum::<i64>() % 2) as u32
}

/// A colour for each site of the cell; proper where no bond joins sites of one sublattice.
pub(crate) fn sublattice(_cell: &[i64], site: usize, _sides: &[Side]) -> u32 {
    site as u32
}

/// Three colours on hypercubic lattices of any periods from two up: the sum modulo 3 of a proper colouring of each direction's ring by
/// 0, 1, (0, 1, ...) and, for an odd period, a last 2. A step in one direction changes one term of the sum, by no multiple of 3.
pub(crate) fn thirds(cell: &[i64], _site: usize, sides: &[Side]) -> u32 {
    let ring = |(x, side): (&i64, &Side)| {
        let odd = side.boundary.is_periodic() && side.cells % 2 == 1;
        if odd && *x == side.cells - 1 { 2 } else { x % 2 }
    };
    (cell.iter().zip(sides).map(ring).sum::<i64>() % 3) as u32
}

#[cfg(test)]
mod tests {
    use super::super::boundary::Boundary;
    use super::*;

    #[test]
    fn rings_of_odd_period_are_coloured_with_three() {
        for cells in 2..=9 {
            let sides = [Side { cells, boundary: Boundary::Periodic }];
            let colour = |x: i64| thirds(&[x.rem_euclid(cells)], 0, &sides);
            assert!((0..cells).all(|x| colour(x) != colour(x + 1)), "period {cells}");
        }
    }
}
