//! Marker shapes, dash patterns, and clipping to the plot.

use crate::path::Path;

/// A rectangle: left, top, right, bottom.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Area {
    pub(crate) left: f64,
    pub(crate) top: f64,
    pub(crate) right: f64,
    pub(crate) bottom: f64,
}

impl Area {
    pub(crate) fn width(&self) -> f64 {
        self.right - self.left
    }

    pub(crate) fn height(&self) -> f64 {
        self.bottom - self.top
    }
}

/// Dash patterns by place.
const DASHES: [&[f64]; 8] = [
    &[],
    &[7.0, 3.0],
    &[2.0, 2.5],
    &[9.0, 3.0, 2.0, 3.0],
    &[14.0, 3.5],
    &[4.0, 2.0],
    &[7.0, 2.5, 1.5, 2.5, 1.5, 2.5],
    &[1.2, 3.2],
];

/// The dash pattern of a line. From the ninth line on, colours come again with other dashes.
pub(crate) fn dashes(place: usize) -> &'static [f64] {
    DASHES[(place + place / 8 * 3) % 8]
}

/// A marker around a point, and whether it is filled with its colour (otherwise with the paper's).
pub(crate) fn marker(path: &mut Path, place: usize, x: f64, y: f64, r: f64) -> bool {
    // Shapes of one area look equally large.
    match place % 4 {
        0 => path.circle(x, y, r),
        1 => {
            let a = r * 0.886;
            path.rectangle(x - a, y - a, 2.0 * a, 2.0 * a);
        }
        2 => {
            let a = r * 1.3;
            let up = if place % 8 < 4 { 1.0 } else { -1.0 };
            path.polygon(&[(x, y - up * a), (x + a * 0.9, y + up * a * 0.62), (x - a * 0.9, y + up * a * 0.62)]);
        }
        _ => {
            let a = r * 1.25;
            path.polygon(&[(x, y - a), (x + a, y), (x, y + a), (x - a, y)]);
        }
    }
    // Circle filled, square open, triangle filled, diamond open; then the other way round.
    place.is_multiple_of(2) == (place % 8 < 4)
}

/// The part of a segment inside an area (Liang and Barsky 1984).
pub(crate) fn clipped(area: &Area, a: (f64, f64), b: (f64, f64)) -> Option<((f64, f64), (f64, f64))> {
    let (dx, dy) = (b.0 - a.0, b.1 - a.1);
    let (mut from, mut to) = (0.0_f64, 1.0_f64);
    for (p, q) in [(-dx, a.0 - area.left), (dx, area.right - a.0), (-dy, a.1 - area.top), (dy, area.bottom - a.1)] {
        if p == 0.0 {
            if q < 0.0 {
                return None;
            }
        } else if p < 0.0 {
            from = from.max(q / p);
        } else {
            to = to.min(q / p);
        }
    }
    let at = |t: f64| {
        if t == 0.0 {
            a
        } else if t == 1.0 {
            b
        } else {
            (a.0 + t * dx, a.1 + t * dy)
        }
    };
    (from <= to).then(|| (at(from), at(to)))
}

/// A line through points, cut off at the rim of an area.
pub(crate) fn polyline(area: &Area, points: &[(f64, f64)]) -> Path {
    let mut path = Path::new();
    let mut at = None;
    for pair in points.windows(2) {
        match clipped(area, pair[0], pair[1]) {
            Some((a, b)) => {
                if at != Some(a) {
                    path.to(a.0, a.1);
                }
                path.line(b.0, b.1);
                at = Some(b);
            }
            None => at = None,
        }
    }
    path
}

/// A polygon, cut off at the rim of an area (Sutherland and Hodgman 1974).
pub(crate) fn polygon(area: &Area, corners: Vec<(f64, f64)>) -> Path {
    let sides: [&dyn Fn((f64, f64)) -> f64; 4] =
        [&|p| p.0 - area.left, &|p| area.right - p.0, &|p| p.1 - area.top, &|p| area.bottom - p.1];
    let kept = sides.iter().fold(corners, |corners, inside| {
        let mut kept = Vec::with_capacity(corners.len() + 2);
        for (i, &b) in corners.iter().enumerate() {
            let a = corners[(i + corners.len() - 1) % corners.len()];
            let (da, db) = (inside(a), inside(b));
            if (da >= 0.0) != (db >= 0.0) {
                let t = da / (da - db);
                kept.push((a.0 + t * (b.0 - a.0), a.1 + t * (b.1 - a.1)));
            }
            if db >= 0.0 {
                kept.push(b);
            }
        }
        kept
    });
    let mut path = Path::new();
    if kept.len() > 2 {
        path.polygon(&kept);
    }
    path
}

#[cfg(test)]
mod tests {
    use super::*;

    const AREA: Area = Area { left: 0.0, top: 0.0, right: 10.0, bottom: 10.0 };

    #[test]
    fn lines_end_at_the_rim() {
        assert_eq!(polyline(&AREA, &[(-5.0, 5.0), (5.0, 5.0), (5.0, 15.0), (7.0, 15.0)]).data(), "m0 5h5v5");
        assert!(polyline(&AREA, &[(-5.0, -5.0), (-1.0, 20.0)]).is_empty());
        let far = polyline(&AREA, &[(-1e12, 5.0), (1e12, 5.0)]);
        assert_eq!(far.data(), "m0 5h10");
    }

    #[test]
    fn areas_end_at_the_rim() {
        let path = polygon(&AREA, vec![(-5.0, 2.0), (5.0, 2.0), (5.0, 4.0), (-5.0, 4.0)]);
        assert_eq!(path.data(), "m0 2h5v2h-5z");
        assert!(polygon(&AREA, vec![(20.0, 0.0), (30.0, 0.0), (30.0, 5.0)]).is_empty());
    }

    /// Sixteen lines: no two share colour and dash, and the first eight no marker.
    #[test]
    fn lines_differ_without_colour() {
        let look = |i: usize| {
            let mut path = Path::new();
            let filled = marker(&mut path, i, 0.0, 0.0, 3.0);
            (path.data(), filled)
        };
        for i in 0..8 {
            for j in 0..i {
                assert_ne!(look(i), look(j), "markers {i} and {j}");
                assert_ne!(dashes(i), dashes(j), "dashes {i} and {j}");
            }
            assert_ne!(dashes(i), dashes(i + 8));
        }
    }
}
