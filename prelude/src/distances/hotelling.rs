//! Hotelling's T² and the residual statistic Q.

use std::sync::Arc;

use nalgebra::DVector;

use super::contributions::Contributions;
use super::limits::{QLimit, QRule, Residuals, TSquaredRule, USUAL_COVERAGE, check_coverage};
use super::model::{Plane, Squares};
use crate::components::PrincipalComponents;
use crate::error::{Error, Result};
use crate::table::DataMatrix;

/// Hotelling's T² and the residual statistic Q of the rows that components were fitted to, with
/// limits at coverage 0.975.
///
/// ```text
/// T²_i = Σ_{k ≤ K} z_ik² / λ_k        Q_i = Σ_j ( x̃_ij − Σ_{k ≤ K} z_ik v_jk )²
/// ```
///
/// with z the scores, λ the variances (divisor n − 1), v the loadings and x̃ the centred and scaled
/// values. Q is also called the squared prediction error. The limit on T² is that of
/// [`TSquaredRule::Beta`] here and that of [`TSquaredRule::F`] for new rows
/// ([`TSquaredAndQ::of`]); the limits on Q are those of [`QRule`]. All take the directions as
/// known, and rows as independent and normal.
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::distances::t_squared_and_q;
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::table::DataMatrix;
///
/// let x = DMatrix::from_fn(30, 4, |i, j| ((i * i + 3 * i * j + 7 * j) as f64 * 0.37).sin());
/// let pca = principal_components(&DataMatrix::from_unnamed(x)?, Scaling::Correlation)?;
/// let found = t_squared_and_q(&pca, 2)?;
/// assert!((found.t_squared().sum() - 2.0 * 29.0).abs() < 1e-9); // K (n − 1)
/// let left_out = pca.variances()[2] + pca.variances()[3];
/// assert!((found.q().sum() - 29.0 * left_out).abs() < 1e-9);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::ComponentOutOfRange`] unless 1 ≤ K ≤ r; [`Error::WeightsNotCovered`] for an analysis
/// of rows with unequal weights.
pub fn t_squared_and_q(pca: &PrincipalComponents, n_components: usize) -> Result<TSquaredAndQ> {
    if pca.is_weighted() {
        return Err(Error::WeightsNotCovered { method: "a limit on T² or Q" });
    }
    let plane = Plane::of(pca, n_components)?;
    let squares = plane.squares(pca.data())?;
    let n = pca.n_rows() as f64;
    let mean = squares.orthogonal.sum() / n;
    let spread: f64 = squares.orthogonal.iter().map(|q| (q - mean).powi(2)).sum();
    let residuals = Residuals {
        left_out: plane.left_out.clone(),
        mean,
        variance: spread / (n - 1.0),
        n_rows: plane.n_rows,
        n_components,
    };
    let fit = Arc::new(Fit { plane, residuals });
    Ok(TSquaredAndQ::new(fit, pca.data().clone(), squares, false, USUAL_COVERAGE))
}

#[derive(Debug)]
struct Fit {
    plane: Plane,
    residuals: Residuals,
}

/// Hotelling's T² and the residual statistic Q of rows, with limits; made by [`t_squared_and_q`].
#[derive(Debug, Clone)]
pub struct TSquaredAndQ {
    fit: Arc<Fit>,
    rows: DataMatrix,
    new_rows: bool,
    coverage: f64,
    t_squared: DVector<f64>,
    q: DVector<f64>,
    t_squared_limit: Option<f64>,
    q_limits: Vec<QLimit>,
}

impl TSquaredAndQ {
    fn new(
        fit: Arc<Fit>,
        rows: DataMatrix,
        squares: Squares,
        new_rows: bool,
        coverage: f64,
    ) -> Self {
        let (n, k) = (fit.plane.n_rows, fit.plane.n_components());
        TSquaredAndQ {
            t_squared_limit: rule(new_rows).limit(n, k, coverage),
            q_limits: fit.residuals.limits(coverage),
            fit,
            rows,
            new_rows,
            coverage,
            t_squared: squares.score,
            q: squares.orthogonal,
        }
    }

    /// The same statistics beside limits of another coverage, such as 0.95 or 0.99.
    ///
    /// # Errors
    ///
    /// [`Error::OptionOutOfRange`] unless it is above 0.5 and below 1.
    pub fn with_coverage(&self, coverage: f64) -> Result<TSquaredAndQ> {
        check_coverage(coverage)?;
        let (n, k) = (self.n_fitted_rows(), self.n_components());
        Ok(TSquaredAndQ {
            coverage,
            t_squared_limit: self.t_squared_rule().limit(n, k, coverage),
            q_limits: self.fit.residuals.limits(coverage),
            ..self.clone()
        })
    }

