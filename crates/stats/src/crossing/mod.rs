//! Where curves of several sizes cross, and where the crossings tend.
//!
//! Made for Binder cumulants and correlation lengths over size, which become independent of size at a critical point.
//! The method is laid out in the `README.md` beside this file.

mod extrapolate;
mod limits;
mod pair;
mod shift;
mod straighten;

pub use extrapolate::{Constant, Extrapolated, Member};
pub use limits::WithoutSmallest;
pub use pair::PairCrossing;
pub use shift::Shift;

use thiserror::Error;

use crate::jackknife::{replicate_error, scaled_deviations};
use crate::local::LocalParams;
use crate::matrix::Matrix;

/// The curve of one size.
#[derive(Clone, Debug, PartialEq)]
pub struct Curve {
    /// Linear size.
    pub size: f64,
    /// Places (temperatures), increasing.
    pub x: Vec<f64>,
    /// Values.
    pub y: Vec<f64>,
    /// Jackknife replicates of the values.
    pub replicates: Replicates,
}

/// Jackknife replicates, over equally weighted blocks.
#[derive(Clone, Debug, PartialEq)]
pub enum Replicates {
    /// `[point][block]`: every point from runs of its own.
    Separate(Vec<Vec<f64>>),
    /// `[block][point]`: all points from the same runs, as in reweighting. Taken as exactly smooth.
    Joint(Vec<Vec<f64>>),
}

/// How [`crossing`] works.
#[derive(Clone, Debug, PartialEq)]
pub struct CrossingParams {
    /// Exponents w of the correction that are averaged: 0.5, 0.75 ... 2.5.
    pub corrections: Vec<f64>,
    /// y = 1/nu; from the slopes if `None`.
    pub inverse_nu: Option<f64>,
    /// A fit with less probability than this is flagged: 0.01.
    pub least_p: f64,
    /// A bound c that no value exceeds, 2/3 for the cumulant: curves are then interpolated as -ln(c - y), which is nearly
    /// straight where y bends towards its bound, and has errors that hardly depend on y. Crossings are at the same places. None by default.
    pub ceiling: Option<f64>,
    /// Degrees and points of the local polynomials.
    pub local: LocalParams,
}

impl Default for CrossingParams {
    fn default() -> Self {
        Self {
            corrections: (2..=10).map(|quarter| 0.25 * f64::from(quarter)).collect(),
            inverse_nu: None,
            least_p: 0.01,
            ceiling: None,
            local: LocalParams::default(),
        }
    }
}

/// What is doubtful.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
#[non_exhaustive]
pub enum CrossingFlag {
    /// A pair of successive sizes does not cross inside the range both were measured in.
    NoCrossing,
    /// The crossings do not follow the form fitted, or a curve is not a polynomial near its crossing.
    BadFit,
    /// Fewer than three pairs: the fit with a correction has nothing left to test it, and with one pair there is none.
    FewSizes,
    /// The fit of a constant differs from the limit by more than their difference may: it leaves out a correction that is there.
    Biased,
    /// Leaving out the smallest size moves the result by more than the difference may: the form does not hold for that size.
    SizeDependent,
}

/// What [`crossing`] found.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct CrossingInfo {
    /// Crossings of successive sizes, by size; pairs that do not cross are left out.
    pub pairs: Vec<PairCrossing>,
    /// Covariance of their places.
    pub covariance: Matrix,
    /// Limit of the places; `None` without a pair.
    pub place: Option<Extrapolated>,
    /// Limit of the values; `None` without a pair.
    pub value: Option<Extrapolated>,
    /// y = 1/nu that was used, from all pairs, with its error (0 if given).
    pub inverse_nu: (f64, f64),
    /// The same without the smallest size.
    pub without_smallest: WithoutSmallest,
    /// What is doubtful about all of it, in order, each once.
    pub flags: Vec<CrossingFlag>,
    /// What is doubtful about the limit of the places alone: `SizeDependent`.
    pub place_flags: Vec<CrossingFlag>,
    /// What is doubtful about the constant fitted to the places: `Biased`, `BadFit`, `SizeDependent`. Nothing that counts against the limits.
    pub constant_flags: Vec<CrossingFlag>,
    /// The same of the constant fitted to the values: `Biased`, `BadFit`.
    pub value_constant_flags: Vec<CrossingFlag>,
}

