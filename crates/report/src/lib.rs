//! Charts, pictures of configurations, and the report page: drawn from finished values, without opening a file.
//!
//! - [`Chart`] and [`Picture`] are plain data; `draw` makes a [`Drawing`] of them, which is written as SVG or painted as PNG.
//!   Both come from the same shapes: text is outlines of an embedded font, so neither needs one.
//! - [`Page`] is one HTML file: question, answers with errors and verdicts, what is not settled, figures, tables, and how to get the same
//!   digits again. It asks for nothing: no address stands in it, and its content security policy allows none.
//! - [`shown`] writes a number with the digits that its error allows, the same way everywhere.
//!
//! ```
//! use spinledger_report::{Axis, Chart, Frame, Line, Point, Style};
//!
//! let points = [1.0, 2.0, 4.0].map(|x| Point { x, y: x * x, error: Some(0.1) }).to_vec();
//! let chart = Chart {
//!     title: "Squares".to_owned(),
//!     x: Axis::new("x", "").logarithmic(),
//!     y: Axis::new("square", "J").logarithmic(),
//!     lines: vec![Line { label: "x²".to_owned(), points, style: Style::Joined }],
//!     marks: vec![],
//!     notes: vec![],
//! };
//! let drawing = chart.draw(Frame::WIDE);
//! assert!(drawing.svg().starts_with("<svg"));
//! assert!(drawing.png(2.0)?.starts_with(b"\x89PNG"));
//! # Ok::<(), spinledger_report::DrawError>(())
//! ```
//!
//! Bytes are the same on every machine: coordinates are rounded to hundredths, logarithms come from one library, and pixels are
//! painted without processor-dependent paths. The drawing's own look (colours that the colour-blind tell apart, dashes and markers that
//! do without colour) is in `ink` and `chart::strokes`; a page overrides colours for dark screens through classes.
//!
//! Left to others: which columns make a chart, what a verdict is, files. `examples/gallery` writes one of everything from
//! invented data.
#![forbid(unsafe_code)]

mod chart;
mod drawing;
mod font;
mod ink;
mod number;
mod page;
mod path;
mod picture;
mod text;
mod ticks;

pub use chart::{Axis, Chart, Frame, Line, Mark, MarkAxis, Point, Scale, Style};
pub use drawing::Drawing;
pub use number::{Shown, shown};
pub use page::{Again, Answer, Content, Figure, Flagged, Page, Reference, TableView, Verdict, flag_remedy, flag_words};
pub use picture::{Picture, Shades, Sites, Walls};

/// A drawing could not be painted.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum DrawError {
    /// The picture would have no pixels, or too many.
    #[error("a picture of {width} x {height} pixels cannot be painted: 1 to 100 million pixels are possible")]
    Size {
        /// Pixels across.
        width: f64,
        /// Pixels down.
        height: f64,
    },
    /// The PNG could not be encoded.
    #[error("the PNG could not be encoded: {0}")]
    Png(String),
}
