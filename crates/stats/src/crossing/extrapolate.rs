//! Limits of crossings with one correction to scaling.

use spinledger_numerics::elementary::{exp, pow};
use spinledger_numerics::special::chi_squared_p;

use super::shift::{Limit, Shift};
use crate::fit::{Errors, Fit, linear, linear_map};
use crate::matrix::Matrix;

/// A limit, averaged over exponents of the correction.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct Extrapolated {
    /// The limit.
    pub value: f64,
    /// Its standard error: `statistical` and `spread` together.
    pub error: f64,
    /// Part of the error that comes from the data.
    pub statistical: f64,
    /// Part of the error that comes from not knowing the exponent.
    pub spread: f64,
    /// Chi-squared of the exponent that fits best.
    pub chi_squared: f64,
    /// Pairs minus two; 0 for one or two pairs.
    pub degrees: usize,
    /// Probability of a larger chi-squared; 1 for zero degrees.
    pub p: f64,
    /// The fit of a constant, for comparison.
    pub constant: Constant,
    /// How far the constant is from the limit; `None` for one pair.
    pub bias: Option<Shift>,
    /// The fit for each exponent; empty for one pair, which cannot be extrapolated.
    pub members: Vec<Member>,
}

/// A fit without correction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Constant {
    /// Weighted mean.
    pub value: f64,
    /// Its standard error.
    pub error: f64,
    /// Its chi-squared.
    pub chi_squared: f64,
    /// Pairs minus one.
    pub degrees: usize,
    /// Probability of a larger chi-squared; 1 for zero degrees.
    pub p: f64,
}

/// A fit with one exponent.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Member {
    /// Exponent of the correction.
    pub correction: f64,
    /// Limit with it.
    pub value: f64,
    /// Standard error of that.
    pub error: f64,
    /// Its chi-squared.
    pub chi_squared: f64,
    /// Share in the average.
    pub weight: f64,
}

/// Shift of the place where two sizes cross, per B/A.
pub(super) fn place_form(small: f64, large: f64, inverse_nu: f64, correction: f64) -> f64 {
    (pow(small, -correction) - pow(large, -correction)) / (pow(large, inverse_nu) - pow(small, inverse_nu))
}

/// Shift of the value where two sizes cross, per B.
pub(super) fn value_form(small: f64, large: f64, inverse_nu: f64, correction: f64) -> f64 {
    pow(small, -correction) + pow(small, inverse_nu) * place_form(small, large, inverse_nu, correction)
}

/// Fits limit + amplitude * form for each exponent and averages. Gives the maps from data to limit beside it. `None` without data or when no
/// fit is possible.
pub(super) fn extrapolate(
    data: &[f64],
    covariance: &Matrix,
    corrections: &[f64],
    form: impl Fn(f64) -> Vec<f64>,
) -> Option<(Extrapolated, Limit)> {
    let pairs = data.len();
    let errors = Errors::Covariance(covariance);
    let ones = Matrix::from_fn(pairs, 1, |_, _| 1.0);
    let constant = linear(&ones, data, errors).ok()?;
    let constant = Constant {
        value: constant.parameters[0],
        error: constant.error(0),
        chi_squared: constant.chi_squared,
        degrees: constant.degrees,
        p: chi_squared_p(constant.chi_squared, constant.degrees),
    };
    let mut maps = Limit { constant: linear_map(&ones, errors).ok()?.row(0).to_vec(), members: Vec::new() };
    if pairs < 2 {
        let Constant { value, error, chi_squared, .. } = constant;
        let only = Extrapolated {
            value,
            error,
            statistical: error,
            spread: 0.0,
            chi_squared,
            degrees: 0,
            p: 1.0,
            constant,
            bias: None,
            members: Vec::new(),
        };
        return Some((only, maps));
    }
    let fits: Vec<(f64, Fit, Vec<f64>)> = corrections
        .iter()
        .filter_map(|correction| {
            // Scaled to the shift of the first pair: the flat prior over the amplitude then means the same for each exponent.
            let form = form(*correction);
            let design = Matrix::from_fn(pairs, 2, |pair, k| if k == 0 { 1.0 } else { form[pair] / form[0] });
            let map = linear_map(&design, errors).ok()?.row(0).to_vec();
            linear(&design, data, errors).ok().map(|fit| (*correction, fit, map))
        })
        .collect();
    let chi_squared = fits.iter().map(|(_, fit, _)| fit.chi_squared).min_by(f64::total_cmp)?;
    let weight = |fit: &Fit| exp(-0.5 * (fit.chi_squared - chi_squared));
    let total: f64 = fits.iter().map(|(_, fit, _)| weight(fit)).sum();
    let members: Vec<Member> = fits
        .iter()
        .map(|(correction, fit, _)| Member {
            correction: *correction,
            value: fit.parameters[0],
            error: fit.error(0),
            chi_squared: fit.chi_squared,
            weight: weight(fit) / total,
        })
        .collect();
    let value: f64 = members.iter().map(|member| member.weight * member.value).sum();
    let statistical: f64 = members.iter().map(|member| member.weight * member.error * member.error).sum();
    let spread: f64 =
        members.iter().map(|member| member.weight * (member.value - value) * (member.value - value)).sum();
    let degrees = pairs - 2;
    maps.members = fits.into_iter().map(|(correction, fit, map)| (correction, weight(&fit) / total, map)).collect();
    let bias = maps.bias(data, covariance);
    let averaged = Extrapolated {
        value,
        error: (statistical + spread).sqrt(),
        statistical: statistical.sqrt(),
        spread: spread.sqrt(),
        chi_squared,
        degrees,
        p: chi_squared_p(chi_squared, degrees),
        constant,
        bias,
        members,
    };
    Some((averaged, maps))
}
