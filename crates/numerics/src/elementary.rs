//! Elementary functions whose bits do not depend on the machine.
//!
//! The functions of `std` call the platform's C library, whose last bits differ between systems and releases.
//! These call one release of `libm`, written in Rust, built without its `arch` feature (which would choose fused
//! operations by processor). Errors are below one unit in the last place for most of them, below a few for
//! [`pow`], [`lgamma`] and [`erfc`].
//!
//! `sqrt`, `abs`, `floor`, `+ - * /` of `std` are correctly rounded by IEEE 754 and need no wrapper; `mul_add` is
//! correctly rounded too but is avoided, since portable and vector code would then differ.

macro_rules! unary {
    ($($(#[$doc:meta])* $name:ident = $from:ident;)*) => {$(
        $(#[$doc])*
        #[inline]
        #[must_use]
        pub fn $name(x: f64) -> f64 {
            libm::$from(x)
        }
    )*};
}

unary! {
    /// e^x.
    exp = exp;
    /// e^x - 1, accurate near 0.
    exp_m1 = expm1;
    /// Natural logarithm; -inf at 0, NaN below.
    ln = log;
    /// ln(1 + x), accurate near 0.
    ln_1p = log1p;
    /// Logarithm to base 2.
    log2 = log2;
    /// Logarithm to base 10.
    log10 = log10;
    /// Sine of an angle in radians.
    sin = sin;
    /// Cosine of an angle in radians.
    cos = cos;
    /// Tangent of an angle in radians.
    tan = tan;
    /// Angle in [0, pi] whose cosine is x; NaN outside [-1, 1].
    acos = acos;
    /// Angle in [-pi/2, pi/2] whose sine is x; NaN outside [-1, 1].
    asin = asin;
    /// Angle in [-pi/2, pi/2] whose tangent is x.
    atan = atan;
    /// Hyperbolic sine.
    sinh = sinh;
    /// Hyperbolic cosine.
    cosh = cosh;
    /// Hyperbolic tangent.
    tanh = tanh;
    /// Nonnegative number whose hyperbolic cosine is x; NaN below 1.
    acosh = acosh;
    /// Number whose hyperbolic sine is x.
    asinh = asinh;
    /// Number whose hyperbolic tangent is x; infinite at -1 and 1, NaN beyond.
    atanh = atanh;
    /// Cube root.
    cbrt = cbrt;
    /// ln |Gamma(x)|.
    lgamma = lgamma;
    /// Error function.
    erf = erf;
    /// 1 - erf(x), accurate for large x.
    erfc = erfc;
}

/// x raised to the power y.
#[inline]
#[must_use]
pub fn pow(x: f64, y: f64) -> f64 {
    libm::pow(x, y)
}

/// Angle of the point (x, y) in (-pi, pi]; the ordinate comes first.
#[inline]
#[must_use]
pub fn atan2(y: f64, x: f64) -> f64 {
    libm::atan2(y, x)
}

/// Square root of x^2 + y^2 without overflow on the way.
#[inline]
#[must_use]
pub fn hypot(x: f64, y: f64) -> f64 {
    libm::hypot(x, y)
}

/// Sine and cosine of the same angle in radians.
#[inline]
#[must_use]
pub fn sin_cos(x: f64) -> (f64, f64) {
    libm::sincos(x)
}

/// ln(e^a + e^b) without overflow; -inf stands for a vanishing term.
#[inline]
#[must_use]
pub fn ln_add_exp(a: f64, b: f64) -> f64 {
    let (high, low) = if a >= b { (a, b) } else { (b, a) };
    if high.is_infinite() {
        return high;
    }
    high + ln_1p(exp(low - high))
}
