//! From the tightest subset to an estimate: corrections, reweighting, and what is refused.

use nalgebra::{DMatrix, DVector};

use super::correction::{consistency, raw_small_sample, reweighted_small_sample};
use super::mcd::{Found, Hyperplane, mirrored, search};
use super::options::RobustOptions;
use super::result::RobustScatter;
use super::subsets::{Estimate, Workspace, estimate, squared_distances};
use super::univariate::KEPT;
use crate::components::spectrum::symmetric;
use crate::distributions::chi_squared_quantile;
use crate::error::{Error, Result};
use crate::live::{checkpoint, seed};
use crate::quantile::{deviation, median};
use crate::table::DataMatrix;

/// Centre and covariance of the rows that belong together.
///
/// The minimum covariance determinant: of all subsets of h rows, the one whose covariance matrix
/// has the smallest determinant (P. J. Rousseeuw and K. Van Driessen 1999, Technometrics 41,
/// 212–223). Its mean and covariance are the raw estimate. The covariance is made consistent for
/// normal rows (C. Croux and G. Haesbroeck 1999) and corrected for few rows (G. Pison, S. Van
/// Aelst and G. Willems 2002). The estimate itself is the mean and covariance (divisor: rows kept
/// − 1) of the rows whose squared distance from the raw one is at most the 97.5 % quantile of χ²_p,
/// corrected in the same way for the share of rows kept. In one dimension the subset is exact.
///
/// In more dimensions the subset is searched for from random starts, so that it may not be the
/// best there is; more starts or another seed show whether it is. Neither units nor any other
/// invertible linear change of variables matters.
///
/// ```
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::robust::{RobustOptions, robust_scatter};
/// use semiaxis::table::DataMatrix;
///
/// // Thirty rows about (0, 0), of which five were moved to (50, 50).
/// let x = DMatrix::from_fn(30, 2, |i, j| {
///     let noise = ((7 * i * i + 3 * i * j + 11 * j) as f64).sin();
///     if i < 5 { 50.0 + noise } else { noise }
/// });
/// let scatter = robust_scatter(&DataMatrix::from_unnamed(x)?, RobustOptions::new().seed(1))?;
/// assert_eq!(scatter.flagged(), ["1", "2", "3", "4", "5"]);
/// assert!(scatter.centre().amax() < 0.5);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::TooFewRows`] for fewer than 2p or p + 2 rows; [`Error::WeightsNotCovered`];
/// [`Error::SingularScatter`] when all rows lie in a hyperplane, and [`Error::ExactFit`] when h or
/// more of them do: it gives the equation and the rows that do not satisfy it;
/// [`Error::OptionOutOfRange`].
pub fn robust_scatter(x: &DataMatrix, options: RobustOptions) -> Result<RobustScatter> {
    options.check()?;
    check_rows(x)?;
    let (n, p) = (x.n_rows(), x.n_cols());
    let seed = options.chosen_seed().unwrap_or_else(seed);
    let h = options.subset_size(n, p);
    let fitted = match reweighted(x.values(), h, options, seed)? {
        Outcome::Fitted(fitted) => fitted,
        Outcome::Hyperplane(plane) => return Err(exact_fit(x, &plane)),
        Outcome::Singular { rank } => {
            return Err(Error::SingularScatter { method: METHOD, rank, order: p });
        }
    };
    Ok(RobustScatter::new(x, fitted, options, seed))
}

pub(super) const METHOD: &str = "the robust scatter";

fn check_rows(x: &DataMatrix) -> Result<()> {
    if x.relative_weights().is_some() {
        return Err(Error::WeightsNotCovered { method: METHOD });
    }
    let needed = (2 * x.n_cols()).max(x.n_cols() + 2);
    if x.n_rows() < needed {
        return Err(Error::TooFewRows { method: METHOD, needed, found: x.n_rows() });
    }
    Ok(())
}

