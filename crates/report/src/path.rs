//! Paths in hundredths of a unit: what is written as SVG and what is painted have the same coordinates.

use std::fmt::Write as _;

/// A point in hundredths of a drawing unit, so that text and pixels agree and rounding happens once.
pub(crate) type Spot = (i32, i32);

/// The hundredths of a coordinate. Far away is as good as further away: painting clips.
pub(crate) fn hundredths(x: f64) -> i32 {
    (x * 100.0).round().clamp(-1e8, 1e8) as i32
}

/// One stroke of the pen.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Pen {
    Move(Spot),
    Line(Spot),
    Quad(Spot, Spot),
    Cubic(Spot, Spot, Spot),
    Close,
}

/// A path.
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) struct Path {
    pub(crate) pens: Vec<Pen>,
}

fn spot(x: f64, y: f64) -> Spot {
    (hundredths(x), hundredths(y))
}

impl Path {
    pub(crate) fn new() -> Self {
        Self::default()
    }

    pub(crate) fn is_empty(&self) -> bool {
        self.pens.is_empty()
    }

    pub(crate) fn to(&mut self, x: f64, y: f64) -> &mut Self {
        self.pens.push(Pen::Move(spot(x, y)));
        self
    }

    pub(crate) fn line(&mut self, x: f64, y: f64) -> &mut Self {
        self.pens.push(Pen::Line(spot(x, y)));
        self
    }

    pub(crate) fn quad(&mut self, a: (f64, f64), b: (f64, f64)) {
        self.pens.push(Pen::Quad(spot(a.0, a.1), spot(b.0, b.1)));
    }

    pub(crate) fn cubic(&mut self, a: (f64, f64), b: (f64, f64), c: (f64, f64)) {
        self.pens.push(Pen::Cubic(spot(a.0, a.1), spot(b.0, b.1), spot(c.0, c.1)));
    }

    pub(crate) fn close(&mut self) -> &mut Self {
        self.pens.push(Pen::Close);
        self
    }

    /// A straight line.
    pub(crate) fn segment(x0: f64, y0: f64, x1: f64, y1: f64) -> Self {
        let mut path = Path::new();
        path.to(x0, y0).line(x1, y1);
        path
    }

    /// Adds a rectangle.
    pub(crate) fn rectangle(&mut self, x: f64, y: f64, width: f64, height: f64) -> &mut Self {
        self.to(x, y).line(x + width, y).line(x + width, y + height).line(x, y + height).close()
    }

    /// Adds a circle, as four cubics.
    pub(crate) fn circle(&mut self, x: f64, y: f64, r: f64) {
        // The usual constant: off by at most 0.03 % of the radius.
        let k = 0.552_284_75 * r;
        self.to(x + r, y);
        self.cubic((x + r, y + k), (x + k, y + r), (x, y + r));
        self.cubic((x - k, y + r), (x - r, y + k), (x - r, y));
        self.cubic((x - r, y - k), (x - k, y - r), (x, y - r));
        self.cubic((x + k, y - r), (x + r, y - k), (x + r, y));
        self.close();
    }

    /// Adds a closed polygon.
    pub(crate) fn polygon(&mut self, corners: &[(f64, f64)]) {
        for (i, &(x, y)) in corners.iter().enumerate() {
            if i == 0 {
                self.to(x, y)
            } else {
                self.line(x, y)
            };
        }
        self.close();
    }

    /// The `d` attribute: relative commands, no number longer than it must be.
    pub(crate) fn data(&self) -> String {
        let mut out = String::with_capacity(self.pens.len() * 8);
        let (mut at, mut begin) = ((0, 0), (0, 0));
        let mut last = ' ';
        for pen in &self.pens {
            match *pen {
                Pen::Move(p) => {
                    command(&mut out, &mut last, 'm', &[p], at);
                    (at, begin) = (p, p);
                    // What follows `m` without a letter would be `l`.
                    last = 'l';
                }
                Pen::Line(p) if p.1 == at.1 => {
                    letter(&mut out, &mut last, 'h');
                    number(&mut out, p.0 - at.0);
                    at = p;
                }
                Pen::Line(p) if p.0 == at.0 => {
                    letter(&mut out, &mut last, 'v');
                    number(&mut out, p.1 - at.1);
                    at = p;
                }
                Pen::Line(p) => {
                    command(&mut out, &mut last, 'l', &[p], at);
                    at = p;
                }
                Pen::Quad(a, p) => {
                    command(&mut out, &mut last, 'q', &[a, p], at);
                    at = p;
                }
                Pen::Cubic(a, b, p) => {
                    command(&mut out, &mut last, 'c', &[a, b, p], at);
                    at = p;
                }
                Pen::Close => {
                    out.push('z');
                    last = 'z';
                    at = begin;
                }
            }
        }
        out
    }
}

fn command(out: &mut String, last: &mut char, name: char, spots: &[Spot], at: Spot) {
    if name == 'm' {
        out.push('m');
    } else {
        letter(out, last, name);
    }
    for p in spots {
        number(out, p.0 - at.0);
        number(out, p.1 - at.1);
    }
}

fn letter(out: &mut String, last: &mut char, name: char) {
    if *last != name {
        out.push(name);
        *last = name;
    }
}

/// Writes hundredths as a decimal, with a space before it where it would run into the number before.
pub(crate) fn number(out: &mut String, hundredths: i32) {
    let after_digit = out.as_bytes().last().is_some_and(u8::is_ascii_digit);
    if hundredths < 0 {
        out.push('-');
    } else if after_digit {
        out.push(' ');
    }
    let size = hundredths.unsigned_abs();
    let (whole, part) = (size / 100, size % 100);
    let _ = match (whole, part) {
        (_, 0) => write!(out, "{whole}"),
        (0, _) if part % 10 == 0 => write!(out, ".{}", part / 10),
        (0, _) => write!(out, ".{part:02}"),
        (_, _) if part % 10 == 0 => write!(out, "{whole}.{}", part / 10),
        (_, _) => write!(out, "{whole}.{part:02}"),
    };
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn paths_are_short_texts() {
        let mut path = Path::new();
        path.rectangle(1.0, 2.5, 3.0, -0.25);
        path.to(0.0, 0.0).line(1.0, 1.0).line(2.0, 3.0);
        assert_eq!(path.data(), "m1 2.5h3v-.25h-3zm-1-2.5 1 1 1 2");
    }

    #[test]
    fn endless_coordinates_stay_numbers() {
        assert_eq!(hundredths(f64::INFINITY), 100_000_000);
        assert_eq!(hundredths(f64::NAN), 0);
    }
}
