//! YAML to a checked pipeline: all problems at once, each with its place and the nearest word.
//!
//! - [`Source`] is a file as typed; [`read`] turns it into a [`Pipeline`], checked against a
//!   [`Vocabulary`](spinledger_terms::Vocabulary) of step kinds and plugin items.
//! - [`Step::expand`] gives the [`Point`]s of a scan; a point knows its complete parameters, its columns, and where in the text each
//!   parameter stands, so that whoever checks further can point there.
//! - [`render`] shows problems to people, [`located`] to machines.
//!
//! ```
//! use spinledger_pipeline::{Source, read, render};
//! use spinledger_terms::{Field, Kind, StepSpec, Vocabulary};
//!
//! let measure = Field::new("measure", Kind::COUNT, "measurements per chain").required();
//! let sample = StepSpec { does: "sample".into(), about: String::new(), fields: vec![measure], scan: None };
//! let vocabulary = Vocabulary { steps: vec![sample], items: Vec::new() };
//! let text = "spinledger: 1\npipeline: first\nseed: 7\nsteps:\n  chains: { does: sample, mesure: 20000 }\n";
//!
//! let source = Source::new("first.yaml", text);
//! let problems = read(&source, &vocabulary).unwrap_err();
//! let expected = "\
//! first.yaml:5:27: `mesure` is not a key of a sample step
//!      5 |   chains: { does: sample, mesure: 20000 }
//!        :                           ^^^^^^ expected one of: does, measure
//!        :                                  nearest: measure
//! ";
//! assert_eq!(render(&source, &problems), expected);
//!
//! let source = Source::new("first.yaml", text.replace("mesure", "measure"));
//! assert_eq!(read(&source, &vocabulary).unwrap().steps[0].name, "chains");
//! ```
//!
//! How it works: the text is read into a tree (serde_yaml, in one module), the tree's values are admitted by the kinds that
//! the vocabulary declares, and problems carry paths. Only when they are shown are paths turned into lines and columns, by running the
//! parser again down the path. Nothing here depends on the order of keys, save ties between independent steps.
//!
//! Left to others: which kinds of step there are and what their parameters mean together (`engine`), which plugins (`host`),
//! what is on record (`plan`, `ledger`). Opens no file.
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
