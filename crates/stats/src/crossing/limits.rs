//! Limits of all crossings, and of those without the smallest size.

use super::extrapolate::{self, Extrapolated};
use super::pair::{self, Found};
use super::shift::{Limit, Shift};
use super::{CrossingFlag, CrossingInfo, CrossingParams};
use crate::fit::{Errors, linear};
use crate::matrix::{Matrix, dot};

/// What the crossings say when the smallest size is left out. How much a limit depends on what sizes there are is the first thing to ask of it.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct WithoutSmallest {
    /// Limit of the places, as it would be found from the other sizes alone; `None` without a pair.
    pub place: Option<Extrapolated>,
    /// What is doubtful about it, in order, each once.
    pub flags: Vec<CrossingFlag>,
    /// What is doubtful about the constant fitted to its places, and not about it: `Biased`, `BadFit`.
    pub constant_flags: Vec<CrossingFlag>,
    /// How far the limit moves: that without the smallest size minus that with it. `None` for fewer than three pairs.
    pub shift: Option<Shift>,
    /// The same of the fitted constant. `None` for fewer than two pairs.
    pub constant_shift: Option<Shift>,
}

/// Limits of some successive pairs.
struct Limits {
    places: Vec<f64>,
    covariance: Matrix,
    place: Option<(Extrapolated, Limit)>,
    value: Option<(Extrapolated, Limit)>,
    inverse_nu: (f64, f64),
    flags: Vec<CrossingFlag>,
}

impl Limits {
    /// `found` has `None` for pairs that do not cross.
    fn of(found: &[Option<Found>], params: &CrossingParams) -> Self {
        let mut flags = Vec::new();
        let pairs: Vec<&Found> = found.iter().flatten().collect();
        if pairs.len() < found.len() {
            flags.push(CrossingFlag::NoCrossing);
        }
        if pairs.len() < 3 {
            flags.push(CrossingFlag::FewSizes);
        }
        let inverse_nu = match params.inverse_nu {
            Some(given) => (given, 0.0),
            None => mean_inverse_nu(&pairs),
        };
        let covariance = |part: usize| {
            Matrix::from_fn(pairs.len(), pairs.len(), |a, b| {
                let model = if a == b { pairs[a].model_variance[part] } else { 0.0 };
                pairs[a].deviations.iter().map(|mine| shared(mine, pairs[b], part)).sum::<f64>() + model
            })
        };
        let data = |part: usize| pairs.iter().map(|pair| pair.centre[part]).collect::<Vec<f64>>();
        let limit = |part: usize, covariance: &Matrix| {
            let form = if part == pair::PLACE { extrapolate::place_form } else { extrapolate::value_form };
            extrapolate::extrapolate(&data(part), covariance, &params.corrections, |w| {
                pairs.iter().map(|pair| form(pair.size, pair.partner, inverse_nu.0, w)).collect()
            })
        };
        let places = covariance(pair::PLACE);
        let (place, value) = (limit(pair::PLACE, &places), limit(pair::VALUE, &covariance(pair::VALUE)));
        // A limit that cannot be had from crossings there are: covariances that are not positive definite.
        let failed = !pairs.is_empty() && (place.is_none() || value.is_none());
        let unlikely =
            |limit: &Option<(Extrapolated, Limit)>| limit.as_ref().is_some_and(|(limit, _)| limit.p < params.least_p);
        let rough = pairs.iter().any(|pair| pair.local_p < 0.1 * params.least_p);
        if failed || unlikely(&place) || unlikely(&value) || rough {
            flags.push(CrossingFlag::BadFit);
        }
        flags.sort_unstable();
        Self { places: data(pair::PLACE), covariance: places, place, value, inverse_nu, flags }
    }
}

/// Limits of all pairs of successive sizes, `None` for those that do not cross.
pub(super) fn limits(found: &[Option<Found>], params: &CrossingParams) -> CrossingInfo {
    let all = Limits::of(found, params);
    let without = Limits::of(&found[1..], params);
    let (mut shift, mut constant_shift) = (None, None);
    if let (Some((_, map)), Some((_, other))) = (&all.place, &without.place) {
        // Where the smallest two sizes do not cross, leaving out the smallest changes nothing.
        if all.places.len() > without.places.len() {
            shift = map.shift(other, &all.places, &all.covariance);
            constant_shift = map.constant_shift(other, &all.places, &all.covariance);
        }
    }
    let flag = |flag: CrossingFlag, p: Option<f64>| p.is_some_and(|p| p < params.least_p).then_some(flag);
    let of_constant = |limit: &Option<(Extrapolated, Limit)>| {
        let limit = limit.as_ref().map(|(limit, _)| limit);
        let bias = limit.and_then(|limit| limit.bias).map(|bias| bias.p);
        let fit = flag(CrossingFlag::BadFit, limit.map(|limit| limit.constant.p));
        fit.into_iter().chain(flag(CrossingFlag::Biased, bias)).collect::<Vec<_>>()
    };
    let mut constant_flags = of_constant(&all.place);
    constant_flags.extend(flag(CrossingFlag::SizeDependent, constant_shift.map(|shift| shift.p)));
    CrossingInfo {
        pairs: found.iter().flatten().map(Found::report).collect(),
        place_flags: flag(CrossingFlag::SizeDependent, shift.map(|shift| shift.p)).into_iter().collect(),
        constant_flags,
        value_constant_flags: of_constant(&all.value),
        without_smallest: WithoutSmallest {
            constant_flags: of_constant(&without.place),
            place: without.place.map(|(limit, _)| limit),
            flags: without.flags,
            shift,
            constant_shift,
        },
        covariance: all.covariance,
        place: all.place.map(|(limit, _)| limit),
        value: all.value.map(|(limit, _)| limit),
        inverse_nu: all.inverse_nu,
        flags: all.flags,
    }
}

/// Covariance that two pairs have through one size.
fn shared(mine: &pair::Deviations, other: &Found, part: usize) -> f64 {
    let same = other.deviations.iter().find(|other| other.size == mine.size);
    same.map_or(0.0, |other| dot(&mine.parts[part], &other.parts[part]))
}

/// Weighted mean of 1/nu over the pairs whose slopes give one, kept within 0.3 to 4; 1 without any.
fn mean_inverse_nu(found: &[&Found]) -> (f64, f64) {
    let (mut data, mut errors) = (Vec::new(), Vec::new());
    for pair in found {
        let variance: f64 =
            pair.deviations.iter().map(|part| dot(&part.parts[pair::SLOPES], &part.parts[pair::SLOPES])).sum();
        if pair.centre[pair::SLOPES].is_finite() && variance.is_finite() && variance > 0.0 {
            data.push(pair.centre[pair::SLOPES]);
            errors.push(variance.sqrt());
        }
    }
    let ones = Matrix::from_fn(data.len(), 1, |_, _| 1.0);
    match linear(&ones, &data, Errors::Independent(&errors)) {
        Ok(fit) => (fit.parameters[0].clamp(0.3, 4.0), fit.error(0)),
        Err(_) => (1.0, 0.0),
    }
}
