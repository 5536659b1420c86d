//! Unevaluated sums of two doubles: about 106 bits of precision with the exponent range of a double.
//!
//! Dekker, T. J. (1971), A floating-point technique for extending the available precision, Numerische Mathematik 18,
//! 224-242; Ogita, T., Rump, S. M. & Oishi, S. (2005), Accurate sum and dot product, SIAM J. Sci. Comput. 26,
//! 1955-1988. No fused multiply-add is used, so every machine gives the same bits.

use std::cmp::Ordering;
use std::ops::{Add, AddAssign, Div, Mul, MulAssign, Neg, Sub, SubAssign};

/// A number held as the unevaluated sum of a double and a correction of at most half its last place.
///
/// Relative error of one operation is below 1e-31 while values and their products stay within 1e-290 and 1e290.
///
/// ```
/// use aforesaid::stats::linear::DoubleDouble;
/// let third = DoubleDouble::from(1.0) / DoubleDouble::from(3.0);
/// let left = third * DoubleDouble::from(3.0) - DoubleDouble::from(1.0);
/// assert!(left.value().abs() < 1e-31);
/// ```
#[derive(Clone, Copy, Debug, Default)]
pub struct DoubleDouble {
    high: f64,
    low: f64,
}

/// A double cut into two halves of at most 26 bits each, so that products of halves are exact.
#[derive(Clone, Copy, Debug, Default)]
pub struct Split {
    value: f64,
    high: f64,
    low: f64,
}

impl Split {
    /// Cuts `value` (Veltkamp); exact for magnitudes below 1e299.
    #[inline(always)]
    pub fn new(value: f64) -> Split {
        let scaled = 134_217_729.0 * value; // 2^27 + 1
        let high = scaled - (scaled - value);
        Split { value, high, low: value - high }
    }
}

/// `a + b` as rounded sum and exact error (Knuth).
#[inline(always)]
pub fn two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    let part = sum - a;
    (sum, (a - (sum - part)) + (b - part))
}

/// `a - b` as rounded difference and exact error.
#[inline(always)]
pub fn two_difference(a: f64, b: f64) -> (f64, f64) {
    two_sum(a, -b)
}

/// `a * b` as rounded product and exact error (Dekker).
#[inline(always)]
pub fn two_product(a: f64, b: f64) -> (f64, f64) {
    two_product_split(Split::new(a), Split::new(b))
}

/// [`two_product`] of factors that have been cut already.
#[inline(always)]
pub fn two_product_split(a: Split, b: Split) -> (f64, f64) {
    let product = a.value * b.value;
    let error = a.low * b.low - (((product - a.high * b.high) - a.low * b.high) - a.high * b.low);
    (product, error)
}

/// Sum and error where `a` is known to be the larger in magnitude.
#[inline(always)]
fn quick_two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    (sum, b - (sum - a))
}

impl DoubleDouble {
    /// Zero.
    pub const ZERO: DoubleDouble = DoubleDouble { high: 0.0, low: 0.0 };
    /// One.
    pub const ONE: DoubleDouble = DoubleDouble { high: 1.0, low: 0.0 };
    /// Natural logarithm of 2.
    const LN_2: DoubleDouble = DoubleDouble { high: std::f64::consts::LN_2, low: 2.319_046_813_846_299_6e-17 };

    /// The number `high + low`, whatever the two overlap.
    #[inline]
    pub fn new(high: f64, low: f64) -> DoubleDouble {
        let (high, low) = two_sum(high, low);
        DoubleDouble { high, low }
    }

    /// The nearest double.
    #[inline]
    pub fn value(self) -> f64 {
        self.high
    }

    /// What [`value`](Self::value) leaves out.
    #[inline]
    pub fn remainder(self) -> f64 {
        self.low
    }

    /// Magnitude.
    pub fn abs(self) -> DoubleDouble {
        if self.high < 0.0 { -self } else { self }
    }

    /// The square.
    pub fn square(self) -> DoubleDouble {
        self * self
    }

    /// Whether the number is exactly zero.
    pub fn is_zero(self) -> bool {
        self.high == 0.0
    }

    /// Square root; of a negative number it is a NaN, so callers see to the sign first.
    pub fn sqrt(self) -> DoubleDouble {
        if self.high == 0.0 {
            return DoubleDouble::ZERO;
        }
        let root = self.high.sqrt();
        let (square, error) = two_product(root, root);
        let left = self - DoubleDouble { high: square, low: error };
        let (high, low) = quick_two_sum(root, left.high / (2.0 * root));
        DoubleDouble { high, low }
    }

    /// Natural logarithm of a positive number, with full relative precision near 1.
    ///
    /// The number is brought to m 2^k with m near 1; ln m = 2 artanh((m - 1) / (m + 1)) by its series.
    pub fn ln(self) -> DoubleDouble {
        let (mut mantissa, mut exponent) = libm::frexp(self.high);
        if mantissa < std::f64::consts::FRAC_1_SQRT_2 {
            mantissa *= 2.0;
            exponent -= 1;
        }
        let scaled = DoubleDouble { high: mantissa, low: libm::ldexp(self.low, -exponent) };
        let ratio = (scaled - Self::ONE) / (scaled + Self::ONE);
        let square = ratio.square();
        let mut power = ratio;
        let mut sum = ratio;
        let mut odd = 3.0;
        // |ratio| is below 0.172, so that each term is below 0.03 of the one before: 22 terms reach 1e-33.
        for _ in 0..22 {
            power *= square;
            sum += power / DoubleDouble::from(odd);
            odd += 2.0;
        }
        sum + sum + Self::LN_2 * DoubleDouble::from(f64::from(exponent))
    }
}

