//! Integrated autocorrelation times and the errors of means.
//!
//! Convention: tau = 1/2 + sum_{t>=1} rho(t) in units of the spacing of the measurements, so that the variance of a
//! mean of n measurements is 2 tau / n times their variance and 1/2 means uncorrelated.
//!
//! The sum is cut at a window W: too short loses what is left of the tail, too long adds noise. Default is the window
//! of Wolff 2004 Comput. Phys. Commun. 156 143 (sect. 3.3), which balances both under the assumption that the slowest
//! time is S tau with S = 1.5; the rule of Sokal 1997 (Cargese lectures), W >= c tau, is there too.
//!
//! Several chains are taken together: deviations from the common mean, products within chains (Wolff eq. 31), with
//! the correction for the bias that the estimated mean brings (eq. 49). Chains that sit at different means
//! therefore show as a long time and a large error, not as a small error.

use thiserror::Error;

use spinledger_numerics::elementary::{exp, ln};
use spinledger_numerics::sum::{CompensatedSum, sum_by};

pub use crate::autocovariance::{Autocovariance, Covariances};

/// Lags computed at first; 16 times as many each time the window does not close.
const FIRST_LAGS: usize = 63;

/// Where the sum over lags stops.
#[derive(Clone, Copy, Debug, PartialEq)]
#[non_exhaustive]
pub enum Window {
    /// Wolff 2004 with this S, usually 1 to 2.
    Wolff {
        /// Ratio of the slowest time to tau.
        s: f64,
    },
    /// Sokal 1997: the least W >= c tau(W), c usually 4 to 10.
    Sokal {
        /// Window over tau.
        c: f64,
    },
}

/// How [`autocorrelation`] works.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AutocorrelationParams {
    /// Rule for the window; Wolff with S = 1.5 by default.
    pub window: Window,
}

impl Default for AutocorrelationParams {
    fn default() -> Self {
        Self { window: Window::Wolff { s: 1.5 } }
    }
}

/// What the chains of one quantity say.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct Autocorrelation {
    /// Measurements in all chains.
    pub count: usize,
    /// Mean over all of them.
    pub mean: f64,
    /// Variance of one measurement, corrected for bias.
    pub variance: f64,
    /// Integrated time in measurements, at least 1/2: a mean of anticorrelated measurements is given the error of
    /// uncorrelated ones, since a negative tail cannot be told from noise.
    pub tau: f64,
    /// Statistical error of `tau` (Wolff eq. 42).
    pub tau_error: f64,
    /// Last lag in the sum; 0 for a constant series.
    pub window: usize,
    /// Whether the rule found a window of at most a tenth of the longest chain. If not, `tau` and `error` are
    /// lower estimates and the chains are too short.
    pub closed: bool,
    /// Standard error of `mean`.
    pub error: f64,
    /// Number of independent measurements, count / (2 tau).
    pub effective: f64,
    /// rho(0) = 1, rho(1) ... up to at least the window, if the chains are long enough for it.
    pub rho: Vec<f64>,
}

/// Why there is no estimate.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum AutocorrelationError {
    /// Fewer than two measurements in all.
    #[error("an error needs two measurements; there are {count}")]
    TooShort {
        /// Measurements there are.
        count: usize,
    },
    /// A measurement is infinite or not a number.
    #[error("measurement {index} of chain {chain} is not finite")]
    NotFinite {
        /// Chain, from 0.
        chain: usize,
        /// Measurement within the chain, from 0.
        index: usize,
    },
}

/// What the lags computed so far allow.
#[derive(Clone, Debug, PartialEq)]
pub enum Windowed {
    /// The window closed, or no more lags make sense.
    Done(Autocorrelation),
    /// The window did not close: accumulate again up to this lag.
    NeedsLags(usize),
}

/// Estimates mean, error and autocorrelation time of chains of one quantity.
///
/// Cost: two passes and about 64 products a value; long times add passes of about 100 operations a value each (10^6
/// values with tau 1000 take a fifth of a second). Memory is about ten times the window.
///
/// # Errors
/// Fewer than two measurements, or one that is not finite.
pub fn autocorrelation(
    chains: &[&[f64]],
    params: &AutocorrelationParams,
) -> Result<Autocorrelation, AutocorrelationError> {
    let mean = common_mean(chains)?;
    let mut max_lag = FIRST_LAGS;
    loop {
        let mut sums = Autocovariance::new(mean, max_lag);
        for chain in chains {
            sums.push(chain);
            sums.end_chain();
        }
        match sums.finish().window(params) {
            Windowed::Done(found) => return Ok(found),
            Windowed::NeedsLags(more) => max_lag = more,
        }
    }
}

