//! Probabilistic components of a table with or without holes.

use std::sync::Arc;

use nalgebra::{DMatrix, DVector};

use super::complete::{available_components, cell, check_observed, named};
use super::fit::{Best, Fit, best_of_starts};
use super::options::{GapMethod, ProbabilisticOptions, Settings};
use super::result::{EstimatedCell, Starts};
use crate::components::{Scaling, spectrum};
use crate::error::{Error, Result};
use crate::table::{GappedMatrix, NamedMatrix};

/// Fits k probabilistic components by maximum likelihood.
///
/// Each row x of p variables is taken to be
///
/// ```text
/// x = μ + W t + e,   t ~ N(0, I_k),   e ~ N(0, σ² I_p)
/// ```
///
/// and a row with holes counts with what it shows. Without holes the answer has a closed form
/// (Tipping and Bishop 1999, equations 7 and 8): with λ the roots of the covariance matrix
/// (divisor n) and U its axes,
///
/// ```text
/// σ² = Σ_{s>k} λ_s / (p − k),   W = U (Λ − σ² I)^{1/2}
/// ```
///
/// With holes it is found by EM, which can end at a lesser maximum: try
/// [`random_starts`](ProbabilisticOptions::random_starts).
///
/// ```
/// use semiaxis::gaps::{ProbabilisticOptions, probabilistic_components};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::table::GappedMatrix;
///
/// let mut x = DMatrix::from_fn(50, 4, |i, j| {
///     (i as f64 * 0.7).sin() + 0.2 * ((i * (j + 3)) as f64 * 1.3).cos()
/// });
/// x[(3, 2)] = f64::NAN;
/// let x = GappedMatrix::from_unnamed(x)?;
/// let ppca = probabilistic_components(&x, 1, ProbabilisticOptions::new())?;
/// assert!(ppca.converged());
/// assert!(ppca.log_likelihoods().is_sorted());
/// assert!(ppca.proportions()[0] > 0.9);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// As [`estimate_missing`](super::estimate_missing).
pub fn probabilistic_components(
    x: impl Into<GappedMatrix>,
    n_components: usize,
    options: ProbabilisticOptions,
) -> Result<ProbabilisticComponents> {
    options.check()?;
    let x = x.into();
    let available = available_components(&x, "probabilistic components")?;
    if !(1..=available).contains(&n_components) {
        return Err(Error::ComponentOutOfRange { asked: n_components, available });
    }
    check_observed(&x, n_components, GapMethod::Probabilistic)?;
    let settings = options.settings();
    let seed = options.seed_or_drawn();
    let best = best_of_starts(x.values(), n_components, settings, seed);
    let Best { mut fit, n_agreeing } = best.map_err(|error| named(error, &x))?;
    let lengths = rotate_to_axes(&mut fit)?;
    let starts = Starts { n_starts: settings.random_starts + 1, n_agreeing };
    ProbabilisticComponents::new(x, settings, fit, lengths, seed, starts)
}

/// Turns the loadings so that they are perpendicular and of descending length, signs by the rule
/// of components; returns the lengths.
fn rotate_to_axes(fit: &mut Fit) -> Result<DVector<f64>> {
    let (k, p) = (fit.n_components, fit.centre.len());
    let loadings = DMatrix::from_fn(p, k, |j, s| fit.loadings(j)[s]);
    let (lengths, turn) = spectrum::singular(&loadings)?;
    let mut turned = loadings * turn;
    for mut column in turned.column_iter_mut() {
        if spectrum::sign(column.as_slice()) < 0.0 {
            column.neg_mut();
        }
    }
    for j in 0..p {
        for s in 0..k {
            fit.coefficients[j * (k + 1) + s] = turned[(j, s)];
        }
    }
    Ok(lengths)
}

/// Probabilistic components; see [`probabilistic_components`].
///
/// The units of the analysis are standard deviations of the observed cells (correlation) or the
/// units of the data (covariance).
#[derive(Debug, Clone)]
pub struct ProbabilisticComponents {
    x: GappedMatrix,
    scaling: Scaling,
    mean: DVector<f64>,
    scale: DVector<f64>,
    loadings: NamedMatrix,
    lengths: DVector<f64>,
    noise: f64,
    scores: NamedMatrix,
    /// Covariances of the scores, one for each pattern of holes.
    score_covariances: Vec<DMatrix<f64>>,
    /// For each row its place among them.
    pattern_of: Vec<usize>,
    cells: Vec<EstimatedCell>,
    fit: Fit,
    starts: Starts,
    tolerance: f64,
    seed: u64,
}

impl ProbabilisticComponents {
    fn new(
        x: GappedMatrix,
        settings: &Settings,
        fit: Fit,
        lengths: DVector<f64>,
        seed: u64,
        starts: Starts,
    ) -> Result<Self> {
        let (n, p, k) = (x.n_rows(), x.n_cols(), fit.n_components);
        let scaling = settings.scaling;
        let mut scores = DMatrix::zeros(n, k);
        let mut score_covariances = Vec::new();
        let mut pattern_of = vec![0; n];
        for group in &fit.patterns(x.values()).groups {
            let known = fit.scores_of(group)?;
            let rows = group.values.chunks_exact(group.observed.len());
            for (&i, row) in group.rows.iter().zip(rows) {
                for (s, score) in fit.expected(group, &known, row).into_iter().enumerate() {
                    scores[(i, s)] = score;
                }
                pattern_of[i] = score_covariances.len();
            }
            score_covariances.push(known.inverse() * fit.noise);
        }
        let cells = fit.estimates(x.values())?.iter().map(|estimate| cell(&x, estimate)).collect();
        let names: Arc<[String]> = (1..=k).map(|s| format!("PC{s}")).collect();
        // Under covariance scaling the fit has a unit of its own, here undone.
        let unit = fit.unit(scaling);
        let loadings = DMatrix::from_fn(p, k, |j, s| fit.loadings(j)[s] * unit);
        Ok(ProbabilisticComponents {
            scaling,
            mean: DVector::from_fn(p, |j, _| fit.centre[j] + fit.scale[j] * fit.mean(j)),
            scale: match scaling {
                Scaling::Correlation => DVector::from_column_slice(&fit.scale),
                Scaling::Covariance => DVector::repeat(p, 1.0),
            },
            loadings: NamedMatrix::new(loadings, x.variables(), names.clone())?,
            lengths: lengths * unit,
            noise: fit.noise_in_units(scaling),
            scores: NamedMatrix::new(scores, x.labels(), names)?,
            score_covariances,
            pattern_of,
            cells,
            fit,
            starts,
            tolerance: settings.tolerance,
            seed,
            x,
        })
    }

