//! Tails and quantiles of the distributions that tests and limits refer to.
//!
//! Upper tails are computed as such, never as one minus the lower tail, so that they keep their
//! digits far out.

use statrs::distribution::{
    ChiSquared, Continuous, ContinuousCDF, FisherSnedecor, Normal, StudentsT,
};

/// P(Z > z) for the standard normal distribution.
pub(crate) fn normal_upper_tail(z: f64) -> f64 {
    Normal::standard().sf(z)
}

/// The z below which a standard normal variable lies with this probability.
pub(crate) fn normal_quantile(probability: f64) -> f64 {
    Normal::standard().inverse_cdf(probability)
}

/// P(X > x) for the chi-squared distribution; NaN unless the degrees of freedom are positive.
pub(crate) fn chi_squared_upper_tail(x: f64, freedom: f64) -> f64 {
    ChiSquared::new(freedom).map_or(f64::NAN, |law| law.sf(x.max(0.0)))
}

/// The x below which a chi-squared variable lies with this probability.
pub(crate) fn chi_squared_quantile(probability: f64, freedom: f64) -> f64 {
    ChiSquared::new(freedom).map_or(f64::NAN, |law| polished_quantile(&law, probability))
}

/// P(X > x) for the F distribution; NaN unless both degrees of freedom are positive.
pub(crate) fn f_upper_tail(x: f64, numerator: f64, denominator: f64) -> f64 {
    FisherSnedecor::new(numerator, denominator).map_or(f64::NAN, |law| law.sf(x.max(0.0)))
}

/// The x below which an F variable lies with this probability.
pub(crate) fn f_quantile(probability: f64, numerator: f64, denominator: f64) -> f64 {
    FisherSnedecor::new(numerator, denominator)
        .map_or(f64::NAN, |law| polished_quantile(&law, probability))
}

/// P(|T| > |t|) for Student's t distribution.
pub(crate) fn t_two_tails(t: f64, freedom: f64) -> f64 {
    StudentsT::new(0.0, 1.0, freedom).map_or(f64::NAN, |law| 2.0 * law.sf(t.abs()))
}

/// A quantile to full precision: the search behind `inverse_cdf` stops at some ten digits, and
/// Newton's steps from there double them.
fn polished_quantile(
    law: &(impl ContinuousCDF<f64, f64> + Continuous<f64, f64>),
    probability: f64,
) -> f64 {
    let mut x = law.inverse_cdf(probability);
    for _ in 0..2 {
        // The smaller of the two tails keeps its digits.
        let excess = if probability > 0.5 {
            (1.0 - probability) - law.sf(x)
        } else {
            law.cdf(x) - probability
        };
        let next = x - excess / law.pdf(x);
        if !(next.is_finite() && next > 0.0) {
            break;
        }
        x = next;
    }
    x
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::compare::assert_relative;

    /// mpmath 1.4.1 in 30 digits: roots of the regularised incomplete gamma and beta functions.
    #[test]
    fn quantiles_have_all_their_digits() {
        let chi_squared = [
            (32.0 / 60.0, 3.0, 2.548_068_278_935_706),
            (0.975, 3.0, 9.348_403_604_496_148),
            (0.99, 7.3, 18.964_387_373_864_643),
        ];
        for (probability, freedom, expected) in chi_squared {
            let found = chi_squared_quantile(probability, freedom);
            assert_relative(found, expected, 2e-14, "chi-squared");
        }
        assert_relative(f_quantile(0.975, 3.0, 40.0), 3.463_259_659_534_841, 2e-14, "F");
        assert_relative(f_quantile(0.99, 2.5, 77.1), 4.398_024_805_493_224, 2e-14, "F");
    }
}
