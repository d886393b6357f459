//! What a decomposition says, and what can be done with it.

use std::fmt;
use std::sync::{Arc, OnceLock};

use nalgebra::{DMatrix, DVector};

use super::options::{Route, Scaling};
use super::scores::project_rows;
use crate::error::{Error, Result};
use crate::table::{DataMatrix, NamedMatrix};

/// The principal components of a [`DataMatrix`]; made by
/// [`principal_components`](super::principal_components).
///
/// Throughout, n is the number of rows, p the number of variables, r the number of components,
/// x̄ⱼ and sⱼ the mean and the scale of variable j, vⱼₖ its loading on component k and λₖ that
/// component's variance.
#[derive(Clone)]
pub struct PrincipalComponents {
    pub(super) data: DataMatrix,
    // Of sum n; none when they make no difference.
    pub(super) weights: Option<Arc<[f64]>>,
    pub(super) scaling: Scaling,
    pub(super) route: Route,
    pub(super) tolerance: f64,
    // p each; `scale` holds ones under covariance.
    pub(super) mean: DVector<f64>,
    pub(super) scale: DVector<f64>,
    pub(super) deviation: DVector<f64>,
    // r of them, descending, all above zero.
    pub(super) variances: DVector<f64>,
    pub(super) total_variance: f64,
    // p × r.
    pub(super) loadings: NamedMatrix,
    // n × r; as costly as the decomposition of a long table, so made when first wanted.
    pub(super) scores: OnceLock<NamedMatrix>,
}

impl PrincipalComponents {
    /// The variances λ of the components, descending: eigenvalues of the covariance or
    /// correlation matrix with divisor n − 1.
    pub fn variances(&self) -> &DVector<f64> {
        &self.variances
    }

    /// The share of each component in the total variance.
    pub fn proportions(&self) -> DVector<f64> {
        &self.variances / self.total_variance
    }

    /// The share of the first component, the first two, the first three, and so on.
    pub fn cumulative(&self) -> DVector<f64> {
        let mut sum = 0.0;
        self.variances.map(|variance| {
            sum += variance;
            sum / self.total_variance
        })
    }

    /// The loadings V: p rows named by variable, r columns of unit length, perpendicular to one
    /// another. Multiplying a centred and scaled row by them gives its scores.
    pub fn loadings(&self) -> &NamedMatrix {
        &self.loadings
    }

    /// The scores: the coordinates of each row along the components, n × r.
    ///
    /// ```text
    /// z_ik = Σ_j v_jk (x_ij − x̄_j) / s_j
    /// ```
    ///
    /// Each column has mean zero and variance λ (divisor n − 1), and no two are correlated: with
    /// row weights, by the weighted formulas of [`DataMatrix::with_weights`]. They are in the units of the variables under covariance and without unit under correlation.
    /// Computed on first use.
    pub fn scores(&self) -> &NamedMatrix {
        self.scores.get_or_init(|| self.scores_of(&self.data))
    }

    /// The structure: the correlation of each variable with each component, p × r.
    ///
    /// ```text
    /// r_jk = v_jk √λ_k / (standard deviation of variable j, scaled as the analysis scales it)
    /// ```
    ///
    /// A variable that does not vary has no correlation with anything: its row is NaN.
    pub fn structure(&self) -> NamedMatrix {
        let mut values = self.loadings.values().clone();
        for (mut column, variance) in values.column_iter_mut().zip(self.variances.iter()) {
            column *= variance.sqrt();
        }
        for (mut row, (deviation, scale)) in
            values.row_iter_mut().zip(self.deviation.iter().zip(self.scale.iter()))
        {
            let scaled_deviation = deviation / scale;
            row.apply(|value| {
                *value = if scaled_deviation > 0.0 { *value / scaled_deviation } else { f64::NAN };
            });
        }
        self.named_by_variable(values)
    }

