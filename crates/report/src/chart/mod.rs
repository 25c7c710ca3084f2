//! Charts: lines with points, error bars and bands over two axes.

mod axis;
mod draw;
mod key;
mod layout;
mod marks;
mod strokes;

pub(crate) use axis::Scaled;

/// A chart, as plain data.
#[derive(Clone, Debug, PartialEq)]
pub struct Chart {
    /// Stands above it.
    pub title: String,
    /// The axis along the bottom.
    pub x: Axis,
    /// The axis up the side.
    pub y: Axis,
    /// What is drawn; colours, marker shapes and dashes go by place. Eight can be told apart. Lines with one label look alike and are named once: points
    /// and the curve through them.
    pub lines: Vec<Line>,
    /// Reference lines.
    pub marks: Vec<Mark>,
    /// What a reader must know about the points, in small letters below; what the chart itself leaves out is added.
    pub notes: Vec<String>,
}

/// An axis.
#[derive(Clone, Debug, PartialEq)]
pub struct Axis {
    /// What is along it.
    pub label: String,
    /// Its unit; empty for pure numbers.
    pub unit: String,
    /// How numbers lie along it.
    pub scale: Scale,
    /// From where to where; None: as the data need. A range that is empty or not finite counts as None.
    pub range: Option<(f64, f64)>,
}

impl Axis {
    /// A linear axis as wide as the data need.
    pub fn new(label: impl Into<String>, unit: impl Into<String>) -> Self {
        Axis { label: label.into(), unit: unit.into(), scale: Scale::Linear, range: None }
    }

    /// The same axis with a logarithmic scale; what is not positive is left out, with a note.
    #[must_use]
    pub fn logarithmic(self) -> Self {
        Axis { scale: Scale::Log, ..self }
    }
}

/// How numbers lie along an axis.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Scale {
    /// Equal differences are equal distances.
    Linear,
    /// Equal ratios are equal distances.
    Log,
}

/// Points that belong together, in the order in which they are joined.
#[derive(Clone, Debug, PartialEq)]
pub struct Line {
    /// What tells them from the others (`L = 32`).
    pub label: String,
    /// The points.
    pub points: Vec<Point>,
    /// How they are drawn.
    pub style: Style,
}

/// A point of a line. Points that are not finite are left out, and the chart says how many.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Point {
    /// Along the bottom.
    pub x: f64,
    /// Up the side.
    pub y: f64,
    /// One standard error of `y`, if known.
    pub error: Option<f64>,
}

/// How a line is drawn.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Style {
    /// Markers with error bars.
    Points,
    /// Markers with error bars, joined by a thin line that guides the eye.
    Joined,
    /// A line through all points; errors are not drawn.
    Curve,
    /// A line with a band one standard error wide to either side.
    Band,
}

/// A reference line across the chart.
#[derive(Clone, Debug, PartialEq)]
pub struct Mark {
    /// Which axis it stands on.
    pub on: MarkAxis,
    /// Where.
    pub value: f64,
    /// Half the width of a band around it; zero for none.
    pub error: f64,
    /// What it is (`exact T_c`).
    pub label: String,
}

/// The axis that a mark stands on.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum MarkAxis {
    /// A vertical line at a value of x.
    X,
    /// A horizontal line at a value of y.
    Y,
}

/// The size of a drawn chart, in drawing units (CSS pixels).
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Frame {
    /// Across; at least 240.
    pub width: f64,
    /// Down; at least 200.
    pub height: f64,
}

impl Frame {
    /// For files, pages and paper.
    pub const WIDE: Frame = Frame { width: 760.0, height: 460.0 };
    /// For a telephone.
    pub const NARROW: Frame = Frame { width: 350.0, height: 400.0 };
}
