//! How many components predict best what is not seen.
//!
//! Cross-validation hides observed cells, each once, and asks the fit to the others for them. The
//! cells of each row are dealt to the parts in turn, in random order, so that no part strips a row
//! that shows several cells. Generalised cross-validation hides nothing:
//!
//! ```text
//! GCV(k) = N Σ (x_ij − x̂_ij)² / (N − p − k (n + p − k − 1))²
//! ```
//!
//! over the N observed cells, x̂ being the plain reconstruction of the completed matrix from k
//! components (J. Josse and F. Husson (2012), "Selecting the number of components in principal
//! component analysis using cross-validation approximations", CSDA 56, 1869–1879).

use nalgebra::DMatrix;
use rand::RngExt;

use super::fit::{fit_once, working_scale};
use super::options::{ComponentRule, Settings};
use super::patterns::{observed_spread, varies};
use super::result::{ComponentChoice, PredictionError};
use super::roots::{Roots, roots};
use crate::components::Scaling;
use crate::error::{Error, Result};
use crate::quantile::deviation;
use crate::random::replicate_generator;
use crate::repeat::repeat;

/// Predictions that are off by this share of a standard deviation rank numbers of components as
/// well as better ones, and fits of too many components, which are slow to settle, end early.
const TOLERANCE: f64 = 1e-4;

/// How many numbers a fit of k components by least squares chooses: means, scores and axes.
pub(super) fn fitted_numbers(n_rows: usize, n_cols: usize, k: usize) -> usize {
    n_cols + k * (n_rows + n_cols - k - 1)
}

/// Observed cells beyond the numbers that were fitted to them, if there are any.
pub(super) fn free_cells(n_observed: usize, n: usize, p: usize, k: usize) -> Option<usize> {
    n_observed.checked_sub(fitted_numbers(n, p, k)).filter(|free| *free > 0)
}

/// Σ over observed cells of squared differences from the reconstruction of the filled matrix, in
/// the units of the analysis.
pub(super) fn residual_of_observed(x: &DMatrix<f64>, filled: &DMatrix<f64>, roots: &Roots) -> f64 {
    let (n, p) = x.shape();
    let mut total = 0.0;
    let mut row = vec![0.0; p];
    for i in 0..n {
        for j in 0..p {
            row[j] = (filled[(i, j)] - roots.mean[j]) / roots.scale[j];
        }
        let scores: Vec<f64> =
            roots.axes.column_iter().map(|axis| super::small::dot(axis.as_slice(), &row)).collect();
        for j in (0..p).filter(|&j| !x[(i, j)].is_nan()) {
            let fitted: f64 = scores.iter().enumerate().map(|(s, t)| t * roots.axes[(j, s)]).sum();
            total += (row[j] - fitted).powi(2);
        }
    }
    total
}

/// The errors of 0 to `most` components, and the number with the smallest.
pub(super) fn choose(
    x: &DMatrix<f64>,
    rule: ComponentRule,
    most: usize,
    settings: &Settings,
    seed: u64,
) -> Result<ComponentChoice> {
    let settings = &Settings { tolerance: settings.tolerance.max(TOLERANCE), ..*settings };
    let tried = match rule {
        ComponentRule::CrossValidated { folds } => cross_validated(x, folds, most, settings, seed)?,
        _ => generalised(x, most, settings, seed)?,
    };
    let n_unconverged = tried.iter().map(|tried| tried.n_unconverged).sum();
    let n_predicted = tried.first().map_or(0, |tried| tried.n_predicted);
    let errors: Vec<PredictionError> = tried.into_iter().map(|tried| tried.error).collect();
    let best = errors
        .iter()
        .filter_map(|error| error.mean_squared.map(|value| (error.n_components, value)))
        .min_by(|a, b| a.1.total_cmp(&b.1))
        .map(|(n_components, _)| n_components)
        .ok_or(Error::NoConvergence { method: "the choice of the number of components" })?;
    Ok(ComponentChoice { rule, errors, n_components: best, n_predicted, n_unconverged, seed })
}

/// What was found out about one number of components.
struct Tried {
    error: PredictionError,
    n_predicted: usize,
    n_unconverged: usize,
}

/// What the fit without one part says about it.
struct Part {
    squares: f64,
    n_cells: usize,
    converged: bool,
}

