//! Which line is which: labels at the ends of lines where they fit, otherwise rows above the plot.

use super::axis::Scaled;
use super::draw::Look;
use super::layout::LABEL;
use super::strokes::{Area, clipped};
use super::{Chart, Line, Style};
use crate::drawing::{Anchor, Drawing, Lettering, Stroke};
use crate::font::{self, Weight};
use crate::ink::Ink;
use crate::path::Path;

/// Height of a row.
pub(crate) const ROW: f64 = 18.0;
/// Width of a sample of line or marker, with the room after it.
const SAMPLE: f64 = 24.0;
/// Room between the plot and the labels, for the threads that join them.
const THREAD: f64 = 22.0;
/// Least distance of labels one above the other.
const PITCH: f64 = 16.0;

/// Where lines are named.
#[derive(Debug, PartialEq)]
pub(crate) enum Key {
    Beside(Vec<Slot>),
    Above { rows: Vec<Vec<(usize, f64, String)>>, top: f64 },
}

/// A label beside the plot.
#[derive(Debug, PartialEq)]
pub(crate) struct Slot {
    pub(crate) index: usize,
    /// The end of its line, in drawing units.
    pub(crate) end: (f64, f64),
    /// The height of the label's middle.
    pub(crate) y: f64,
}

/// Where a line ends, as shares of the plot: its last visible point (largest x), or where it leaves the plot.
fn end(line: &Line, x: &Scaled, y: &Scaled) -> Option<(f64, f64)> {
    const PLOT: Area = Area { left: 0.0, top: 0.0, right: 1.0, bottom: 1.0 };
    let spots: Vec<(f64, f64)> =
        line.points.iter().filter(|p| x.usable(p.x) && y.usable(p.y)).map(|p| (x.share(p.x), y.share(p.y))).collect();
    let own = spots.iter().filter_map(|&p| clipped(&PLOT, p, p));
    let between = spots.windows(2).filter(|_| line.style != Style::Points).filter_map(|w| clipped(&PLOT, w[0], w[1]));
    own.chain(between)
        .flat_map(|(a, b)| [a, b])
        .fold(None, |best: Option<(f64, f64)>, p| if best.is_some_and(|b| b.0 >= p.0) { best } else { Some(p) })
}

/// Where the lines of one label end: the rightmost of their ends.
fn common_end(chart: &Chart, index: usize, x: &Scaled, y: &Scaled) -> Option<(f64, f64)> {
    let label = &chart.lines[index].label;
    let ends = chart.lines.iter().filter(|line| line.label == *label).filter_map(|line| end(line, x, y));
    ends.fold(None, |best: Option<(f64, f64)>, p| if best.is_some_and(|b| b.0 >= p.0) { best } else { Some(p) })
}

/// Room for labels beside the plot, or None where they do not fit and go above.
pub(crate) fn gutter(chart: &Chart, x: &Scaled, y: &Scaled, width: f64) -> Option<f64> {
    let named: Vec<usize> = chart.named().into_iter().filter(|index| !chart.lines[*index].label.is_empty()).collect();
    let widest = |width: f64, index: &usize| width.max(font::width(&chart.lines[*index].label, LABEL, Weight::Regular));
    let widest = named.iter().fold(0.0, widest);
    let room = THREAD + SAMPLE + widest;
    let near = named.iter().all(|index| common_end(chart, *index, x, y).is_some_and(|e| e.0 > 0.7));
    (!named.is_empty() && named.len() <= 10 && near && room <= 0.23 * width).then_some(room)
}

/// Labels beside the plot, each as near to the end of its line as the others allow.
pub(crate) fn slots(chart: &Chart, x: &Scaled, y: &Scaled, area: &Area) -> Vec<Slot> {
    let mut slots: Vec<Slot> = chart
        .named()
        .into_iter()
        .map(|index| (index, &chart.lines[index]))
        .filter(|(_, l)| !l.label.is_empty())
        .filter_map(|(index, _)| {
            let (a, b) = common_end(chart, index, x, y)?;
            let end = (area.left + a * area.width(), area.bottom - b * area.height());
            Some(Slot { index, end, y: end.1 })
        })
        .collect();
    slots.sort_by(|a, b| a.y.total_cmp(&b.y).then(a.index.cmp(&b.index)));
    let wanted: Vec<f64> = slots.iter().map(|s| s.y).collect();
    for (slot, y) in slots.iter_mut().zip(spread(&wanted, PITCH, area.top + 4.0, area.bottom - 4.0)) {
        slot.y = y;
    }
    slots
}

