//! What a decomposition says that needs no data any more.

use std::collections::HashSet;
use std::fmt;
use std::sync::Arc;

use nalgebra::{DMatrix, DVector};

use super::options::{Route, Scaling};
use super::randomised::Approximation;
use super::scores::project_rows;
use crate::error::{Error, Result};
use crate::live::{checkpoint, interrupted};
use crate::table::{DataMatrix, NamedMatrix};
use crate::transform::Transformation;

/// The part of [`PrincipalComponents`](super::PrincipalComponents) that needs no data: means,
/// scales, variances and loadings, and what follows from them.
///
/// A `PrincipalComponents` dereferences to it, so that everything here can be asked of an analysis
/// at once; an analysis that was saved comes back as this. Throughout, n is the number of rows, p
/// the number of variables, r the number of components, x̄ⱼ and sⱼ the mean and the scale of variable
/// j, vⱼₖ its loading on component k and λₖ that component's variance.
#[derive(Clone, PartialEq)]
pub struct FittedComponents {
    pub(super) scaling: Scaling,
    pub(super) route: Route,
    // There exactly when the route is the randomised one.
    pub(super) approximation: Option<Approximation>,
    pub(super) n_rows: usize,
    // What the rows went through before they were analysed.
    pub(super) transformations: Arc<[Transformation]>,
    pub(super) is_weighted: bool,
    pub(super) rank: usize,
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
    // n × r; only after loading an analysis that was saved with them.
    pub(super) saved_scores: Option<NamedMatrix>,
}

impl FittedComponents {
    /// The variances λ of the components, descending: eigenvalues of the covariance or
    /// correlation matrix with divisor n − 1.
    ///
    /// Components of equal variance are in no particular order, and any perpendicular directions in
    /// the space that they span would do as well; see [`tied`](Self::tied).
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

    /// The structure: the correlation of each variable with each component, p × r.
    ///
    /// ```text
    /// r_jk = v_jk √λ_k / (standard deviation of variable j, scaled as the analysis scales it)
    /// ```
    ///
    /// A variable that does not vary has no correlation with anything: its row is NaN.
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// // Loading √(1/2), variance 3/2.
    /// assert!((pca.structure()[(0, 0)] - 0.75_f64.sqrt()).abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
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
    /// The rows must have the variables of the analysis in the same order
    /// (`x.select(pca.variables())?` brings them into it) and must have gone through the same
    /// transformations with the same numbers; rows as they were measured go through
    /// [`project_raw`](Self::project_raw).
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// let new = DataMatrix::from_unnamed(dmatrix![3.0, 3.0])?;
    /// // One standard deviation above the mean in both variables.
    /// assert!((pca.project(&new)?[(0, 0)] - 2.0_f64.sqrt()).abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`] names what is missing, unknown or out of place;
    /// [`Error::TransformationsDiffer`] what the rows went through instead.
    pub fn project(&self, x: &DataMatrix) -> Result<NamedMatrix> {
        self.check_variables(x)?;
        x.check_transformations(&self.transformations)?;
        Ok(self.scores_of(x))
    }