    /// The scores of other rows, measured against the mean and scale of this analysis.
    ///
    /// The rows must have the variables of the analysis in the same order.
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`] names what is missing, unknown or out of place.
    pub fn project(&self, x: &DataMatrix) -> Result<NamedMatrix> {
        self.check_variables(x)?;
        Ok(self.scores_of(x))
    }

    /// The rows as the first `n_components` components alone describe them, in the original
    /// units, with what that leaves unexplained.
    ///
    /// ```text
    /// x̂_ij = x̄_j + s_j Σ_{k ≤ K} z_ik v_jk
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::ComponentOutOfRange`] unless 1 ≤ K ≤ r.
    pub fn reconstruct(&self, n_components: usize) -> Result<Reconstruction> {
        let kept = self.loadings.first(n_components)?;
        let scores = self.scores().first(n_components)?;
        let mut values = super::scores::product(scores.values(), kept.values());
        let original = self.data.values();
        let mut row_residuals = DVector::zeros(values.nrows());
        for (j, mut column) in values.column_iter_mut().enumerate() {
            let (mean, scale) = (self.mean[j], self.scale[j]);
            for (i, value) in column.iter_mut().enumerate() {
                let residual: f64 = (original[(i, j)] - mean) / scale - *value;
                row_residuals[i] += residual * residual;
                *value = mean + scale * *value;
            }
        }
        let proportion = self.variances.rows(0, n_components).sum() / self.total_variance;
        let values = DataMatrix::from_values(
            values,
            self.variables().iter().cloned(),
            self.labels().iter().cloned(),
        )?;
        let values = match self.data.weights() {
            Some(weights) => values.with_weights(weights.iter().copied())?,
            None => values,
        };
        let residual_sum_of_squares = match self.row_weights() {
            Some(weights) => row_residuals.iter().zip(weights).map(|(r, w)| r * w).sum(),
            None => row_residuals.sum(),
        };
        Ok(Reconstruction {
            values,
            n_components,
            proportion,
            row_residuals,
            residual_sum_of_squares,
        })
    }

    /// The names of the variables, in order.
    pub fn variables(&self) -> &[String] {
        self.data.variables()
    }

    /// The labels of the rows, in order.
    pub fn labels(&self) -> &[String] {
        self.data.labels()
    }

    /// The matrix that was decomposed.
    pub fn data(&self) -> &DataMatrix {
        &self.data
    }

    /// The number n of rows.
    pub fn n_rows(&self) -> usize {
        self.data.n_rows()
    }

    /// The number p of variables.
    pub fn n_variables(&self) -> usize {
        self.data.n_cols()
    }

    /// The number r of components, which is the numerical rank.
    pub fn n_components(&self) -> usize {
        self.variances.len()
    }

    /// The mean of each variable, in its units.
    pub fn mean(&self) -> &DVector<f64> {
        &self.mean
    }

    /// What each variable was divided by: its standard deviation (divisor n − 1) under
    /// correlation, one under covariance.
    pub fn scale(&self) -> &DVector<f64> {
        &self.scale
    }

    /// The standard deviation of each variable, in its units, with divisor n − 1.
    pub fn variable_deviations(&self) -> &DVector<f64> {
        &self.deviation
    }

    /// The sum of the variances of all variables: their number under correlation.
    pub fn total_variance(&self) -> f64 {
        self.total_variance
    }

    /// The numerical rank r of the centred and scaled data.
    ///
    /// A singular value σ counts when it exceeds
    ///
    /// ```text
    /// τ = ε max( max(n, p) σ₁ , √(n p) max_j m_j / s_j )
    /// ```
    ///
    /// with ε = 2⁻⁵², σ₁ the largest singular value and mⱼ the largest absolute value of
    /// variable j: the first term is what the decomposition itself may be off by, the second what
    /// the data were rounded by when they were written in double precision. A rank below
    /// min(n − 1, p) says that some variables can be computed from others.
    pub fn rank(&self) -> usize {
        self.variances.len()
    }

    /// The smallest variance that counts: τ² / (n − 1), with τ as at [`rank`](Self::rank).
    pub fn tolerance(&self) -> f64 {
        self.tolerance
    }

    /// What the variables were measured in.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }

    /// What sums of squares were divided by: n − 1.
    pub fn divisor(&self) -> usize {
        self.n_rows() - 1
    }

