//! Elementary and special functions, and sums.

use proptest::prelude::*;
use spinledger_numerics::elementary as e;
use spinledger_numerics::special::{chi_squared_p, gamma_q, normal_quantile};
use spinledger_numerics::sum::{CHUNK, CompensatedSum, mean, sum, sum_by};

#[test]
fn value_stability() {
    let x = 0.734_375;
    let found = [
        e::exp(x),
        e::exp_m1(x),
        e::ln(x),
        e::ln_1p(x),
        e::sin(x),
        e::cos(x),
        e::tan(x),
        e::sinh(x),
        e::cosh(x),
        e::tanh(x),
        e::acosh(1.0 + x),
        e::asinh(x),
        e::atanh(x),
        e::atan2(x, -0.25),
        e::pow(x, 2.5),
        e::lgamma(x),
        e::erf(x),
        e::erfc(x),
        e::exp(-40.3),
        e::ln(1e-300),
        e::sin(1e6),
        e::cos(1e6),
        e::tanh(1e-3),
        e::pow(7.3, -31.7),
        e::lgamma(123.4),
        e::erfc(5.5),
        e::log2(x),
        e::log10(x),
        e::cbrt(x),
        e::hypot(x, 3.0),
        e::acos(x),
        e::asin(x),
        e::atan(x),
        e::ln_add_exp(x, 0.1),
        normal_quantile(0.9),
        gamma_q(2.5, 1.5),
        gamma_q(2.5, 6.5),
    ]
    .map(f64::to_bits);
    assert_eq!(found, FROZEN, "{found:#x?}");
}

const FROZEN: [u64; 37] = [
    0x4000_ac66_0691_6501,
    0x3ff1_58cc_0d22_ca02,
    0xbfd3_c252_7733_3184,
    0x3fe1_9ee6_b467_c96f,
    0x3fe5_71a6_966d_59b3,
    0x3fe7_c082_7f09_e54f,
    0x3fec_e3f6_42e1_5af6,
    0x3fe9_ab83_c9ca_2dd4,
    0x3ff4_830a_283d_b318,
    0x3fe4_0604_a486_6019,
    0x3ff2_5d9f_f7d6_ea83,
    0x3fe5_c77a_3df7_2b23,
    0x3fee_0564_d32d_9391,
    0x3ffe_61f5_f9e8_4c98,
    0x3fdd_9412_0cb0_ca27,
    0x3fcc_3b59_c1b5_7138,
    0x3fe6_6e86_d031_2e82,
    0x3fd3_22f2_5f9d_a2fc,
    0x3c4d_0740_dfb1_adcb,
    0xc085_9634_47f8_7fb5,
    0xbfd6_664b_2568_d867,
    0x3fed_f9df_9906_d32c,
    0x3f50_624d_7751_6ce2,
    0x3a41_00a9_53d1_7233,
    0x407d_5560_a7b6_27a6,
    0x3d00_9182_b326_b229,
    0xbfdc_819d_c2d4_5fe4,
    0xbfc1_299a_4fb3_e306,
    0x3fec_dee0_3539_2e39,
    0x4008_b567_c0a8_1e45,
    0x3fe7_dfa6_2fc1_b2a5,
    0x3fea_6450_78c6_a78c,
    0x3fe4_4506_5b79_5b56,
    0x3ff2_8e9c_6030_d5e4,
    0x3ff4_813c_36e2_6d34,
    0x3fe6_6648_b218_61b6,
    0x3f97_f09a_91b3_c9d1,
];

#[test]
fn elementary_functions_at_known_points() {
    // Correctly rounded decimals of classical constants; two units in the last place allowed.
    let close =
        |found: f64, expected: f64| assert!((found / expected - 1.0).abs() <= 2.0 * f64::EPSILON, "{found} {expected}");
    close(e::exp(1.0), std::f64::consts::E);
    close(e::ln(2.0), std::f64::consts::LN_2);
    close(e::atan2(1.0, 1.0), std::f64::consts::FRAC_PI_4);
    close(e::acosh(e::cosh(2.0)), 2.0);
    close(e::lgamma(0.5), 0.572_364_942_924_700_1);
    close(e::erfc(1.0), 0.157_299_207_050_285_13);
    close(e::pow(2.0, 0.5), std::f64::consts::SQRT_2);
    close(e::sin_cos(0.5).0, e::sin(0.5));
    close(e::sin_cos(0.5).1, e::cos(0.5));
    close(e::ln_add_exp(1000.0, 1000.0), 1000.0 + std::f64::consts::LN_2);
    assert_eq!(e::ln_add_exp(f64::NEG_INFINITY, -3.0), -3.0);
    assert_eq!(e::ln_add_exp(f64::NEG_INFINITY, f64::NEG_INFINITY), f64::NEG_INFINITY);
}

