//! Order statistics and moments of plain slices: mean, variance, median, quantiles.
//! Quantile definition: linear interpolation between order statistics, h = (n − 1)p (definition 7 of Hyndman & Fan
//! 1996, Am. Stat. 50, 361–365). Input: finite values in any order. Empty input gives `None`.

/// Arithmetic mean.
#[must_use]
pub fn mean(values: &[f64]) -> Option<f64> {
    (!values.is_empty()).then(|| values.iter().sum::<f64>() / values.len() as f64)
}

/// Unbiased variance (divides by n − 1); `None` under two values.
#[must_use]
pub fn variance(values: &[f64]) -> Option<f64> {
    let centre = mean(values)?;
    (values.len() > 1)
        .then(|| values.iter().map(|v| (v - centre) * (v - centre)).sum::<f64>() / (values.len() - 1) as f64)
}

/// A sorted copy, by total order.
#[must_use]
pub fn sorted(values: &[f64]) -> Vec<f64> {
    let mut copy = values.to_vec();
    copy.sort_by(f64::total_cmp);
    copy
}

/// Quantile `p` (clamped to 0..=1) of values already sorted.
#[must_use]
pub fn quantile_of_sorted(sorted: &[f64], p: f64) -> Option<f64> {
    let last = sorted.len().checked_sub(1)?;
    let position = p.clamp(0.0, 1.0) * last as f64;
    let below = position.floor() as usize;
    let above = (below + 1).min(last);
    Some(sorted[below] + (position - below as f64) * (sorted[above] - sorted[below]))
}

/// Quantile `p` of values in any order.
///
/// ```
/// assert_eq!(veerlog::stats::order::quantile(&[4.0, 1.0, 3.0, 2.0], 0.5), Some(2.5));
/// ```
#[must_use]
pub fn quantile(values: &[f64], p: f64) -> Option<f64> {
    quantile_of_sorted(&sorted(values), p)
}

/// Median; partially reorders `values` (no copy), linear time.
#[must_use]
pub fn median_in_place(values: &mut [f64]) -> Option<f64> {
    let n = values.len();
    if n == 0 {
        return None;
    }
    let (lower, upper, _) = values.select_nth_unstable_by(n / 2, f64::total_cmp);
    if n % 2 == 1 {
        return Some(*upper);
    }
    let below = lower.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    Some(0.5 * (below + *upper))
}

/// Median of values in any order.
#[must_use]
pub fn median(values: &[f64]) -> Option<f64> {
    median_in_place(&mut values.to_vec())
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn hand_checked() {
        let v = [4.0, 1.0, 3.0, 2.0, 10.0];
        assert_eq!(mean(&v), Some(4.0));
        assert_eq!(variance(&v), Some(12.5));
        assert_eq!(median(&v), Some(3.0));
        assert_eq!(median(&v[..4]), Some(2.5));
        assert_abs_diff_eq!(quantile(&v, 0.9).unwrap(), 7.6, epsilon = 1e-12);
    }

    #[test]
    fn empty_is_none() {
        assert_eq!(mean(&[]), None);
        assert_eq!(variance(&[1.0]), None);
        assert_eq!(median(&[]), None);
        assert_eq!(quantile(&[], 0.5), None);
    }
}
