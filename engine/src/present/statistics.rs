//! Statistics of a list of numbers. Where a number is NaN, so is every statistic of the list.

/// Sum, in the order given; 0 of no numbers.
#[must_use]
pub fn sum(numbers: &[f64]) -> f64 {
    numbers.iter().sum()
}

/// Arithmetic mean; `None` of no numbers.
#[must_use]
pub fn mean(numbers: &[f64]) -> Option<f64> {
    (!numbers.is_empty()).then(|| sum(numbers) / numbers.len() as f64)
}

/// Standard deviation of a sample, with n - 1; `None` of fewer than two numbers.
#[must_use]
pub fn standard_deviation(numbers: &[f64]) -> Option<f64> {
    let mean = mean(numbers).filter(|_| numbers.len() > 1)?;
    // Deviations from the mean, not a difference of sums of squares: that loses every digit where sd << mean.
    let squares: f64 = numbers.iter().map(|number| (number - mean).powi(2)).sum();
    Some((squares / (numbers.len() - 1) as f64).sqrt())
}

/// Quantile by linear interpolation between order statistics, definition 7 of Hyndman & Fan (1996),
/// The American Statistician 50, 361-365: with x sorted and counted from 1,
///
/// ```text
/// h = (n - 1) p + 1;   Q(p) = x[floor h] + (h - floor h) (x[floor h + 1] - x[floor h])
/// ```
///
/// # Returns
///
/// `None` of no numbers, or where `probability` lies outside 0 to 1.
#[must_use]
pub fn quantile(numbers: &[f64], probability: f64) -> Option<f64> {
    if numbers.is_empty() || !(0.0..=1.0).contains(&probability) {
        return None;
    }
    if numbers.iter().any(|number| number.is_nan()) {
        return Some(f64::NAN);
    }
    let mut sorted = numbers.to_vec();
    sorted.sort_by(f64::total_cmp);
    let position = (sorted.len() - 1) as f64 * probability;
    let (below, above) = (sorted[position.floor() as usize], sorted[position.ceil() as usize]);
    // Equal neighbours first: infinities would otherwise give NaN.
    Some(if below == above { below } else { below + position.fract() * (above - below) })
}

#[cfg(test)]
mod tests {
    use super::{mean, quantile, standard_deviation};

    #[test]
    fn by_hand() {
        let numbers = [4.0, 1.0, 2.0, 3.0];
        assert_eq!(mean(&numbers), Some(2.5));
        // Squares of -1.5, -0.5, 0.5, 1.5 add up to 5; 5/3 is the variance.
        assert_eq!(standard_deviation(&numbers), Some((5.0_f64 / 3.0).sqrt()));
        // h = 3 * 0.25 + 1 = 1.75, three quarters of the way from 1 to 2.
        assert_eq!(quantile(&numbers, 0.25), Some(1.75));
        assert_eq!(quantile(&numbers, 0.5), Some(2.5));
        assert_eq!(quantile(&numbers, 0.0), Some(1.0));
        assert_eq!(quantile(&numbers, 1.0), Some(4.0));
    }

    #[test]
    fn a_small_spread_on_a_large_mean_keeps_its_digits() {
        // Exact in binary: the mean is 1e9 + 0.5, the deviations are -0.5 and 0.5.
        assert_eq!(standard_deviation(&[1e9, 1e9 + 1.0]), Some(0.5_f64.sqrt()));
    }

    #[test]
    fn too_few_or_no_numbers() {
        assert_eq!(mean(&[]), None);
        assert_eq!(standard_deviation(&[1.0]), None);
        assert_eq!(quantile(&[], 0.5), None);
        assert_eq!(quantile(&[1.0], 1.5), None);
        assert_eq!(quantile(&[1.0], f64::NAN), None);
    }

    #[test]
    fn not_finite() {
        let inf = f64::INFINITY;
        assert_eq!(quantile(&[inf, inf, 1.0], 0.75), Some(inf));
        assert!(quantile(&[1.0, f64::NAN], 0.0).is_some_and(f64::is_nan));
        assert!(mean(&[1.0, f64::NAN]).is_some_and(f64::is_nan));
    }
}
