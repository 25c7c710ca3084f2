//! Exact critical temperatures of nearest-neighbour models without field, in units of the coupling (k_B = 1).

use spinledger_numerics::elementary::{acosh, asinh, cos, cosh, exp, ln, ln_1p, sinh};

/// Ising model on the square lattice, 2/ln(1 + sqrt 2) (Kramers & Wannier 1941; Onsager 1944).
#[must_use]
pub fn square_ising() -> f64 {
    2.0 / ln_1p(2f64.sqrt())
}

/// Ising model on the triangular lattice, 4/ln 3 (Houtappel 1950 Physica 16 425).
#[must_use]
pub fn triangular_ising() -> f64 {
    4.0 / ln(3.0)
}

/// Ising model on the honeycomb lattice, 2/ln(2 + sqrt 3) (Houtappel 1950).
#[must_use]
pub fn honeycomb_ising() -> f64 {
    2.0 / ln(2.0 + 3f64.sqrt())
}

/// Ising model on the kagome lattice, 4/ln(3 + 2 sqrt 3) (Kano & Naya 1953 Prog. Theor. Phys. 10 158).
#[must_use]
pub fn kagome_ising() -> f64 {
    4.0 / ln(3.0 + 2.0 * 3f64.sqrt())
}

/// Ising model on the square lattice with couplings x and y along the two directions: the root of
/// sinh(2x/T) sinh(2y/T) = 1 (Onsager 1944). `None` unless both are finite and not zero; signs do not matter.
#[must_use]
pub fn anisotropic_square_ising(x: f64, y: f64) -> Option<f64> {
    let (x, y) = (x.abs(), y.abs());
    let (large, small) = (x.max(y), x.min(y));
    if !(x.is_finite() && y.is_finite()) || small == 0.0 {
        return None;
    }
    // In K = large/T: sinh(2K) sinh(2 r K) = 1 has its root between those for r = 1 and for the smaller coupling alone.
    let ratio = small / large;
    let mut low = 0.5 * asinh(1.0);
    let mut high = low / ratio;
    // Newton on ln sinh + ln sinh, which is concave and increasing, kept inside the bracket.
    let mut k = low;
    for _ in 0..200 {
        let value = ln_sinh(2.0 * k) + ln_sinh(2.0 * ratio * k);
        if value < 0.0 {
            low = k
        } else {
            high = k
        }
        let slope = 2.0 / tanh_of(2.0 * k) + 2.0 * ratio / tanh_of(2.0 * ratio * k);
        let next = k - value / slope;
        let next = if next > low && next < high { next } else { 0.5 * (low + high) };
        if (next - k).abs() <= 1e-16 * k {
            break;
        }
        k = next;
    }
    Some(large / k)
}

fn ln_sinh(x: f64) -> f64 {
    if x < 1.0 { ln(sinh(x)) } else { x + ln_1p(-exp(-2.0 * x)) - std::f64::consts::LN_2 }
}

fn tanh_of(x: f64) -> f64 {
    spinledger_numerics::elementary::tanh(x)
}

/// Potts model with q states on the square lattice, 1/ln(1 + sqrt q) (Potts 1952; Baxter 1973 J. Phys. C 6 L445): continuous
/// up to q = 4, of first order above. `None` for q below 1 or not finite.
#[must_use]
pub fn square_potts(q: f64) -> Option<f64> {
    (q.is_finite() && q >= 1.0).then(|| 1.0 / ln_1p(q.sqrt()))
}

/// Potts model on the triangular lattice: v^3 + 3 v^2 = q with v = exp(1/T) - 1 (Kim & Joseph 1974 J. Phys. C 7 L167).
/// `None` for q below 1 or not finite.
#[must_use]
pub fn triangular_potts(q: f64) -> Option<f64> {
    if !q.is_finite() || q < 1.0 {
        return None;
    }
    // v = w - 1 gives w^3 - 3 w + 2 = q.
    let w = 2.0 * third((q - 2.0) / 2.0);
    Some(1.0 / ln(w))
}

/// Potts model on the honeycomb lattice: v^3 - 3 q v - q^2 = 0 with v = exp(1/T) - 1 (Kim & Joseph 1974). `None` for
/// q below 1 or not finite.
#[must_use]
pub fn honeycomb_potts(q: f64) -> Option<f64> {
    if !q.is_finite() || q < 1.0 {
        return None;
    }
    // v = 2 sqrt(q) w: 4 w^3 - 3 w = sqrt(q)/2.
    Some(1.0 / ln_1p(2.0 * q.sqrt() * third(q.sqrt() / 2.0)))
}

/// The largest root of 4 w^3 - 3 w = c for c >= -1: the cosine or hyperbolic cosine of a third of the angle.
fn third(c: f64) -> f64 {
    if c > 1.0 { cosh(acosh(c) / 3.0) } else { cos(spinledger_numerics::elementary::acos(c) / 3.0) }
}
