//! Tails and quantiles of the distributions that tests and limits refer to.
//!
//! Every tail is computed as such, never as one minus the other where that would lose digits, and
//! every quantile can be asked for by its lower probability or by its upper tail, so that a tail
//! of 1e-12 keeps all its digits. Relative errors are below 1e-12 for tails down to 1e-300 and
//! degrees of freedom from 0.1 to 1e6, and of the same size for quantiles.
//!
//! Conventions: a parameter that is not positive and finite, a probability outside 0 to 1 and NaN
//! give NaN; the ends of a distribution are reached at probabilities 0 and 1.
//!
//! Everything rests on two functions, the incomplete gamma (`gamma`) and the incomplete beta
//! function (`beta`), and on one Newton iteration for quantiles (`invert`).

#![allow(dead_code, reason = "both tails and quantiles of each law; families take what they need")]

mod beta;
mod gamma;
mod invert;
mod saddle;

#[cfg(test)]
mod tests;

use statrs::function::erf::erfc_inv;

use invert::{Probability, Side};

/// P(Z > z) for the standard normal distribution.
pub(crate) fn normal_upper_tail(z: f64) -> f64 {
    // Z² follows the chi-squared distribution with one degree of freedom.
    let two_tails = chi_squared_upper_tail(z * z, 1.0);
    if z < 0.0 { 1.0 - 0.5 * two_tails } else { 0.5 * two_tails }
}

/// The z below which a standard normal variable lies with this probability.
pub(crate) fn normal_quantile(probability: f64) -> f64 {
    if probability < 0.5 {
        -normal_upper_quantile(probability)
    } else {
        normal_upper_quantile(1.0 - probability)
    }
}

/// The z above which a standard normal variable lies with this probability.
pub(crate) fn normal_upper_quantile(tail: f64) -> f64 {
    if tail > 0.5 {
        return -normal_upper_quantile(1.0 - tail);
    }
    if !(tail > 0.0 && tail < 0.5) {
        return if tail == 0.0 {
            f64::INFINITY
        } else if tail == 0.5 {
            0.0
        } else {
            f64::NAN
        };
    }
    // One Newton step on the logarithm of the tail takes the starting value's error to rounding.
    let z = std::f64::consts::SQRT_2 * erfc_inv(2.0 * tail);
    let reached = normal_upper_tail(z);
    let density = (-0.5 * z * z).exp() / (2.0 * std::f64::consts::PI).sqrt();
    if density > 0.0 { z + (reached / tail).ln() * reached / density } else { z }
}

/// P(X > x) for the chi-squared distribution.
pub(crate) fn chi_squared_upper_tail(x: f64, freedom: f64) -> f64 {
    gamma::tail(Side::Upper, 0.5 * freedom, 0.5 * x)
}

/// P(X ≤ x) for the chi-squared distribution.
pub(crate) fn chi_squared_lower_tail(x: f64, freedom: f64) -> f64 {
    gamma::tail(Side::Lower, 0.5 * freedom, 0.5 * x)
}

/// The x below which a chi-squared variable lies with this probability.
pub(crate) fn chi_squared_quantile(probability: f64, freedom: f64) -> f64 {
    2.0 * gamma::quantile(Probability::lower(probability), 0.5 * freedom)
}

/// The x above which a chi-squared variable lies with this probability.
pub(crate) fn chi_squared_upper_quantile(tail: f64, freedom: f64) -> f64 {
    2.0 * gamma::quantile(Probability::upper(tail), 0.5 * freedom)
}

/// P(X > x) for the F distribution.
pub(crate) fn f_upper_tail(x: f64, numerator: f64, denominator: f64) -> f64 {
    beta::ratio_tail(Side::Upper, 0.5 * numerator, 0.5 * denominator, x)
}

/// P(X ≤ x) for the F distribution.
pub(crate) fn f_lower_tail(x: f64, numerator: f64, denominator: f64) -> f64 {
    beta::ratio_tail(Side::Lower, 0.5 * numerator, 0.5 * denominator, x)
}

/// The x below which an F variable lies with this probability.
pub(crate) fn f_quantile(probability: f64, numerator: f64, denominator: f64) -> f64 {
    beta::ratio_quantile(Probability::lower(probability), 0.5 * numerator, 0.5 * denominator)
}

/// The x above which an F variable lies with this probability.
pub(crate) fn f_upper_quantile(tail: f64, numerator: f64, denominator: f64) -> f64 {
    beta::ratio_quantile(Probability::upper(tail), 0.5 * numerator, 0.5 * denominator)
}

/// P(|T| > |t|) for Student's t distribution.
pub(crate) fn t_two_tails(t: f64, freedom: f64) -> f64 {
    // T² follows the F distribution with 1 and `freedom` degrees of freedom.
    f_upper_tail(t * t, 1.0, freedom)
}

/// P(T > t) for Student's t distribution.
pub(crate) fn t_upper_tail(t: f64, freedom: f64) -> f64 {
    let half = 0.5 * t_two_tails(t, freedom);
    if t < 0.0 { 1.0 - half } else { half }
}

/// The t above which a variable that follows Student's t distribution lies with this probability.
pub(crate) fn t_upper_quantile(tail: f64, freedom: f64) -> f64 {
    if tail > 0.5 {
        return -t_upper_quantile(1.0 - tail, freedom);
    }
    f_upper_quantile(2.0 * tail, 1.0, freedom).sqrt()
}

/// The t below which a variable that follows Student's t distribution lies with this probability.
pub(crate) fn t_quantile(probability: f64, freedom: f64) -> f64 {
    if probability < 0.5 {
        -t_upper_quantile(probability, freedom)
    } else {
        t_upper_quantile(1.0 - probability, freedom)
    }
}

/// P(X > x) for the beta distribution on 0 to 1 with the shapes a and b: its density is
/// proportional to x^(a − 1) (1 − x)^(b − 1).
pub(crate) fn beta_upper_tail(x: f64, a: f64, b: f64) -> f64 {
    beta::share_tail(Side::Upper, a, b, x)
}

/// P(X ≤ x) for the beta distribution with the shapes a and b.
pub(crate) fn beta_lower_tail(x: f64, a: f64, b: f64) -> f64 {
    beta::share_tail(Side::Lower, a, b, x)
}

/// The x below which a beta variable with the shapes a and b lies with this probability.
pub(crate) fn beta_quantile(probability: f64, a: f64, b: f64) -> f64 {
    beta::share_quantile(Probability::lower(probability), a, b)
}

/// The x above which a beta variable with the shapes a and b lies with this probability.
pub(crate) fn beta_upper_quantile(tail: f64, a: f64, b: f64) -> f64 {
    beta::share_quantile(Probability::upper(tail), a, b)
}
