//! The one choice an analyst must make, and the choices the computation makes.

use std::fmt;

/// What the variables are measured in before components are sought.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Scaling {
    /// Every variable is brought to unit variance, so that all weigh the same whatever their
    /// units. Components are then those of the correlation matrix.
    Correlation,
    /// Variables keep their units, so that those that vary more weigh more. Components are then
    /// those of the covariance matrix with divisor n − 1.
    Covariance,
}

/// The way a decomposition was computed; it depends on shape and conditioning only.
///
/// The smaller of the two cross-products (p × p for n ≥ p, else n × n) is formed about the exact
/// column means and decomposed. When its smallest root that could be non-zero is below 1e-5 of
/// its largest, digits of the small components have been lost in squaring, and the centred data
/// themselves are decomposed by singular values instead.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum Route {
    /// Eigenvectors of the p × p cross-product of the variables.
    VariableCrossProduct,
    /// Eigenvectors of the n × n cross-product of the rows, for wide data.
    RowCrossProduct,
    /// Singular values of the centred (and scaled) data.
    SingularValues,
}

impl fmt::Display for Scaling {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Scaling::Correlation => "correlation",
            Scaling::Covariance => "covariance",
        })
    }
}

impl fmt::Display for Route {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Route::VariableCrossProduct => "cross-product of the variables",
            Route::RowCrossProduct => "cross-product of the rows",
            Route::SingularValues => "singular values of the data",
        })
    }
}
