//! The exponent of a power transformation by maximum likelihood.

use crate::distributions::chi_squared_quantile;
use crate::error::{Error, Result};

/// How an exponent of Box and Cox was estimated.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ExponentEstimate {
    /// The profile log-likelihood at the estimate, Box and Cox (1964), equation 8, with
    /// nothing left out but the constant −(n/2)(1 + ln 2π).
    ///
    /// ```text
    /// l(λ) = −(n / 2) ln σ̂²(λ) + (λ − 1) Σ_i ln x_i        σ̂²: variance of y with divisor n
    /// ```
    pub log_likelihood: f64,
    /// The same at λ = 1, which is no transformation at all.
    pub log_likelihood_untransformed: f64,
    /// The lower end of the 95 % interval of exponents whose log-likelihood lies within
    /// χ²₀.₉₅(1) / 2 = 1.92 of the largest; `None` when it lies below the bounds of the search.
    pub lower: Option<f64>,
    /// The upper end of that interval; `None` when it lies above the bounds of the search.
    pub upper: Option<f64>,
    /// Whether the likelihood still rises at a bound of the search, so that the estimate is that
    /// bound.
    pub at_bound: bool,
}

/// The exponent between two bounds that makes one column most likely to be normal.
///
/// The log-likelihood is concave in λ (Kouider and Chen 1995, "Concavity of Box–Cox log-likelihood
/// function", Statistics & Probability Letters 25, 171–175), so its slope has one zero, which is
/// found to the last digits where the maximum itself would be found to half of them.
pub(super) fn estimate(
    column: &[f64],
    weights: Option<&[f64]>,
    (least, most): (f64, f64),
) -> Result<(f64, ExponentEstimate)> {
    let profile = Profile::of(column, weights);
    let (least, most) = (least.max(-profile.steepest), most.min(profile.steepest));
    if least >= most {
        return Err(Error::NoConvergence { method: "the search for an exponent" });
    }
    let slope = |exponent| profile.slope(exponent);
    let (exponent, at_bound) = if slope(least) <= 0.0 {
        (least, true)
    } else if slope(most) >= 0.0 {
        (most, true)
    } else {
        (zero_between(slope, least, most), false)
    };
    let highest = profile.log_likelihood(exponent);
    if !highest.is_finite() {
        // Values so close that their logarithms are the same number.
        return Err(Error::NoConvergence { method: "the search for an exponent" });
    }
    let level = highest - chi_squared_quantile(0.95, 1.0) / 2.0;
    let above_level = |exponent| profile.log_likelihood(exponent) - level;
    let end =
        |bound: f64| (above_level(bound) < 0.0).then(|| zero_between(above_level, bound, exponent));
    let estimate = ExponentEstimate {
        log_likelihood: highest,
        log_likelihood_untransformed: profile.log_likelihood(1.0),
        lower: end(least),
        upper: end(most),
        at_bound,
    };
    Ok((exponent, estimate))
}

/// The profile likelihood of one column.
struct Profile<'a> {
    // Logarithms about their mean: powers of them neither overflow nor need a Jacobian.
    logs: Vec<f64>,
    mean_log: f64,
    weights: Option<&'a [f64]>,
    // The largest absolute exponent at which squares of powers are still numbers.
    steepest: f64,
}

impl<'a> Profile<'a> {
    fn of(column: &[f64], weights: Option<&'a [f64]>) -> Self {
        let mut logs: Vec<f64> = column.iter().map(|value| value.ln()).collect();
        let mean_log = weighted_mean(&logs, weights);
        logs.iter_mut().for_each(|log| *log -= mean_log);
        let reach = logs.iter().fold(0.0, |reach: f64, log| reach.max(log.abs()));
        Profile { logs, mean_log, weights, steepest: 300.0 / reach }
    }

    fn log_likelihood(&self, exponent: f64) -> f64 {
        let powers: Vec<f64> = self.logs.iter().map(|log| power(exponent, *log)).collect();
        let n = powers.len() as f64;
        -0.5 * n * self.covariance(&powers, &powers).ln() - n * self.mean_log
    }

