//! The crossing of two curves.

use spinledger_numerics::elementary::ln;
use spinledger_numerics::special::chi_squared_p;

use super::{Curve, Replicates, deviations};
use crate::local::{Local, LocalParams, local, value_and_slope};
use crate::matrix::dot;

/// Index of the place of a crossing among its results.
pub(super) const PLACE: usize = 0;
/// Index of the value at the crossing.
pub(super) const VALUE: usize = 1;
/// Index of 1/nu from the slopes.
pub(super) const SLOPES: usize = 2;

/// The crossing of two sizes.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct PairCrossing {
    /// Smaller size.
    pub size: f64,
    /// Larger size.
    pub partner: f64,
    /// Place of the crossing.
    pub place: f64,
    /// Its standard error, the choice of polynomials included.
    pub error: f64,
    /// Value of both curves there.
    pub value: f64,
    /// Its standard error.
    pub value_error: f64,
    /// ln(ratio of slopes)/ln(ratio of sizes), an estimate of 1/nu; `None` if the slopes differ in sign.
    pub inverse_nu: Option<f64>,
    /// Standard error of `inverse_nu`.
    pub inverse_nu_error: Option<f64>,
}

/// A crossing with what its covariance with others needs.
pub(super) struct Found {
    pub(super) size: f64,
    pub(super) partner: f64,
    pub(super) centre: [f64; 3],
    /// Through the smaller and through the larger size.
    pub(super) deviations: [Deviations; 2],
    /// Variances of place and value from the choice of polynomials.
    pub(super) model_variance: [f64; 2],
    /// Smaller of the probabilities of the two local fits.
    pub(super) local_p: f64,
}

/// Scaled jackknife deviations of the results through the replicates of one size.
pub(super) struct Deviations {
    pub(super) size: f64,
    pub(super) parts: [Vec<f64>; 3],
}

impl Found {
    pub(super) fn report(&self) -> PairCrossing {
        let variance = |part: usize| {
            self.deviations.iter().map(|part_of| dot(&part_of.parts[part], &part_of.parts[part])).sum::<f64>()
        };
        let slopes = Some(self.centre[SLOPES]).filter(|value| value.is_finite());
        PairCrossing {
            size: self.size,
            partner: self.partner,
            place: self.centre[PLACE],
            error: (variance(PLACE) + self.model_variance[PLACE]).sqrt(),
            value: self.centre[VALUE],
            value_error: (variance(VALUE) + self.model_variance[VALUE]).sqrt(),
            inverse_nu: slopes,
            inverse_nu_error: slopes.and(Some(variance(SLOPES).sqrt()).filter(|error| error.is_finite())),
        }
    }
}

/// Finds the crossing of two curves, `None` if they do not cross within their common range.
pub(super) fn find(small: &Curve, large: &Curve, params: &LocalParams) -> Option<Found> {
    let low = small.x[0].max(large.x[0]);
    let high = small.x[small.x.len() - 1].min(large.x[large.x.len() - 1]);
    let curves = [small, large];
    let errors = [small.errors(), large.errors()];
    let mut centre = guess(curves, &errors, low, high)?;
    let fit = |curve: usize, centre: f64| {
        let Curve { x, y, replicates, .. } = curves[curve];
        let smooth = matches!(replicates, Replicates::Joint(_));
        local(x, y, &errors[curve], centre, &LocalParams { smooth, ..*params }).ok()
    };
    let mut fits = [fit(0, centre)?, fit(1, centre)?];
    for _ in 0..3 {
        let coefficients = [fits[0].base.clone(), fits[1].base.clone()];
        centre = root(&fits, &coefficients, centre).filter(|place| (low..=high).contains(place))?;
        fits = [fit(0, centre)?, fit(1, centre)?];
    }
    let coefficients = [fits[0].base.clone(), fits[1].base.clone()];
    let place = root(&fits, &coefficients, centre).filter(|place| (low..=high).contains(place))?;
    let results = |coefficients: &[Vec<f64>; 2], place: f64| {
        let (value, slope) = value_and_slope(&coefficients[0], fits[0].reduced(place));
        let (_, partner) = value_and_slope(&coefficients[1], fits[1].reduced(place));
        let ratio = partner / fits[1].scale / (slope / fits[0].scale);
        [place, value, ln(ratio) / ln(large.size / small.size)]
    };
    let through = |curve: usize| {
        let mut parts: [Vec<f64>; 3] = Default::default();
        curves[curve].for_each_group(|group| {
            let each = |values: &Vec<f64>| {
                let mut varied = coefficients.clone();
                let change: Vec<f64> = values.iter().zip(&curves[curve].y).map(|(new, old)| new - old).collect();
                varied[curve] = fits[curve].coefficients(&change);
                let place = root(&fits, &varied, place).unwrap_or_else(|| step(&fits, &varied, place));
                results(&varied, place)
            };
            let group: Vec<[f64; 3]> = group.iter().map(each).collect();
            for (part, deviation) in parts.iter_mut().enumerate() {
                deviation.extend(deviations(&group, part));
            }
        });
        Deviations { size: curves[curve].size, parts }
    };
    let slope = |curve: usize| value_and_slope(&coefficients[curve], fits[curve].reduced(place)).1 / fits[curve].scale;
    let (slopes, steepness) = ([slope(0), slope(1)], slope(1) - slope(0));
    let model = [fits[0].model_error, fits[1].model_error];
    let of_place = (model[0] * model[0] + model[1] * model[1]) / (steepness * steepness);
    let of_value = ((slopes[1] * model[0]) * (slopes[1] * model[0]) + (slopes[0] * model[1]) * (slopes[0] * model[1]))
        / (steepness * steepness);
    let p = |fit: &Local| chi_squared_p(fit.chi_squared, fit.degrees);
    let found = Found {
        size: small.size,
        partner: large.size,
        centre: results(&coefficients, place),
        deviations: [through(0), through(1)],
        model_variance: [of_place, of_value],
        local_p: p(&fits[0]).min(p(&fits[1])),
    };
    // A place known no better than the range it was looked for in is no crossing.
    (found.report().error < high - low).then_some(found)
}

