//! Draws a chart.

use super::layout::{LABEL, Layout, NOTE, RIM, TICK, TITLE};
use super::strokes::{Area, dashes, marker, polygon, polyline};
use super::{Chart, Frame, Line, Scale, Style, key, marks};
use crate::drawing::{Anchor, Drawing, Lettering, Stroke};
use crate::font::Weight;
use crate::ink::{Ink, places};
use crate::number::shown;
use crate::path::Path;

/// Opacity of error bands.
pub(crate) const BAND: f64 = 0.2;

/// How a line looks.
pub(crate) struct Look {
    place: usize,
    pub(crate) ink: Ink,
}

impl Look {
    pub(crate) fn of(chart: &Chart, index: usize) -> Look {
        let named = chart.named();
        let place = named.iter().position(|first| *first == chart.first(index)).unwrap_or(0);
        let places = places(named.len());
        Look { place, ink: Ink::Line(places[place % places.len()]) }
    }

    pub(crate) fn curve(&self) -> Stroke {
        Stroke { ink: self.ink, width: 1.7, dashes: dashes(self.place), round: false }
    }

    pub(crate) fn guide(&self) -> Stroke {
        Stroke { ink: self.ink, width: 0.9, dashes: dashes(self.place), round: false }
    }

    pub(crate) fn marker(&self, drawing: &mut Drawing, x: f64, y: f64, r: f64) {
        let mut path = Path::new();
        let filled = marker(&mut path, self.place, x, y, r);
        self.markers(drawing, path, filled);
    }

    fn markers(&self, drawing: &mut Drawing, path: Path, filled: bool) {
        let fill = if filled { self.ink } else { Ink::Paper };
        drawing.fill_and_stroke(path, fill, Stroke::solid(self.ink, 1.3));
    }
}

impl Chart {
    /// The first line that has the label of this one, and its look.
    fn first(&self, index: usize) -> usize {
        let label = &self.lines[index].label;
        let same = |line: &Line| !label.is_empty() && line.label == *label;
        self.lines.iter().position(same).unwrap_or(index)
    }

    /// Lines that look different: those that are the first of their label.
    pub(crate) fn named(&self) -> Vec<usize> {
        (0..self.lines.len()).filter(|index| self.first(*index) == *index).collect()
    }

    /// Draws the chart. Cost: a millisecond for some thousand points. Never fails: what cannot be drawn is left out with a note.
    pub fn draw(&self, frame: Frame) -> Drawing {
        let frame = Frame { width: frame.width.clamp(240.0, 1e4), height: frame.height.clamp(200.0, 1e4) };
        let layout = Layout::of(self, frame);
        // Labels above the plot may need more height than the frame has.
        let height = frame.height.max(layout.area.bottom + LABEL + TICK + 18.0 + RIM);
        let mut drawing = Drawing::new(frame.width, height, &self.title, self.description());
        marks::draw_bands(&mut drawing, self, &layout);
        grid(&mut drawing, &layout);
        marks::draw_lines(&mut drawing, self, &layout);
        for (index, line) in self.lines.iter().enumerate() {
            draw_line(&mut drawing, line, &Look::of(self, index), &layout);
        }
        axes(&mut drawing, &layout);
        key::draw(&mut drawing, self, &layout.key, &layout.area, RIM);
        marks::draw_labels(&mut drawing, self, &layout);
        words(&mut drawing, &layout, frame.width, height);
        drawing
    }

    /// Left, top, right, bottom of the plot in a frame.
    pub(crate) fn area(&self, frame: Frame) -> [f64; 4] {
        let Area { left, top, right, bottom } = Layout::of(self, frame).area;
        [left, top, right, bottom]
    }

    /// The two axes.
    pub(crate) fn scales(&self) -> (super::Scaled, super::Scaled) {
        super::layout::scales(self)
    }