/// The estimate before and after reweighting, in the units of the data.
#[derive(Debug, Clone)]
pub(super) struct Fitted {
    pub(super) raw_centre: DVector<f64>,
    pub(super) raw_covariance: DMatrix<f64>,
    pub(super) centre: DVector<f64>,
    pub(super) covariance: DMatrix<f64>,
    /// Squared distances from the raw and from the final estimate.
    pub(super) raw_squares: Vec<f64>,
    pub(super) squares: Vec<f64>,
    /// Whether reweighting kept the row.
    pub(super) kept: Vec<bool>,
    pub(super) subset: Vec<u32>,
    /// Of the subset's covariance, uncorrected.
    pub(super) log_determinant: f64,
    pub(super) raw_factors: Factors,
    pub(super) factors: Factors,
    pub(super) n_steps: usize,
    pub(super) converged: bool,
}

/// What a covariance was multiplied by.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Factors {
    pub(super) consistency: f64,
    pub(super) small_sample: f64,
}

impl Factors {
    fn both(self) -> f64 {
        self.consistency * self.small_sample
    }
}

pub(super) enum Outcome {
    Fitted(Box<Fitted>),
    /// Normal and constant are in the units of the data.
    Hyperplane(Hyperplane),
    Singular {
        rank: usize,
    },
}

/// Where columns were moved to and by what they were divided before the search.
struct Units {
    centre: DVector<f64>,
    scale: DVector<f64>,
}

impl Units {
    /// Medians, and medians of absolute deviations (or standard deviations where half of a column
    /// is equal). They only bring columns near zero and one, where no digits are lost: distances
    /// do not depend on them. An error holds the place of a column that does not vary.
    fn of(x: &DMatrix<f64>) -> std::result::Result<Self, usize> {
        let p = x.ncols();
        let mut units = Units { centre: DVector::zeros(p), scale: DVector::zeros(p) };
        for (j, column) in x.column_iter().enumerate() {
            let values: Vec<f64> = column.iter().copied().collect();
            let centre = median(values.clone());
            let spread = median(values.iter().map(|value| (value - centre).abs()).collect());
            let spread = if spread > 0.0 { spread } else { deviation(&values) };
            // A column of equal numbers can have a deviation of a rounding.
            if column.max() == column.min() || spread == 0.0 {
                return Err(j);
            }
            (units.centre[j], units.scale[j]) = (centre, spread);
        }
        Ok(units)
    }

    fn take(&self, x: &DMatrix<f64>) -> DMatrix<f64> {
        let mut scaled = x.clone();
        for (j, mut column) in scaled.column_iter_mut().enumerate() {
            column.apply(|value| *value = (*value - self.centre[j]) / self.scale[j]);
        }
        scaled
    }

    fn centre_back(&self, centre: &DVector<f64>) -> DVector<f64> {
        &self.centre + centre.component_mul(&self.scale)
    }

    fn covariance_back(&self, covariance: &DMatrix<f64>) -> DMatrix<f64> {
        DMatrix::from_fn(covariance.nrows(), covariance.ncols(), |i, j| {
            covariance[(i, j)] * self.scale[i] * self.scale[j]
        })
    }

    fn plane_back(&self, plane: Hyperplane) -> Hyperplane {
        let mut normal = plane.normal.component_div(&self.scale);
        let mut constant = plane.constant + normal.dot(&self.centre);
        let length = normal.norm();
        normal /= length;
        constant /= length;
        Hyperplane { normal, constant, on: plane.on }
    }
}