    /// The number of components.
    pub fn n_components(&self) -> usize {
        self.lengths.len()
    }

    /// The table that was analysed.
    pub fn source(&self) -> &GappedMatrix {
        &self.x
    }

    /// Whether variables were brought to unit variance.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }

    /// The fitted mean μ of each variable, in the units of the data. With holes it differs from
    /// the mean of the observed cells.
    pub fn mean(&self) -> &DVector<f64> {
        &self.mean
    }

    /// What each variable is divided by: the standard deviation of its observed cells, whose
    /// divisor is their number less one, or one.
    pub fn scale(&self) -> &DVector<f64> {
        &self.scale
    }

    /// The loadings W, p × k, in the units of the analysis: perpendicular, of descending length
    /// √(λ − σ²), the largest of each in absolute value positive. Not of unit length: see
    /// [`axes`](ProbabilisticComponents::axes).
    pub fn loadings(&self) -> &NamedMatrix {
        &self.loadings
    }

    /// The loadings brought to unit length, which compare with those of
    /// [`principal_components`](crate::components::principal_components).
    pub fn axes(&self) -> NamedMatrix {
        let mut values = self.loadings.values().clone();
        for (mut column, length) in values.column_iter_mut().zip(self.lengths.iter()) {
            if *length > 0.0 {
                column /= *length;
            }
        }
        let names = self.loadings.shared_column_names();
        NamedMatrix::new(values, self.x.variables(), names).expect("names as those of the loadings")
    }

    /// The variance of the model along each axis, λ = squared length + σ², descending. Without
    /// holes, the roots of the covariance or correlation matrix times (n − 1)/n.
    pub fn variances(&self) -> DVector<f64> {
        self.lengths.map(|length| length * length + self.noise)
    }

    /// The share of each axis in the total variance of the model.
    pub fn proportions(&self) -> DVector<f64> {
        let p = self.x.n_cols() as f64;
        let total = self.lengths.norm_squared() + p * self.noise;
        self.variances() / total
    }

    /// The noise variance σ², in the units of the analysis; maximum likelihood, divisor n.
    pub fn noise_variance(&self) -> f64 {
        self.noise
    }

    /// The expected scores of each row given what it shows, n × k. Scores have unit variance in
    /// the model; expected ones are drawn towards zero, the more the less a row shows.
    pub fn scores(&self) -> &NamedMatrix {
        &self.scores
    }

    /// The covariance of the scores of one row given what it shows, σ² M⁻¹, k × k; None for a row
    /// that is not there, counted from zero.
    pub fn score_covariance(&self, row_idx: usize) -> Option<&DMatrix<f64>> {
        self.score_covariances.get(*self.pattern_of.get(row_idx)?)
    }

    /// The standard deviation of each score given what its row shows, n × k.
    pub fn score_deviations(&self) -> NamedMatrix {
        let deviations = DMatrix::from_fn(self.x.n_rows(), self.n_components(), |i, s| {
            self.score_covariances[self.pattern_of[i]][(s, s)].sqrt()
        });
        let names = self.loadings.shared_column_names();
        NamedMatrix::new(deviations, self.x.labels(), names).expect("names as those of the scores")
    }

    /// The missing cells as the fit sees them, row by row.
    pub fn cells(&self) -> &[EstimatedCell] {
        &self.cells
    }

    /// The log-likelihood of the observed cells, in the units of the analysis, at the start and
    /// after each accepted step; it never falls but by rounding. One value where the closed form
    /// applies.
    pub fn log_likelihoods(&self) -> &[f64] {
        &self.fit.log_likelihoods
    }

    /// The log-likelihood of the observed cells at the end.
    pub fn log_likelihood(&self) -> f64 {
        self.fit.log_likelihoods.last().copied().unwrap_or(f64::NAN)
    }

    /// Whether the iteration ended because nothing changed any more; true for the closed form.
    pub fn converged(&self) -> bool {
        self.fit.status.converged
    }

    /// Iterations; 0 for the closed form.
    pub fn n_iterations(&self) -> usize {
        self.fit.status.n_iterations
    }

    /// The largest change of a parameter in the last iteration; see
    /// [`ProbabilisticOptions::tolerance`].
    pub fn last_change(&self) -> f64 {
        self.fit.status.last_change
    }

    /// The change at which the iteration was to end.
    pub fn tolerance(&self) -> f64 {
        self.tolerance
    }

    /// Starts, the plain one included, and how many of them ended at the best fit.
    pub fn starts(&self) -> Starts {
        self.starts
    }

    /// The seed of the random starts.
    pub fn seed(&self) -> u64 {
        self.seed
    }
}