    /// dl / dλ = −n cov(z, dz/dλ) / var(z), with z the powers.
    fn slope(&self, exponent: f64) -> f64 {
        let (powers, slopes): (Vec<f64>, Vec<f64>) =
            self.logs.iter().map(|log| power_and_slope(exponent, *log)).unzip();
        let n = powers.len() as f64;
        -n * self.covariance(&powers, &slopes) / self.covariance(&powers, &powers)
    }

    /// With divisor n.
    fn covariance(&self, a: &[f64], b: &[f64]) -> f64 {
        let (mean_a, mean_b) = (weighted_mean(a, self.weights), weighted_mean(b, self.weights));
        let products = a.iter().zip(b).map(|(a, b)| (a - mean_a) * (b - mean_b));
        let sum: f64 = match self.weights {
            None => products.sum(),
            Some(weights) => products.zip(weights).map(|(product, weight)| product * weight).sum(),
        };
        sum / a.len() as f64
    }
}

/// The mean, with weights that sum to the number of values.
pub(super) fn weighted_mean(values: &[f64], weights: Option<&[f64]>) -> f64 {
    let n = values.len() as f64;
    match weights {
        None => values.iter().sum::<f64>() / n,
        Some(weights) => values.iter().zip(weights).map(|(v, w)| v * w).sum::<f64>() / n,
    }
}

/// (e^{λu} − 1) / λ, and u for λ = 0.
pub(super) fn power(exponent: f64, log: f64) -> f64 {
    if exponent == 0.0 { log } else { (exponent * log).exp_m1() / exponent }
}

/// [`power`] and its derivative with respect to the exponent, u² (t eᵗ − eᵗ + 1) / t² with t = λu.
fn power_and_slope(exponent: f64, log: f64) -> (f64, f64) {
    let t = exponent * log;
    let less_one = t.exp_m1();
    let power = if exponent == 0.0 { log } else { less_one / exponent };
    let ratio = if t.abs() < 1.0 {
        SERIES.iter().rev().fold(0.0, |sum, coefficient| sum * t + coefficient)
    } else {
        (t * (less_one + 1.0) - less_one) / (t * t)
    };
    (power, log * log * ratio)
}

/// (t eᵗ − eᵗ + 1) / t² = Σ_k (k + 1) / (k + 2)! tᵏ, to double precision for |t| < 1, where the closed
/// form loses its digits to cancellation.
const SERIES: [f64; 18] = {
    let mut series = [0.0; 18];
    let (mut k, mut factorial) = (0, 2.0);
    while k < 18 {
        series[k] = (k + 1) as f64 / factorial;
        factorial *= (k + 3) as f64;
        k += 1;
    }
    series
};

/// The zero of a function between two arguments at which it has different signs, to about 10⁻¹⁴, by
/// the method of C. J. F. Ridders (1979), "A new algorithm for computing a single root of a real
/// continuous function", IEEE Transactions on Circuits and Systems 26, 979–980. Each round at
/// least halves the bracket, so that it ends within some fifty, and mostly within six.
fn zero_between(function: impl Fn(f64) -> f64, from: f64, to: f64) -> f64 {
    let (mut left, mut right) = (from, to);
    let (mut at_left, mut at_right) = (function(left), function(right));
    let mut last = f64::NAN;
    while (right - left).abs() > 1e-14 {
        let middle = left + (right - left) / 2.0;
        let at_middle = function(middle);
        // Not zero and not negative, since the ends have different signs.
        let root = (at_middle * at_middle - at_left * at_right).sqrt();
        let toward = if at_left < at_right { -1.0 } else { 1.0 };
        let guess = middle + (middle - left) * toward * at_middle / root;
        if at_middle == 0.0 || (guess - last).abs() <= 1e-14 {
            return if at_middle == 0.0 { middle } else { guess };
        }
        last = guess;
        let at_guess = function(guess);
        // The ends move to the closest arguments on either side of the zero.
        for (argument, value) in [(middle, at_middle), (guess, at_guess)] {
            if (argument - left) * (right - argument) < 0.0 {
                continue;
            }
            if (value < 0.0) == (at_left < 0.0) {
                (left, at_left) = (argument, value);
            } else {
                (right, at_right) = (argument, value);
            }
        }
    }
    left + (right - left) / 2.0
}