/// Why nothing could be done.
#[derive(Clone, Debug, PartialEq, Error)]
#[non_exhaustive]
pub enum CrossingError {
    /// Fewer than two curves.
    #[error("a crossing needs curves of two sizes; there are {curves}")]
    TooFewCurves {
        /// Curves there are.
        curves: usize,
    },
    /// Curves are not in order of size, or two have the same.
    #[error("sizes must increase: {size} follows {before}")]
    Order {
        /// Size before.
        before: f64,
        /// Size in the wrong place.
        size: f64,
    },
    /// A curve has fewer than two points, points not in order, values not finite, or replicates that do not fit or are
    /// fewer than two.
    #[error("the curve of size {size} has {problem}")]
    Curve {
        /// Its size.
        size: f64,
        /// What is wrong.
        problem: &'static str,
    },
    /// No exponent to average over, or one that is not positive and finite.
    #[error("exponents of corrections must be positive, and at least one")]
    Corrections,
}

/// Finds where successive curves cross and extrapolates. Curves must be in order of size.
///
/// Cost: for P points a curve and R replicates in all about P^2 small fits and R roots a pair.
///
/// # Errors
/// Curves that are malformed; curves that do not cross are not an error but flagged.
pub fn crossing(curves: &[Curve], params: &CrossingParams) -> Result<CrossingInfo, CrossingError> {
    if curves.len() < 2 {
        return Err(CrossingError::TooFewCurves { curves: curves.len() });
    }
    let sound = |value: f64| value.is_finite() && value > 0.0;
    if params.corrections.is_empty() || !params.corrections.iter().chain(&params.inverse_nu).all(|value| sound(*value))
    {
        return Err(CrossingError::Corrections);
    }
    for curve in curves {
        curve.check()?;
    }
    for two in curves.windows(2) {
        if two[0].size >= two[1].size {
            return Err(CrossingError::Order { before: two[0].size, size: two[1].size });
        }
    }
    match params.ceiling {
        None => Ok(find(curves, params)),
        Some(ceiling) => {
            let straightened: Vec<Curve> = curves.iter().map(|curve| straighten::curve(curve, ceiling)).collect();
            let mut found = find(&straightened, params);
            straighten::undo(&mut found, ceiling);
            Ok(found)
        }
    }
}

/// [`crossing`] of curves that have been checked.
fn find(curves: &[Curve], params: &CrossingParams) -> CrossingInfo {
    let found = curves.windows(2).map(|two| pair::find(&two[0], &two[1], &params.local)).collect::<Vec<_>>();
    limits::limits(&found, params)
}

impl Curve {
    fn check(&self) -> Result<(), CrossingError> {
        let wrong = |problem| Err(CrossingError::Curve { size: self.size, problem });
        let points = self.x.len();
        if points < 2 || self.y.len() != points {
            return wrong("fewer than two points, or not one value a point");
        }
        if !self.size.is_finite() || self.size <= 0.0 {
            return wrong("no positive size");
        }
        if !self.x.iter().chain(&self.y).all(|value| value.is_finite()) {
            return wrong("values that are not finite");
        }
        if self.x.windows(2).any(|two| two[0] >= two[1]) {
            return wrong("points out of order");
        }
        let (rows, fits) = match &self.replicates {
            Replicates::Separate(points_rows) => {
                (points_rows, points_rows.len() == points && points_rows.iter().all(|row| row.len() >= 2))
            }
            Replicates::Joint(blocks) => (blocks, blocks.len() >= 2 && blocks.iter().all(|row| row.len() == points)),
        };
        if !fits {
            return wrong("fewer than two replicates a point, or replicates of other points");
        }
        if !rows.iter().flatten().all(|value| value.is_finite()) {
            return wrong("replicates that are not finite");
        }
        Ok(())
    }

    /// Standard error of each value.
    #[must_use]
    pub fn errors(&self) -> Vec<f64> {
        match &self.replicates {
            Replicates::Separate(points) => points.iter().map(|row| replicate_error(row)).collect(),
            Replicates::Joint(blocks) => {
                let column = |point: usize| blocks.iter().map(|row| row[point]).collect::<Vec<f64>>();
                (0..self.x.len()).map(|point| replicate_error(&column(point))).collect()
            }
        }
    }

    /// Calls `each` with the values of every replicate in a fixed order, grouped by what varies together.
    fn for_each_group(&self, mut each: impl FnMut(&[Vec<f64>])) {
        match &self.replicates {
            Replicates::Joint(blocks) => each(blocks),
            Replicates::Separate(points) => {
                for (point, row) in points.iter().enumerate() {
                    let group: Vec<Vec<f64>> = row
                        .iter()
                        .map(|value| {
                            let mut values = self.y.clone();
                            values[point] = *value;
                            values
                        })
                        .collect();
                    each(&group);
                }
            }
        }
    }
}

/// Scaled deviations of one column of replicate results.
fn deviations(results: &[[f64; 3]], part: usize) -> Vec<f64> {
    let column: Vec<f64> = results.iter().map(|result| result[part]).collect();
    scaled_deviations(&column)
}