fn cross_validated(
    x: &DMatrix<f64>,
    folds: usize,
    most: usize,
    settings: &Settings,
    seed: u64,
) -> Result<Vec<Tried>> {
    let part_of = deal(x, folds, seed);
    let hidden: Vec<DMatrix<f64>> = (0..folds).map(|fold| hide(x, &part_of, fold)).collect();
    let scale = working_scale(observed_spread(x).deviation, settings.scaling);
    let n_numbers = most + 1;
    let what = "choosing components by cross-validation";
    let parts = repeat(
        what,
        folds * n_numbers,
        seed,
        || (),
        |(), _, job| predict(x, &hidden[job % folds], &scale, job / folds, settings),
    )?;
    let of_number = |k: usize| -> Tried {
        let parts = &parts[k * folds..][..folds];
        let n_predicted = parts.iter().flatten().map(|part| part.n_cells).sum();
        let n_unconverged = parts.iter().flatten().filter(|part| !part.converged).count();
        let squares: f64 = parts.iter().flatten().map(|part| part.squares).sum();
        let possible = parts.iter().all(Option::is_some) && n_predicted > 0;
        let means: Vec<f64> =
            parts.iter().flatten().map(|part| part.squares / part.n_cells as f64).collect();
        let error = PredictionError {
            n_components: k,
            mean_squared: possible.then(|| squares / n_predicted as f64),
            standard_error: possible.then(|| deviation(&means) / (folds as f64).sqrt()),
        };
        Tried { error, n_predicted, n_unconverged }
    };
    Ok((0..n_numbers).map(of_number).collect())
}

/// None where so many components cannot be fitted to what is left.
fn predict(
    x: &DMatrix<f64>,
    hidden: &DMatrix<f64>,
    scale: &[f64],
    n_components: usize,
    settings: &Settings,
) -> Result<Option<Part>> {
    let fitted = fit_once(hidden, n_components, settings, None)
        .and_then(|fit| Ok((fit.estimates(hidden)?, fit.status.converged)));
    let (estimates, converged) = match fitted {
        Ok(fitted) => fitted,
        Err(Error::Interrupted) => return Err(Error::Interrupted),
        Err(_) => return Ok(None),
    };
    let mut part = Part { squares: 0.0, n_cells: 0, converged };
    for estimate in estimates {
        let seen = x[(estimate.row, estimate.column)];
        if !seen.is_nan() {
            part.squares += ((seen - estimate.value) / scale[estimate.column]).powi(2);
            part.n_cells += 1;
        }
    }
    Ok(Some(part))
}

/// Deals the observed cells of each row to the parts in turn.
fn deal(x: &DMatrix<f64>, folds: usize, seed: u64) -> DMatrix<usize> {
    // Numbers from 0 up belong to the fits.
    let mut generator = replicate_generator(seed, u64::MAX);
    let mut part_of = DMatrix::repeat(x.nrows(), x.ncols(), usize::MAX);
    let mut next = 0;
    for i in 0..x.nrows() {
        let mut seen: Vec<usize> = (0..x.ncols()).filter(|&j| !x[(i, j)].is_nan()).collect();
        for last in (1..seen.len()).rev() {
            seen.swap(last, generator.random_range(0..=last));
        }
        for j in seen {
            part_of[(i, j)] = next % folds;
            next += 1;
        }
    }
    part_of
}

/// The matrix without the cells of one part; a column that would show no variation keeps them.
fn hide(x: &DMatrix<f64>, part_of: &DMatrix<usize>, fold: usize) -> DMatrix<f64> {
    let mut hidden = x.clone();
    for (j, mut column) in hidden.column_iter_mut().enumerate() {
        for (value, part) in column.iter_mut().zip(part_of.column(j)) {
            if *part == fold {
                *value = f64::NAN;
            }
        }
        if !varies(column.iter().copied()) {
            column.copy_from(&x.column(j));
        }
    }
    hidden
}

fn generalised(
    x: &DMatrix<f64>,
    most: usize,
    settings: &Settings,
    seed: u64,
) -> Result<Vec<Tried>> {
    let (n, p) = x.shape();
    let n_observed = x.iter().filter(|value| !value.is_nan()).count();
    let what = "choosing components by generalised cross-validation";
    repeat(
        what,
        most + 1,
        seed,
        || (),
        |(), _, k| {
            let mut error =
                PredictionError { n_components: k, mean_squared: None, standard_error: None };
            let mut n_unconverged = 0;
            let fitted = fit_once(x, k, settings, None)
                .and_then(|fit| Ok((fit.estimates(x)?, fit.status.converged)));
            match (fitted, free_cells(n_observed, n, p, k)) {
                (Err(Error::Interrupted), _) => return Err(Error::Interrupted),
                (Ok((estimates, converged)), Some(free)) => {
                    let mut filled = x.clone();
                    for estimate in estimates {
                        filled[(estimate.row, estimate.column)] = estimate.value;
                    }
                    let roots = roots(&filled, settings.scaling == Scaling::Correlation, k)?;
                    let squares = residual_of_observed(x, &filled, &roots);
                    let free = free as f64;
                    error.mean_squared = Some(n_observed as f64 * squares / (free * free));
                    n_unconverged = usize::from(!converged);
                }
                _ => {}
            }
            Ok(Tried { error, n_predicted: n_observed, n_unconverged })
        },
    )
}
