//! The nearest rising series: isotonic regression by pooling adjacent violators.
//! Source: Barlow, Bartholomew, Bremner & Brunk (1972), Statistical Inference under Order Restrictions. Linear time.

/// The non-decreasing series nearest to (value, weight > 0) in weighted least squares, in the given order.
///
/// ```
/// use veerlog::stats::isotonic::isotonic;
/// assert_eq!(isotonic(&[(1.0, 1.0), (3.0, 1.0), (2.0, 1.0)]), [1.0, 2.5, 2.5]);
/// ```
#[must_use]
pub fn isotonic(values: &[(f64, f64)]) -> Vec<f64> {
    // Blocks of (mean, weight, items); a block lower than the one before it is pooled with it.
    let mut blocks: Vec<(f64, f64, usize)> = Vec::new();
    for &(value, weight) in values {
        let mut block = (value, weight, 1);
        while let Some(&(before, mass, items)) = blocks.last()
            && before >= block.0
        {
            let total = mass + block.1;
            block = ((before * mass + block.0 * block.1) / total, total, items + block.2);
            blocks.pop();
        }
        blocks.push(block);
    }
    blocks.into_iter().flat_map(|(value, _, items)| std::iter::repeat_n(value, items)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn empty_and_falling() {
        assert!(isotonic(&[]).is_empty());
        assert_eq!(isotonic(&[(3.0, 1.0), (1.0, 1.0)]), [2.0, 2.0]);
    }

    proptest! {
        #[test]
        fn rises_and_keeps_the_mean(values in prop::collection::vec((-5.0..5.0_f64, 0.1..3.0_f64), 1..30)) {
            let fitted = isotonic(&values);
            prop_assert!(fitted.windows(2).all(|w| w[0] <= w[1]));
            let before: f64 = values.iter().map(|(v, w)| v * w).sum();
            let after: f64 = values.iter().zip(&fitted).map(|((_, w), f)| f * w).sum();
            prop_assert!((before - after).abs() < 1e-9);
        }
    }
}
