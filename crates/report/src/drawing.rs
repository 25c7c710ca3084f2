//! A drawing: shapes in order, written as SVG or painted as PNG.

use crate::DrawError;
use crate::font::{self, Weight};
use crate::ink::{Ink, hex};
use crate::path::{Path, Pen, hundredths, number};
use crate::text::escape;
use std::fmt::Write as _;
use tiny_skia as skia;

/// How a path is stroked.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Stroke {
    pub(crate) ink: Ink,
    pub(crate) width: f64,
    /// Dash and gap lengths; empty for a solid line.
    pub(crate) dashes: &'static [f64],
    /// Round ends and joins.
    pub(crate) round: bool,
}

impl Stroke {
    pub(crate) fn solid(ink: Ink, width: f64) -> Self {
        Stroke { ink, width, dashes: &[], round: false }
    }
}

#[derive(Clone, Debug, PartialEq)]
struct Shape {
    path: Path,
    /// Ink and opacity.
    fill: Option<(Ink, f64)>,
    stroke: Option<Stroke>,
}

/// A finished drawing. Its SVG and its PNG come from the same shapes with the same coordinates.
#[derive(Clone, Debug, PartialEq)]
pub struct Drawing {
    width: f64,
    height: f64,
    title: String,
    description: String,
    shapes: Vec<Shape>,
}

/// Whom an SVG is written for.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Reader {
    File,
    Page,
}

/// Anchor of a text.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Anchor {
    Begin,
    Middle,
    End,
}

impl Drawing {
    pub(crate) fn new(width: f64, height: f64, title: &str, description: String) -> Self {
        let mut drawing = Drawing { width, height, title: title.to_owned(), description, shapes: Vec::new() };
        let mut ground = Path::new();
        ground.rectangle(0.0, 0.0, width, height);
        drawing.fill(ground, Ink::Paper, 1.0);
        drawing
    }

    /// Width in drawing units (CSS pixels).
    pub fn width(&self) -> f64 {
        self.width
    }

    /// Height in drawing units.
    pub fn height(&self) -> f64 {
        self.height
    }

    /// What the drawing shows, in words: the `desc` of the SVG.
    pub fn description(&self) -> &str {
        &self.description
    }

    pub(crate) fn fill(&mut self, path: Path, ink: Ink, opacity: f64) {
        if !path.is_empty() {
            self.shapes.push(Shape { path, fill: Some((ink, opacity)), stroke: None });
        }
    }

    pub(crate) fn stroke(&mut self, path: Path, stroke: Stroke) {
        if !path.is_empty() {
            self.shapes.push(Shape { path, fill: None, stroke: Some(stroke) });
        }
    }

    pub(crate) fn fill_and_stroke(&mut self, path: Path, fill: Ink, stroke: Stroke) {
        if !path.is_empty() {
            self.shapes.push(Shape { path, fill: Some((fill, 1.0)), stroke: Some(stroke) });
        }
    }

    /// Writes a line of text; returns where it begins and ends.
    pub(crate) fn text(&mut self, text: &str, at: (f64, f64), anchor: Anchor, look: Lettering) -> (f64, f64) {
        let width = font::width(text, look.size, look.weight);
        let x = match anchor {
            Anchor::Begin => at.0,
            Anchor::Middle => at.0 - width / 2.0,
            Anchor::End => at.0 - width,
        };
        let path = font::outline(text, x, at.1, look.size, look.weight);
        if look.halo {
            let halo = Stroke { ink: Ink::Paper, width: 3.0, dashes: &[], round: true };
            self.stroke(path.clone(), halo);
        }
        self.fill(path, look.ink, 1.0);
        (x, x + width)
    }

    /// A whole SVG file with the light colours; it names no font and nothing outside itself.
    pub fn svg(&self) -> String {
        self.written(Reader::File)
    }

    /// For the inside of a page: no namespace, no `title` (which would pop up under the pointer) but a label.
    pub(crate) fn inline_svg(&self) -> String {
        self.written(Reader::Page)
    }

