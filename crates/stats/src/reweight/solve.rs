//! The free energies of the runs, as the minimum of a convex function.
//!
//! A(f) = sum_E H(E) ln D(E; f) - sum_i n_i f_i with D = sum_i n_i exp(f_i - b_i E). Its gradient, expected minus actual measurements of each run, is zero
//! where the equations of Ferrenberg & Swendsen hold; its Hessian is a sum of covariances and therefore not negative (Zhu & Hummer 2012 J. Comput. Chem. 33
//! 453; Tan, Gallicchio, Lapelosa & Levy 2012 J. Chem. Phys. 136 144102). Adding a constant to all f changes nothing: the first is held at its start.

use spinledger_numerics::elementary::{exp, ln};

use super::ReweightError;
use crate::matrix::{Matrix, dot};

/// Converged when every run's expected measurements differ from its actual ones by less than this part.
const TOLERANCE: f64 = 1e-10;
/// Rounding may end descent before that; this much is still far below any statistical error.
const ENOUGH: f64 = 1e-6;
/// Steps at most. Newton's method takes about five; iterating the equations, the last resort, many.
const STEPS: usize = 2000;

pub(super) struct Problem<'a> {
    pub(super) levels: &'a [f64],
    /// Measurements at each level.
    pub(super) height: &'a [f64],
    pub(super) betas: &'a [f64],
    /// Measurements of each run.
    pub(super) counts: &'a [f64],
}

struct State {
    value: f64,
    gradient: Vec<f64>,
    hessian: Matrix,
}

impl Problem<'_> {
    /// The minimum.
    ///
    /// # Errors
    /// Where it is not reached.
    pub(super) fn solve(&self, start: &[f64]) -> Result<Vec<f64>, ReweightError> {
        let runs = self.betas.len();
        let mut f = start.to_vec();
        let mut state = self.state(&f);
        for _ in 0..STEPS {
            let residual = self.residual(&state);
            if residual <= TOLERANCE {
                return Ok(f);
            }
            let mut moved = false;
            if let Some(step) = self.newton(&state) {
                let slope: f64 = (1..runs).map(|run| step[run] * state.gradient[run]).sum();
                let mut share = 1.0;
                // Halved thirty times a step is rounding.
                for _ in 0..30 {
                    let tried: Vec<f64> = f.iter().zip(&step).map(|(f, step)| f + share * step).collect();
                    let found = self.state(&tried);
                    if found.value <= state.value + 1e-4 * share * slope {
                        (f, state, moved) = (tried, found, true);
                        break;
                    }
                    share *= 0.5;
                }
            }
            if !moved {
                // One round of the equations themselves, which never goes up: exp(-f_i) grows by expected over actual.
                let tried: Vec<f64> = f
                    .iter()
                    .zip(&state.gradient)
                    .zip(self.counts)
                    .map(|((f, gradient), count)| f - ln((1.0 + gradient / count).max(1e-300)))
                    .collect();
                let found = self.state(&tried);
                if found.value >= state.value && self.residual(&found) >= residual {
                    // A minimum to rounding.
                    return if residual <= ENOUGH { Ok(f) } else { Err(ReweightError::NotConverged { residual }) };
                }
                (f, state) = (tried, found);
            }
        }
        let residual = self.residual(&state);
        if residual <= ENOUGH { Ok(f) } else { Err(ReweightError::NotConverged { residual }) }
    }

    /// ln D of each level.
    pub(super) fn denominators(&self, f: &[f64]) -> Vec<f64> {
        let mut terms = vec![0.0; f.len()];
        let logs = self.logs(f);
        (0..self.levels.len()).map(|level| self.shares(level, &logs, &mut terms)).collect()
    }

    /// ln n_i + f_i.
    fn logs(&self, f: &[f64]) -> Vec<f64> {
        f.iter().zip(self.counts).map(|(f, count)| f + ln(*count)).collect()
    }

    /// Fills each run's share of D at a level; ln D.
    fn shares(&self, level: usize, logs: &[f64], shares: &mut [f64]) -> f64 {
        let energy = self.levels[level];
        let mut most = f64::NEG_INFINITY;
        for ((share, log), beta) in shares.iter_mut().zip(logs).zip(self.betas) {
            *share = log - beta * energy;
            most = most.max(*share);
        }
        let mut total = 0.0;
        for share in shares.iter_mut() {
            *share = exp(*share - most);
            total += *share;
        }
        shares.iter_mut().for_each(|share| *share /= total);
        most + ln(total)
    }

    fn state(&self, f: &[f64]) -> State {
        let runs = f.len();
        let logs = self.logs(f);
        let mut shares = vec![0.0; runs];
        let (mut value, mut expected) = (spinledger_numerics::sum::CompensatedSum::new(), vec![0.0; runs]);
        let mut products = Matrix::zeros(runs, runs);
        for (level, height) in self.height.iter().enumerate() {
            if *height == 0.0 {
                continue;
            }
            value.add(height * self.shares(level, &logs, &mut shares));
            for a in 0..runs {
                let part = height * shares[a];
                expected[a] += part;
                for b in 0..a {
                    products[(a, b)] += part * shares[b];
                }
            }
        }
        for (f, count) in f.iter().zip(self.counts) {
            value.add(-f * count);
        }
        // H_ab = -sum H p_a p_b, and rows add up to zero: so computed, a diagonal of tiny overlaps is not a difference of large numbers.
        let mut hessian = Matrix::zeros(runs, runs);
        for a in 0..runs {
            for b in 0..a {
                let product = products[(a, b)];
                hessian[(a, b)] = -product;
                hessian[(b, a)] = -product;
                hessian[(a, a)] += product;
                hessian[(b, b)] += product;
            }
        }
        let gradient = expected.iter().zip(self.counts).map(|(expected, count)| expected - count).collect();
        State { value: value.value(), gradient, hessian }
    }

    fn residual(&self, state: &State) -> f64 {
        state.gradient.iter().zip(self.counts).fold(0.0, |most, (g, count)| f64::max(most, g.abs() / count))
    }

    /// Newton's step with the first run held; `None` where the Hessian does not allow one.
    fn newton(&self, state: &State) -> Option<Vec<f64>> {
        let free = self.betas.len() - 1;
        let scale = |run: usize| state.hessian[(run + 1, run + 1)].sqrt();
        if free == 0 || (0..free).any(|run| scale(run) <= 0.0 || !scale(run).is_finite()) {
            return None;
        }
        // With a unit diagonal: runs may overlap with their neighbours very differently.
        let scaled = Matrix::from_fn(free, free, |a, b| state.hessian[(a + 1, b + 1)] / (scale(a) * scale(b)));
        let lower = scaled.cholesky()?;
        let right: Vec<f64> = (0..free).map(|run| -state.gradient[run + 1] / scale(run)).collect();
        let solution = lower.backward(&lower.forward(&right));
        let step: Vec<f64> =
            std::iter::once(0.0).chain(solution.iter().enumerate().map(|(run, x)| x / scale(run))).collect();
        (step.iter().all(|x| x.is_finite()) && dot(&step, &state.gradient) < 0.0).then_some(step)
    }
}
