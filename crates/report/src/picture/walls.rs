//! Walls in a grid: sides of cells between unequal states, joined to long lines.
//!
//! Where four walls meet at a corner between two states, diagonal sites of the lower state (the minus sites) stay separate: the
//! walls turn around each of them, drawn with a cut corner.

use std::collections::BTreeMap;

/// Length of a cut at a corner, as a share of a cell.
pub(super) const CUT: f64 = 0.3;

/// Walls in units of cells, from the upper left corner of the grid.
#[derive(Debug, Default, PartialEq)]
pub(super) struct Found {
    /// Straight lines: x0, y0, x1, y1.
    pub(super) lines: Vec<[f64; 4]>,
    /// Corners where four walls meet between two states, by the state that joins there.
    pub(super) necks: BTreeMap<u16, Vec<(usize, usize)>>,
}

/// The walls inside a grid. The rim has none: what is beyond it is not known here.
pub(super) fn around(columns: usize, rows: usize, state: &dyn Fn(usize, usize) -> Option<u16>) -> Found {
    let mut found = Found::default();
    let differ = |a: Option<u16>, b: Option<u16>| a.is_some() && b.is_some() && a != b;
    // The lower state, if diagonal sites of it touch at this corner and the two others are equal too.
    let lower = |x: usize, y: usize| -> Option<(u16, u16)> {
        if x == 0 || y == 0 || x >= columns || y >= rows {
            return None;
        }
        let (nw, ne) = (state(x - 1, y - 1)?, state(x, y - 1)?);
        let (sw, se) = (state(x - 1, y)?, state(x, y)?);
        (nw == se && ne == sw && nw != ne).then(|| (nw.min(ne), nw.max(ne)))
    };
    for y in 1..rows {
        for x in 1..columns {
            if let Some((minus, plus)) = lower(x, y) {
                found.necks.entry(plus).or_default().push((x, y));
                let (x, y) = (x as f64, y as f64);
                let falling = state(x as usize, y as usize) == Some(minus);
                // Minus sites to the upper left and lower right, or the other way round.
                let side = if falling { CUT } else { -CUT };
                found.lines.push([x - side, y, x, y - CUT]);
                found.lines.push([x + side, y, x, y + CUT]);
            }
        }
    }
    // Along one direction, then along the other.
    let mut runs = |outer: usize,
                    inner: usize,
                    wall: &dyn Fn(usize, usize) -> bool,
                    corner: &dyn Fn(usize, usize) -> bool,
                    upright: bool| {
        for across in 1..outer {
            let mut at = 0;
            while at < inner {
                if !wall(across, at) {
                    at += 1;
                    continue;
                }
                let begin = at;
                at += 1;
                while at < inner && wall(across, at) && !corner(across, at) {
                    at += 1;
                }
                let from = begin as f64 + if corner(across, begin) { CUT } else { 0.0 };
                let to = at as f64 - if corner(across, at) { CUT } else { 0.0 };
                let across = across as f64;
                found.lines.push(if upright { [across, from, across, to] } else { [from, across, to, across] });
            }
        }
    };
    runs(columns, rows, &|x, y| differ(state(x - 1, y), state(x, y)), &|x, y| lower(x, y).is_some(), true);
    runs(rows, columns, &|y, x| differ(state(x, y - 1), state(x, y)), &|y, x| lower(x, y).is_some(), false);
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    fn walls(columns: usize, states: &[u16]) -> Found {
        around(columns, states.len() / columns, &|x, y| states.get(y * columns + x).copied())
    }

    #[test]
    fn straight_walls_are_one_line() {
        let found = walls(3, &[1, 1, 1, 0, 0, 0, 0, 0, 0]);
        assert_eq!(found.lines, [[0.0, 1.0, 3.0, 1.0]]);
    }

    #[test]
    fn minus_sites_that_touch_at_a_corner_stay_separate() {
        for (states, falling) in [([0, 1, 1, 0], true), ([1, 0, 0, 1], false)] {
            let found = walls(2, &states);
            assert_eq!(found.necks[&1], [(1, 1)], "plus sites join");
            assert_eq!(found.lines.len(), 6, "two cuts and four shortened sides");
            // Each cut runs through the corner of a minus cell.
            for [x0, y0, x1, y1] in &found.lines[..2] {
                let (mx, my) = ((x0 + x1) / 2.0, (y0 + y1) / 2.0);
                assert_eq!((mx < 1.0) == (my < 1.0), falling, "{mx} {my}");
            }
        }
    }

    #[test]
    fn three_states_meet_plainly() {
        let found = walls(2, &[0, 1, 2, 0]);
        assert!(found.necks.is_empty());
        assert_eq!(found.lines.len(), 2);
    }

    /// Lengths of walls add up to the number of unequal neighbours.
    #[test]
    fn every_unequal_pair_has_its_wall() {
        let mut state = 12345u32;
        let states: Vec<u16> = (0..400)
            .map(|_| {
                state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
                (state >> 30) as u16
            })
            .collect();
        let found = walls(20, &states);
        let pairs = (0..400).filter(|i| i % 20 < 19 && states[*i] != states[i + 1]).count()
            + (0..380).filter(|i| states[*i] != states[i + 20]).count();
        let necks: usize = found.necks.values().map(Vec::len).sum();
        let straight: f64 =
            found.lines.iter().filter(|l| l[0] == l[2] || l[1] == l[3]).map(|l| l[2] - l[0] + l[3] - l[1]).sum();
        assert!((straight + 4.0 * CUT * necks as f64 - pairs as f64).abs() < 1e-9);
    }
}
