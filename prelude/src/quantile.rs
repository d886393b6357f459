//! Means, spreads and order statistics of one list of numbers.

/// The mean; NaN for an empty list.
pub(crate) fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

/// The standard deviation with divisor n − 1, about the mean; NaN for fewer than two numbers.
pub(crate) fn deviation(values: &[f64]) -> f64 {
    let mean = mean(values);
    let squares: f64 = values.iter().map(|value| (value - mean).powi(2)).sum();
    (squares / (values.len() as f64 - 1.0)).sqrt()
}

/// The quantile of numbers in ascending order by definition 7 of R. J. Hyndman and Y. Fan (1996),
/// "Sample quantiles in statistical packages": linear between order statistics, at the position
/// (n − 1) q counted from zero. NaN for an empty list.
pub(crate) fn quantile(ascending: &[f64], share: f64) -> f64 {
    let Some(last) = ascending.len().checked_sub(1) else { return f64::NAN };
    let position = last as f64 * share.clamp(0.0, 1.0);
    let below = position.floor() as usize;
    let above = (below + 1).min(last);
    let part = position - below as f64;
    ascending[below] + part * (ascending[above] - ascending[below])
}

/// Puts numbers in ascending order; none of them may be NaN for the order to mean anything.
pub(crate) fn ascending(mut values: Vec<f64>) -> Vec<f64> {
    values.sort_unstable_by(f64::total_cmp);
    values
}

/// The median: the middle number, or the mean of the two in the middle.
pub(crate) fn median(values: Vec<f64>) -> f64 {
    quantile(&ascending(values), 0.5)
}

#[cfg(test)]
mod tests {
    use super::*;

    // R 4.2.2: mean, sd, median and quantile(x, 0.1, type = 7) of c(2, 7, 1, 8, 2, 8).
    #[test]
    fn the_statistics_language_gives_the_same() {
        let x = [2.0, 7.0, 1.0, 8.0, 2.0, 8.0];
        assert!((mean(&x) - 14.0 / 3.0).abs() < 1e-14);
        assert!((deviation(&x) - 3.326_659_986_633_24).abs() < 1e-12);
        assert_eq!(median(x.to_vec()), 4.5);
        assert_eq!(quantile(&ascending(x.to_vec()), 0.1), 1.5);
        assert!(quantile(&[], 0.5).is_nan());
    }
}
