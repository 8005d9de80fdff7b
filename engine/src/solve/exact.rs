//! Error-free floating-point arithmetic: totals kept to twice the precision of `f64`, and sums rounded once.
//!
//! The total of a redox component is often the small difference of large totals. In the dominant basis that difference
//! must come out exactly, or exactly zero, so it is summed without rounding (Dekker 1971, Knuth, Shewchuk 1997;
//! recalled).

use std::ops::{Add, Mul, Neg, Sub};

/// A number held as the unevaluated sum of two `f64`: about 32 significant digits.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Total {
    /// The nearest `f64`.
    high: f64,
    /// What that leaves over.
    low: f64,
}

impl Total {
    /// `numerator / denominator`, so that a decimal keeps its value: 0.2 is `from_ratio(2.0, 10.0)`.
    ///
    /// # Examples
    ///
    /// ```
    /// use lysocline_engine::solve::Total;
    ///
    /// let rest = Total::from_ratio(3.0, 10.0) - Total::from_ratio(2.0, 10.0) - Total::from_ratio(1.0, 10.0);
    /// assert!(rest.to_f64().abs() < 1e-32); // 0.3 - 0.2 - 0.1 is -2.8e-17 in plain f64
    /// ```
    #[must_use]
    pub fn from_ratio(numerator: f64, denominator: f64) -> Self {
        let high = numerator / denominator;
        if !high.is_finite() {
            return Self { high, low: 0.0 };
        }
        let remainder = (-high).mul_add(denominator, numerator);
        Self::normalised(high, remainder / denominator)
    }

    /// The nearest `f64`.
    #[must_use]
    pub fn to_f64(self) -> f64 {
        self.high
    }

    /// The two parts, largest first.
    pub(super) fn parts(self) -> [f64; 2] {
        [self.high, self.low]
    }

    fn normalised(high: f64, low: f64) -> Self {
        let (high, low) = two_sum(high, low);
        Self { high, low }
    }
}

impl From<f64> for Total {
    fn from(high: f64) -> Self {
        Self { high, low: 0.0 }
    }
}

impl Add for Total {
    type Output = Self;

    fn add(self, other: Self) -> Self {
        let (high, high_error) = two_sum(self.high, other.high);
        let (low, low_error) = two_sum(self.low, other.low);
        let (high, rest) = two_sum(high, high_error + low);
        Self::normalised(high, rest + low_error)
    }
}

impl Neg for Total {
    type Output = Self;

    fn neg(self) -> Self {
        Self { high: -self.high, low: -self.low }
    }
}

impl Sub for Total {
    type Output = Self;

    fn sub(self, other: Self) -> Self {
        self + -other
    }
}

impl Mul<f64> for Total {
    type Output = Self;

    fn mul(self, factor: f64) -> Self {
        let (high, error) = two_product(self.high, factor);
        Self::normalised(high, self.low.mul_add(factor, error))
    }
}

/// `a + b` as the rounded sum and its rounding error.
pub(super) fn two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    let b_part = sum - a;
    (sum, (a - (sum - b_part)) + (b - b_part))
}

/// `a * b` as the rounded product and its rounding error (exact unless the product underflows).
pub(super) fn two_product(a: f64, b: f64) -> (f64, f64) {
    let product = a * b;
    (product, a.mul_add(b, -product))
}

/// Sum of terms and of products without intermediate rounding, rounded once at the end.
///
/// The partial sums do not overlap (Shewchuk 1997), so the sign is exact and a sum that is zero is zero.
#[derive(Debug, Default)]
pub(super) struct ExactSum {
    partials: Vec<f64>,
}

impl ExactSum {
    /// Adds one term.
    pub(super) fn add(&mut self, mut term: f64) {
        let mut kept = 0;
        for k in 0..self.partials.len() {
            let (sum, error) = two_sum(term, self.partials[k]);
            if error != 0.0 {
                self.partials[kept] = error;
                kept += 1;
            }
            term = sum;
        }
        self.partials.truncate(kept);
        if term != 0.0 {
            self.partials.push(term);
        }
    }

    /// Adds `a * b`.
    pub(super) fn add_product(&mut self, a: f64, b: f64) {
        let (product, error) = two_product(a, b);
        self.add(product);
        if error != 0.0 {
            self.add(error);
        }
    }

    /// The sum, rounded to within one unit in the last place, and an empty accumulator again.
    pub(super) fn take(&mut self) -> f64 {
        let sum = self.partials.iter().rev().sum();
        self.partials.clear();
        sum
    }
}

/// Sum of products in twice the precision of `f64` (Ogita, Rump & Oishi 2005; recalled): enough to see how well a balance
/// closes, and cheaper than a sum without any rounding.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct DoubleSum {
    sum: f64,
    error: f64,
}

impl DoubleSum {
    /// Adds `a * b`.
    pub(super) fn add_product(&mut self, a: f64, b: f64) {
        let (product, product_error) = two_product(a, b);
        let (sum, sum_error) = two_sum(self.sum, product);
        self.sum = sum;
        self.error += product_error + sum_error;
    }

    pub(super) fn take(self) -> f64 {
        self.sum + self.error
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sums_lose_nothing_to_cancellation() {
        let mut sum = ExactSum::default();
        for term in [1e100, 1.0, -1e100, 1e-30, -1.0] {
            sum.add(term);
        }
        assert_eq!(sum.take(), 1e-30);
        sum.add_product(0.1, 3.0);
        sum.add_product(0.1, -3.0);
        assert_eq!(sum.take(), 0.0);
    }

    #[test]
    fn decimals_added_in_small_portions_stay_exact() {
        let step = Total::from_ratio(1.0, 1000.0);
        let sum = (0..1000).fold(Total::default(), |sum, _| sum + step);
        assert!((sum - Total::from(1.0)).to_f64().abs() < 1e-28);
        assert!((step * 1000.0 - Total::from(1.0)).to_f64().abs() < 1e-30);
    }
}