    /// The weights of the rows, brought to the sum n; `None` when there are none or all are equal,
    /// which makes no difference.
    pub fn row_weights(&self) -> Option<&[f64]> {
        self.weights.as_deref()
    }

    /// Whether row weights made a difference; see [`DataMatrix::with_weights`].
    pub fn is_weighted(&self) -> bool {
        self.weights.is_some()
    }

    /// The way the decomposition was computed.
    pub fn route(&self) -> Route {
        self.route
    }

    fn scores_of(&self, x: &DataMatrix) -> NamedMatrix {
        let values = project_rows(x.values(), &self.mean, &self.scale, self.loadings.values());
        NamedMatrix::new(values, x.shared_labels(), self.loadings.shared_column_names())
            .expect("as many rows and columns as the rows and loadings that made them")
    }

    fn named_by_variable(&self, values: DMatrix<f64>) -> NamedMatrix {
        let names = self.loadings.shared_column_names();
        NamedMatrix::new(values, self.data.shared_variables(), names)
            .expect("the shape of the loadings")
    }

    fn check_variables(&self, x: &DataMatrix) -> Result<()> {
        same_variables(self.variables(), x.variables())
    }
}

/// Refuses rows whose variables are not those that an analysis was made with, in their order.
pub(crate) fn same_variables(wanted: &[String], found: &[String]) -> Result<()> {
    if wanted == found {
        return Ok(());
    }
    let lacking = |from: &[String], of: &[String]| -> Vec<String> {
        let known: std::collections::HashSet<&String> = of.iter().collect();
        from.iter().filter(|name| !known.contains(name)).cloned().collect()
    };
    let (missing, extra) = (lacking(wanted, found), lacking(found, wanted));
    let order = if missing.is_empty() && extra.is_empty() {
        wanted
            .iter()
            .zip(found)
            .enumerate()
            .find(|(_, (a, b))| a != b)
            .map(|(place, (a, b))| (place + 1, a.clone(), b.clone()))
    } else {
        None
    };
    Err(Error::VariablesDiffer { missing, extra, order })
}

impl fmt::Debug for PrincipalComponents {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_struct("PrincipalComponents")
            .field("scaling", &self.scaling)
            .field("n_rows", &self.n_rows())
            .field("n_variables", &self.n_variables())
            .field("variances", &self.variances.as_slice())
            .field("route", &self.route)
            .finish_non_exhaustive()
    }
}

/// Rows as a few components describe them; made by [`PrincipalComponents::reconstruct`].
#[derive(Debug, Clone)]
pub struct Reconstruction {
    values: DataMatrix,
    n_components: usize,
    proportion: f64,
    row_residuals: DVector<f64>,
    residual_sum_of_squares: f64,
}

impl Reconstruction {
    /// The described rows as a matrix, in the original units.
    pub fn data_matrix(&self) -> &DataMatrix {
        &self.values
    }

    /// The described values alone, in the original units.
    pub fn values(&self) -> &DMatrix<f64> {
        self.values.values()
    }

    /// The names of the variables, in order.
    pub fn variables(&self) -> &[String] {
        self.values.variables()
    }

    /// The labels of the rows, in order.
    pub fn labels(&self) -> &[String] {
        self.values.labels()
    }

    /// How many components describe the rows.
    pub fn n_components(&self) -> usize {
        self.n_components
    }

    /// The share of the total variance that the description keeps.
    pub fn proportion(&self) -> f64 {
        self.proportion
    }

    /// For each row, the sum over variables of the squared difference between the row and its
    /// description, both scaled as the analysis scales them.
    ///
    /// A row with a large residual does not follow the pattern of the others. That is a statement
    /// about the table, not about safety.
    pub fn row_residuals(&self) -> &DVector<f64> {
        &self.row_residuals
    }

    /// The sum of [`row_residuals`](Self::row_residuals), each times the weight of its row (of sum
    /// n) when rows are weighted: (n − 1) times the variances left out.
    pub fn residual_sum_of_squares(&self) -> f64 {
        self.residual_sum_of_squares
    }
}
