//! Least squares and local polynomials.

mod common;

use common::{Normal, moments};
use proptest::prelude::*;
use spinledger_numerics::elementary::exp;
use spinledger_stats::fit::{Errors, FitError, NonlinearParams, linear, linear_map, nonlinear};
use spinledger_stats::local::{LocalError, LocalParams, local, value_and_slope};
use spinledger_stats::matrix::Matrix;

fn line(count: usize) -> Matrix {
    Matrix::from_fn(count, 2, |row, k| if k == 0 { 1.0 } else { row as f64 })
}

#[test]
fn a_line_by_hand() {
    // y = 1, 3, 2 at 0, 1, 2 with errors 1: intercept 3/2, slope 1/2, residuals -1/2, 1, -1/2.
    let fit = linear(&line(3), &[1.0, 3.0, 2.0], Errors::Independent(&[1.0; 3])).expect("a fit");
    assert!((fit.parameters[0] - 1.5).abs() < 1e-14 && (fit.parameters[1] - 0.5).abs() < 1e-14);
    assert!((fit.chi_squared - 1.5).abs() < 1e-14 && fit.degrees == 1);
    assert!((fit.covariance[(0, 0)] - 5.0 / 6.0).abs() < 1e-14);
    assert!((fit.covariance[(0, 1)] + 0.5).abs() < 1e-14);
    assert!((fit.error(1) - 0.5f64.sqrt()).abs() < 1e-14);
    // Q(1/2, 3/4) = erfc(sqrt(3)/2).
    assert!((fit.p() - 0.220_671_361_919_847).abs() < 1e-12, "{}", fit.p());
}

#[test]
fn correlated_data() {
    // Mean of two data with variances 1, 4 and covariance 1: weights (3, 0)/3, variance 1.
    let covariance = Matrix::from_fn(2, 2, |a, b| [[1.0, 1.0], [1.0, 4.0]][a][b]);
    let ones = Matrix::from_fn(2, 1, |_, _| 1.0);
    let fit = linear(&ones, &[3.0, 9.0], Errors::Covariance(&covariance)).expect("a fit");
    assert!((fit.parameters[0] - 3.0).abs() < 1e-14 && (fit.error(0) - 1.0).abs() < 1e-14);
    assert!((fit.chi_squared - 12.0).abs() < 1e-12);
}

#[test]
fn chi_squared_of_true_models_is_distributed_as_it_should() {
    // 500 fits with 4 degrees: mean 4 +- 0.13, and p below 0.05 in 25 +- 5; bounds at about four of these.
    let (mut chi, mut low) = (Vec::new(), 0);
    for seed in 0..500 {
        let mut normal = Normal::new("chi", seed);
        let y: Vec<f64> = (0..6).map(|row| 2.0 - 0.3 * f64::from(row) + 0.1 * normal.next()).collect();
        let fit = linear(&line(6), &y, Errors::Independent(&[0.1; 6])).expect("a fit");
        chi.push(fit.chi_squared);
        low += usize::from(fit.p() < 0.05);
    }
    assert!((moments(&chi).0 - 4.0).abs() < 0.55 && (8..=45).contains(&low), "{:?} {low}", moments(&chi));
}

