//! Complete elliptic integrals.

/// K(k) and K(k) - E(k) for the complementary modulus k' = sqrt(1 - k^2) in (0, 1], by the arithmetic-geometric mean
/// (Abramowitz & Stegun 1964 17.6). The difference is summed on its own, without cancellation.
pub(super) fn complete(complementary: f64, modulus: f64) -> (f64, f64) {
    let (mut a, mut b) = (1.0, complementary);
    let mut c = modulus;
    let mut factor = 0.5;
    let mut total = factor * c * c;
    for _ in 0..40 {
        if c.abs() <= 1e-17 * a {
            break;
        }
        (a, b, c) = (0.5 * (a + b), (a * b).sqrt(), 0.5 * (a - b));
        factor *= 2.0;
        total += factor * c * c;
    }
    let k = std::f64::consts::FRAC_PI_2 / a;
    (k, k * total)
}
