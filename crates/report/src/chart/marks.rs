//! Reference lines and their labels.

use super::axis::Scaled;
use super::layout::{Layout, NOTE};
use super::{Chart, MarkAxis};
use crate::drawing::{Anchor, Drawing, Lettering, Stroke};
use crate::font::{self, Weight};
use crate::ink::Ink;
use crate::path::Path;

/// Height of a row of labels above the plot.
pub(crate) const ROW: f64 = 15.0;

/// A vertical mark's label in its place.
#[derive(Debug, PartialEq)]
pub(crate) struct Placed {
    /// Which mark.
    pub(crate) index: usize,
    pub(crate) text: String,
    /// Left end.
    pub(crate) x: f64,
    /// From the top.
    pub(crate) row: usize,
    pub(crate) baseline: f64,
}

/// Places the labels of vertical marks in rows above the plot, each in the lowest row where it touches no other; returns them and
/// the number of rows. `plot` and `room` are left and right ends of the plot and of what labels may take.
pub(crate) fn place(chart: &Chart, x: &Scaled, (left, right): (f64, f64), room: (f64, f64)) -> (Vec<Placed>, usize) {
    let mut rows: Vec<Vec<(f64, f64)>> = Vec::new();
    let mut placed = Vec::new();
    for (index, mark) in chart.marks.iter().enumerate() {
        if mark.on != MarkAxis::X || mark.label.is_empty() || !x.usable(mark.value) || !x.contains(mark.value) {
            continue;
        }
        let text = font::fitted(&mark.label, NOTE, Weight::Regular, room.1 - room.0);
        let width = font::width(&text, NOTE, Weight::Regular);
        let at = left + x.share(mark.value) * (right - left);
        // A label stands over its own line or beside it, where no other mark's line or label is.
        let others = || {
            let on = chart.marks.iter().enumerate().filter(|(i, m)| *i != index && m.on == MarkAxis::X);
            on.filter(|(_, m)| x.usable(m.value)).map(|(_, m)| left + x.share(m.value) * (right - left))
        };
        let begins = [at - width / 2.0, at + 4.0, at - width - 4.0].map(|b| b.min(room.1 - width).max(room.0));
        let clear = |begin: &f64| !others().any(|line| line > begin - 3.0 && line < begin + width + 3.0);
        let free =
            |row: &[(f64, f64)], begin: f64| row.iter().all(|&(a, b)| begin > b + 8.0 || begin + width < a - 8.0);
        let found = begins
            .iter()
            .filter(|b| clear(b))
            .find_map(|&begin| rows.iter().position(|row| free(row, begin)).map(|row| (row, begin)));
        let (row, begin) = found.unwrap_or_else(|| {
            rows.push(Vec::new());
            (rows.len() - 1, begins.into_iter().find(clear).unwrap_or(begins[0]))
        });
        rows[row].push((begin, begin + width));
        placed.push(Placed { index, text, x: begin, row, baseline: 0.0 });
    }
    // The first row found stands next to the plot.
    let count = rows.len();
    for mark in &mut placed {
        mark.row = count - 1 - mark.row;
    }
    (placed, count)
}

/// The bands of all marks, which lie under everything.
pub(crate) fn draw_bands(drawing: &mut Drawing, chart: &Chart, layout: &Layout) {
    let area = &layout.area;
    for mark in chart.marks.iter().filter(|m| m.error > 0.0 && m.error.is_finite()) {
        let axis = if mark.on == MarkAxis::X { &layout.x } else { &layout.y };
        let end = |value: f64| if axis.usable(value) { axis.share(value).clamp(0.0, 1.0) } else { 0.0 };
        let (a, b) = (end(mark.value - mark.error), end(mark.value + mark.error));
        if b <= a {
            continue;
        }
        let mut path = Path::new();
        match mark.on {
            MarkAxis::X => {
                path.rectangle(area.left + a * area.width(), area.top, (b - a) * area.width(), area.height())
            }
            MarkAxis::Y => {
                path.rectangle(area.left, area.bottom - b * area.height(), area.width(), (b - a) * area.height())
            }
        };
        drawing.fill(path, Ink::Mark, 0.16);
    }
}

/// The lines of all marks.
pub(crate) fn draw_lines(drawing: &mut Drawing, chart: &Chart, layout: &Layout) {
    let area = &layout.area;
    for (index, mark) in chart.marks.iter().enumerate() {
        let axis = if mark.on == MarkAxis::X { &layout.x } else { &layout.y };
        if !axis.usable(mark.value) || !axis.contains(mark.value) {
            continue;
        }
        let path = match mark.on {
            MarkAxis::X => {
                // Up to its label, if the label stands in a row further up.
                let label = layout.marks.iter().find(|p| p.index == index);
                let top = label.map_or(area.top, |p| p.baseline + 4.0);
                let x = layout.place_x(mark.value);
                Path::segment(x, top, x, area.bottom)
            }
            MarkAxis::Y => {
                let y = layout.place_y(mark.value);
                Path::segment(area.left, y, area.right, y)
            }
        };
        drawing.stroke(path, Stroke { ink: Ink::Mark, width: 1.1, dashes: &[5.0, 2.0, 1.0, 2.0], round: false });
    }
}

/// The labels of all marks, over everything else.
pub(crate) fn draw_labels(drawing: &mut Drawing, chart: &Chart, layout: &Layout) {
    let look = Lettering { size: NOTE, weight: Weight::Regular, ink: Ink::Mark, halo: true };
    for mark in &layout.marks {
        drawing.text(&mark.text, (mark.x, mark.baseline), Anchor::Begin, look);
    }
    let area = &layout.area;
    for mark in chart.marks.iter().filter(|m| m.on == MarkAxis::Y) {
        if layout.y.usable(mark.value) && layout.y.contains(mark.value) {
            let y = layout.place_y(mark.value);
            let text = font::fitted(&mark.label, NOTE, Weight::Regular, area.width() - 8.0);
            // Above the line, or below where there is no room.
            let baseline = if y - NOTE - 6.0 < area.top { y + NOTE + 3.0 } else { y - 5.0 };
            drawing.text(&text, (area.left + 6.0, baseline), Anchor::Begin, look);
        }
    }
}
