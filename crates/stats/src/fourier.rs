//! Fast Fourier transform of a power of two, for correlations.

use spinledger_numerics::elementary::sin_cos;

/// Precomputed twiddles of one length.
///
/// Radix 2, decimation in time (Cooley & Tukey 1965 Math. Comput. 19 297). Written here because a library's choice of
/// instructions may change the last bits between processors.
pub(crate) struct Fourier {
    length: usize,
    cosines: Vec<f64>,
    sines: Vec<f64>,
}

impl Fourier {
    /// The transform of a length that is a power of two, at least 2.
    pub(crate) fn new(length: usize) -> Self {
        debug_assert!(length.is_power_of_two() && length >= 2);
        let turn = std::f64::consts::TAU / length as f64;
        let (sines, cosines) = (0..length / 2).map(|k| sin_cos(turn * k as f64)).unzip();
        Self { length, cosines, sines }
    }

    /// Number of complex values.
    pub(crate) fn length(&self) -> usize {
        self.length
    }

    /// Replaces z(t) by sum_t z(t) exp(-2 pi i k t / length).
    pub(crate) fn forward(&self, re: &mut [f64], im: &mut [f64]) {
        let shift = usize::BITS - self.length.trailing_zeros();
        for index in 0..self.length {
            let mirrored = index.reverse_bits() >> shift;
            if index < mirrored {
                re.swap(index, mirrored);
                im.swap(index, mirrored);
            }
        }
        let mut half = 1;
        while half < self.length {
            let stride = self.length / (2 * half);
            for (re, im) in re.chunks_exact_mut(2 * half).zip(im.chunks_exact_mut(2 * half)) {
                let (re_low, re_high) = re.split_at_mut(half);
                let (im_low, im_high) = im.split_at_mut(half);
                for k in 0..half {
                    let (cosine, sine) = (self.cosines[k * stride], self.sines[k * stride]);
                    let turned_re = re_high[k] * cosine + im_high[k] * sine;
                    let turned_im = im_high[k] * cosine - re_high[k] * sine;
                    re_high[k] = re_low[k] - turned_re;
                    im_high[k] = im_low[k] - turned_im;
                    re_low[k] += turned_re;
                    im_low[k] += turned_im;
                }
            }
            half *= 2;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn agrees_with_the_definition() {
        let length = 64;
        let signal = |t: usize| ((t * t + 3) % 17) as f64 - 8.0;
        let other = |t: usize| ((t * 5 + 1) % 11) as f64;
        let mut re: Vec<f64> = (0..length).map(signal).collect();
        let mut im: Vec<f64> = (0..length).map(other).collect();
        Fourier::new(length).forward(&mut re, &mut im);
        for k in 0..length {
            let (mut expected_re, mut expected_im) = (0.0, 0.0);
            for t in 0..length {
                let (sine, cosine) = sin_cos(-std::f64::consts::TAU * ((k * t) % length) as f64 / length as f64);
                expected_re += signal(t) * cosine - other(t) * sine;
                expected_im += signal(t) * sine + other(t) * cosine;
            }
            assert!((re[k] - expected_re).abs() < 1e-11 && (im[k] - expected_im).abs() < 1e-11, "{k}");
        }
    }
}
