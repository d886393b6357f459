//! Which components cannot be told apart.

use super::fitted::FittedComponents;
use super::options::Route;

impl FittedComponents {
    /// Groups of components whose variances are equal as far as the computation can tell, each by
    /// its components' names; empty when all differ.
    ///
    /// Of such a group only the space that its components span is determined: the directions within
    /// it, and so single loadings and scores, are arbitrary. A group is a run of components in which
    /// each variance differs from the next by no more than rounding may have moved the two:
    ///
    /// ```text
    /// |λ_k − λ_k+1| ≤ e_k + e_k+1,   e = 2 √(λ τ² / (n − 1)),  but at least
    ///     max(n, p) ε λ₁  where a cross-product was decomposed,
    ///     the residual of the component  where the search was randomised
    /// ```
    ///
    /// with τ as at [`rank`](Self::rank). Variances that differ by more may still be equal in the
    /// population: that is a question of sampling, for intervals and tests to answer.
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// // A square: both directions spread alike.
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 1.0, -1.0; -1.0, 1.0; -1.0, -1.0])?;
    /// let pca = principal_components(&x, Scaling::Covariance)?;
    /// assert_eq!(pca.tied(), [["PC1", "PC2"]]);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    pub fn tied(&self) -> Vec<Vec<String>> {
        let uncertain: Vec<f64> = (0..self.n_components()).map(|k| self.uncertainty(k)).collect();
        let names = self.loadings.column_names();
        let mut groups: Vec<Vec<String>> = Vec::new();
        let mut run_goes_on = false;
        for k in 1..self.n_components() {
            let apart = (self.variances[k - 1] - self.variances[k]).abs();
            let tied = apart <= uncertain[k - 1] + uncertain[k];
            if tied {
                if !run_goes_on {
                    groups.push(vec![names[k - 1].clone()]);
                }
                groups.last_mut().expect("pushed where the run began").push(names[k].clone());
            }
            run_goes_on = tied;
        }
        groups
    }

    /// How far rounding, or a randomised search, may have moved a variance.
    fn uncertainty(&self, k: usize) -> f64 {
        // σ ± τ makes σ² ± 2 σ τ.
        let data = 2.0 * (self.variances[k] * self.tolerance).sqrt();
        let method = match (self.route, &self.approximation) {
            (Route::VariableCrossProduct | Route::RowCrossProduct, _) => {
                self.n_rows.max(self.n_variables()) as f64 * f64::EPSILON * self.variances[0]
            }
            (_, Some(approximation)) => approximation.residuals[k],
            _ => 0.0,
        };
        data.max(method)
    }
}
