//! Autocovariances of chains, fed piece by piece.

use spinledger_numerics::sum::{CompensatedSum, sum_by};

use crate::fourier::Fourier;

/// Up to this lag products are summed directly; beyond it Fourier transforms are cheaper.
const DIRECT_LAGS: usize = 96;
/// Leading values of a segment in direct summation.
const DIRECT_SEGMENT: usize = 8192;

/// Accumulates sum_i (x_i - mean)(x_{i+t} - mean) for t = 0 ..= `max_lag` over any number of chains.
///
/// Memory is a small multiple of `max_lag`, whatever the length of the chains. Cost per value is `max_lag` products
/// up to lag 96, and about 7 log2(4 `max_lag`) operations beyond: segments of three parts of four of a transform's length are
/// correlated with themselves and the part that follows, and their spectra are added. Results depend on where chains
/// end, not on how the values were cut into pieces.
pub struct Autocovariance {
    mean: f64,
    max_lag: usize,
    /// Values of the current chain from the start of the current segment.
    pending: Vec<f64>,
    segment: usize,
    chain_len: usize,
    chain_lens: Vec<usize>,
    sums: Sums,
}

enum Sums {
    Direct(Vec<CompensatedSum>),
    Spectrum { fourier: Fourier, re: Vec<f64>, im: Vec<f64>, power_re: Vec<f64>, power_im: Vec<f64> },
}

/// Pooled autocovariances.
#[derive(Clone, Debug, PartialEq)]
pub struct Covariances {
    /// Mean that was subtracted.
    pub mean: f64,
    /// Length of each chain; empty chains are left out.
    pub chain_lens: Vec<usize>,
    /// Autocovariance at lags 0, 1 ...: sum of products over number of products.
    pub gamma: Vec<f64>,
}

impl Autocovariance {
    /// An accumulator for values with this mean over all chains.
    #[must_use]
    pub fn new(mean: f64, max_lag: usize) -> Self {
        let (segment, sums) = if max_lag <= DIRECT_LAGS {
            (DIRECT_SEGMENT, Sums::Direct(vec![CompensatedSum::new(); max_lag + 1]))
        } else {
            let length = (4 * (max_lag + 1)).next_power_of_two();
            let zeros = || vec![0.0; length];
            let fourier = Fourier::new(length);
            let sums = Sums::Spectrum { fourier, re: zeros(), im: zeros(), power_re: zeros(), power_im: zeros() };
            (length - (max_lag + 1), sums)
        };
        Self { mean, max_lag, pending: Vec::new(), segment, chain_len: 0, chain_lens: Vec::new(), sums }
    }

    /// The next values of the current chain.
    pub fn push(&mut self, values: &[f64]) {
        let whole = self.segment + self.max_lag;
        let mut rest = values;
        while !rest.is_empty() {
            let (now, later) = rest.split_at(rest.len().min(whole - self.pending.len()));
            self.pending.extend(now.iter().map(|value| value - self.mean));
            rest = later;
            if self.pending.len() == whole {
                self.add_segment();
            }
        }
        self.chain_len += values.len();
    }

    /// Ends the current chain: products across chains are not formed.
    pub fn end_chain(&mut self) {
        while !self.pending.is_empty() {
            self.add_segment();
        }
        if self.chain_len > 0 {
            self.chain_lens.push(self.chain_len);
        }
        self.chain_len = 0;
    }

