//! One configuration turned onto another, and a test of whether they are related.

use nalgebra::{DMatrix, DVector, RowDVector};
use rand::RngExt;

use super::check::comparable;
use super::options::{ProcrustesOptions, ProcrustesTestOptions};
use crate::error::{Error, Result};
use crate::live;
use crate::repeat::repeat;
use crate::table::NamedMatrix;

/// Sums closer than this share of one another are tied but for rounding.
const TIED: f64 = 1e-10;

/// Turns the second matrix onto the first: orthogonal Procrustes without shifting or stretching,
/// the choice for loadings.
///
/// Both matrices have the same row names in the same order and as many columns as one another; the
/// first is held fixed. See [`procrustes_with`] for the formulas and for scores.
///
/// ```
/// use semiaxis::comparison::procrustes;
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::table::NamedMatrix;
///
/// let rows = ["a", "b", "c"].map(String::from);
/// let columns = ["1", "2"].map(String::from);
/// let first = NamedMatrix::new(dmatrix![1.0, 0.0; 0.0, 2.0; 1.0, 1.0], rows.clone(), columns.clone())?;
/// // The same points, a quarter turn away.
/// let second = NamedMatrix::new(dmatrix![0.0, 1.0; -2.0, 0.0; -1.0, 1.0], rows, columns)?;
/// let comparison = procrustes(&first, &second)?;
/// assert!(comparison.residual_sum_of_squares() < 1e-24);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// As [`procrustes_with`].
pub fn procrustes(first: &NamedMatrix, second: &NamedMatrix) -> Result<Procrustes> {
    procrustes_with(first, second, ProcrustesOptions::new())
}

/// Turns the second matrix onto the first, with shifting and stretching by choice.
///
/// ```text
/// minimise ‖X − (c Y T + 1 tᵀ)‖²   over orthogonal T, and c > 0 and t where they are allowed
/// YᵀX = U Σ Vᵀ,   T = U Vᵀ,   c = Σσ / ‖Y‖²,   t = x̄ − c Tᵀ ȳ
/// ```
///
/// with X the first and Y the second matrix, both centred by columns first when shifting is
/// allowed. T may reflect, since the sign of a component is arbitrary. Without stretching c = 1.
/// Sources: Schönemann (1966) for T, Gower (1975) for c and t.
///
/// ```
/// use semiaxis::comparison::{ProcrustesOptions, procrustes_with};
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::table::NamedMatrix;
///
/// let rows = ["a", "b", "c"].map(String::from);
/// let columns = ["1", "2"].map(String::from);
/// let first = NamedMatrix::new(dmatrix![1.0, 0.0; 0.0, 2.0; 1.0, 1.0], rows.clone(), columns.clone())?;
/// // Twice as large and five to the right.
/// let second = NamedMatrix::new(dmatrix![7.0, 0.0; 5.0, 4.0; 7.0, 2.0], rows, columns)?;
/// let comparison = procrustes_with(&first, &second, ProcrustesOptions::for_scores())?;
/// assert!((comparison.scale() - 0.5).abs() < 1e-12);
/// assert!(comparison.m_squared() < 1e-12);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::RowNamesDiffer`] names what differs; [`Error::ShapeMismatch`] for another number of
/// columns (take the [`first`](NamedMatrix::first) few of each); [`Error::ZeroColumns`] when a
/// matrix holds nothing but zeros, or but one point when shifting is allowed;
/// [`Error::NonFinite`], [`Error::NoRows`], [`Error::NoColumns`].
pub fn procrustes_with(
    first: &NamedMatrix,
    second: &NamedMatrix,
    options: ProcrustesOptions,
) -> Result<Procrustes> {
    let pair = Pair::of(first, second, options.has_translation())?;
    let cross = pair.y.values.transpose() * &pair.x.values;
    let svd = decomposed(cross)?;
    let (Some(left), Some(right)) = (&svd.u, &svd.v_t) else { return Err(not_decomposed()) };
    let turn = left * right;
    let overlap = svd.singular_values.sum();
    let scale = if options.has_scaling() { overlap / pair.y.sum_of_squares } else { 1.0 };
    let shift = &pair.x.mean - scale * &pair.y.mean * &turn;
    let mut fitted = scale * second.values() * &turn;
    for mut row in fitted.row_iter_mut() {
        row += &shift;
    }
    let residuals = DVector::from_iterator(
        first.n_rows(),
        (first.values() - &fitted).row_iter().map(|row| row.norm()),
    );
    Ok(Procrustes {
        fitted: NamedMatrix::new(fitted, first.shared_row_names(), first.shared_column_names())?,
        turn: NamedMatrix::new(turn, second.shared_column_names(), first.shared_column_names())?,
        scale,
        shift: shift.transpose(),
        residuals,
        target_sum_of_squares: pair.x.sum_of_squares,
        correlation: pair.correlation(overlap),
        options,
    })
}