#[test]
fn quantile_inverts_the_distribution_function() {
    // Through erfc, in every branch of the algorithm: the tail probability decides the accuracy that can be asked for.
    for step in 0..=1500 {
        let x = -0.025 * f64::from(step);
        let tail = 0.5 * e::erfc(-x / std::f64::consts::SQRT_2);
        assert!((normal_quantile(tail) - x).abs() <= 4e-15 * (1.0 - x), "{x}: {}", normal_quantile(tail));
        if x > -5.0 {
            let upper = normal_quantile(1.0 - tail);
            // 1 - tail is rounded to 2^-53, which is 2^-53 / density in x.
            let density = e::exp(-x * x / 2.0) * 0.398_942_280_401_432_7;
            assert!((upper + x).abs() <= 2e-15 * (1.0 - x) + 1.2e-16 / density, "{x}: {upper}");
        }
    }
    assert_eq!(normal_quantile(0.5), 0.0);
    assert_eq!(normal_quantile(0.0), f64::NEG_INFINITY);
    assert_eq!(normal_quantile(1.0), f64::INFINITY);
    assert!(normal_quantile(-0.1).is_nan() && normal_quantile(1.1).is_nan() && normal_quantile(f64::NAN).is_nan());
}

#[test]
fn incomplete_gamma_at_closed_forms() {
    for step in 1..400 {
        let x = 0.1 * f64::from(step);
        // Q(1, x) = e^-x; Q(1/2, x) = erfc(sqrt x); Q(3, x) = e^-x (1 + x + x^2/2).
        assert!((gamma_q(1.0, x) - e::exp(-x)).abs() < 1e-14, "{x}");
        assert!((gamma_q(0.5, x) - e::erfc(x.sqrt())).abs() < 1e-14, "{x}");
        assert!((gamma_q(3.0, x) - e::exp(-x) * (1.0 + x + x * x / 2.0)).abs() < 1e-14, "{x}");
    }
    // Poisson sum for a large order: Q(1000, 1000) = sum_{k<1000} e^-1000 1000^k / k!.
    let direct: f64 = sum_by(1000, |k| e::exp(k as f64 * e::ln(1000.0) - 1000.0 - e::lgamma(k as f64 + 1.0)));
    assert!((gamma_q(1000.0, 1000.0) - direct).abs() < 1e-11);
    assert_eq!(gamma_q(2.0, 0.0), 1.0);
    assert_eq!(gamma_q(2.0, f64::INFINITY), 0.0);
    assert!(gamma_q(0.0, 1.0).is_nan() && gamma_q(1.0, -1.0).is_nan() && gamma_q(1.0, f64::NAN).is_nan());
    // Upper 5 percent points of the chi-squared distribution.
    assert!((chi_squared_p(3.841_458_820_694_124, 1) - 0.05).abs() < 1e-13);
    assert!((chi_squared_p(18.307_038_053_275_15, 10) - 0.05).abs() < 1e-13);
    assert_eq!(chi_squared_p(5.0, 0), 1.0);
}

#[test]
fn compensated_sum_keeps_what_plain_addition_loses() {
    let mut total = CompensatedSum::new();
    total.extend([1.0, 1e100, 1.0, -1e100]);
    assert_eq!(total.value(), 2.0);
    let mut infinite = CompensatedSum::new();
    infinite.extend([1.0, f64::INFINITY, 1.0]);
    assert_eq!(infinite.value(), f64::INFINITY);
    let mut other = CompensatedSum::new();
    other.extend([1e-20, 3.0]);
    total.merge(&other);
    assert_eq!(total.value(), 5.0);
    assert_eq!(CompensatedSum::default().value(), 0.0);
}

#[test]
fn sums_of_every_length() {
    for count in (0..40).chain(CHUNK - 9..CHUNK + 9).chain(3 * CHUNK..3 * CHUNK + 3) {
        let values: Vec<f64> = (1..=count).map(|value| value as f64).collect();
        assert_eq!(sum(&values), (count * (count + 1) / 2) as f64);
    }
    assert_eq!(mean(&[]), None);
    assert_eq!(mean(&[0.1; 777]), Some(0.1));
    assert_eq!(mean(&[1.0, f64::INFINITY]), Some(f64::INFINITY));
    assert!(mean(&[f64::NAN, 1.0]).is_some_and(f64::is_nan));
}

proptest! {
    // Failing inputs are printed; a file of them would be written beside the sources.
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn sum_is_accurate(values in proptest::collection::vec(-1e6..1e6f64, 0..5000)) {
        // Exact by integers: the values are rounded to multiples of 2^-20 first.
        let scaled: Vec<i128> = values.iter().map(|value| (value * 1_048_576.0) as i128).collect();
        let exact = scaled.iter().sum::<i128>() as f64 / 1_048_576.0;
        let rounded: Vec<f64> = scaled.iter().map(|value| *value as f64 / 1_048_576.0).collect();
        let scale: f64 = rounded.iter().map(|value| value.abs()).sum();
        prop_assert!((sum(&rounded) - exact).abs() <= 130.0 * f64::EPSILON * scale);
    }
}