#[test]
fn fits_that_cannot_be_done() {
    let unit = [1.0; 3];
    let errors = Errors::Independent(&unit);
    let y = [1.0, 2.0, 3.0];
    assert_eq!(linear(&line(1), &[1.0], Errors::Independent(&[1.0])), Err(FitError::TooFew { data: 1, parameters: 2 }));
    assert_eq!(linear(&line(3), &y[..2], errors), Err(FitError::Shape { data: 2, other: 3 }));
    assert_eq!(linear(&line(2), &y[..2], errors), Err(FitError::Shape { data: 2, other: 3 }));
    let same = Matrix::from_fn(3, 2, |row, _| row as f64 + 1.0);
    assert_eq!(linear(&same, &y, errors), Err(FitError::Singular { parameter: 1 }));
    let zeros = Matrix::zeros(3, 1);
    assert_eq!(linear(&zeros, &y, errors), Err(FitError::Singular { parameter: 0 }));
    for bad in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        assert_eq!(linear(&line(3), &y, Errors::Independent(&[1.0, bad, 1.0])), Err(FitError::Covariance));
    }
    let singular = Matrix::from_fn(3, 3, |_, _| 1.0);
    assert_eq!(linear(&line(3), &y, Errors::Covariance(&singular)), Err(FitError::Covariance));
    assert_eq!(linear(&line(3), &[1.0, f64::NAN, 1.0], errors), Err(FitError::NotFinite));
    let bad = Matrix::from_fn(3, 1, |row, _| if row == 1 { f64::NAN } else { 1.0 });
    assert_eq!(linear(&bad, &y, errors), Err(FitError::NotFinite));
}

fn decay(parameters: &[f64], values: &mut [f64]) {
    for (t, value) in values.iter_mut().enumerate() {
        *value = parameters[0] * exp(-parameters[1] * t as f64) + parameters[2];
    }
}

#[test]
fn nonlinear_pulls_are_right() {
    // 200 fits of an exponential; mean within 0.3 and width 0.85 to 1.15 are four and three standard deviations.
    let truth = [3.0, 0.4, 1.0];
    let mut pulls: [Vec<f64>; 3] = Default::default();
    for seed in 0..200 {
        let mut normal = Normal::new("decay", seed);
        let mut y = [0.0; 20];
        decay(&truth, &mut y);
        y.iter_mut().for_each(|y| *y += 0.01 * normal.next());
        let start = [1.0, 1.0, 0.0];
        let (fit, info) =
            nonlinear(decay, &start, &y, Errors::Independent(&[0.01; 20]), &NonlinearParams::default()).expect("a fit");
        assert!(info.iterations < 50);
        for (k, pulls) in pulls.iter_mut().enumerate() {
            pulls.push((fit.parameters[k] - truth[k]) / fit.error(k));
        }
    }
    for pulls in &pulls {
        let (mean, width) = moments(pulls);
        assert!(mean.abs() < 0.3 && (0.85..1.15).contains(&width), "{mean} {width}");
    }
}

#[test]
fn nonlinear_without_noise_is_exact_and_agrees_with_linear() {
    let mut y = [0.0; 20];
    decay(&[3.0, 0.4, 1.0], &mut y);
    let errors = [1e-3; 20];
    let params = NonlinearParams::default();
    let (fit, _) = nonlinear(decay, &[2.0, 0.6, 0.5], &y, Errors::Independent(&errors), &params).expect("a fit");
    assert!((fit.parameters[1] - 0.4).abs() < 1e-7 && fit.chi_squared < 1e-6, "{fit:?}");
    let y = [1.0, 3.0, 2.0, 5.0];
    let covariance = Matrix::from_fn(4, 4, |a, b| if a == b { 1.0 } else { 0.3 });
    let straight =
        |p: &[f64], out: &mut [f64]| out.iter_mut().enumerate().for_each(|(t, v)| *v = p[0] + p[1] * t as f64);
    let (found, _) = nonlinear(straight, &[0.0, 0.0], &y, Errors::Covariance(&covariance), &params).expect("a fit");
    let exact = linear(&line(4), &y, Errors::Covariance(&covariance)).expect("a fit");
    for k in 0..2 {
        assert!((found.parameters[k] - exact.parameters[k]).abs() < 1e-6);
        assert!((found.error(k) - exact.error(k)).abs() < 1e-6);
    }
}