/// Whether two configurations of the same units are related: how often shuffled rows agree as well.
///
/// The statistic is the Procrustes correlation r = √(1 − m²) after shifting and stretching, which
/// does not depend on which matrix comes first. Each permutation shuffles the rows of the second
/// matrix.
///
/// ```text
/// p = (1 + number of permutations with r at least as large) / (1 + number of permutations)
/// ```
///
/// A small p says that the agreement is more than chance would give units that may be exchanged for
/// one another; it does not say that agreement is close. The rows have to be exchangeable under the
/// hypothesis of no relation: repeated measurements, series in time and designs with blocks are not.
/// Source: Jackson (1995).
///
/// ```
/// use semiaxis::comparison::{ProcrustesTestOptions, procrustes_test};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::table::NamedMatrix;
///
/// let rows: Vec<String> = (1..=12).map(|row| row.to_string()).collect();
/// let columns = ["1", "2"].map(String::from);
/// let first = DMatrix::from_fn(12, 2, |i, j| ((i * (j + 2)) as f64 * 1.3).sin());
/// let second = first.map(|value| 3.0 * value + 0.1 * (9.0 * value).cos());
/// let first = NamedMatrix::new(first, rows.clone(), columns.clone())?;
/// let second = NamedMatrix::new(second, rows, columns)?;
/// let test = procrustes_test(&first, &second, ProcrustesTestOptions::new().seed(1))?;
/// assert_eq!(test.p_value(), 1.0 / 1000.0);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// As [`procrustes_with`]; [`Error::TooFewRows`] for fewer than three rows;
/// [`Error::OptionOutOfRange`].
pub fn procrustes_test(
    first: &NamedMatrix,
    second: &NamedMatrix,
    options: ProcrustesTestOptions,
) -> Result<ProcrustesTest> {
    options.check()?;
    if first.n_rows() < 3 {
        let method = "a test of association by permutation";
        return Err(Error::TooFewRows { method, needed: 3, found: first.n_rows() });
    }
    let pair = Pair::of(first, second, true)?;
    let observed = overlap(&pair.x.values, &pair.y.values)?;
    let seed = options.chosen_seed().unwrap_or_else(live::seed);
    let workspace = || pair.y.values.clone();
    let n_permutations = options.n_permutations();
    let as_large =
        repeat("permutations", n_permutations, seed, workspace, |shuffled, generator, _| {
            // Each replicate starts from the rows as given: its answer must depend on its own
            // generator only, not on which replicates the thread ran before.
            shuffled.copy_from(&pair.y.values);
            for last in (1..shuffled.nrows()).rev() {
                shuffled.swap_rows(last, generator.random_range(0..=last));
            }
            Ok(overlap(&pair.x.values, shuffled)? >= observed * (1.0 - TIED))
        })?;
    let n_as_large = as_large.into_iter().filter(|is_as_large| *is_as_large).count();
    Ok(ProcrustesTest {
        correlation: pair.correlation(observed),
        n_as_large,
        n_permutations,
        n_rows: first.n_rows(),
        seed,
    })
}

/// Two configurations, centred when they may be shifted.
struct Pair {
    x: Configuration,
    y: Configuration,
}

struct Configuration {
    values: DMatrix<f64>,
    // Zero when nothing was taken off.
    mean: RowDVector<f64>,
    // Above zero.
    sum_of_squares: f64,
}

impl Pair {
    fn of(first: &NamedMatrix, second: &NamedMatrix, centre: bool) -> Result<Self> {
        comparable(first, second)?;
        if first.n_cols() != second.n_cols() {
            return Err(Error::ShapeMismatch {
                what: "columns of the second matrix",
                expected: first.n_cols(),
                found: second.n_cols(),
            });
        }
        Ok(Pair {
            x: Configuration::of(first, centre, "the first matrix")?,
            y: Configuration::of(second, centre, "the second matrix")?,
        })
    }

    fn correlation(&self, overlap: f64) -> f64 {
        (overlap / (self.x.sum_of_squares * self.y.sum_of_squares).sqrt()).min(1.0)
    }
}