    fn written(&self, reader: Reader) -> String {
        let (mut w, mut h) = (String::new(), String::new());
        number(&mut w, hundredths(self.width));
        number(&mut h, hundredths(self.height));
        let mut out = String::from("<svg");
        if reader == Reader::File {
            out.push_str(" xmlns=\"http://www.w3.org/2000/svg\"");
        }
        let _ = write!(out, " width=\"{w}\" height=\"{h}\" viewBox=\"0 0 {w} {h}\" role=\"img\"");
        match reader {
            Reader::File => {
                let _ = write!(
                    out,
                    ">\n<title>{}</title>\n<desc>{}</desc>\n",
                    escape(&self.title),
                    escape(&self.description)
                );
            }
            Reader::Page => {
                let _ = write!(out, " aria-label=\"{}. {}\">", escape(&self.title), escape(&self.description));
            }
        }
        for shape in &self.shapes {
            out.push_str("<path");
            let mut classes = Vec::new();
            match shape.fill {
                Some((ink, opacity)) => {
                    let _ = write!(out, " fill=\"{}\"", hex(ink.light()));
                    if opacity < 1.0 {
                        let _ = write!(out, " fill-opacity=\"{opacity}\"");
                    }
                    classes.extend(ink.word().map(|w| format!("f-{w}")));
                }
                None => out.push_str(" fill=\"none\""),
            }
            if let Some(stroke) = &shape.stroke {
                let _ = write!(out, " stroke=\"{}\" stroke-width=\"{}\"", hex(stroke.ink.light()), stroke.width);
                if !stroke.dashes.is_empty() {
                    let dashes: Vec<String> = stroke.dashes.iter().map(f64::to_string).collect();
                    let _ = write!(out, " stroke-dasharray=\"{}\"", dashes.join(" "));
                }
                if stroke.round {
                    out.push_str(" stroke-linecap=\"round\" stroke-linejoin=\"round\"");
                }
                classes.extend(stroke.ink.word().map(|w| format!("s-{w}")));
            }
            if !classes.is_empty() {
                let _ = write!(out, " class=\"{}\"", classes.join(" "));
            }
            let _ = write!(out, " d=\"{}\"/>", shape.path.data());
            if reader == Reader::File {
                out.push('\n');
            }
        }
        out.push_str("</svg>");
        if reader == Reader::File {
            out.push('\n');
        }
        out
    }

    /// A PNG with the light colours, `scale` pixels to a drawing unit; the same bytes on every machine.
    ///
    /// # Errors
    /// [`DrawError::Size`] where the picture would have no pixels or more than 10⁸, [`DrawError::Png`] where it cannot be encoded.
    pub fn png(&self, scale: f64) -> Result<Vec<u8>, DrawError> {
        let (width, height) = ((self.width * scale).round(), (self.height * scale).round());
        if !(width >= 1.0 && height >= 1.0 && width * height <= 1e8) {
            return Err(DrawError::Size { width, height });
        }
        let mut pixels = skia::Pixmap::new(width as u32, height as u32).ok_or(DrawError::Size { width, height })?;
        let transform = skia::Transform::from_scale(scale as f32, scale as f32);
        for shape in &self.shapes {
            let Some(path) = painted(&shape.path) else { continue };
            if let Some((ink, opacity)) = shape.fill {
                let paint = paint(ink, opacity);
                pixels.fill_path(&path, &paint, skia::FillRule::Winding, transform, None);
            }
            if let Some(stroke) = &shape.stroke {
                let (cap, join) = if stroke.round {
                    (skia::LineCap::Round, skia::LineJoin::Round)
                } else {
                    (skia::LineCap::Butt, skia::LineJoin::Miter)
                };
                let dashes: Vec<f32> = stroke.dashes.iter().map(|&x| x as f32).collect();
                let look = skia::Stroke {
                    width: stroke.width as f32,
                    line_cap: cap,
                    line_join: join,
                    dash: skia::StrokeDash::new(dashes, 0.0),
                    ..skia::Stroke::default()
                };
                pixels.stroke_path(&path, &paint(stroke.ink, 1.0), &look, transform, None);
            }
        }
        pixels.encode_png().map_err(|cause| DrawError::Png(cause.to_string()))
    }
}

/// How a text looks.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Lettering {
    pub(crate) size: f64,
    pub(crate) weight: Weight,
    pub(crate) ink: Ink,
    /// A rim in the colour of the paper, for text over lines.
    pub(crate) halo: bool,
}

impl Lettering {
    pub(crate) fn plain(size: f64, ink: Ink) -> Self {
        Lettering { size, weight: Weight::Regular, ink, halo: false }
    }
}

fn paint(ink: Ink, opacity: f64) -> skia::Paint<'static> {
    let [r, g, b] = ink.light();
    let mut paint = skia::Paint::default();
    paint.set_color_rgba8(r, g, b, (opacity * 255.0).round() as u8);
    paint.anti_alias = true;
    paint
}

fn painted(path: &Path) -> Option<skia::Path> {
    let c = |v: i32| v as f32 / 100.0;
    let mut builder = skia::PathBuilder::with_capacity(path.pens.len(), path.pens.len() * 2);
    for pen in &path.pens {
        match *pen {
            Pen::Move(p) => builder.move_to(c(p.0), c(p.1)),
            Pen::Line(p) => builder.line_to(c(p.0), c(p.1)),
            Pen::Quad(a, p) => builder.quad_to(c(a.0), c(a.1), c(p.0), c(p.1)),
            Pen::Cubic(a, b, p) => builder.cubic_to(c(a.0), c(a.1), c(b.0), c(b.1), c(p.0), c(p.1)),
            Pen::Close => builder.close(),
        }
    }
    builder.finish()
}
