//! Distribution functions that statistics needs.

use crate::elementary::{exp, lgamma, ln};

/// Upper regularised incomplete gamma function Q(a, x) for a > 0, x >= 0; NaN elsewhere.
///
/// Series below x = a + 1, continued fraction by the modified Lentz method above (Abramowitz & Stegun 1964 6.5.29
/// and 6.5.31; Thompson & Barnett 1986 J. Comput. Phys. 64 490). Absolute error below about 1e-13 for a up to 1000.
#[must_use]
pub fn gamma_q(a: f64, x: f64) -> f64 {
    if a.is_nan() || x.is_nan() || a <= 0.0 || x < 0.0 || a.is_infinite() {
        return f64::NAN;
    }
    if x == 0.0 {
        return 1.0;
    }
    if x.is_infinite() {
        return 0.0;
    }
    let front = exp(a * ln(x) - x - lgamma(a));
    // Terms shrink by at least a fixed factor beyond about sqrt(a) of them: the caps are never the reason to stop.
    if x < a + 1.0 {
        let (mut term, mut total, mut k) = (1.0 / a, 1.0 / a, a);
        for _ in 0..100_000 {
            k += 1.0;
            term *= x / k;
            total += term;
            if term <= total * 1e-17 {
                break;
            }
        }
        return (1.0 - front * total).clamp(0.0, 1.0);
    }
    let tiny = 1e-300;
    let mut b = x + 1.0 - a;
    let (mut c, mut d) = (1.0 / tiny, 1.0 / b);
    let mut fraction = d;
    for n in 1..100_000 {
        let n = f64::from(n);
        let numerator = -n * (n - a);
        b += 2.0;
        d = numerator * d + b;
        c = b + numerator / c;
        if d.abs() < tiny {
            d = tiny;
        }
        if c.abs() < tiny {
            c = tiny;
        }
        d = 1.0 / d;
        let factor = c * d;
        fraction *= factor;
        if (factor - 1.0).abs() < 1e-16 {
            break;
        }
    }
    (front * fraction).clamp(0.0, 1.0)
}

/// Probability that a chi-squared variable of this many degrees of freedom exceeds `chi_squared`.
///
/// 1 for zero degrees (nothing to test); NaN for a NaN argument.
#[must_use]
pub fn chi_squared_p(chi_squared: f64, degrees: usize) -> f64 {
    if degrees == 0 {
        return if chi_squared.is_nan() { f64::NAN } else { 1.0 };
    }
    gamma_q(degrees as f64 / 2.0, chi_squared / 2.0)
}

/// Quantile of the standard normal distribution: -inf at 0, inf at 1, NaN outside [0, 1].
///
/// Algorithm PPND16 of Wichura 1988 Appl. Statist. 37 477 (AS 241), relative error about 1e-16.
#[must_use]
pub fn normal_quantile(p: f64) -> f64 {
    if p.is_nan() || !(0.0..=1.0).contains(&p) {
        return f64::NAN;
    }
    let q = p - 0.5;
    if q.abs() <= 0.425 {
        let r = 0.180_625 - q * q;
        return q * polynomial(&CENTRE_ABOVE, r) / polynomial(&CENTRE_BELOW, r);
    }
    let tail = if q < 0.0 { p } else { 1.0 - p };
    let r = if tail == 0.0 { f64::INFINITY } else { (-ln(tail)).sqrt() };
    let magnitude = if r.is_infinite() {
        r
    } else if r <= 5.0 {
        polynomial(&MIDDLE_ABOVE, r - 1.6) / polynomial(&MIDDLE_BELOW, r - 1.6)
    } else {
        polynomial(&FAR_ABOVE, r - 5.0) / polynomial(&FAR_BELOW, r - 5.0)
    };
    if q < 0.0 { -magnitude } else { magnitude }
}

/// Value of the polynomial with these coefficients, lowest first.
fn polynomial(coefficients: &[f64; 8], x: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |value, coefficient| value * x + coefficient)
}

const CENTRE_ABOVE: [f64; 8] = [
    3.387_132_872_796_366_5,
    1.331_416_678_917_843_8e2,
    1.971_590_950_306_551_3e3,
    1.373_169_376_550_946e4,
    4.592_195_393_154_987e4,
    6.726_577_092_700_87e4,
    3.343_057_558_358_813e4,
    2.509_080_928_730_122_7e3,
];
const CENTRE_BELOW: [f64; 8] = [
    1.0,
    4.231_333_070_160_091e1,
    6.871_870_074_920_579e2,
    5.394_196_021_424_751e3,
    2.121_379_430_158_659_7e4,
    3.930_789_580_009_271e4,
    2.872_908_573_572_194_3e4,
    5.226_495_278_852_854e3,
];
const MIDDLE_ABOVE: [f64; 8] = [
    1.423_437_110_749_683_5,
    4.630_337_846_156_546,
    5.769_497_221_460_691,
    3.647_848_324_763_204_5,
    1.270_458_252_452_368_4,
    2.417_807_251_774_506e-1,
    2.272_384_498_926_918_4e-2,
    7.745_450_142_783_414e-4,
];
const MIDDLE_BELOW: [f64; 8] = [
    1.0,
    2.053_191_626_637_759,
    1.676_384_830_183_803_8,
    6.897_673_349_851e-1,
    1.481_039_764_274_800_8e-1,
    1.519_866_656_361_645_7e-2,
    5.475_938_084_995_345e-4,
    1.050_750_071_644_416_9e-9,
];
const FAR_ABOVE: [f64; 8] = [
    6.657_904_643_501_103,
    5.463_784_911_164_114,
    1.784_826_539_917_291_3,
    2.965_605_718_285_048_7e-1,
    2.653_218_952_657_612_4e-2,
    1.242_660_947_388_078_4e-3,
    2.711_555_568_743_487_6e-5,
    2.010_334_399_292_288_1e-7,
];
const FAR_BELOW: [f64; 8] = [
    1.0,
    5.998_322_065_558_88e-1,
    1.369_298_809_227_358e-1,
    1.487_536_129_085_061_5e-2,
    7.868_691_311_456_133e-4,
    1.846_318_317_510_054_8e-5,
    1.421_511_758_316_446e-7,
    2.044_263_103_389_939_8e-15,
];
