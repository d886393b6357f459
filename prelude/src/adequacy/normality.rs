//! Do rows come from a multivariate normal distribution?

use nalgebra::DMatrix;

use super::fit::full_rank_components;
use super::result::{HenzeZirklerTest, KurtosisTest, MultivariateNormality, SkewnessTest};
use crate::components::PrincipalComponents;
use crate::distributions::{chi_squared_upper_tail, normal_upper_tail};
use crate::error::Result;
use crate::repeat::repeat;
use crate::table::DataMatrix;

/// Rows that one step compares with all rows before them.
const ROWS_A_STEP: usize = 32;

/// Mardia's tests of skewness and kurtosis and the test of Henze and Zirkler.
///
/// With yᵢ the rows centred and made uncorrelated with unit variance (divisor n), gᵢⱼ = yᵢᵀ yⱼ,
/// dᵢⱼ = ‖yᵢ − yⱼ‖² and β the smoothing parameter:
///
/// ```text
/// b₁ = Σ_ij g_ij³ / n²,   n b₁ / 6 ~ χ² with p (p + 1)(p + 2) / 6 degrees of freedom  (Mardia 1970)
/// b₂ = Σ_i g_ii² / n,     (b₂ − p (p + 2)) / √(8 p (p + 2) / n) ~ N(0, 1)             (Mardia 1970)
/// T = Σ_ij e^(−β² d_ij / 2) / n − 2 (1 + β²)^(−p/2) Σ_i e^(−β² g_ii / (2 (1 + β²)))
///     + n (1 + 2β²)^(−p/2),  lognormal                                    (Henze and Zirkler 1990)
/// ```
///
/// All hold for many rows. A small p-value speaks against normal rows; a large one does not speak
/// for them when rows are few.
///
/// ```
/// use semiaxis::adequacy::multivariate_normality;
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::table::DataMatrix;
///
/// // Squares of normal-like scores are far from normal.
/// let x = DMatrix::from_fn(60, 2, |i, j| ((i * (7 + 4 * j) % 60) as f64 / 60.0).powi(6));
/// let found = multivariate_normality(&DataMatrix::from_unnamed(x)?)?;
/// assert!(found.skewness().corrected_p_value < 1e-3);
/// assert!(found.henze_zirkler().p_value < 1e-3);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::TooFewRows`](crate::Error::TooFewRows) unless n > p + 1;
/// [`Error::SingularScatter`](crate::Error::SingularScatter);
/// [`Error::WeightsNotCovered`](crate::Error::WeightsNotCovered);
/// [`Error::ConstantColumns`](crate::Error::ConstantColumns);
/// [`Error::Interrupted`](crate::Error::Interrupted).
pub fn multivariate_normality(x: &DataMatrix) -> Result<MultivariateNormality> {
    normality_of(&full_rank_components(x, "a test of multivariate normality")?)
}

pub(super) fn normality_of(pca: &PrincipalComponents) -> Result<MultivariateNormality> {
    let white = uncorrelated_rows(pca);
    let (n, p) = (pca.n_rows() as f64, pca.n_variables() as f64);
    let squares: Vec<f64> = white.column_iter().map(|row| row.norm_squared()).collect();
    let smoothing = (0.25 * (2.0 * p + 1.0) * n).powf(1.0 / (p + 4.0)) / 2.0_f64.sqrt();
    let PairSums { cubes, closeness } = pair_sums(&white, &squares, smoothing * smoothing)?;
    Ok(MultivariateNormality {
        skewness: skewness(cubes / (n * n), n, p),
        kurtosis: kurtosis(squares.iter().map(|g| g * g).sum::<f64>() / n, n, p),
        henze_zirkler: henze_zirkler(closeness, &squares, smoothing, p),
        n_rows: pca.n_rows(),
        n_variables: pca.n_variables(),
    })
}

/// Rows as columns, centred, uncorrelated and of unit variance with divisor n.
fn uncorrelated_rows(pca: &PrincipalComponents) -> DMatrix<f64> {
    let n = pca.n_rows() as f64;
    let mut white = pca.scores().values().transpose();
    for (mut component, variance) in white.row_iter_mut().zip(pca.variances().iter()) {
        component /= (variance * (n - 1.0) / n).sqrt();
    }
    white
}

/// Sums over all pairs of rows, each row with itself included.
struct PairSums {
    /// Σ gᵢⱼ³
    cubes: f64,
    /// Σ exp(−β² dᵢⱼ / 2)
    closeness: f64,
}

