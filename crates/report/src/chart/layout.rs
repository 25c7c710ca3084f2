//! Where things stand in a chart: rows of text above and below, room for labels at the sides, the plot in between.

use super::axis::{Scaled, caption};
use super::key::{self, Key};
use super::marks;
use super::strokes::Area;
use super::{Chart, Frame, MarkAxis, Point, Style};
use crate::font::{self, Weight};
use crate::ticks::Ticks;

/// Sizes of letters.
pub(crate) const TITLE: f64 = 15.0;
pub(crate) const LABEL: f64 = 12.5;
pub(crate) const TICK: f64 = 12.0;
pub(crate) const NOTE: f64 = 11.0;
/// Free room around everything.
pub(crate) const RIM: f64 = 12.0;

/// A chart with everything in its place.
#[derive(Debug)]
pub(crate) struct Layout {
    pub(crate) area: Area,
    pub(crate) x: Scaled,
    pub(crate) y: Scaled,
    pub(crate) x_ticks: Ticks,
    pub(crate) y_ticks: Ticks,
    pub(crate) x_caption: String,
    pub(crate) y_caption: String,
    /// Lines of the title.
    pub(crate) title: Vec<String>,
    /// Baseline of the caption of y.
    pub(crate) y_caption_at: f64,
    /// Labels of vertical marks, placed.
    pub(crate) marks: Vec<marks::Placed>,
    pub(crate) key: Key,
    pub(crate) notes: Vec<String>,
}

impl Layout {
    pub(crate) fn of(chart: &Chart, frame: Frame) -> Layout {
        let (width, height) = (frame.width, frame.height);
        let (x, y) = scales(chart);
        let notes = notes(chart, &x, &y);

        // Ticks decide the left margin, the left margin decides the width, the width decides the ticks of x; the ticks of y need a
        // height, for which a guess is close enough.
        let y_ticks = y.ticks(((height - 130.0) / 46.0).clamp(3.0, 8.0) as usize);
        let label_width = |ticks: &Ticks| {
            ticks.labelled.iter().map(|t| font::width(&t.label, TICK, Weight::Regular)).fold(0.0, f64::max)
        };
        let left = RIM + label_width(&y_ticks) + 9.0;
        let gutter = key::gutter(chart, &x, &y, width);
        let right = width - RIM - gutter.unwrap_or(6.0);
        let most = ((right - left) / 62.0).clamp(2.0, 10.0) as usize;
        let x_ticks = thinned(&x, most, right - left, label_width);

        let title = font::wrapped(&chart.title, TITLE, Weight::Heavy, width - 2.0 * RIM, 3);
        let mut top = RIM + TITLE * 1.3 * title.len() as f64;
        let legend = if gutter.is_none() { key::rows(chart, width - 2.0 * RIM) } else { Vec::new() };
        let legend_top = top + 6.0;
        if !legend.is_empty() {
            top += 6.0 + key::ROW * legend.len() as f64;
        }
        let y_caption = caption(&chart.y, y_ticks.power);
        // What stands above as the title is not said twice.
        let y_caption = if y_caption.to_lowercase() == chart.title.to_lowercase() { String::new() } else { y_caption };
        top += if y_caption.is_empty() { 2.0 } else { LABEL + 10.0 };
        let y_caption_at = top - 3.0;
        let (mut placed, rows) = marks::place(chart, &x, (left, right), (RIM, width - RIM));
        top += 12.0 + marks::ROW * rows as f64;
        for mark in &mut placed {
            mark.baseline = top - 5.0 - marks::ROW * (rows - 1 - mark.row) as f64;
        }
        let note_room = (NOTE + 4.0) * notes.len() as f64;
        let bottom = (height - RIM - note_room - LABEL - TICK - 18.0).max(top + 40.0);
        let area = Area { left, top, right, bottom };
        let key = match gutter {
            Some(_) => Key::Beside(key::slots(chart, &x, &y, &area)),
            None => Key::Above { rows: legend, top: legend_top },
        };
        let x_caption = caption(&chart.x, x_ticks.power);
        Layout { area, x, y, x_ticks, y_ticks, x_caption, y_caption, title, y_caption_at, marks: placed, key, notes }
    }

    pub(crate) fn place_x(&self, x: f64) -> f64 {
        self.area.left + self.x.share(x) * self.area.width()
    }

    pub(crate) fn place_y(&self, y: f64) -> f64 {
        self.area.bottom - self.y.share(y) * self.area.height()
    }
}

/// Fewer ticks until their labels do not touch.
fn thinned(axis: &Scaled, most: usize, room: f64, widest: impl Fn(&Ticks) -> f64) -> Ticks {
    let mut ticks = axis.ticks(most);
    for fewer in (1..most).rev() {
        if (widest(&ticks) + 12.0) * ticks.labelled.len() as f64 <= room + 12.0 {
            break;
        }
        ticks = axis.ticks(fewer);
    }
    ticks
}

/// Both axes, wide enough for all points with their errors, and for marks that are not far away.
pub(crate) fn scales(chart: &Chart) -> (Scaled, Scaled) {
    let points = || chart.lines.iter().flat_map(|line| line.points.iter().map(move |p| (line.style, p)));
    let both = |p: &Point| p.x.is_finite() && p.y.is_finite();
    let on = |axis: MarkAxis| chart.marks.iter().filter(move |m| m.on == axis).map(|m| m.value);
    let xs = points().filter(|(_, p)| both(p)).map(|(_, p)| p.x).chain(on(MarkAxis::X));
    let ys = points().filter(|(_, p)| both(p)).flat_map(|(style, p)| {
        let error = if style == Style::Curve { 0.0 } else { p.error.filter(|e| e.is_finite()).unwrap_or(0.0).abs() };
        [p.y, p.y - error, p.y + error]
    });
    (Scaled::settle(&chart.x, xs, 0.03), Scaled::settle(&chart.y, ys.chain(on(MarkAxis::Y)), 0.05))
}

/// What was left out, in words.
fn notes(chart: &Chart, x: &Scaled, y: &Scaled) -> Vec<String> {
    let (mut endless, mut not_positive, mut outside, mut drawn) = (0_usize, 0, 0, 0);
    for p in chart.lines.iter().flat_map(|l| &l.points) {
        if !p.x.is_finite() || !p.y.is_finite() {
            endless += 1;
        } else if (x.log && p.x <= 0.0) || (y.log && p.y <= 0.0) {
            not_positive += 1;
        } else if !x.usable(p.x) || !y.usable(p.y) {
            endless += 1;
        } else if !x.contains(p.x) || !y.contains(p.y) {
            outside += 1;
        } else {
            drawn += 1;
        }
    }
    let points = |n: usize| if n == 1 { "1 point".to_owned() } else { format!("{n} points") };
    let mut notes = chart.notes.clone();
    if endless > 0 {
        notes.push(format!("{} left out: not a finite number", points(endless)));
    }
    if not_positive > 0 {
        notes.push(format!("{} left out: not positive, on a logarithmic axis", points(not_positive)));
    }
    if outside > 0 {
        notes.push(format!("{} outside the range shown", points(outside)));
    }
    if drawn == 0 && endless + not_positive + outside == 0 {
        notes.push("no points".to_owned());
    }
    notes
}
