//! YAML to a checked pipeline, with every problem located.
#![forbid(unsafe_code)]

mod address;
mod columns;
mod expand;
mod fill;
mod locate;
mod merge;
mod order;
mod pipeline;
mod point;
mod render;
mod scan;
mod source;
mod step;
mod units;
mod yaml;

pub use columns::size_parts;
pub use expand::{Expansion, MOST_POINTS};
pub use locate::{Located, Other, locate, located};
pub use pipeline::{FORMAT, Pipeline, plugin_paths, read};
pub use point::Point;
pub use render::render;
pub use scan::{Axis, AxisValues, Block, FromStep};
pub use source::{Place, Source};
pub use step::Step;
pub use units::{Scale, Units};
