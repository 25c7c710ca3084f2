//! How far two limits of the same crossings are apart.
//!
//! Both come from the same data, so that their errors go together and say little about their difference. A limit with a given exponent is a
//! linear map of the crossings, and so is the difference of two; the covariance of the crossings, which is that of their jackknife replicates,
//! gives its error. The exponent is averaged as for the limit itself: the difference is taken at each, and its spread is part of the error.
//! So is the probability of so large a difference: a difference that is there whatever the exponent counts, however uncertain its size.

use spinledger_numerics::special::chi_squared_p;

use crate::matrix::{Matrix, dot};

/// A difference of two limits.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Shift {
    /// The difference.
    pub value: f64,
    /// Its standard error.
    pub error: f64,
    /// Probability of one as large or larger, of either sign, where there is none: that with each exponent, averaged.
    pub p: f64,
}

/// The maps from crossings to a limit.
#[derive(Clone, Debug)]
pub(super) struct Limit {
    /// To that of a constant.
    pub(super) constant: Vec<f64>,
    /// For each exponent: itself, its weight, the map. Empty for one pair.
    pub(super) members: Vec<(f64, f64, Vec<f64>)>,
}

impl Limit {
    /// Constant minus limit with a correction; `None` without the latter.
    pub(super) fn bias(&self, data: &[f64], covariance: &Matrix) -> Option<Shift> {
        let differences = self.members.iter().map(|(_, weight, map)| (*weight, difference(&self.constant, map)));
        average(data, covariance, &differences.collect::<Vec<_>>())
    }

    /// The limit without the first pairs minus this one; `None` where one of them has no correction. Both with the same exponent each time,
    /// weighted by what all pairs say of it.
    pub(super) fn shift(&self, without: &Limit, data: &[f64], covariance: &Matrix) -> Option<Shift> {
        let differences = self.members.iter().filter_map(|(correction, weight, map)| {
            let (_, _, other) = without.members.iter().find(|(other, _, _)| other == correction)?;
            Some((*weight, difference(&padded(other, map.len()), map)))
        });
        average(data, covariance, &differences.collect::<Vec<_>>())
    }

    /// The same of the constants.
    pub(super) fn constant_shift(&self, without: &Limit, data: &[f64], covariance: &Matrix) -> Option<Shift> {
        let other = padded(&without.constant, self.constant.len());
        average(data, covariance, &[(1.0, difference(&other, &self.constant))])
    }
}

/// A map that takes no notice of the first data.
fn padded(map: &[f64], length: usize) -> Vec<f64> {
    let mut whole = vec![0.0; length - map.len()];
    whole.extend_from_slice(map);
    whole
}

fn difference(a: &[f64], b: &[f64]) -> Vec<f64> {
    a.iter().zip(b).map(|(a, b)| a - b).collect()
}

/// Average over weighted maps; `None` without any.
fn average(data: &[f64], covariance: &Matrix, maps: &[(f64, Vec<f64>)]) -> Option<Shift> {
    let total: f64 = maps.iter().map(|(weight, _)| weight).sum();
    if total.is_nan() || total <= 0.0 {
        return None;
    }
    let each: Vec<(f64, f64, f64)> = maps
        .iter()
        .map(|(weight, map)| (weight / total, dot(map, data), dot(map, &covariance.times(map)).max(0.0)))
        .collect();
    let mean = |of: &dyn Fn(f64, f64) -> f64| -> f64 {
        each.iter().map(|(weight, value, variance)| weight * of(*value, *variance)).sum()
    };
    let value = mean(&|value, _| value);
    let variance = mean(&|own, variance| variance + (own - value) * (own - value));
    let p = mean(&|own, variance| if variance > 0.0 { chi_squared_p(own * own / variance, 1) } else { 1.0 });
    Some(Shift { value, error: variance.sqrt(), p })
}