    /// What the chart shows, in words, for those who do not see it.
    fn description(&self) -> String {
        let axis = |a: &super::Axis| {
            let scale = if a.scale == Scale::Log { ", logarithmic" } else { "" };
            if a.unit.is_empty() { format!("{}{scale}", a.label) } else { format!("{} in {}{scale}", a.label, a.unit) }
        };
        let mut words = format!("{} against {}.", axis(&self.y), axis(&self.x));
        for line in &self.lines {
            let name = if line.label.is_empty() { "a line" } else { &line.label };
            let count = line.points.len();
            words += &format!(" {name}: {count} {}", if count == 1 { "point" } else { "points" });
            let finite = || line.points.iter().filter(|p| p.x.is_finite() && p.y.is_finite());
            if let (Some(first), Some(last)) = (finite().next(), finite().next_back()) {
                let n = |v| shown(v, None, 5).text();
                words += &format!(", from {} at {} to {} at {}", n(first.y), n(first.x), n(last.y), n(last.x));
            }
            words.push('.');
        }
        for mark in &self.marks {
            words += &format!(" Marked: {} at {}.", mark.label, shown(mark.value, Some(mark.error), 7).text());
        }
        for note in &self.notes {
            words += &format!(" {note}.");
        }
        words
    }
}

/// Faint lines at the ticks of y: heights are read off further away from their axis than places along the bottom.
fn grid(drawing: &mut Drawing, layout: &Layout) {
    let area = &layout.area;
    let mut path = Path::new();
    for tick in &layout.y_ticks.labelled {
        let y = layout.place_y(tick.value);
        path.to(area.left, y).line(area.right, y);
    }
    drawing.stroke(path, Stroke::solid(Ink::Grid, 1.0));
}

fn axes(drawing: &mut Drawing, layout: &Layout) {
    let area = &layout.area;
    let mut path = Path::segment(area.left, area.bottom, area.right, area.bottom);
    for tick in &layout.x_ticks.labelled {
        let x = layout.place_x(tick.value);
        path.to(x, area.bottom).line(x, area.bottom + 6.0);
    }
    for &value in &layout.x_ticks.minor {
        let x = layout.place_x(value);
        path.to(x, area.bottom).line(x, area.bottom + 3.0);
    }
    for &value in &layout.y_ticks.minor {
        let y = layout.place_y(value);
        path.to(area.left - 3.0, y).line(area.left, y);
    }
    drawing.stroke(path, Stroke::solid(Ink::Text, 1.1));
    let look = Lettering::plain(TICK, Ink::Text);
    for tick in &layout.x_ticks.labelled {
        let at = (layout.place_x(tick.value), area.bottom + 9.0 + TICK);
        drawing.text(&tick.label, at, Anchor::Middle, look);
    }
    for tick in &layout.y_ticks.labelled {
        let at = (area.left - 8.0, layout.place_y(tick.value) + TICK * 0.36);
        drawing.text(&tick.label, at, Anchor::End, look);
    }
}

fn words(drawing: &mut Drawing, layout: &Layout, width: f64, height: f64) {
    let title = Lettering { size: TITLE, weight: Weight::Heavy, ink: Ink::Text, halo: false };
    for (i, line) in layout.title.iter().enumerate() {
        drawing.text(line, (RIM, RIM + TITLE * (0.95 + 1.3 * i as f64)), Anchor::Begin, title);
    }
    let area = &layout.area;
    let caption = Lettering { size: LABEL, weight: Weight::Regular, ink: Ink::Soft, halo: true };
    let fit = |text: &str, most| crate::font::fitted(text, LABEL, Weight::Regular, most);
    drawing.text(&fit(&layout.y_caption, width - 2.0 * RIM), (RIM, layout.y_caption_at), Anchor::Begin, caption);
    let below = area.bottom + 9.0 + TICK + 7.0 + LABEL;
    drawing.text(&fit(&layout.x_caption, area.right - RIM), (area.right, below), Anchor::End, caption);
    let note = Lettering::plain(NOTE, Ink::Soft);
    for (i, text) in layout.notes.iter().rev().enumerate() {
        let text = crate::font::fitted(text, NOTE, Weight::Regular, width - 2.0 * RIM);
        drawing.text(&text, (RIM, height - RIM + 2.0 - (NOTE + 4.0) * i as f64), Anchor::Begin, note);
    }
}

