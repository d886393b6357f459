//! Tails and quantiles of the distributions that tests and limits refer to.
//!
//! Upper tails are computed as such, never as one minus the lower tail, so that they keep their
//! digits far out.

use statrs::distribution::{ChiSquared, ContinuousCDF, FisherSnedecor, Normal, StudentsT};

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
    ChiSquared::new(freedom).map_or(f64::NAN, |law| law.inverse_cdf(probability))
}

/// P(X > x) for the F distribution; NaN unless both degrees of freedom are positive.
pub(crate) fn f_upper_tail(x: f64, numerator: f64, denominator: f64) -> f64 {
    FisherSnedecor::new(numerator, denominator).map_or(f64::NAN, |law| law.sf(x.max(0.0)))
}

/// The x below which an F variable lies with this probability.
pub(crate) fn f_quantile(probability: f64, numerator: f64, denominator: f64) -> f64 {
    FisherSnedecor::new(numerator, denominator).map_or(f64::NAN, |law| law.inverse_cdf(probability))
}

/// P(|T| > |t|) for Student's t distribution.
pub(crate) fn t_two_tails(t: f64, freedom: f64) -> f64 {
    StudentsT::new(0.0, 1.0, freedom).map_or(f64::NAN, |law| 2.0 * law.sf(t.abs()))
}