/// Mean over all measurements of all chains; exact for a constant series.
///
/// # Errors
/// As [`autocorrelation`].
pub fn common_mean(chains: &[&[f64]]) -> Result<f64, AutocorrelationError> {
    let count: usize = chains.iter().map(|chain| chain.len()).sum();
    let Some(origin) = chains.iter().find_map(|chain| chain.first()).copied().filter(|_| count >= 2) else {
        return Err(AutocorrelationError::TooShort { count });
    };
    let mut total = CompensatedSum::new();
    for (number, chain) in chains.iter().enumerate() {
        let part = sum_by(chain.len(), |index| chain[index] - origin);
        if !part.is_finite()
            && let Some(index) = chain.iter().position(|value| !value.is_finite())
        {
            return Err(AutocorrelationError::NotFinite { chain: number, index });
        }
        total.add(part);
    }
    Ok(origin + total.value() / count as f64)
}

impl Covariances {
    /// Chooses the window, or says that more lags are needed. For callers that feed [`Autocovariance`] themselves.
    ///
    /// Start with 63 lags. At most half of the longest chain is asked for.
    #[must_use]
    pub fn window(&self, params: &AutocorrelationParams) -> Windowed {
        let longest = self.chain_lens.iter().copied().max().unwrap_or(0);
        let most = (longest / 2).max(1);
        let lags = self.gamma.len() - 1;
        let count: usize = self.chain_lens.iter().sum();
        let variance = self.gamma[0];
        if variance <= 0.0 {
            return Windowed::Done(Autocorrelation {
                count,
                mean: self.mean,
                variance: 0.0,
                tau: 0.5,
                tau_error: 0.0,
                window: 0,
                closed: true,
                error: 0.0,
                effective: count as f64,
                rho: vec![1.0],
            });
        }
        let usable = lags.min(most);
        match self.find(params.window, usable, count) {
            Some(window) => Windowed::Done(self.sum(window, 10 * window <= longest, count)),
            None if lags < most => Windowed::NeedsLags((16 * (lags + 1) - 1).min(most)),
            None => Windowed::Done(self.sum(usable, false, count)),
        }
    }

    fn find(&self, rule: Window, usable: usize, count: usize) -> Option<usize> {
        let mut half = 0.0;
        for lag in 1..=usable {
            half += self.gamma[lag] / self.gamma[0];
            let closes = match rule {
                Window::Sokal { c } => lag as f64 >= c * (0.5 + half),
                Window::Wolff { s } => {
                    // exp(-1/tau') = half / (half + 1) defines the time tau' / S of a single exponential.
                    let slowest = if half <= 0.0 { f64::MIN_POSITIVE } else { s / ln((half + 1.0) / half) };
                    exp(-(lag as f64) / slowest) - slowest / (lag as f64 * count as f64).sqrt() < 0.0
                }
            };
            if closes {
                return Some(lag);
            }
        }
        None
    }

    fn sum(&self, window: usize, closed: bool, count: usize) -> Autocorrelation {
        let total = count as f64;
        let integral = |gamma: &dyn Fn(usize) -> f64| gamma(0) + 2.0 * (1..=window).map(gamma).sum::<f64>();
        let shift = (integral(&|lag| self.gamma[lag]) / total).max(0.0);
        let variance = self.gamma[0] + shift;
        let tau = (0.5 * integral(&|lag| (self.gamma[lag] + shift) / variance)).max(0.5);
        let shown = self.gamma.len().min((2 * window + 1).max(FIRST_LAGS + 1));
        Autocorrelation {
            count,
            mean: self.mean,
            variance,
            tau,
            tau_error: 2.0 * tau * ((window as f64 + 0.5 - tau).max(0.0) / total).sqrt(),
            window,
            closed,
            error: (2.0 * tau * variance / total).sqrt(),
            effective: total / (2.0 * tau),
            rho: self.gamma[..shown].iter().map(|gamma| (gamma + shift) / variance).collect(),
        }
    }
}

impl Autocorrelation {
    /// Standard error of `rho[lag]`, with the correlation taken as 0 beyond the window (Luscher 2005 Comput. Phys.
    /// Commun. 165 199, eq. E.11, after Madras & Sokal 1988). Cost: lag + window operations.
    ///
    /// # Panics
    /// If `rho` has no such lag.
    #[must_use]
    pub fn rho_error(&self, lag: usize) -> f64 {
        let here = self.rho[lag];
        let rho = |at: usize| if at <= self.window { self.rho.get(at).copied().unwrap_or(0.0) } else { 0.0 };
        if lag == 0 || self.window == 0 {
            return 0.0;
        }
        let square = |k: usize| {
            let term = rho(k + lag) + rho(k.abs_diff(lag)) - 2.0 * here * rho(k);
            term * term
        };
        (sum_by(lag + self.window, |index| square(index + 1)) / self.count as f64).sqrt()
    }
}
