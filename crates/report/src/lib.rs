//! Charts, pictures of configurations and the report page.
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
pub use page::{Again, Answer, Content, Figure, Page, Reference, TableView, Verdict, flag_words};
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
