//! Charts, pictures of configurations and the report page.
#![forbid(unsafe_code)]

mod drawing;
mod font;
mod ink;
mod path;
mod text;

pub use drawing::Drawing;

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
