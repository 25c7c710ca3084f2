//! A rectangle of cells: equal neighbours become one rectangle.

use super::{Picture, Shades, Sites, walls};
use crate::drawing::{Drawing, Stroke};
use crate::ink::Ink;
use crate::path::Path;
use std::collections::BTreeMap;

/// Many walls between cells smaller than this many units hide what they bound.
const SMALL: f64 = 4.0;
const MANY: usize = 20_000;

pub(super) fn draw(picture: &Picture, columns: usize, rows: usize, side: f64, with_walls: bool) -> Drawing {
    // A picture of nothing is still a picture.
    let (columns, rows) = if columns == 0 || rows == 0 { (0, 0) } else { (columns, rows) };
    let longer = columns.max(rows).max(1) as f64;
    let cell = if side >= longer { (side / longer).floor() } else { side / longer };
    let (width, height) = (cell * columns as f64, cell * rows as f64);
    // A strip shows each of its sites several times.
    let sites = if matches!(picture.sites, Sites::Strip { .. }) { columns } else { columns * rows };
    let (mut drawing, left, top) = picture.frame(width, height, sites);
    let (left, top) = (left.round(), top.round());
    let state = |column: usize, row: usize| picture.states.get(row * columns + column).copied();

    // The commonest state is the ground, so that only the others need rectangles. It needs every cell to have a state.
    let whole = picture.states.len() >= columns * rows;
    let counts = picture.counts(columns * rows);
    let ground = counts.iter().max_by_key(|(state, n)| (*n, u16::MAX - state)).map(|c| c.0).filter(|_| whole);
    if let Some(state) = ground {
        let mut path = Path::new();
        path.rectangle(left, top, width, height);
        drawing.fill(path, picture.ink(state), 1.0);
    }
    let mut paths: BTreeMap<u16, Path> = BTreeMap::new();
    // Greedy: the longest run along the row, then down as far as whole runs have the state.
    let mut done = vec![false; columns * rows];
    for row in 0..rows {
        let mut column = 0;
        while column < columns {
            let here = state(column, row);
            let open = |c: usize, r: usize, done: &[bool]| state(c, r) == here && !done[r * columns + c];
            let Some(value) = here.filter(|s| Some(*s) != ground && !done[row * columns + column]) else {
                column += 1;
                continue;
            };
            let right = (column..columns).find(|&c| !open(c, row, &done)).unwrap_or(columns);
            let bottom = (row + 1..rows).find(|&r| (column..right).any(|c| !open(c, r, &done))).unwrap_or(rows);
            for r in row..bottom {
                done[r * columns + column..r * columns + right].fill(true);
            }
            paths.entry(value).or_default().rectangle(
                left + cell * column as f64,
                top + cell * row as f64,
                cell * (right - column) as f64,
                cell * (bottom - row) as f64,
            );
            column = right;
        }
    }
    for (value, path) in paths {
        drawing.fill(path, picture.ink(value), 1.0);
    }
    if !with_walls || matches!(picture.shades, Shades::Ring(_)) {
        return drawing;
    }
    let found = walls::around(columns, rows, &state);
    if cell < SMALL && found.lines.len() > MANY {
        return drawing;
    }
    // Where minus sites touch at a corner only, the wall passes between them: their corners are given to the other state.
    for (value, corners) in found.necks {
        let mut path = Path::new();
        for (x, y) in corners {
            let (x, y, c) = (left + cell * x as f64, top + cell * y as f64, cell * walls::CUT);
            path.polygon(&[(x - c, y), (x, y - c), (x + c, y), (x, y + c)]);
        }
        drawing.fill(path, picture.ink(value), 1.0);
    }
    let mut path = Path::new();
    for [x0, y0, x1, y1] in found.lines {
        path.to(left + cell * x0, top + cell * y0).line(left + cell * x1, top + cell * y1);
    }
    let stroke = Stroke { ink: Ink::Wall, width: (cell * 0.18).clamp(0.6, 2.2), dashes: &[], round: true };
    drawing.stroke(path, stroke);
    drawing
}