#[test]
fn nonlinear_refuses_what_it_cannot_do() {
    let params = NonlinearParams::default();
    let y = [1.0, 2.0, 3.0];
    let errors = Errors::Independent(&[1.0; 3]);
    let nan = nonlinear(|_, out| out.fill(f64::NAN), &[1.0], &y, errors, &params);
    assert_eq!(nan.expect_err("NaN"), FitError::NotFinite);
    let deaf = nonlinear(|_, out| out.fill(1.0), &[1.0], &y, errors, &params);
    assert_eq!(deaf.expect_err("no dependence"), FitError::Singular { parameter: 0 });
    let twice = nonlinear(|p, out| out.fill(p[0] + p[1]), &[1.0, 2.0], &y, errors, &params);
    assert!(matches!(twice, Err(FitError::Singular { .. })), "{twice:?}");
    let few = nonlinear(|p, out| out.fill(p[0]), &[1.0; 4], &y, errors, &params);
    assert_eq!(few.expect_err("few"), FitError::TooFew { data: 3, parameters: 4 });
    let impatient = NonlinearParams { iterations: 1, ..params };
    let stopped = nonlinear(decay, &[1.0, 3.0, 0.0], &y, errors, &impatient);
    assert!(matches!(stopped, Err(FitError::NotConverged { iterations: 1, .. })), "{stopped:?}");
}

#[test]
fn local_polynomial_of_a_polynomial() {
    let x: Vec<f64> = (0..12).map(|k| 0.1 * f64::from(k)).collect();
    let y: Vec<f64> = x.iter().map(|x| 1.0 - 2.0 * x + 0.5 * x * x).collect();
    let fit = local(&x, &y, &[1e-3; 12], 0.43, &LocalParams::default()).expect("a fit");
    let (value, slope) = value_and_slope(&fit.base, fit.reduced(0.47));
    assert!((value - (1.0 - 0.94 + 0.5 * 0.47 * 0.47)).abs() < 1e-9, "{value}");
    assert!((slope / fit.scale - (-2.0 + 0.47)).abs() < 1e-7, "{slope}");
    assert!(fit.chi_squared < 1e-9 && fit.model_error < 1e-9);
    // Exactly smooth: the cubic through four points.
    let cubic: Vec<f64> = x.iter().map(|x| x * x * x).collect();
    let params = LocalParams { smooth: true, ..LocalParams::default() };
    for centre in [-0.5, 0.0, 0.43, 1.1, 2.0] {
        let fit = local(&x, &cubic, &[1.0; 12], centre, &params).expect("a fit");
        let value = fit.base[0];
        assert!((value - centre * centre * centre).abs() < 1e-10, "{centre} {value}");
        assert_eq!(fit.model_error, 0.0);
    }
}

#[test]
fn local_polynomial_takes_fewer_points_when_the_curve_demands() {
    // A kink far from the centre must not bend the curve at the centre.
    let x: Vec<f64> = (0..20).map(|k| 0.05 * f64::from(k)).collect();
    let y: Vec<f64> = x.iter().map(|x| if *x > 0.7 { 10.0 * (x - 0.7) + 0.7 } else { *x }).collect();
    let fit = local(&x, &y, &[1e-3; 20], 0.3, &LocalParams::default()).expect("a fit");
    assert!((fit.base[0] - 0.3).abs() < 1e-4, "{:?}", fit.base);
}

/// Points of a bent curve with noise, so that several polynomials compete.
fn bent() -> (Vec<f64>, Vec<f64>, Vec<f64>) {
    let mut normal = common::Normal::new("bent", 1);
    let x: Vec<f64> = (0..11).map(|k| 0.1 * f64::from(k)).collect();
    let y = x.iter().map(|x| x / (1.0 + x * x) + 0.02 * normal.next()).collect();
    (x, y, vec![0.02; 11])
}

