//! What a rotation says.

use nalgebra::DVector;

use super::fit::explained;
use super::options::{Rotation, RotationOptions};
use crate::table::NamedMatrix;

/// Rotated loadings with everything that belongs to them; made by [`rotate`](super::rotate).
///
/// Throughout, p is the number of variables, k of components, A the matrix that was rotated, T the
/// rotation matrix and Φ = TᵀT the factor correlations. Rotated components are called `R1`, `R2`
/// and so on, in descending order of the variance they explain.
#[derive(Debug, Clone, PartialEq)]
pub struct Rotated {
    pub(super) original: NamedMatrix,
    pub(super) pattern: NamedMatrix,
    pub(super) structure: NamedMatrix,
    pub(super) turn: NamedMatrix,
    pub(super) correlations: NamedMatrix,
    // How much of the total each variable carries; ones unless an analysis says otherwise.
    pub(super) variances: DVector<f64>,
    pub(super) rotation: Rotation,
    pub(super) options: RotationOptions,
    pub(super) seed: u64,
    pub(super) criterion: f64,
    pub(super) start_criterion: f64,
    pub(super) iterations: usize,
    pub(super) gradient: f64,
    pub(super) n_reached: usize,
    pub(super) n_collapsed: usize,
    // How the exhibit shows the loadings.
    pub(super) dimmed_below: f64,
    pub(super) sorted: bool,
}

impl Rotated {
    /// The rotated pattern loadings Λ = A (Tᵀ)⁻¹, p × k: the coefficients with which the rotated
    /// components make up each variable. For an orthogonal rotation they equal the structure.
    pub fn loadings(&self) -> &NamedMatrix {
        &self.pattern
    }

    /// The structure A T, p × k: the correlations of variables with rotated components, when the
    /// matrix that was rotated holds correlations.
    pub fn structure(&self) -> &NamedMatrix {
        &self.structure
    }

    /// The rotation matrix T, k × k: columns of unit length, perpendicular for an orthogonal
    /// rotation. Scores of unit variance times T are the rotated scores.
    pub fn rotation_matrix(&self) -> &NamedMatrix {
        &self.turn
    }

    /// The factor correlations Φ = TᵀT, k × k: the identity for an orthogonal rotation.
    pub fn factor_correlations(&self) -> &NamedMatrix {
        &self.correlations
    }

    /// The matrix that was rotated.
    pub fn original(&self) -> &NamedMatrix {
        &self.original
    }

    /// What each rotated component explains, descending.
    ///
    /// ```text
    /// Σ_j v_j λ_jk s_jk
    /// ```
    ///
    /// with λ the pattern, s the structure, and v the variance of variable j in the scale of the
    /// analysis (one for a bare matrix and under correlation), so that an orthogonal rotation gives
    /// the usual sums of squared loadings. They sum to what the components explained before. For an
    /// oblique rotation components overlap, and this way of dividing what they share is one of
    /// several: a component may get more or less than it would explain alone.
    pub fn variances(&self) -> DVector<f64> {
        explained(&self.pattern, &self.structure, &self.variances)
    }

    /// The share of each rotated component in the variance of all variables: the variances over
    /// Σ_j v_j, which is p for a bare matrix. It is a share of the total when the matrix that was
    /// rotated holds correlations.
    pub fn proportions(&self) -> DVector<f64> {
        self.variances() / self.variances.sum()
    }

    /// The communality of each variable: the sum over components of pattern times structure, which
    /// is the sum of squares of its row in A. No rotation changes it. With correlations, it is the
    /// share of the variable's variance that the k components explain.
    pub fn communalities(&self) -> DVector<f64> {
        let products = self.pattern.component_mul(&self.structure);
        products.column_sum()
    }

    /// The rotation that was sought.
    pub fn rotation(&self) -> Rotation {
        self.rotation
    }

    /// How it was sought.
    pub fn options(&self) -> RotationOptions {
        self.options
    }

    /// The seed of the random starts.
    pub fn seed(&self) -> u64 {
        self.seed
    }

    /// The criterion V that was reached, as [`Rotation`] defines it; of rows of unit length under
    /// Kaiser normalisation. Larger is simpler for varimax, quartimax and equamax, smaller for
    /// oblimin. Promax has no criterion of its own: this is the varimax one it starts from.
    pub fn criterion(&self) -> f64 {
        self.criterion
    }

    /// The criterion of the matrix as given.
    pub fn start_criterion(&self) -> f64 {
        self.start_criterion
    }

    /// The iterations of the start that was kept: rounds over all pairs of components for the
    /// orthogonal rotations and promax, steps for oblimin.
    pub fn iterations(&self) -> usize {
        self.iterations
    }

    /// How steep the criterion was at the last iteration, without unit: for the orthogonal rotations
    /// the largest slope over all planes in relation to the terms that make it up, for oblimin the
    /// length of the projected gradient for one row of length one on average.
    pub fn gradient(&self) -> f64 {
        self.gradient
    }

    /// Whether the gradient fell below the tolerance before the iterations ran out.
    pub fn converged(&self) -> bool {
        self.gradient <= self.options.chosen_tolerance()
    }

    /// The number of starts whose criterion equals the one kept, to a relative 1e-8.
    pub fn n_reached(&self) -> usize {
        self.n_reached
    }

    /// The number of starts in which components fell together; it can only happen with oblimin.
    pub fn n_collapsed(&self) -> usize {
        self.n_collapsed
    }

    /// For each variable, the place (from zero) of the component on which its pattern loading is
    /// largest in absolute value; of equal ones the first.
    pub fn home_idx(&self) -> Vec<usize> {
        let home = |row: usize| {
            (1..self.pattern.n_cols()).fold(0, |best, column| {
                let size = |column: usize| self.pattern[(row, column)].abs();
                if size(column) > size(best) { column } else { best }
            })
        };
        (0..self.pattern.n_rows()).map(home).collect()
    }

    /// Dims loadings below this absolute value in the exhibit; 0.3 unless set.
    pub fn dimmed_below(mut self, threshold: f64) -> Self {
        self.dimmed_below = threshold;
        self
    }

    /// Shows the variables by the component they load on most, and within it by descending
    /// absolute loading.
    pub fn sorted_by_component(mut self) -> Self {
        self.sorted = true;
        self
    }
}