    /// Correlates the first `segment` pending values with all pending ones, and drops them.
    fn add_segment(&mut self) {
        let leading = self.segment.min(self.pending.len());
        let pending = &self.pending;
        match &mut self.sums {
            Sums::Direct(sums) => {
                for (lag, total) in sums.iter_mut().enumerate() {
                    let count = leading.min(pending.len().saturating_sub(lag));
                    let shifted = &pending[lag.min(pending.len())..];
                    total.add(sum_by(count, |index| pending[index] * shifted[index]));
                }
            }
            Sums::Spectrum { fourier, re, im, power_re, power_im } => {
                // Both real signals pass one transform, as its real and imaginary part.
                re.fill(0.0);
                im.fill(0.0);
                re[..leading].copy_from_slice(&pending[..leading]);
                im[..pending.len()].copy_from_slice(pending);
                fourier.forward(re, im);
                let length = fourier.length();
                for k in 0..length {
                    let mirrored = (length - k) % length;
                    let (a_re, a_im) = (0.5 * (re[k] + re[mirrored]), 0.5 * (im[k] - im[mirrored]));
                    let (b_re, b_im) = (0.5 * (im[k] + im[mirrored]), 0.5 * (re[mirrored] - re[k]));
                    power_re[k] += a_re * b_re + a_im * b_im;
                    power_im[k] += a_re * b_im - a_im * b_re;
                }
            }
        }
        self.pending.drain(..leading);
    }

    /// The autocovariances of all chains; ends the current one.
    #[must_use]
    pub fn finish(mut self) -> Covariances {
        self.end_chain();
        let sums: Vec<f64> = match self.sums {
            Sums::Direct(sums) => sums.iter().map(CompensatedSum::value).collect(),
            Sums::Spectrum { fourier, mut power_re, mut power_im, .. } => {
                // The inverse transform is the forward one of the conjugate, of which the real part is wanted.
                power_im.iter_mut().for_each(|value| *value = -*value);
                fourier.forward(&mut power_re, &mut power_im);
                power_re[..=self.max_lag].iter().map(|value| value / fourier.length() as f64).collect()
            }
        };
        let count = |lag: usize| self.chain_lens.iter().map(|len| len.saturating_sub(lag)).sum::<usize>();
        let gamma = sums.iter().enumerate().map(|(lag, sum)| match count(lag) {
            0 => 0.0,
            products => sum / products as f64,
        });
        Covariances { mean: self.mean, gamma: gamma.collect(), chain_lens: self.chain_lens }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_numerics::random::{SplitMix, unit_f64};

    fn chains() -> Vec<Vec<f64>> {
        let mut splitmix = SplitMix::new(5);
        [3000, 0, 1, 150, 2047].map(|len| (0..len).map(|_| unit_f64(splitmix.next())).collect()).to_vec()
    }

    fn definition(chains: &[Vec<f64>], mean: f64, lag: usize) -> f64 {
        let (mut total, mut count) = (0.0, 0);
        for chain in chains {
            for (x, y) in chain.iter().zip(chain.iter().skip(lag)) {
                total += (x - mean) * (y - mean);
                count += 1;
            }
        }
        total / f64::from(count)
    }

    #[test]
    fn both_ways_of_summing_follow_the_definition() {
        let chains = chains();
        for max_lag in [0, 1, 7, DIRECT_LAGS, DIRECT_LAGS + 1, 127, 128, 500, 2900] {
            let mut sums = Autocovariance::new(0.4, max_lag);
            for chain in &chains {
                sums.push(chain);
                sums.end_chain();
            }
            let found = sums.finish();
            assert_eq!(found.chain_lens, [3000, 1, 150, 2047]);
            assert_eq!(found.gamma.len(), max_lag + 1);
            for (lag, gamma) in found.gamma.iter().enumerate() {
                assert!((gamma - definition(&chains, 0.4, lag)).abs() < 1e-13, "{max_lag} {lag}");
            }
        }
    }

    #[test]
    fn pieces_do_not_matter() {
        let chain = &chains()[0];
        for max_lag in [20, 200] {
            let mut whole = Autocovariance::new(0.5, max_lag);
            whole.push(chain);
            let mut pieces = Autocovariance::new(0.5, max_lag);
            chain.chunks(37).for_each(|piece| pieces.push(piece));
            assert_eq!(whole.finish(), pieces.finish());
        }
    }
}
