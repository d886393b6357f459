//! Limits on distances: which law they come from, and when they do not apply.

use std::fmt;

use crate::distributions::{chi_squared_quantile, f_quantile, normal_quantile};
use crate::error::{Error, Result};
use crate::quantile::ascending;
use crate::robust::univariate::univariate;

/// The coverage of limits unless another is asked for.
pub(crate) const USUAL_COVERAGE: f64 = 0.975;

pub(crate) fn check_coverage(coverage: f64) -> Result<()> {
    if coverage > 0.5 && coverage < 1.0 {
        return Ok(());
    }
    Err(Error::OptionOutOfRange {
        option: "coverage",
        value: coverage,
        accepted: "above 0.5 and below 1",
    })
}

/// Centre and spread of the orthogonal distances of fitted rows, to the power 2/3.
///
/// A weighted sum of squares of normal variables, to the power 1/3, is nearly normal (E. B. Wilson
/// and M. M. Hilferty 1931); the distance is the root of such a sum. Centre and spread are the
/// exact univariate minimum covariance determinant after reweighting, so that rows off the pattern
/// do not widen the limit that should find them. None when there are fewer than three rows.
pub(crate) fn orthogonal_moments(squares: &[f64], share: f64) -> Option<(f64, f64)> {
    let n = squares.len();
    if n < 3 {
        return None;
    }
    let h = ((share * n as f64) as usize).clamp(n / 2 + 1, n);
    let powers = ascending(squares.iter().map(|square| square.cbrt()).collect());
    let found = univariate(&powers, h).reweighted;
    Some((found.centre, found.spread))
}

/// The orthogonal distance below which a share of rows stays: (μ + σ z)^{3/2}.
pub(crate) fn orthogonal_limit((centre, spread): (f64, f64), coverage: f64) -> f64 {
    (centre + spread * normal_quantile(coverage)).max(0.0).powf(1.5)
}

/// The score distance below which a share of normal rows stays: √χ²_{k, coverage}.
pub(crate) fn score_limit(k: usize, coverage: f64) -> f64 {
    chi_squared_quantile(coverage, k as f64).sqrt()
}

/// The law that a limit on T² comes from. It depends on whether the row that is judged took part
/// in the fit.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TSquaredRule {
    /// For rows of the fitted table: each T² is at most (n − 1)²/n, since the row pulls the mean
    /// and the variances towards itself.
    ///
    /// ```text
    /// T² ≤ (n − 1)²/n · B,  B the quantile of the beta law with k/2 and (n − k − 1)/2
    /// ```
    ///
    /// N. D. Tracy, J. C. Young and R. L. Mason (1992), "Multivariate control charts for
    /// individual observations", Journal of Quality Technology 24, 88–95.
    Beta,
    /// For new rows, which did not take part in the fit:
    ///
    /// ```text
    /// T² ≤ k (n + 1)(n − 1) / (n (n − k)) · F,  F the quantile of the F law with k and n − k
    /// ```
    ///
    /// Source as for [`Beta`](TSquaredRule::Beta).
    F,
}

impl TSquaredRule {
    /// The limit, where the law exists: n − k − 1 or n − k degrees of freedom must be left.
    pub(crate) fn limit(self, n: usize, k: usize, coverage: f64) -> Option<f64> {
        let (n_real, k_real) = (n as f64, k as f64);
        match self {
            TSquaredRule::Beta => {
                let left = n.checked_sub(k + 1).filter(|left| *left > 0)? as f64;
                // A beta quantile by way of the F law: B = kF / (kF + n − k − 1).
                let f = k_real * f_quantile(coverage, k_real, left);
                Some((n_real - 1.0).powi(2) / n_real * (f / (f + left)))
            }
            TSquaredRule::F => {
                let left = n.checked_sub(k).filter(|left| *left > 0)? as f64;
                let factor = k_real * (n_real + 1.0) * (n_real - 1.0) / (n_real * left);
                Some(factor * f_quantile(coverage, k_real, left))
            }
        }
    }
}

impl fmt::Display for TSquaredRule {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            TSquaredRule::Beta => "beta law, fitted rows",
            TSquaredRule::F => "F law, new rows",
        })
    }
}