/// The reweighted minimum covariance determinant of plain numbers.
pub(super) fn reweighted(
    x: &DMatrix<f64>,
    h: usize,
    options: RobustOptions,
    seed: u64,
) -> Result<Outcome> {
    let (n, p) = x.shape();
    let units = match Units::of(x) {
        Ok(units) => units,
        Err(j) => {
            let normal = DVector::from_fn(p, |place, _| if place == j { 1.0 } else { 0.0 });
            let on = (0..n as u32).collect();
            return Ok(Outcome::Hyperplane(Hyperplane { normal, constant: x[(0, j)], on }));
        }
    };
    let scaled = units.take(x);
    let all: Vec<u32> = (0..n as u32).collect();
    let mut workspace = Workspace::new();
    if let Err(flat) = estimate(&scaled, &all, &mut workspace) {
        let roots = symmetric(flat.covariance)?.roots;
        let least = 64.0 * f64::EPSILON * p as f64 * roots[0];
        let rank = roots.iter().filter(|root| **root > least).count().min(p - 1);
        return Ok(Outcome::Singular { rank });
    }
    let found = search(&scaled, h, options.n_starts(), seed)?;
    checkpoint();
    let tightest = match found {
        Found::Tightest(tightest) => tightest,
        Found::Hyperplane(plane) => return Ok(Outcome::Hyperplane(units.plane_back(plane))),
    };
    let share = options.chosen_share();
    let raw_factors = Factors {
        consistency: consistency(p, h as f64 / n as f64),
        small_sample: if h == n { 1.0 } else { raw_small_sample(p, n, share) },
    };
    let raw_squares = squares_of(&scaled, &tightest.estimate, raw_factors);
    let limit = chi_squared_quantile(KEPT, p as f64);
    let kept: Vec<bool> = raw_squares.iter().map(|square| *square <= limit).collect();
    let rows: Vec<u32> =
        (0u32..).zip(&kept).filter_map(|(row, kept)| kept.then_some(row)).collect();
    let final_estimate = match estimate(&scaled, &rows, &mut workspace) {
        Ok(estimate) => estimate,
        // Reweighting keeps the subset as a rule, and that has a volume.
        Err(_) => {
            return Err(Error::NoConvergence { method: "the reweighting of a robust scatter" });
        }
    };
    let factors = Factors {
        consistency: consistency(p, rows.len() as f64 / n as f64),
        small_sample: if h == n { 1.0 } else { reweighted_small_sample(p, n, share) },
    };
    let squares = squares_of(&scaled, &final_estimate, factors);
    let log_scale: f64 = units.scale.iter().map(|scale| scale.ln()).sum();
    Ok(Outcome::Fitted(Box::new(Fitted {
        raw_centre: units.centre_back(&tightest.estimate.centre),
        raw_covariance: units.covariance_back(&mirrored(tightest.estimate.covariance))
            * raw_factors.both(),
        centre: units.centre_back(&final_estimate.centre),
        covariance: units.covariance_back(&mirrored(final_estimate.covariance)) * factors.both(),
        raw_squares,
        squares,
        kept,
        subset: tightest.subset,
        log_determinant: tightest.estimate.log_determinant + 2.0 * log_scale,
        raw_factors,
        factors,
        n_steps: tightest.n_steps,
        converged: tightest.converged,
    })))
}

fn squares_of(x: &DMatrix<f64>, estimate: &Estimate, factors: Factors) -> Vec<f64> {
    let mut squares = Vec::new();
    squared_distances(x, estimate, &mut squares, &mut Vec::new());
    squares.iter_mut().for_each(|square| *square /= factors.both());
    squares
}

/// The error that names a hyperplane of a table's own variables.
pub(super) fn exact_fit(x: &DataMatrix, plane: &Hyperplane) -> Error {
    let largest = plane.normal.amax();
    // Scaled so that the largest coefficient is one: easier to recognise than unit length.
    let factor = plane.normal.iter().find(|c| c.abs() == largest).map_or(1.0, |c| 1.0 / c);
    let coefficients = (x.variables().iter().zip(plane.normal.iter()))
        .filter(|(_, coefficient)| coefficient.abs() > 1e-9 * largest)
        .map(|(name, coefficient)| (name.clone(), coefficient * factor))
        .collect();
    let off = (0u32..)
        .zip(x.labels())
        .filter(|(row, _)| plane.on.binary_search(row).is_err())
        .map(|(_, label)| label.clone())
        .collect();
    Error::ExactFit {
        method: METHOD,
        n_on: plane.on.len(),
        n_rows: x.n_rows(),
        coefficients,
        constant: plane.constant * factor,
        off,
    }
}