impl From<f64> for DoubleDouble {
    #[inline]
    fn from(value: f64) -> DoubleDouble {
        DoubleDouble { high: value, low: 0.0 }
    }
}

impl From<usize> for DoubleDouble {
    /// Exact up to 2^53, more than any count of subjects.
    fn from(count: usize) -> DoubleDouble {
        DoubleDouble::from(count as f64)
    }
}

impl Neg for DoubleDouble {
    type Output = DoubleDouble;
    #[inline]
    fn neg(self) -> DoubleDouble {
        DoubleDouble { high: -self.high, low: -self.low }
    }
}

impl Add for DoubleDouble {
    type Output = DoubleDouble;
    #[inline]
    fn add(self, other: DoubleDouble) -> DoubleDouble {
        let (high, error) = two_sum(self.high, other.high);
        let (low, rest) = two_sum(self.low, other.low);
        let (high, error) = quick_two_sum(high, error + low);
        let (high, low) = quick_two_sum(high, error + rest);
        DoubleDouble { high, low }
    }
}

impl Sub for DoubleDouble {
    type Output = DoubleDouble;
    #[inline]
    fn sub(self, other: DoubleDouble) -> DoubleDouble {
        self + -other
    }
}

impl Mul for DoubleDouble {
    type Output = DoubleDouble;
    #[inline]
    fn mul(self, other: DoubleDouble) -> DoubleDouble {
        let (product, error) = two_product(self.high, other.high);
        let (high, low) = quick_two_sum(product, error + (self.high * other.low + self.low * other.high));
        DoubleDouble { high, low }
    }
}

impl Div for DoubleDouble {
    type Output = DoubleDouble;
    fn div(self, other: DoubleDouble) -> DoubleDouble {
        let first = self.high / other.high;
        let left = self - other * DoubleDouble::from(first);
        let second = left.high / other.high;
        let left = left - other * DoubleDouble::from(second);
        let third = left.high / other.high;
        let (high, low) = quick_two_sum(first, second);
        DoubleDouble { high, low } + DoubleDouble::from(third)
    }
}

impl AddAssign for DoubleDouble {
    #[inline]
    fn add_assign(&mut self, other: DoubleDouble) {
        *self = *self + other;
    }
}

impl SubAssign for DoubleDouble {
    #[inline]
    fn sub_assign(&mut self, other: DoubleDouble) {
        *self = *self - other;
    }
}

impl MulAssign for DoubleDouble {
    #[inline]
    fn mul_assign(&mut self, other: DoubleDouble) {
        *self = *self * other;
    }
}

impl std::iter::Sum for DoubleDouble {
    fn sum<I: Iterator<Item = DoubleDouble>>(terms: I) -> DoubleDouble {
        terms.fold(DoubleDouble::ZERO, |total, term| total + term)
    }
}

impl PartialEq for DoubleDouble {
    fn eq(&self, other: &DoubleDouble) -> bool {
        self.high == other.high && self.low == other.low
    }
}

impl PartialOrd for DoubleDouble {
    fn partial_cmp(&self, other: &DoubleDouble) -> Option<Ordering> {
        match self.high.partial_cmp(&other.high) {
            Some(Ordering::Equal) => self.low.partial_cmp(&other.low),
            order => order,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn close(found: DoubleDouble, high: f64, low: f64) {
        let difference = found - DoubleDouble::new(high, low);
        assert!(difference.value().abs() <= 1e-31 * high.abs(), "{found:?} against {high:e} + {low:e}: off by {:e}", difference.value());
    }

    // Check values: the first double and the rest of the number, from mpmath at 60 digits.
    #[test]
    fn arithmetic_keeps_thirty_one_digits() {
        let two = DoubleDouble::from(2.0);
        let tenth = DoubleDouble::ONE / DoubleDouble::from(10.0);
        close(two.sqrt(), std::f64::consts::SQRT_2, -9.667293313452913e-17);
        close(tenth, 0.1, -5.551115123125783e-18);
        close(two.ln(), std::f64::consts::LN_2, 2.3190468138462996e-17);
        close(DoubleDouble::from(10.0).ln(), std::f64::consts::LN_10, -2.1707562233822494e-16);
        close(tenth.ln(), -std::f64::consts::LN_10, 2.1707562233822494e-16);
    }

    #[test]
    fn logarithm_near_one_keeps_relative_precision() {
        // ln(1 + x) = x - x^2/2 + x^3/3 - ..., here with x = 2^-40.
        let x = 1.0 / 1_099_511_627_776.0;
        let series = DoubleDouble::from(x) - DoubleDouble::from(x * x / 2.0) + DoubleDouble::from(x * x * x) / DoubleDouble::from(3.0);
        let found = (DoubleDouble::ONE + DoubleDouble::from(x)).ln();
        assert!(((found - series) / series).value().abs() < 1e-30);
    }

    #[test]
    fn errors_of_sum_and_product_are_exact() {
        let (sum, error) = two_sum(1e16, 1.0);
        assert_eq!((sum, error), (1e16, 1.0));
        let a = 134_217_729.0; // 2^27 + 1, whose square needs 55 bits
        let (product, error) = two_product(a, a);
        assert_eq!(product as i128 + error as i128, 134_217_729_i128 * 134_217_729);
    }
}