impl Configuration {
    fn of(matrix: &NamedMatrix, centre: bool, what: &'static str) -> Result<Self> {
        let mut values = matrix.values().clone();
        let mut mean = RowDVector::zeros(matrix.n_cols());
        let largest = matrix.amax();
        if centre {
            mean = values.row_mean();
            for mut row in values.row_iter_mut() {
                row -= &mean;
            }
        }
        let sum_of_squares = values.norm_squared();
        // What centring leaves of equal rows is rounding.
        if sum_of_squares.sqrt() <= 8.0 * f64::EPSILON * largest || sum_of_squares == 0.0 {
            return Err(Error::ZeroColumns { what, columns: matrix.column_names().to_vec() });
        }
        Ok(Configuration { values, mean, sum_of_squares })
    }
}

/// The sum of the singular values of YᵀX: how far the two overlap after the best turn.
fn overlap(x: &DMatrix<f64>, y: &DMatrix<f64>) -> Result<f64> {
    let cross = y.tr_mul(x);
    if cross.ncols() == 1 {
        return Ok(cross[0].abs());
    }
    Ok(decomposed(cross)?.singular_values.sum())
}

// As many rows and columns as there are components, so that the small solver is the right one.
fn decomposed(cross: DMatrix<f64>) -> Result<nalgebra::SVD<f64, nalgebra::Dyn, nalgebra::Dyn>> {
    nalgebra::SVD::try_new(cross, true, true, f64::EPSILON, 0).ok_or_else(not_decomposed)
}

fn not_decomposed() -> Error {
    Error::NoConvergence { method: "the singular value decomposition" }
}

/// A configuration turned onto another; made by [`procrustes`] and [`procrustes_with`].
#[derive(Debug, Clone, PartialEq)]
pub struct Procrustes {
    fitted: NamedMatrix,
    turn: NamedMatrix,
    scale: f64,
    shift: DVector<f64>,
    residuals: DVector<f64>,
    target_sum_of_squares: f64,
    correlation: f64,
    options: ProcrustesOptions,
}

impl Procrustes {
    /// The second matrix laid onto the first: c Y T + 1 tᵀ, with the names of the first.
    pub fn fitted(&self) -> &NamedMatrix {
        &self.fitted
    }

    /// The orthogonal matrix T, a row for each column of the second matrix and a column for each of
    /// the first.
    pub fn rotation_matrix(&self) -> &NamedMatrix {
        &self.turn
    }

    /// The factor c by which the second matrix was stretched: 1 unless stretching was allowed.
    pub fn scale(&self) -> f64 {
        self.scale
    }

    /// The shift t, one number for each column: zero unless shifting was allowed.
    pub fn translation(&self) -> &DVector<f64> {
        &self.shift
    }

    /// For each row, the distance between the first matrix and the fitted second.
    pub fn residuals(&self) -> &DVector<f64> {
        &self.residuals
    }

    /// The sum of squared residuals.
    pub fn residual_sum_of_squares(&self) -> f64 {
        self.residuals.norm_squared()
    }

    /// The sum of squared residuals over the sum of squares of the first matrix (about its column
    /// means when shifting was allowed). With stretching it equals m²; without, it may exceed one.
    pub fn residual_share(&self) -> f64 {
        self.residual_sum_of_squares() / self.target_sum_of_squares
    }

    /// Gower's m² = 1 − (Σσ)² / (‖X‖² ‖Y‖²), from 0 (same shape) to 1. It is that of the best
    /// stretching, whether or not stretching was allowed, and so does not depend on which matrix
    /// comes first.
    pub fn m_squared(&self) -> f64 {
        1.0 - self.correlation * self.correlation
    }

    /// The Procrustes correlation √(1 − m²) = Σσ / (‖X‖ ‖Y‖).
    pub fn correlation(&self) -> f64 {
        self.correlation
    }

    /// What was allowed.
    pub fn options(&self) -> ProcrustesOptions {
        self.options
    }
}

/// A permutation test of association; made by [`procrustes_test`].
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ProcrustesTest {
    correlation: f64,
    n_as_large: usize,
    n_permutations: usize,
    n_rows: usize,
    seed: u64,
}

impl ProcrustesTest {
    /// The Procrustes correlation √(1 − m²) of the rows as they are.
    pub fn correlation(&self) -> f64 {
        self.correlation
    }

    /// Gower's m² of the rows as they are.
    pub fn m_squared(&self) -> f64 {
        1.0 - self.correlation * self.correlation
    }

    /// The share of permutations, the rows as they are among them, that agree at least as well.
    pub fn p_value(&self) -> f64 {
        (1 + self.n_as_large) as f64 / (1 + self.n_permutations) as f64
    }

    /// The number of permutations that agree at least as well.
    pub fn n_as_large(&self) -> usize {
        self.n_as_large
    }

    /// The number of permutations.
    pub fn n_permutations(&self) -> usize {
        self.n_permutations
    }

    /// The number of rows.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// The seed.
    pub fn seed(&self) -> u64 {
        self.seed
    }
}
