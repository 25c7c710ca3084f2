//! The Ising ring.

use spinledger_numerics::elementary::{cosh, exp, hypot, ln, ln_1p, pow, tanh};

/// The Ising model on a ring of n sites.
#[derive(Clone, Copy, Debug, PartialEq)]
#[non_exhaustive]
pub struct Ring {
    /// ln Z of the whole ring.
    pub log_z: f64,
    /// Magnetisation per site.
    pub magnetisation: f64,
    /// Correlation of neighbours: the energy per site is -J times this minus h times the magnetisation.
    pub neighbour_correlation: f64,
    /// Heat capacity per site without field; `None` with one.
    pub heat_capacity: Option<f64>,
}

/// Exact values for coupling over temperature `k` (negative: antiferromagnet) and field over temperature `h`
/// (Ising 1925 Z. Phys. 31 253, by the transfer matrix).
///
/// Each site has a bond to the next: a ring of two has two bonds, a ring of one a bond to itself. n = 0 counts as 1.
#[must_use]
pub fn ring(n: usize, k: f64, h: f64) -> Ring {
    let n = n.max(1);
    // Eigenvalues exp(k) (cosh h +- root), in units of exp(|k|) cosh(h) to stay finite, with exp(-2|k|) taken out.
    let (with, against) = if k >= 0.0 { (1.0, exp(-2.0 * k)) } else { (exp(2.0 * k), 1.0) };
    let field = tanh(h);
    let sech = 1.0 / cosh(h);
    let root = hypot(with * field, against * sech);
    let (high, low) = (with + root, with - root);
    // low = (with^2 - against^2) sech^2 / high, without cancellation.
    let low = if high > 0.0 { (with - against) * (with + against) * sech * sech / high } else { low };
    let ratio = low / high;
    let power = integer_power(ratio, n);
    let before = integer_power(ratio, n - 1);
    let log_z = n as f64 * (k.abs() + ln_cosh(h) + ln(high)) + ln_1p(power);
    // No root is left without field at couplings so strong that exp(-2|k|) underflows. Beside it are the derivatives of the
    // eigenvalues with respect to k.
    let (slope, bend) = if root > 0.0 {
        let (along, across) = (with * field, against * sech);
        (along / root, (along * along - across * across) / root)
    } else {
        (0.0, 0.0)
    };
    let magnetisation = slope * (1.0 - power) / (1.0 + power);
    let neighbour_correlation = ((with + bend) / high + before * (with - bend) / high) / (1.0 + power);
    let heat_capacity = (h == 0.0).then(|| {
        let t = tanh(k);
        let rest = 1.0 / (cosh(k) * cosh(k));
        let size = n as f64;
        let powered = integer_power(t, n);
        let first = size * integer_power(t, n - 1) * rest / (1.0 + powered);
        let lower = if n >= 2 { (size - 1.0) * integer_power(t, n - 2) * rest * rest } else { 0.0 };
        let second = size * (lower - 2.0 * powered * rest) / (1.0 + powered) - first * first;
        k * k * (rest + second / size)
    });
    Ring { log_z, magnetisation, neighbour_correlation, heat_capacity }
}

/// x^n with its sign.
fn integer_power(x: f64, n: usize) -> f64 {
    if n == 0 {
        return 1.0;
    }
    let magnitude = pow(x.abs(), n as f64);
    if x < 0.0 && n % 2 == 1 { -magnitude } else { magnitude }
}

fn ln_cosh(x: f64) -> f64 {
    x.abs() + ln_1p(exp(-2.0 * x.abs())) - std::f64::consts::LN_2
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn strong_couplings_stay_finite() {
        let found = ring(1000, 400.0, 0.0);
        assert!((found.log_z - 400_000.0 - std::f64::consts::LN_2).abs() < 1e-9);
        assert_eq!((found.neighbour_correlation, found.magnetisation), (1.0, 0.0));
        let found = ring(1000, -400.0, 0.0);
        assert!((found.neighbour_correlation + 1.0).abs() < 1e-12);
        assert_eq!(found.magnetisation, 0.0);
    }
}