/// A rule for the limit on Q. With λ the variances of the components that are left out and
/// θ₁ = Σλ, θ₂ = Σλ², θ₃ = Σλ³:
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum QRule {
    /// A power of Q is nearly normal.
    ///
    /// ```text
    /// θ₁ ( z h₀ √(2 θ₂) / θ₁ + 1 + θ₂ h₀ (h₀ − 1) / θ₁² )^{1/h₀},  h₀ = 1 − 2 θ₁ θ₃ / (3 θ₂²)
    /// ```
    ///
    /// z is the normal quantile. J. E. Jackson and G. S. Mudholkar (1979), "Control procedures for
    /// residuals associated with principal component analysis", Technometrics 21, 341–349. It does
    /// not apply when h₀ is zero or the bracket is not positive.
    JacksonMudholkar,
    /// A multiple of χ² with the mean and the variance of Q: (θ₂/θ₁) χ²_h with h = θ₁²/θ₂.
    ///
    /// G. E. P. Box (1954), "Some theorems on quadratic forms applied in the study of analysis of
    /// variance problems, I", Annals of Mathematical Statistics 25, 290–302.
    Box,
    /// Residual variances compared by an F ratio.
    ///
    /// ```text
    /// θ₁ (n − 1)/(n − k − 1) F,  F the quantile with q and q (n − k − 1) degrees of freedom
    /// ```
    ///
    /// with q the number of components left out. S. Wold and M. Sjöström (1977), "SIMCA: a method
    /// for analyzing chemical data in terms of similarity and analogy", in B. R. Kowalski (editor),
    /// "Chemometrics: Theory and Application". The ratio takes the left-out variances for equal;
    /// here it is given only while h = θ₁²/θ₂ is at least 0.8 q, that is while they scatter by at
    /// most half their mean (our convention).
    F,
    /// A multiple of χ² matched to Q as the fitted rows have it: with m its mean and v its variance
    /// (divisor n − 1) over those rows, (v / 2m) χ²_h with h = 2m²/v.
    ///
    /// P. Nomikos and J. F. MacGregor (1995), "Multivariate SPC charts for monitoring batch
    /// processes", Technometrics 37, 41–59. It needs no variances, so that it also serves an
    /// analysis that kept its first components only; a wild row in the table widens it.
    Moments,
}

impl fmt::Display for QRule {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            QRule::JacksonMudholkar => "Jackson and Mudholkar",
            QRule::Box => "Box",
            QRule::F => "F ratio",
            QRule::Moments => "matched moments",
        })
    }
}

/// What one rule says about Q: a limit, or why it gives none.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct QLimit {
    rule: QRule,
    value: Answer,
}

impl QLimit {
    /// The rule.
    pub fn rule(&self) -> QRule {
        self.rule
    }

    /// The limit, if the rule applies.
    pub fn value(&self) -> Option<f64> {
        self.value.ok()
    }

    /// Why the rule does not apply, if so.
    pub fn why_not(&self) -> Option<&'static str> {
        self.value.err()
    }
}

/// What the limits on Q are computed from.
#[derive(Debug, Clone)]
pub(crate) struct Residuals {
    /// The variances that are left out, if they are known one by one.
    pub(crate) left_out: Option<Vec<f64>>,
    /// The mean and the variance (divisor n − 1) of Q over the fitted rows.
    pub(crate) mean: f64,
    pub(crate) variance: f64,
    pub(crate) n_rows: usize,
    pub(crate) n_components: usize,
}

type Answer = std::result::Result<f64, &'static str>;

impl Residuals {
    /// What every rule says.
    pub(crate) fn limits(&self, coverage: f64) -> Vec<QLimit> {
        [QRule::JacksonMudholkar, QRule::Box, QRule::F, QRule::Moments]
            .map(|rule| QLimit { rule, value: self.limit(rule, coverage) })
            .to_vec()
    }

    fn limit(&self, rule: QRule, coverage: f64) -> Answer {
        if self.left_out.as_ref().is_some_and(Vec::is_empty) {
            return Err("no component is left out");
        }
        if rule == QRule::Moments {
            return self.by_moments(coverage);
        }
        let Some(left_out) = &self.left_out else {
            return Err("the analysis kept its first components only");
        };
        let theta = |power: i32| left_out.iter().map(|variance| variance.powi(power)).sum::<f64>();
        let [one, two, three] = [1, 2, 3].map(theta);
        match rule {
            QRule::JacksonMudholkar => jackson_mudholkar(one, two, three, coverage),
            QRule::Box => Ok(two / one * chi_squared_quantile(coverage, one * (one / two))),
            _ => self.by_ratio(left_out.len() as f64, one, two, coverage),
        }
    }

    fn by_ratio(&self, q: f64, one: f64, two: f64, coverage: f64) -> Answer {
        let Some(left @ 1..) = self.n_rows.checked_sub(self.n_components + 1) else {
            return Err("no degrees of freedom are left");
        };
        if one * (one / two) < EVEN * q {
            return Err("the variances left out are too unequal");
        }
        let (n, left) = (self.n_rows as f64, left as f64);
        Ok(one * (n - 1.0) / left * f_quantile(coverage, q, q * left))
    }

    fn by_moments(&self, coverage: f64) -> Answer {
        if self.mean == 0.0 || self.variance == 0.0 {
            return Err("Q does not vary over the fitted rows");
        }
        let freedom = 2.0 * self.mean * (self.mean / self.variance);
        Ok(self.mean / freedom * chi_squared_quantile(coverage, freedom))
    }
}

/// The least share of q that h must be for variances to pass as equal; see [`QRule::F`].
const EVEN: f64 = 0.8;

fn jackson_mudholkar(one: f64, two: f64, three: f64, coverage: f64) -> Answer {
    let power = 1.0 - 2.0 * (one / two) * (three / two) / 3.0;
    if power.abs() < 1e-6 {
        return Err("its power h₀ is zero");
    }
    let bracket = normal_quantile(coverage) * power * (2.0 * two).sqrt() / one
        + 1.0
        + two * power * (power - 1.0) / (one * one);
    if bracket > 0.0 { Ok(one * bracket.powf(1.0 / power)) } else { Err("its power has no root") }
}