#[test]
fn map_of_a_local_polynomial_is_its_derivative() {
    let (x, y, errors) = bent();
    let params = LocalParams::default();
    let fit = local(&x, &y, &errors, 0.52, &params).expect("a fit");
    for datum in 0..x.len() {
        let shifted = |step: f64| {
            let mut y = y.clone();
            y[datum] += step;
            local(&x, &y, &errors, 0.52, &params).expect("a fit").base
        };
        let step = 1e-6;
        let (high, low) = (shifted(step), shifted(-step));
        for k in 0..2 {
            let slope = (high[k] - low[k]) / (2.0 * step);
            assert!((slope - fit.map[(k, datum)]).abs() < 1e-6, "{datum} {k}: {slope} {}", fit.map[(k, datum)]);
        }
    }
    let change: Vec<f64> = (0..x.len()).map(|datum| if datum == 5 { 0.25 } else { 0.0 }).collect();
    assert_eq!(fit.coefficients(&change)[0], fit.base[0] + 0.25 * fit.map[(0, 5)]);
}

#[test]
fn where_no_polynomial_fits_the_error_covers_what_is_unknown() {
    // Seven points of a peak that no polynomial of degree five follows to 1e-6.
    let x: Vec<f64> = (0..7).map(|k| f64::from(k) - 3.0).collect();
    let peak = |x: f64| 1.0 / (1.0 + 0.4 * (x - 0.2) * (x - 0.2));
    let y: Vec<f64> = x.iter().map(|x| peak(*x)).collect();
    for centre in [-0.5, 0.3, 0.5, 0.8, 1.4] {
        let fit = local(&x, &y, &[1e-6; 7], centre, &LocalParams::default()).expect("a fit");
        let off = (fit.base[0] - peak(centre)).abs();
        assert!(off > 1e-5, "interpolation this good would make the test empty: {off}");
        assert!(off < 3.0 * fit.model_error && fit.model_error < 0.2, "{centre}: off {off}, error {}", fit.model_error);
        assert_eq!(fit.degrees, 0);
    }
}

#[test]
fn local_refuses_and_survives() {
    let params = LocalParams::default();
    assert_eq!(local(&[1.0], &[1.0], &[1.0], 1.0, &params), Err(LocalError::TooFew { points: 1 }));
    assert_eq!(local(&[1.0, 1.0], &[1.0; 2], &[1.0; 2], 1.0, &params), Err(LocalError::Points));
    assert_eq!(local(&[1.0, 2.0], &[1.0; 3], &[1.0; 2], 1.0, &params), Err(LocalError::Points));
    assert_eq!(local(&[1.0, 2.0], &[1.0, f64::NAN], &[1.0; 2], 1.0, &params), Err(LocalError::Points));
    let two = local(&[1.0, 2.0], &[3.0, 5.0], &[0.0, 0.0], 1.5, &params).expect("a line");
    assert!((two.base[0] - 4.0).abs() < 1e-12);
    let three = local(&[1.0, 2.0, 3.0], &[1.0, 4.0, 9.0], &[1e-3; 3], 2.0, &params).expect("a parabola");
    assert!((three.base[0] - 4.0).abs() < 1e-3);
}

proptest! {
    // Failing inputs are printed; a file of them would be written beside the sources.
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn fit_recovers_any_parabola(
        parameters in proptest::array::uniform3(-5.0..5.0f64),
        errors in proptest::collection::vec(0.1..3.0f64, 5..12),
    ) {
        let count = errors.len();
        let design = Matrix::from_fn(count, 3, |row, k| (0..k).fold(1.0, |value, _| value * (row as f64 - 2.0)));
        let y = design.times(&parameters);
        let fit = linear(&design, &y, Errors::Independent(&errors)).expect("a fit");
        for (found, given) in fit.parameters.iter().zip(parameters) {
            prop_assert!((found - given).abs() < 1e-9);
        }
        prop_assert!(fit.chi_squared < 1e-15);
        // The map has the error propagation of the fit: M C M^T is the covariance.
        let map = linear_map(&design, Errors::Independent(&errors)).expect("a map");
        for a in 0..3 {
            let variance: f64 = (0..count).map(|datum| (map[(a, datum)] * errors[datum]).powi(2)).sum();
            prop_assert!((variance / fit.covariance[(a, a)] - 1.0).abs() < 1e-9);
        }
    }
}