    /// The scores of other rows as they were measured: they are put through the transformations of
    /// the analysis, with the numbers fitted to its rows, and projected.
    ///
    /// Columns are taken by name, and others are left aside. Transformations that the rows went
    /// through already must be the first of the analysis, and are not repeated.
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    /// use semiaxis::transform::Transform;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 4.0; 9.0, 1.0; 4.0, 9.0])?;
    /// let pca = principal_components(&x.transformed(Transform::square_root())?, Scaling::Covariance)?;
    /// assert!(pca.project(&x).is_err()); // the roots were analysed
    /// assert!(pca.project_raw(&x)? == *pca.scores());
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`] names columns that are missing; [`Error::TransformationsDiffer`]
    /// when the rows went through something else; [`Error::OutsideDomain`] names a value that cannot
    /// be transformed.
    pub fn project_raw(&self, x: &DataMatrix) -> Result<NamedMatrix> {
        let x = x.through(&self.transformations)?;
        let missing = lacking(self.variables(), x.variables());
        if !missing.is_empty() {
            return Err(Error::VariablesDiffer { missing, extra: Vec::new(), order: None });
        }
        self.project(&x.select(self.variables())?)
    }

    /// What the rows went through before they were analysed, in order.
    pub fn transformations(&self) -> &[Transformation] {
        &self.transformations
    }

    /// The names of the variables, in order.
    pub fn variables(&self) -> &[String] {
        self.loadings.row_names()
    }

    /// The number n of rows that were analysed.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// The number p of variables.
    pub fn n_variables(&self) -> usize {
        self.mean.len()
    }

    /// The number r of components: the numerical rank, or fewer when only so many were kept.
    pub fn n_components(&self) -> usize {
        self.variances.len()
    }

    /// Whether all components are here: none was left out, by choice or because a randomised
    /// decomposition looks for the first ones only.
    pub fn is_complete(&self) -> bool {
        self.route != Route::Randomised && self.n_components() == self.rank
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

    /// The sum of the variances of all variables: their number under correlation. Components that
    /// were not kept are part of it.
    pub fn total_variance(&self) -> f64 {
        self.total_variance
    }

    /// The variance of the components that were not kept: the total less that of those here.
    pub fn left_out_variance(&self) -> f64 {
        if self.is_complete() { 0.0 } else { (self.total_variance - self.variances.sum()).max(0.0) }
    }

    /// The numerical rank r of the centred and scaled data; for a randomised decomposition, which
    /// does not look so far, the number of components kept.
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
    ///
    /// A cross-product that was asked for in spite of its condition adds what rounding adds to its
    /// roots: variances count above p ε λ₁ (n ε λ₁ for that of the rows).
    pub fn rank(&self) -> usize {
        self.rank
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
        self.n_rows - 1
    }

    /// The way the decomposition was computed.
    pub fn route(&self) -> Route {
        self.route
    }

    /// How good a randomised decomposition is; `None` for the others, which are exact to within
    /// rounding.
    pub fn approximation(&self) -> Option<&Approximation> {
        self.approximation.as_ref()
    }

    /// Whether row weights made a difference; see [`DataMatrix::with_weights`].
    pub fn is_weighted(&self) -> bool {
        self.is_weighted
    }

    pub(super) fn scores_of(&self, x: &DataMatrix) -> NamedMatrix {
        let project = |stop: fn() -> bool| {
            project_rows(x.values(), &self.mean, &self.scale, self.loadings.values(), stop)
        };
        let mut values = project(interrupted);
        checkpoint();
        if interrupted() {
            // Only the thread of the cell leaves it; on others the scores must be whole.
            values = project(|| false);
        }
        NamedMatrix::new(values, x.shared_labels(), self.loadings.shared_column_names())
            .expect("as many rows and columns as the rows and loadings that made them")
    }

    /// A matrix of the shape of the loadings with their names.
    pub(super) fn named_by_variable(&self, values: DMatrix<f64>) -> NamedMatrix {
        let columns = self.loadings.shared_column_names();
        NamedMatrix::new(values, self.loadings.shared_row_names(), columns)
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

/// The names that are not among others.
pub(super) fn lacking(names: &[String], others: &[String]) -> Vec<String> {
    let known: HashSet<&String> = others.iter().collect();
    names.iter().filter(|name| !known.contains(name)).cloned().collect()
}

impl fmt::Debug for FittedComponents {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_struct("FittedComponents")
            .field("scaling", &self.scaling)
            .field("n_rows", &self.n_rows)
            .field("n_variables", &self.n_variables())
            .field("variances", &self.variances.as_slice())
            .field("route", &self.route)
            .finish_non_exhaustive()
    }
}
