//! Figures: a chart drawn for wide and for narrow windows, with its values for the readout.

use super::record::fold;
use super::{Content, Figure};
use crate::chart::{Axis, Chart, Frame};
use crate::number::shown;
use crate::text::{escape, json_text};
use std::fmt::Write as _;

/// Side of pictures of configurations.
const PICTURE: f64 = 520.0;

pub(super) fn write(out: &mut String, number: usize, figure: &Figure) {
    let _ = writeln!(out, "<figure id=\"figure-{number}\">");
    match &figure.content {
        Content::Chart(chart) => {
            let (wide, narrow) = (chart.draw(Frame::WIDE), chart.draw(Frame::NARROW));
            let _ = write!(
                out,
                "<div class=\"stage\" data-figure=\"{number}\">\n<div class=\"wide\">{}</div>\n<div class=\"narrow\">{}</div>\n<span class=\"spot\" hidden=\"\"></span>\n</div>\n",
                wide.inline_svg(),
                narrow.inline_svg()
            );
            let _ = write!(
                out,
                "<p class=\"readout\" aria-live=\"polite\" hidden=\"\"></p>\n<script type=\"application/json\" id=\"values-{number}\">"
            );
            values(out, chart, (wide.height(), narrow.height()));
            out.push_str("</script>\n");
        }
        Content::Picture(picture) => {
            let _ = writeln!(out, "<div class=\"picture\">{}</div>", picture.draw(PICTURE).inline_svg());
        }
    }
    let _ = writeln!(out, "<figcaption dir=\"auto\"><b>Figure {number}.</b> {}</figcaption>", escape(&figure.caption));
    fold(out, "Record of this figure", &figure.record);
    out.push_str("</figure>\n");
}

/// The values of a chart as JSON: `wide` and `narrow` say where the plot is (left, top, right, bottom as shares of the drawing), each point
/// is its place in the plot in ten-thousandths from the lower left and its texts.
fn values(out: &mut String, chart: &Chart, heights: (f64, f64)) {
    let area = |frame: Frame, height: f64| {
        let [left, top, right, bottom] = chart.area(frame);
        let (w, h) = (frame.width, height);
        format!("[{:.5},{:.5},{:.5},{:.5}]", left / w, top / h, right / w, bottom / h)
    };
    let name = |axis: &Axis| json_text(&axis.label);
    let unit = |axis: &Axis| json_text(&axis.unit);
    let _ = write!(
        out,
        "{{\"wide\":{},\"narrow\":{},\"x\":[{},{}],\"y\":[{},{}],\"lines\":[",
        area(Frame::WIDE, heights.0),
        area(Frame::NARROW, heights.1),
        name(&chart.x),
        unit(&chart.x),
        name(&chart.y),
        unit(&chart.y)
    );
    let (x, y) = chart.scales();
    for (i, line) in chart.lines.iter().enumerate() {
        let comma = if i > 0 { "," } else { "" };
        let _ = write!(out, "{comma}{{\"name\":{},\"points\":[", json_text(&line.label));
        let mut first = true;
        for p in &line.points {
            if !(x.usable(p.x) && y.usable(p.y) && x.contains(p.x) && y.contains(p.y)) {
                continue;
            }
            let place = |share: f64| (share * 10_000.0).round() as i64;
            let _ = write!(
                out,
                "{}[{},{},{},{}]",
                if first { "" } else { "," },
                place(x.share(p.x)),
                place(y.share(p.y)),
                json_text(&shown(p.x, None, 7).text()),
                json_text(&shown(p.y, p.error, 6).text())
            );
            first = false;
        }
        out.push_str("]}");
    }
    out.push_str("]}");
}
