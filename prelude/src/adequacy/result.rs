//! What is known about variables and rows before they are analysed.

use nalgebra::DVector;

use crate::table::NamedMatrix;

/// Whether variables hang together; made by [`adequacy`](super::adequacy).
#[derive(Debug, Clone, PartialEq)]
pub struct Adequacy {
    pub(super) sphericity: SphericityTest,
    pub(super) overall: f64,
    pub(super) by_variable: DVector<f64>,
    pub(super) partial_correlations: NamedMatrix,
    pub(super) ln_determinant: f64,
    pub(super) condition_number: f64,
    pub(super) normality: MultivariateNormality,
}

impl Adequacy {
    /// Bartlett's test of the hypothesis that no two variables are correlated.
    pub fn sphericity(&self) -> &SphericityTest {
        &self.sphericity
    }

    /// The Kaiser–Meyer–Olkin measure of all variables together, from 0 to 1.
    ///
    /// ```text
    /// Σ r_ij² / (Σ r_ij² + Σ q_ij²)   over i ≠ j
    /// ```
    ///
    /// with rᵢⱼ the correlations and qᵢⱼ the partial correlations given all other variables. Near
    /// one, correlations are shared by many variables; Kaiser (1974) has no use for less than 0.5.
    pub fn overall(&self) -> f64 {
        self.overall
    }

    /// The same measure for each variable with the others, in variable order.
    pub fn by_variable(&self) -> &DVector<f64> {
        &self.by_variable
    }

    /// The partial correlation of each pair given all other variables, with ones on the diagonal.
    /// With the signs turned they are the off-diagonal elements of the anti-image correlation
    /// matrix.
    pub fn partial_correlations(&self) -> &NamedMatrix {
        &self.partial_correlations
    }

    /// The determinant of the correlation matrix: one without any correlation, zero when a
    /// variable can be computed from others. With many variables it may be too small for a number
    /// in double precision; see [`ln_determinant`](Self::ln_determinant).
    pub fn determinant(&self) -> f64 {
        self.ln_determinant.exp()
    }

    /// The natural logarithm of the determinant.
    pub fn ln_determinant(&self) -> f64 {
        self.ln_determinant
    }

    /// The largest root of the correlation matrix over its smallest.
    pub fn condition_number(&self) -> f64 {
        self.condition_number
    }

    /// Tests of multivariate normality.
    pub fn normality(&self) -> &MultivariateNormality {
        &self.normality
    }

    /// The names of the variables, in order.
    pub fn variables(&self) -> &[String] {
        self.partial_correlations.row_names()
    }
}

/// Bartlett's test of sphericity.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SphericityTest {
    /// χ² = −(n − 1 − (2p + 5) / 6) ln |R|.
    pub statistic: f64,
    /// p (p − 1) / 2 degrees of freedom.
    pub freedom: f64,
    /// The upper tail of the chi-squared distribution.
    pub p_value: f64,
}

/// Tests of multivariate normality; made by
/// [`multivariate_normality`](super::multivariate_normality).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct MultivariateNormality {
    pub(super) skewness: SkewnessTest,
    pub(super) kurtosis: KurtosisTest,
    pub(super) henze_zirkler: HenzeZirklerTest,
    pub(super) n_rows: usize,
    pub(super) n_variables: usize,
}

impl MultivariateNormality {
    /// Mardia's test of skewness.
    pub fn skewness(&self) -> &SkewnessTest {
        &self.skewness
    }

    /// Mardia's test of kurtosis.
    pub fn kurtosis(&self) -> &KurtosisTest {
        &self.kurtosis
    }

    /// The test of Henze and Zirkler, which finds departures of any kind when rows are many.
    pub fn henze_zirkler(&self) -> &HenzeZirklerTest {
        &self.henze_zirkler
    }

    /// The number n of rows.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// The number p of variables.
    pub fn n_variables(&self) -> usize {
        self.n_variables
    }
}

/// Mardia's test of multivariate skewness.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SkewnessTest {
    /// b₁ = Σᵢⱼ gᵢⱼ³ / n², with gᵢⱼ the product of rows i and j in the metric of the inverse
    /// covariance matrix (divisor n); zero for a symmetric distribution.
    pub skewness: f64,
    /// n b₁ / 6.
    pub statistic: f64,
    /// p (p + 1)(p + 2) / 6 degrees of freedom, of both statistics.
    pub freedom: f64,
    /// The upper tail of the chi-squared distribution for the plain statistic.
    pub p_value: f64,
    /// n b₁ c / 6 with the correction for small samples of Mardia (1974):
    /// c = (p + 1)(n + 1)(n + 3) / (n ((n + 1)(p + 1) − 6)).
    pub corrected_statistic: f64,
    /// The upper tail of the chi-squared distribution for the corrected statistic.
    pub corrected_p_value: f64,
}

/// Mardia's test of multivariate kurtosis.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct KurtosisTest {
    /// b₂ = Σᵢ gᵢᵢ² / n; p (p + 2) for a normal distribution with many rows.
    pub kurtosis: f64,
    /// z = (b₂ − p (p + 2)) / √(8 p (p + 2) / n).
    pub statistic: f64,
    /// Both tails of the standard normal distribution.
    pub p_value: f64,
}

/// The test of Henze and Zirkler.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct HenzeZirklerTest {
    /// The weighted distance between the empirical and the normal characteristic function.
    pub statistic: f64,
    /// The smoothing parameter β = √½ ((2p + 1) n / 4)^(1 / (p + 4)).
    pub smoothing: f64,
    /// The upper tail of the lognormal distribution with the statistic's mean and variance.
    pub p_value: f64,
}