/// A point on the paper.
struct Spot {
    x: f64,
    y: f64,
    /// Upper and lower end of its error bar.
    ends: Option<(f64, f64)>,
}

/// Places of the points that can be drawn.
fn places_of(line: &Line, layout: &Layout) -> Vec<Spot> {
    let area = &layout.area;
    line.points
        .iter()
        .filter(|p| layout.x.usable(p.x) && layout.y.usable(p.y))
        .map(|p| {
            let error = p.error.filter(|e| e.is_finite() && *e != 0.0).map(f64::abs);
            let ends = error.map(|e| {
                // On a logarithmic axis a bar that reaches zero goes down to the rim.
                let place = |y: f64| if layout.y.usable(y) { layout.place_y(y) } else { area.bottom + 1.0 };
                (place(p.y + e), place(p.y - e))
            });
            Spot { x: layout.place_x(p.x), y: layout.place_y(p.y), ends }
        })
        .collect()
}

fn draw_line(drawing: &mut Drawing, line: &Line, look: &Look, layout: &Layout) {
    let area = &layout.area;
    let points = places_of(line, layout);
    let spots: Vec<(f64, f64)> = points.iter().map(|p| (p.x, p.y)).collect();
    if line.style == Style::Band {
        let top = points.iter().map(|p| (p.x, p.ends.map_or(p.y, |e| e.0)));
        let bottom = points.iter().rev().map(|p| (p.x, p.ends.map_or(p.y, |e| e.1)));
        drawing.fill(polygon(area, top.chain(bottom).collect()), look.ink, BAND);
    }
    if matches!(line.style, Style::Curve | Style::Band) {
        if spots.len() == 1 {
            drawing.stroke(bars(area, &points), Stroke::solid(look.ink, 1.1));
            draw_markers(drawing, &points, look, area);
        } else {
            drawing.stroke(polyline(area, &spots), look.curve());
        }
        return;
    }
    if line.style == Style::Joined {
        drawing.stroke(polyline(area, &spots), look.guide());
    }
    let bars = bars(area, &points);
    drawing.stroke(bars, Stroke::solid(look.ink, 1.1));
    draw_markers(drawing, &points, look, area);
}

fn bars(area: &Area, points: &[Spot]) -> Path {
    let cap = if points.len() > 60 { 0.0 } else { 2.6 };
    let mut path = Path::new();
    for &Spot { x, ends, .. } in points {
        let Some((up, down)) = ends else { continue };
        if x < area.left - 0.01 || x > area.right + 0.01 || down < area.top || up > area.bottom {
            continue;
        }
        let (a, b) = (up.max(area.top), down.min(area.bottom));
        path.to(x, a).line(x, b);
        // A cap says that the bar ends there, so a bar cut off at the rim has none.
        for (end, whole) in [(a, a == up), (b, b == down)] {
            if whole && cap > 0.0 {
                path.to(x - cap, end).line(x + cap, end);
            }
        }
    }
    path
}

fn draw_markers(drawing: &mut Drawing, points: &[Spot], look: &Look, area: &Area) {
    let r = match points.len() {
        0..=60 => 3.4,
        61..=200 => 2.4,
        _ => 1.7,
    };
    let mut path = Path::new();
    let mut filled = true;
    let inside = |x: f64, y: f64| {
        x >= area.left - 0.01 && x <= area.right + 0.01 && y >= area.top - 0.01 && y <= area.bottom + 0.01
    };
    for &Spot { x, y, .. } in points.iter().filter(|p| inside(p.x, p.y)) {
        filled = marker(&mut path, look.place, x, y, r);
    }
    look.markers(drawing, path, filled);
}