/// Moves sorted heights apart to at least `pitch`, as little as possible in squares (pooling neighbours that violate), then into the room.
fn spread(wanted: &[f64], pitch: f64, top: f64, bottom: f64) -> Vec<f64> {
    // With i times the pitch taken off, the heights need only not decrease: isotonic regression.
    let mut pools: Vec<(f64, usize)> = Vec::new();
    for (i, &y) in wanted.iter().enumerate() {
        pools.push((y - i as f64 * pitch, 1));
        while let [.., (a, n), (b, m)] = pools[..]
            && a > b
        {
            pools.truncate(pools.len() - 2);
            pools.push(((a * n as f64 + b * m as f64) / (n + m) as f64, n + m));
        }
    }
    let bottom = bottom - (wanted.len().saturating_sub(1)) as f64 * pitch;
    let flat = pools.iter().flat_map(|&(y, n)| std::iter::repeat_n(y.min(bottom).max(top), n));
    flat.enumerate().map(|(i, y)| y + i as f64 * pitch).collect()
}

/// Rows of samples and labels above the plot: index of the line, where it begins, its text.
pub(crate) fn rows(chart: &Chart, width: f64) -> Vec<Vec<(usize, f64, String)>> {
    let mut rows: Vec<Vec<(usize, f64, String)>> = Vec::new();
    let mut at = f64::INFINITY;
    let named = chart.named().into_iter().map(|index| (index, &chart.lines[index]));
    for (index, line) in named.filter(|(_, l)| !l.label.is_empty()) {
        let text = font::fitted(&line.label, LABEL, Weight::Regular, width - SAMPLE);
        let room = SAMPLE + font::width(&text, LABEL, Weight::Regular);
        if at + room > width {
            rows.push(Vec::new());
            at = 0.0;
        }
        if let Some(row) = rows.last_mut() {
            row.push((index, at, text));
        }
        at += room + 16.0;
    }
    rows
}

/// Draws the labels.
pub(crate) fn draw(drawing: &mut Drawing, chart: &Chart, key: &Key, area: &Area, rim: f64) {
    match key {
        Key::Beside(slots) => {
            for slot in slots {
                let line = &chart.lines[slot.index];
                let look = Look::of(chart, slot.index);
                let x = area.right + THREAD;
                // From the line's own end (or the plot's rim) to its label, so that crowded ends can be followed.
                let thread = Stroke { ink: look.ink, width: 0.8, dashes: &[], round: false };
                let from = slot.end.0 + 6.0;
                let mut path = Path::new();
                path.to(from, slot.end.1).line(from.max(area.right) + 3.0, slot.end.1).line(x - 4.0, slot.y);
                drawing.stroke(path, thread);
                sample(drawing, line, &look, x, slot.y);
                let lettering = Lettering::plain(LABEL, Ink::Text);
                drawing.text(&line.label, (x + SAMPLE, slot.y + LABEL * 0.36), Anchor::Begin, lettering);
            }
        }
        Key::Above { rows, top } => {
            for (n, row) in rows.iter().enumerate() {
                let y = top + ROW * (n as f64 + 0.5);
                for (index, x, text) in row {
                    sample(drawing, &chart.lines[*index], &Look::of(chart, *index), rim + x, y);
                    let at = (rim + x + SAMPLE, y + LABEL * 0.36);
                    drawing.text(text, at, Anchor::Begin, Lettering::plain(LABEL, Ink::Text));
                }
            }
        }
    }
}

/// A sample of a line as it is drawn in the plot.
fn sample(drawing: &mut Drawing, line: &Line, look: &Look, x: f64, y: f64) {
    let across = Path::segment(x, y, x + SAMPLE - 6.0, y);
    match line.style {
        Style::Curve => drawing.stroke(across, look.curve()),
        Style::Band => {
            let mut band = Path::new();
            band.rectangle(x, y - 4.0, SAMPLE - 6.0, 8.0);
            drawing.fill(band, look.ink, super::draw::BAND);
            drawing.stroke(across, look.curve());
        }
        Style::Points => look.marker(drawing, x + (SAMPLE - 6.0) / 2.0, y, 3.4),
        Style::Joined => {
            drawing.stroke(across, look.guide());
            look.marker(drawing, x + (SAMPLE - 6.0) / 2.0, y, 3.4);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn labels_do_not_touch_and_move_little() {
        assert_eq!(spread(&[10.0, 50.0], 16.0, 0.0, 100.0), [10.0, 50.0]);
        assert_eq!(spread(&[50.0, 50.0], 16.0, 0.0, 100.0), [42.0, 58.0]);
        assert_eq!(spread(&[0.0, 0.0, 0.0], 16.0, 0.0, 100.0), [0.0, 16.0, 32.0]);
        assert_eq!(spread(&[99.0, 99.0], 16.0, 0.0, 100.0), [84.0, 100.0]);
        assert!(spread(&[], 16.0, 0.0, 100.0).is_empty());
    }
}