fn pair_sums(white: &DMatrix<f64>, squares: &[f64], smoothing_squared: f64) -> Result<PairSums> {
    let n = white.ncols();
    let p = white.nrows();
    let rows = white.as_slice();
    let n_steps = n.div_ceil(ROWS_A_STEP);
    // Nothing here is random; the loop is wanted for its threads, its progress and its end.
    let sums = repeat(
        "test of normality",
        n_steps,
        0,
        || (),
        |(), _, step| {
            let (mut cubes, mut closeness) = (0.0, 0.0);
            for i in step * ROWS_A_STEP..((step + 1) * ROWS_A_STEP).min(n) {
                let own = &rows[i * p..][..p];
                for (other, square) in rows[..i * p].chunks_exact(p).zip(squares) {
                    let product: f64 = own.iter().zip(other).map(|(a, b)| a * b).sum();
                    cubes += product * product * product;
                    let distance = squares[i] + square - 2.0 * product;
                    closeness += (-0.5 * smoothing_squared * distance).exp();
                }
            }
            Ok((cubes, closeness))
        },
    )?;
    let own_cubes: f64 = squares.iter().map(|g| g * g * g).sum();
    let (cubes, closeness) =
        sums.iter().fold((0.0, 0.0), |(a, b), (cubes, closeness)| (a + cubes, b + closeness));
    Ok(PairSums { cubes: own_cubes + 2.0 * cubes, closeness: n as f64 + 2.0 * closeness })
}

fn skewness(skewness: f64, n: f64, p: f64) -> SkewnessTest {
    let statistic = n * skewness / 6.0;
    let freedom = p * (p + 1.0) * (p + 2.0) / 6.0;
    // Mardia (1974), equation 5.5: with it the statistic has the mean of the distribution exactly.
    let correction = (p + 1.0) * (n + 1.0) * (n + 3.0) / (n * ((n + 1.0) * (p + 1.0) - 6.0));
    let corrected_statistic = statistic * correction;
    SkewnessTest {
        skewness,
        statistic,
        freedom,
        p_value: chi_squared_upper_tail(statistic, freedom),
        corrected_statistic,
        corrected_p_value: chi_squared_upper_tail(corrected_statistic, freedom),
    }
}

fn kurtosis(kurtosis: f64, n: f64, p: f64) -> KurtosisTest {
    let expected = p * (p + 2.0);
    let statistic = (kurtosis - expected) / (8.0 * expected / n).sqrt();
    KurtosisTest { kurtosis, statistic, p_value: 2.0 * normal_upper_tail(statistic.abs()) }
}

/// Mean and variance of the statistic and the lognormal tail: Henze and Zirkler (1990), section 3.
fn henze_zirkler(closeness: f64, squares: &[f64], smoothing: f64, p: f64) -> HenzeZirklerTest {
    let n = squares.len() as f64;
    let b2 = smoothing * smoothing;
    let (b4, b8) = (b2 * b2, b2 * b2 * b2 * b2);
    let to_centre: f64 = squares.iter().map(|g| (-0.5 * b2 / (1.0 + b2) * g).exp()).sum();
    let statistic = closeness / n - 2.0 * (1.0 + b2).powf(-0.5 * p) * to_centre
        + n * (1.0 + 2.0 * b2).powf(-0.5 * p);
    let a = 1.0 + 2.0 * b2;
    let w = (1.0 + b2) * (1.0 + 3.0 * b2);
    let pairs = p * (p + 2.0);
    let mean = 1.0 - a.powf(-0.5 * p) * (1.0 + p * b2 / a + pairs * b4 / (2.0 * a * a));
    let variance = 2.0 * (1.0 + 4.0 * b2).powf(-0.5 * p)
        + 2.0 * a.powf(-p) * (1.0 + 2.0 * p * b4 / (a * a) + 3.0 * pairs * b8 / (4.0 * a.powi(4)))
        - 4.0 * w.powf(-0.5 * p) * (1.0 + 1.5 * p * b4 / w + pairs * b8 / (2.0 * w * w));
    let spread = (variance / (mean * mean)).ln_1p();
    let centre = mean.ln() - 0.5 * spread;
    let p_value = normal_upper_tail((statistic.ln() - centre) / spread.sqrt());
    HenzeZirklerTest { statistic, smoothing, p_value }
}
