//! Frozen maps from words to numbers.

/// Number in [0, 1): the high 53 bits of the word, in units of 2^-53.
#[inline]
#[must_use]
pub const fn unit_f64(word: u64) -> f64 {
    (word >> 11) as f64 * (1.0 / (1u64 << 53) as f64)
}

/// Number in (0, 1), never 0 or 1 and symmetric about 1/2: the high 52 bits of the word and a half, in units of 2^-52.
#[inline]
#[must_use]
pub const fn open_unit_f64(word: u64) -> f64 {
    ((word >> 12) as f64 + 0.5) * (1.0 / (1u64 << 52) as f64)
}

/// Unbiased integer in 0 .. n by multiplication and rejection (Lemire 2019 ACM Trans. Model. Comput. Simul. 29 3).
///
/// Takes one word, and one more with probability below n / 2^64 each time.
///
/// # Panics
/// If n is 0: there is no such integer.
#[inline]
pub fn below(n: u64, mut draw: impl FnMut() -> u64) -> u64 {
    assert!(n > 0, "no integer lies in 0 .. 0");
    let mut product = u128::from(draw()) * u128::from(n);
    if (product as u64) < n {
        let rejected = n.wrapping_neg() % n;
        while (product as u64) < rejected {
            product = u128::from(draw()) * u128::from(n);
        }
    }
    (product >> 64) as u64
}

/// [`below`] from half words, for n up to 2^32 - 1.
///
/// # Panics
/// If n is 0.
#[inline]
pub fn below_u32(n: u32, mut draw: impl FnMut() -> u32) -> u32 {
    assert!(n > 0, "no integer lies in 0 .. 0");
    let mut product = u64::from(draw()) * u64::from(n);
    if (product as u32) < n {
        let rejected = n.wrapping_neg() % n;
        while (product as u32) < rejected {
            product = u64::from(draw()) * u64::from(n);
        }
    }
    (product >> 32) as u32
}
