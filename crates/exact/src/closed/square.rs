//! The infinite square lattice.

use std::f64::consts::{FRAC_2_PI, FRAC_PI_2, PI, SQRT_2};

use spinledger_numerics::elementary::{cosh, exp, ln, ln_1p, pow, sin_cos, sinh, tanh};

use super::elliptic::complete;

/// The isotropic ferromagnetic Ising model on the infinite square lattice without field, per site, coupling 1.
#[derive(Clone, Copy, Debug, PartialEq)]
#[non_exhaustive]
pub struct Square {
    /// ln Z per site.
    pub log_z: f64,
    /// -T times that.
    pub free_energy: f64,
    /// Energy.
    pub energy: f64,
    /// Heat capacity; infinite at the critical temperature.
    pub heat_capacity: f64,
    /// Entropy.
    pub entropy: f64,
    /// Spontaneous magnetisation, 0 from the critical temperature on.
    pub magnetisation: f64,
    /// Correlation of nearest neighbours.
    pub neighbour_correlation: f64,
    /// Free energy per length of an interface along (1, 0); 0 from the critical temperature on.
    pub tension: f64,
    /// The same along (1, 1), per Euclidean length.
    pub tension_diagonal: f64,
    /// Inverse of the correlation length along (1, 0), of the connected correlation below the critical temperature.
    pub inverse_correlation_length: f64,
}

/// Exact values at K = 1/T > 0 (Onsager 1944 Phys. Rev. 65 117; Yang 1952 Phys. Rev. 85 808; McCoy & Wu 1973).
///
/// Errors are below about 1e-13, except in the heat capacity within 1e-6 of the critical temperature, where the rounding of
/// K shifts a logarithm. NaN for K that is not positive and finite or above 170, where exponentials overflow.
#[must_use]
pub fn square(k: f64) -> Square {
    let k = if k > 0.0 && k <= 170.0 { k } else { f64::NAN };
    let (sinh2, cosh2, tanh2) = (sinh(2.0 * k), cosh(2.0 * k), tanh(2.0 * k));
    // 2 tanh^2 - 1 = (sinh^2 - 1)/cosh^2, and that without cancellation near sinh = 1.
    let signed = (sinh2 - 1.0) / cosh2 * ((sinh2 + 1.0) / cosh2);
    let modulus = 2.0 * tanh2 / cosh2;
    let (elliptic, difference) = complete(signed.abs(), modulus);
    // At the critical point the product of 0 and a logarithm is 0.
    let product = if signed == 0.0 { 0.0 } else { signed * elliptic };
    let coth2 = 1.0 / tanh2;
    let energy = -coth2 * (1.0 + FRAC_2_PI * product);
    let heat_capacity = if signed == 0.0 {
        f64::INFINITY
    } else {
        4.0 / PI * (k * coth2) * (k * coth2) * (difference - (FRAC_PI_2 + product) / cosh2 / cosh2)
    };
    let log_z = ln_cosh(2.0 * k) + std::f64::consts::LN_2 + integral(signed.abs()) / PI;
    let ordered = sinh2 > 1.0;
    // Not a number outside the range.
    let zero = 0.0 * k;
    let gap = 2.0 * k + ln(tanh(k));
    let power = 1.0 / (sinh2 * sinh2);
    Square {
        log_z,
        free_energy: -log_z / k,
        energy,
        heat_capacity,
        entropy: log_z + k * energy,
        magnetisation: if ordered { pow((1.0 - power) * (1.0 + power), 0.125) } else { zero },
        neighbour_correlation: -0.5 * energy,
        tension: if ordered { gap / k } else { zero },
        tension_diagonal: if ordered { SQRT_2 / k * ln(sinh2) } else { zero },
        inverse_correlation_length: if ordered { 2.0 * gap } else { -gap },
    }
}

fn ln_cosh(x: f64) -> f64 {
    x + ln_1p(exp(-2.0 * x)) - std::f64::consts::LN_2
}

/// Integral over p from 0 to pi/2 of ln[(1 + sqrt(1 - k^2 sin^2 p))/2] for the complementary modulus.
///
/// By the double-exponential rule (Takahasi & Mori 1974 Publ. RIMS 9 721): its nodes crowd at the ends, where the integrand
/// has its square-root singularity as the modulus tends to 1.
fn integral(complementary: f64) -> f64 {
    const STEP: f64 = 1.0 / 32.0;
    // Beyond 3.5 the weights are below 1e-20.
    const NODES: i32 = 112;
    let mut total = 0.0;
    for node in -NODES..=NODES {
        let t = STEP * f64::from(node);
        let inner = FRAC_PI_2 * sinh(t);
        // Distance from pi/2, accurate where it is small: (pi/4)(1 - tanh(inner)) = (pi/2)/(1 + exp(2 inner)).
        let distance = FRAC_PI_2 / (1.0 + exp(2.0 * inner));
        let weight = FRAC_PI_2 * FRAC_PI_2 * 0.5 * cosh(t) / (cosh(inner) * cosh(inner));
        let (sine, cosine) = sin_cos(distance);
        let root = (sine * sine + complementary * complementary * cosine * cosine).sqrt();
        total += weight * ln(0.5 * (1.0 + root));
    }
    STEP * total
}
