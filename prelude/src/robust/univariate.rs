//! The minimum covariance determinant of one list of numbers, exactly.
//!
//! In one dimension the h numbers of smallest variance are neighbours in ascending order, so that
//! sliding a window over the sorted numbers finds them (P. J. Rousseeuw and A. M. Leroy (1987),
//! "Robust Regression and Outlier Detection", chapter 4, section 3).

use super::correction::{consistency, raw_small_sample, reweighted_small_sample};
use crate::distributions::chi_squared_quantile;

/// Centre and spread of one list of numbers, as most of them have it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Univariate {
    pub(crate) centre: f64,
    /// Consistent for the standard deviation of normal numbers.
    pub(crate) spread: f64,
    /// The mean and the variance (divisor h − 1) of the window that was found, uncorrected, and
    /// its place in ascending order.
    pub(crate) window: Window,
}

/// The neighbours of least variance.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Window {
    pub(crate) first: usize,
    pub(crate) mean: f64,
    pub(crate) variance: f64,
}

/// The h neighbours of least variance among numbers in ascending order, 2 ≤ h ≤ n.
///
/// Of windows with the same variance the first is taken.
pub(crate) fn tightest_window(ascending: &[f64], h: usize) -> Window {
    let n = ascending.len();
    let size = h as f64;
    // Sums about the middle number keep the digits of numbers with a large offset; each window's
    // own variance is then computed afresh, so that no rounding piles up along the way.
    let middle = ascending[n / 2];
    let (mut sum, mut squares) = (0.0, 0.0);
    for value in &ascending[..h] {
        sum += value - middle;
        squares += (value - middle).powi(2);
    }
    let mut best = (squares - sum * sum / size, 0);
    for first in 1..=n - h {
        let (gone, new) = (ascending[first - 1] - middle, ascending[first + h - 1] - middle);
        sum += new - gone;
        squares += (new - gone) * (new + gone);
        let spread = squares - sum * sum / size;
        if spread < best.0 {
            best = (spread, first);
        }
    }
    let first = best.1;
    let window = &ascending[first..first + h];
    // A window of equal numbers has no variance at all, not what rounding makes of it.
    if window[0] == window[h - 1] {
        return Window { first, mean: window[0], variance: 0.0 };
    }
    let mean = middle + window.iter().map(|value| value - middle).sum::<f64>() / size;
    let squares: f64 = window.iter().map(|value| (value - mean).powi(2)).sum();
    Window { first, mean, variance: squares / (size - 1.0) }
}

/// Centre and spread before and after one step of reweighting.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct TwoSteps {
    pub(crate) raw: Univariate,
    /// The mean and spread of the numbers within the normal law's 97.5 % of the raw ones (of the
    /// squared distance), with the corrections that go with it.
    pub(crate) reweighted: Univariate,
}

/// The exact minimum covariance determinant in one dimension, with reweighting.
///
/// `ascending` must hold at least two numbers in ascending order, and 2 ≤ h ≤ n. A spread of zero
/// says that h or more numbers are equal.
pub(crate) fn univariate(ascending: &[f64], h: usize) -> TwoSteps {
    let n = ascending.len();
    let window = tightest_window(ascending, h);
    let share = h as f64 / n as f64;
    let factor = consistency(1, share) * raw_small_sample(1, n, share);
    let raw = Univariate { centre: window.mean, spread: (window.variance * factor).sqrt(), window };
    if raw.spread == 0.0 {
        return TwoSteps { raw, reweighted: raw };
    }
    let reach = chi_squared_quantile(KEPT, 1.0).sqrt() * raw.spread;
    let first = ascending.partition_point(|value| *value < raw.centre - reach);
    let end = ascending.partition_point(|value| *value <= raw.centre + reach);
    let kept = &ascending[first..end];
    let n_kept = kept.len() as f64;
    let centre = raw.centre + kept.iter().map(|value| value - raw.centre).sum::<f64>() / n_kept;
    let squares: f64 = kept.iter().map(|value| (value - centre).powi(2)).sum();
    let factor = consistency(1, n_kept / n as f64) * reweighted_small_sample(1, n, share);
    let spread = (squares / (n_kept - 1.0) * factor).sqrt();
    TwoSteps { raw, reweighted: Univariate { centre, spread, window } }
}

/// The share of clean normal rows that reweighting keeps.
pub(crate) const KEPT: f64 = 0.975;
