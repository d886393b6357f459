//! Rotation of an analysis, with scores.

use std::ops::Deref;

use nalgebra::DVector;

use super::fit::rotate_weighted;
use super::options::{Rotation, RotationOptions};
use super::result::Rotated;
use crate::components::PrincipalComponents;
use crate::error::Result;
use crate::exhibit::{Bundle, Exhibit};
use crate::table::{DataMatrix, NamedMatrix};

impl PrincipalComponents {
    /// The first `n_components` components rotated to simple structure, with scores that fit.
    ///
    /// The structure correlations of those components are rotated, so that loadings stay
    /// correlations, communalities stay as they are, and rotated scores have unit variance. The
    /// rotated components explain together what the first `n_components` did; none of them is a
    /// direction of largest variance any more.
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::DMatrix;
    /// use semiaxis::rotation::Rotation;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DMatrix::from_fn(40, 4, |i, j| {
    ///     (i as f64 * if j < 2 { 0.7 } else { 1.9 }).sin() + 0.1 * ((i * (j + 3)) as f64).cos()
    /// });
    /// let pca = principal_components(&DataMatrix::from_unnamed(x)?, Scaling::Correlation)?;
    /// let rotated = pca.rotated(2, Rotation::Varimax)?;
    /// // Each pair of variables that goes together has a component of its own.
    /// let home = rotated.home_idx();
    /// assert!(home[0] == home[1] && home[2] == home[3] && home[0] != home[2]);
    /// assert!((rotated.proportions().sum() - pca.cumulative()[1]).abs() < 1e-9);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::ComponentOutOfRange`](crate::Error::ComponentOutOfRange), and those of
    /// [`rotate_with`](super::rotate_with).
    pub fn rotated(&self, n_components: usize, rotation: Rotation) -> Result<RotatedComponents> {
        self.rotated_with(n_components, rotation, RotationOptions::default())
    }

    /// [`rotated`](Self::rotated) with a choice of normalisation, starts, tolerance and seed.
    ///
    /// # Errors
    ///
    /// As [`rotated`](Self::rotated).
    pub fn rotated_with(
        &self,
        n_components: usize,
        rotation: Rotation,
        options: RotationOptions,
    ) -> Result<RotatedComponents> {
        let structure = self.structure().first(n_components)?;
        // The variance of each variable as the analysis scales it.
        let variances = self
            .variable_deviations()
            .zip_map(self.scale(), |deviation, scale| (deviation / scale).powi(2));
        let rotated = rotate_weighted(&structure, variances, rotation, options)?;
        let scores = rotated_scores(self.scores(), self.variances(), &rotated)?;
        Ok(RotatedComponents { analysis: self.clone(), rotated, scores })
    }
}

/// The first components of an analysis, rotated, with scores; made by
/// [`PrincipalComponents::rotated`].
///
/// It dereferences to [`Rotated`], which holds loadings, structure and everything else.
#[derive(Debug, Clone)]
pub struct RotatedComponents {
    analysis: PrincipalComponents,
    rotated: Rotated,
    scores: NamedMatrix,
}

impl RotatedComponents {
    /// The rotated scores, n × k: the scores of the first k components brought to unit variance,
    /// times the rotation matrix.
    ///
    /// ```text
    /// g_ik = Σ_l z_il / √λ_l · t_lk
    /// ```
    ///
    /// Each column has mean zero and variance one (divisor n − 1); their correlations are the
    /// factor correlations.
    pub fn scores(&self) -> &NamedMatrix {
        &self.scores
    }

    /// The rotated scores of other rows, measured against the mean and scale of the analysis.
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`](crate::Error::VariablesDiffer) names what is missing, unknown or
    /// out of place.
    pub fn project(&self, x: &DataMatrix) -> Result<NamedMatrix> {
        rotated_scores(&self.analysis.project(x)?, self.analysis.variances(), &self.rotated)
    }

    /// The analysis whose components were rotated.
    pub fn analysis(&self) -> &PrincipalComponents {
        &self.analysis
    }

    /// The rotation alone.
    pub fn rotated(&self) -> &Rotated {
        &self.rotated
    }

    /// Dims loadings below this absolute value in the exhibit; 0.3 unless set.
    pub fn dimmed_below(mut self, threshold: f64) -> Self {
        self.rotated = self.rotated.dimmed_below(threshold);
        self
    }

    /// Shows the variables by the component they load on most, and within it by descending
    /// absolute loading.
    pub fn sorted_by_component(mut self) -> Self {
        self.rotated = self.rotated.sorted_by_component();
        self
    }
}

impl Deref for RotatedComponents {
    type Target = Rotated;

    fn deref(&self) -> &Rotated {
        &self.rotated
    }
}

impl Exhibit for RotatedComponents {
    fn exhibit(&self) -> Bundle {
        self.rotated.exhibit()
    }
}

fn rotated_scores(
    scores: &NamedMatrix,
    variances: &DVector<f64>,
    rotated: &Rotated,
) -> Result<NamedMatrix> {
    let turn = rotated.rotation_matrix();
    let mut by_unit = turn.values().clone();
    for (mut row, variance) in by_unit.row_iter_mut().zip(variances.iter()) {
        row /= variance.sqrt();
    }
    let values = scores.values().columns(0, turn.n_rows()) * by_unit;
    NamedMatrix::new(values, scores.shared_row_names(), turn.shared_column_names())
}