/// The place where the difference changes sign, judged by all points in the common range.
fn guess(curves: [&Curve; 2], errors: &[Vec<f64>; 2], low: f64, high: f64) -> Option<f64> {
    let mut places: Vec<f64> =
        curves.iter().flat_map(|curve| &curve.x).copied().filter(|place| (low..=high).contains(place)).collect();
    places.sort_unstable_by(f64::total_cmp);
    places.dedup();
    let difference =
        |place: f64| interpolated(&curves[1].x, &curves[1].y, place) - interpolated(&curves[0].x, &curves[0].y, place);
    let error = |place: f64| {
        let (a, b) = (interpolated(&curves[0].x, &errors[0], place), interpolated(&curves[1].x, &errors[1], place));
        (a * a + b * b).sqrt()
    };
    let differences: Vec<f64> = places.iter().map(|place| difference(*place)).collect();
    let scale = differences.iter().fold(0.0f64, |most, value| most.max(value.abs()));
    let significance: Vec<f64> = places
        .iter()
        .zip(&differences)
        // A floor keeps points without fluctuations from deciding alone.
        .map(|(place, difference)| difference / error(*place).max(1e-6 * scale).max(f64::MIN_POSITIVE))
        .collect();
    let total: f64 = significance.iter().sum();
    let mut best = None;
    let mut left = 0.0;
    for split in 1..places.len() {
        left += significance[split - 1];
        let right = total - left;
        let contrast = (left - right).abs();
        if left * right < 0.0 && best.is_none_or(|(_, most)| contrast > most) {
            best = Some((split, contrast));
        }
    }
    let (split, _) = best?;
    let (before, after) = (differences[split - 1], differences[split]);
    let share = if before * after < 0.0 { before / (before - after) } else { 0.5 };
    Some(places[split - 1] + share * (places[split] - places[split - 1]))
}

/// Linear interpolation inside the range of the points.
fn interpolated(x: &[f64], y: &[f64], place: f64) -> f64 {
    let right = x.partition_point(|known| *known < place).clamp(1, x.len() - 1);
    let share = (place - x[right - 1]) / (x[right] - x[right - 1]);
    y[right - 1] + share * (y[right] - y[right - 1])
}

/// Difference of the two polynomials and its slope in x.
fn difference(fits: &[Local; 2], coefficients: &[Vec<f64>; 2], place: f64) -> (f64, f64) {
    let (small, small_slope) = value_and_slope(&coefficients[0], fits[0].reduced(place));
    let (large, large_slope) = value_and_slope(&coefficients[1], fits[1].reduced(place));
    (large - small, large_slope / fits[1].scale - small_slope / fits[0].scale)
}

/// Root near a place by Newton's method; `None` if it runs away by more than the scale of the polynomials.
fn root(fits: &[Local; 2], coefficients: &[Vec<f64>; 2], start: f64) -> Option<f64> {
    let reach = fits[0].scale.max(fits[1].scale);
    let mut place = start;
    for _ in 0..60 {
        let (value, slope) = difference(fits, coefficients, place);
        let next = place - value / slope;
        if !next.is_finite() || (next - start).abs() > 2.0 * reach {
            return None;
        }
        if (next - place).abs() <= 1e-13 * (reach + next.abs()) {
            return Some(next);
        }
        place = next;
    }
    None
}

/// One step towards the root, for a replicate whose root cannot be followed.
fn step(fits: &[Local; 2], coefficients: &[Vec<f64>; 2], place: f64) -> f64 {
    let (value, slope) = difference(fits, coefficients, place);
    place - value / slope
}
