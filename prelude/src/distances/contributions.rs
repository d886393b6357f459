//! Which variables make a row stand out.

use nalgebra::DVector;

use super::model::Plane;
use crate::error::Result;
use crate::table::DataMatrix;

/// What each variable contributes to the T² and the Q of one row; made by
/// [`Distances::contributions`](super::Distances::contributions) and
/// [`TSquaredAndQ::contributions`](super::TSquaredAndQ::contributions).
///
/// Several definitions are in use. These are complete decompositions: no contribution is negative,
/// and they sum to the statistic. With x̃ the row's deviations from the centre, scaled as the
/// analysis scales them, V the loadings, z = Vᵀx̃ the scores and Λ the variances of the kept
/// components:
///
/// ```text
/// to T²:  ( Σ_k v_jk z_k / √λ_k )²        to Q:  ( x̃_j − Σ_k v_jk z_k )²
/// ```
///
/// (C. F. Alcala and S. J. Qin (2009), "Reconstruction-based contribution for process monitoring",
/// Automatica 45, 1593–1600, where they are set beside the others. Those of P. Miller, R. E.
/// Swanson and C. E. Heckler (1998), "Contribution plots: a missing link in multivariate quality
/// control", Applied Mathematics and Computer Science 8, 775–792, are the same for Q and sum to T²
/// as well, but some of them can be negative.)
///
/// A large contribution shows where to look first. It does not prove that the variable is at
/// fault: what is wrong with one shows in those that are correlated with it.
#[derive(Debug, Clone, PartialEq)]
pub struct Contributions {
    label: String,
    variables: Vec<String>,
    values: DVector<f64>,
    deviations: DVector<f64>,
    to_t_squared: DVector<f64>,
    to_q: DVector<f64>,
    residuals: DVector<f64>,
    n_components: usize,
}

impl Contributions {
    pub(super) fn of(plane: &Plane, x: &DataMatrix, label: &str) -> Result<Self> {
        let values = DVector::from_vec(x.row(label)?);
        // `row` found the label, so it has a place.
        let row = x.labels().iter().position(|known| known == label).unwrap_or_default();
        let split = plane.split(x, row);
        let to_t_squared = (&plane.loadings * &split.unit_scores).map(|part| part * part);
        Ok(Contributions {
            label: label.to_owned(),
            variables: x.variables().to_vec(),
            values,
            deviations: split.deviations,
            to_t_squared,
            to_q: split.residuals.map(|residual| residual * residual),
            residuals: split.residuals,
            n_components: plane.n_components(),
        })
    }

    /// The label of the row.
    pub fn label(&self) -> &str {
        &self.label
    }

    /// The names of the variables, in the order of the analysis.
    pub fn variables(&self) -> &[String] {
        &self.variables
    }

    /// The row's values, in the units of the variables.
    pub fn values(&self) -> &DVector<f64> {
        &self.values
    }

    /// The row's deviations from the centre, scaled as the analysis scales them.
    pub fn deviations(&self) -> &DVector<f64> {
        &self.deviations
    }

    /// What each variable contributes to T²; none is negative, and they sum to
    /// [`t_squared`](Self::t_squared).
    pub fn to_t_squared(&self) -> &DVector<f64> {
        &self.to_t_squared
    }

    /// What each variable contributes to Q; none is negative, and they sum to [`q`](Self::q).
    pub fn to_q(&self) -> &DVector<f64> {
        &self.to_q
    }

    /// What the kept components leave of each deviation: positive where the row lies above what
    /// its other variables would suggest. Its square is the contribution to Q.
    pub fn residuals(&self) -> &DVector<f64> {
        &self.residuals
    }

    /// The row's T²: its squared score distance.
    pub fn t_squared(&self) -> f64 {
        self.to_t_squared.sum()
    }

    /// The row's Q: its squared orthogonal distance.
    pub fn q(&self) -> f64 {
        self.to_q.sum()
    }

    /// How many components are kept.
    pub fn n_components(&self) -> usize {
        self.n_components
    }
}

/// Places in order of size, the largest first; of equal ones the first.
pub(super) fn largest_first(values: &[f64]) -> Vec<usize> {
    let mut order: Vec<usize> = (0..values.len()).collect();
    order.sort_by(|&a, &b| values[b].total_cmp(&values[a]).then(a.cmp(&b)));
    order
}
