//! Curves that bend towards a bound, made nearly straight.

use spinledger_numerics::elementary::{exp, ln};

use super::{CrossingInfo, Curve, Replicates};

/// Least distance from the bound, as a part of it: where nothing fluctuated the distance is zero.
const LEAST: f64 = 1e-9;

/// The curve with y replaced by -ln(ceiling - y).
pub(super) fn curve(curve: &Curve, ceiling: f64) -> Curve {
    let straight = |y: f64| -ln((ceiling - y).max(LEAST * ceiling.abs()));
    let rows = |rows: &Vec<Vec<f64>>| -> Vec<Vec<f64>> {
        rows.iter().map(|row| row.iter().map(|y| straight(*y)).collect()).collect()
    };
    Curve {
        size: curve.size,
        x: curve.x.clone(),
        y: curve.y.iter().map(|y| straight(*y)).collect(),
        replicates: match &curve.replicates {
            Replicates::Separate(points) => Replicates::Separate(rows(points)),
            Replicates::Joint(blocks) => Replicates::Joint(rows(blocks)),
        },
    }
}

/// Values and their errors as those of the curves that were given; errors to first order.
pub(super) fn undo(found: &mut CrossingInfo, ceiling: f64) {
    let bent = |value: &mut f64, errors: &mut [&mut f64]| {
        let distance = exp(-*value);
        *value = ceiling - distance;
        errors.iter_mut().for_each(|error| **error *= distance);
    };
    for pair in &mut found.pairs {
        bent(&mut pair.value, &mut [&mut pair.value_error]);
    }
    if let Some(limit) = &mut found.value {
        bent(&mut limit.value, &mut [&mut limit.error, &mut limit.statistical, &mut limit.spread]);
        bent(&mut limit.constant.value, &mut [&mut limit.constant.error]);
        if let Some(bias) = &mut limit.bias {
            // A difference: the distance from the bound at one of its ends, to first order.
            let distance = ceiling - limit.value;
            bias.value *= distance;
            bias.error *= distance;
        }
        for member in &mut limit.members {
            bent(&mut member.value, &mut [&mut member.error]);
        }
    }
}
