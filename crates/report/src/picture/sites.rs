//! Sites anywhere in the plane.

use super::{Picture, Walls};
use crate::drawing::{Drawing, Stroke};
use crate::ink::Ink;
use crate::path::Path;
use std::collections::BTreeMap;

pub(super) fn draw(picture: &Picture, positions: &[[f64; 2]], walls: &Walls, side: f64) -> Drawing {
    let count = positions.len().min(picture.states.len());
    let placed = || positions[..count].iter().filter(|p| p.iter().all(|x| x.is_finite()));
    let extent = |axis: usize| {
        placed().map(|p| p[axis]).fold((f64::INFINITY, f64::NEG_INFINITY), |(a, b), x| (a.min(x), b.max(x)))
    };
    let ((x0, x1), (y0, y1)) = match (extent(0), extent(1)) {
        (x, y) if x.0 <= x.1 && y.0 <= y.1 => (x, y),
        _ => ((0.0, 0.0), (0.0, 0.0)),
    };
    // Half a distance of room around the outermost sites.
    let unit = side / (x1 - x0 + 1.0).max(y1 - y0 + 1.0);
    let (mut drawing, left, top) = picture.frame(unit * (x1 - x0 + 1.0), unit * (y1 - y0 + 1.0), count);
    let place = |[x, y]: [f64; 2]| (left + unit * (x - x0 + 0.5), top + unit * (y1 - y + 0.5));

    // A dot is a line of no length with round ends: a few bytes each.
    let mut paths: BTreeMap<u16, Path> = BTreeMap::new();
    for (position, &state) in positions.iter().zip(&picture.states).filter(|(p, _)| p.iter().all(|x| x.is_finite())) {
        let (x, y) = place(*position);
        paths.entry(state).or_default().to(x, y).line(x + 0.01, y);
    }
    for (state, path) in paths {
        // A thin rim, so that a light state is seen on light paper.
        drawing.stroke(path.clone(), Stroke { ink: Ink::Soft, width: unit * 0.82, dashes: &[], round: true });
        drawing.stroke(path, Stroke { ink: picture.ink(state), width: unit * 0.74, dashes: &[], round: true });
    }
    let mut path = Path::new();
    match walls {
        Walls::Segments(segments) => {
            for [ax, ay, bx, by] in segments.iter().filter(|s| s.iter().all(|x| x.is_finite())) {
                let (a, b) = (place([*ax, *ay]), place([*bx, *by]));
                path.to(a.0, a.1).line(b.0, b.1);
            }
        }
        Walls::Pairs { pairs, length } => {
            for &[i, j] in pairs {
                let site = |i: u32| {
                    let i = i as usize;
                    (i < count)
                        .then(|| (positions[i], picture.states[i]))
                        .filter(|(p, _)| p.iter().all(|x| x.is_finite()))
                };
                let (Some((a, s)), Some((b, t))) = (site(i), site(j)) else { continue };
                if s != t {
                    let (mx, my) = ((a[0] + b[0]) / 2.0, (a[1] + b[1]) / 2.0);
                    let (nx, ny) = ((a[1] - b[1]) * length / 2.0, (b[0] - a[0]) * length / 2.0);
                    let (p, q) = (place([mx - nx, my - ny]), place([mx + nx, my + ny]));
                    path.to(p.0, p.1).line(q.0, q.1);
                }
            }
        }
    }
    drawing.stroke(path, Stroke { ink: Ink::Wall, width: (unit * 0.14).clamp(0.6, 2.4), dashes: &[], round: true });
    drawing
}
