//! What a decomposition says together with the data it was made of.

use std::fmt;
use std::ops::Deref;
use std::sync::{Arc, OnceLock};

use nalgebra::{DMatrix, DVector};

use super::fitted::FittedComponents;
use crate::error::Result;
use crate::table::{DataMatrix, NamedMatrix};

/// The principal components of a [`DataMatrix`]; made by
/// [`principal_components`](super::principal_components).
///
/// It dereferences to [`FittedComponents`], which holds variances, loadings and everything else that
/// needs no data; functions that take a `&FittedComponents` take a `&PrincipalComponents` as well.
/// Throughout, n is the number of rows, p the number of variables, r the number of components,
/// x̄ⱼ and sⱼ the mean and the scale of variable j, vⱼₖ its loading on component k and λₖ that
/// component's variance.
#[derive(Clone)]
pub struct PrincipalComponents {
    pub(super) data: DataMatrix,
    pub(super) fitted: FittedComponents,
    // Of sum n; none when they make no difference.
    pub(super) weights: Option<Arc<[f64]>>,
    // n × r; as costly as the decomposition of a long table, so made when first wanted.
    pub(super) scores: OnceLock<NamedMatrix>,
}

impl PrincipalComponents {
    /// The scores: the coordinates of each row along the components, n × r.
    ///
    /// ```text
    /// z_ik = Σ_j v_jk (x_ij − x̄_j) / s_j
    /// ```
    ///
    /// Each column has mean zero and variance λ (divisor n − 1), and no two are correlated: with
    /// row weights, by the weighted formulas of [`DataMatrix::with_weights`]. They are in the units
    /// of the variables under covariance and without unit under correlation. Computed on first use.
    pub fn scores(&self) -> &NamedMatrix {
        self.scores.get_or_init(|| self.scores_of(&self.data))
    }

    /// The rows as the first `n_components` components alone describe them, in the units that were
    /// analysed, with what that leaves unexplained.
    ///
    /// ```text
    /// x̂_ij = x̄_j + s_j Σ_{k ≤ K} z_ik v_jk
    /// ```
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// let one = pca.reconstruct(1)?;
    /// assert!((one.proportion() - 0.75).abs() < 1e-12);
    /// assert!((one.residual_sum_of_squares() - 1.0).abs() < 1e-12); // (n − 1) times 1/2
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::ComponentOutOfRange`](crate::Error::ComponentOutOfRange) unless 1 ≤ K ≤ r.
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
        let values = self.data.with_values(values)?;
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

    /// The labels of the rows, in order.
    pub fn labels(&self) -> &[String] {
        self.data.labels()
    }

    /// The matrix that was decomposed.
    pub fn data(&self) -> &DataMatrix {
        &self.data
    }

    /// The weights of the rows, brought to the sum n; `None` when there are none or all are equal,
    /// which makes no difference.
    pub fn row_weights(&self) -> Option<&[f64]> {
        self.weights.as_deref()
    }

    /// The part that needs no data.
    pub fn fitted(&self) -> &FittedComponents {
        &self.fitted
    }
}

impl Deref for PrincipalComponents {
    type Target = FittedComponents;

    fn deref(&self) -> &FittedComponents {
        &self.fitted
    }
}

impl fmt::Debug for PrincipalComponents {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_tuple("PrincipalComponents").field(&self.fitted).finish()
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