    /// The statistics of other rows, with the limits for new rows.
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`] unless the rows have the variables of the analysis in the same
    /// order, [`Error::TransformationsDiffer`] unless they went through its transformations.
    pub fn of(&self, rows: &DataMatrix) -> Result<TSquaredAndQ> {
        let squares = self.fit.plane.squares(rows)?;
        Ok(TSquaredAndQ::new(self.fit.clone(), rows.clone(), squares, true, self.coverage))
    }

    /// T² of each row. Over fitted rows they sum to K (n − 1).
    pub fn t_squared(&self) -> &DVector<f64> {
        &self.t_squared
    }

    /// Q of each row, in squared scaled units. Over fitted rows they sum to n − 1 times the
    /// variances left out.
    pub fn q(&self) -> &DVector<f64> {
        &self.q
    }

    /// The limit on T² by [`t_squared_rule`](Self::t_squared_rule); `None` when too few rows leave
    /// it no degrees of freedom.
    pub fn t_squared_limit(&self) -> Option<f64> {
        self.t_squared_limit
    }

    /// The law that the limit on T² comes from: it differs for fitted and for new rows.
    pub fn t_squared_rule(&self) -> TSquaredRule {
        rule(self.new_rows)
    }

    /// What every rule says about Q.
    pub fn q_limits(&self) -> &[QLimit] {
        &self.q_limits
    }

    /// The limit on Q that rows are judged by: Jackson and Mudholkar's, or where that does not
    /// apply Box's, or that of matched moments; `None` when no component is left out.
    pub fn q_limit(&self) -> Option<f64> {
        self.q_rule().and_then(|rule| self.q_limit_by(rule))
    }

    /// The rule behind [`q_limit`](Self::q_limit).
    pub fn q_rule(&self) -> Option<QRule> {
        [QRule::JacksonMudholkar, QRule::Box, QRule::Moments]
            .into_iter()
            .find(|rule| self.q_limit_by(*rule).is_some())
    }

    /// The limit on Q by one rule, if it applies.
    pub fn q_limit_by(&self, rule: QRule) -> Option<f64> {
        self.q_limits.iter().find(|limit| limit.rule() == rule).and_then(QLimit::value)
    }

    /// The labels of the rows whose T² exceeds its limit, in row order.
    pub fn beyond_t_squared(&self) -> Vec<&str> {
        self.beyond(&self.t_squared, self.t_squared_limit)
    }

    /// The labels of the rows whose Q exceeds its limit, in row order.
    pub fn beyond_q(&self) -> Vec<&str> {
        self.beyond(&self.q, self.q_limit())
    }

    /// What each variable contributes to T² and Q of one row.
    ///
    /// # Errors
    ///
    /// [`Error::UnknownLabel`] with the nearest label.
    pub fn contributions(&self, label: &str) -> Result<Contributions> {
        Contributions::of(&self.fit.plane, &self.rows, label)
    }

    /// The labels of the rows, in order.
    pub fn labels(&self) -> &[String] {
        self.rows.labels()
    }

    /// The number of rows that are judged.
    pub fn n_rows(&self) -> usize {
        self.rows.n_rows()
    }

    /// The number n of rows that the components were fitted to.
    pub fn n_fitted_rows(&self) -> usize {
        self.fit.plane.n_rows
    }

    /// The number K of components that are kept.
    pub fn n_components(&self) -> usize {
        self.fit.plane.n_components()
    }

    /// The share of rows that follow the model and stay within a limit.
    pub fn coverage(&self) -> f64 {
        self.coverage
    }

    /// Whether these are rows that did not take part in the fit.
    pub fn are_new_rows(&self) -> bool {
        self.new_rows
    }

    fn beyond(&self, values: &DVector<f64>, limit: Option<f64>) -> Vec<&str> {
        let Some(limit) = limit else { return Vec::new() };
        (self.labels().iter().zip(values.iter()))
            .filter(|(_, value)| **value > limit)
            .map(|(label, _)| label.as_str())
            .collect()
    }
}

fn rule(new_rows: bool) -> TSquaredRule {
    if new_rows { TSquaredRule::F } else { TSquaredRule::Beta }
}
