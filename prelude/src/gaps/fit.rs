//! One fit by either method, and what it says about cells that are missing.
//!
//! Both methods end in the same model: an observed row is normal about a mean, its cells share k
//! scores through loadings, and every cell has noise of its own. Given the model, a hole has a
//! mean and a variance that follow from the observed cells of its row.

use nalgebra::DMatrix;
use rand_distr::{Distribution, StandardNormal};

use super::em::{Climb, LEAST_NOISE, Limits, Parameters, climb, scatter};
use super::iterative::iterate;
use super::options::{GapMethod, Settings};
use super::patterns::{Group, Patterns, observed_spread};
use super::roots::roots;
use super::small::{dot, factor, solve_lower, solve_upper};
use crate::components::Scaling;
use crate::error::{Error, Result};
use crate::random::Generator;
use crate::repeat::repeat;

/// How an iteration ended.
#[derive(Debug, Clone, Copy)]
pub(super) struct Status {
    pub(super) n_iterations: usize,
    pub(super) last_change: f64,
    pub(super) converged: bool,
}

/// A fitted model.
#[derive(Debug, Clone)]
pub(super) struct Fit {
    pub(super) n_components: usize,
    pub(super) centre: Vec<f64>,
    pub(super) scale: Vec<f64>,
    /// For each variable its loadings and then its mean, in units of the scale about the centre.
    pub(super) coefficients: Vec<f64>,
    /// What stands on the diagonal of M beside W_Oᵀ W_O: the noise variance, or zero where nothing
    /// is shrunken.
    pub(super) ridge: f64,
    /// The noise variance of a cell.
    pub(super) noise: f64,
    /// Of probabilistic components: at the start and after each step.
    pub(super) log_likelihoods: Vec<f64>,
    pub(super) status: Status,
}

/// A cell that was missing, and what a fit says about it.
#[derive(Debug, Clone, Copy)]
pub(super) struct Estimate {
    pub(super) row: usize,
    pub(super) column: usize,
    pub(super) value: f64,
    pub(super) deviation: f64,
}

/// The best of several fits, and how they compare.
pub(super) struct Best {
    pub(super) fit: Fit,
    /// Fits that ended within a relative 1e-6 of the best, itself included.
    pub(super) n_agreeing: usize,
}

/// Fits from the plain start and from as many random ones as the settings say.
pub(super) fn best_of_starts(
    x: &DMatrix<f64>,
    n_components: usize,
    settings: &Settings,
    seed: u64,
) -> Result<Best> {
    let what = "components with missing values";
    let mut fits = repeat(
        what,
        settings.random_starts + 1,
        seed,
        || (),
        |(), generator, number| {
            fit_once(x, n_components, settings, (number > 0).then_some(generator))
        },
    )?;
    // The smaller the better: minus the likelihood, or the noise.
    let loss = |fit: &Fit| match fit.log_likelihoods.last() {
        Some(log_likelihood) => -log_likelihood,
        None => fit.noise,
    };
    let losses: Vec<f64> = fits.iter().map(loss).collect();
    let mut best = 0;
    for (place, loss) in losses.iter().enumerate() {
        // A later start has to be better by more than rounding.
        if *loss < losses[best] - losses[best].abs() * 1e-9 {
            best = place;
        }
    }
    let near = losses[best] + losses[best].abs() * 1e-6;
    let n_agreeing = losses.iter().filter(|loss| **loss <= near).count();
    Ok(Best { fit: fits.swap_remove(best), n_agreeing })
}

/// One fit, from the plain start or from a random one.
pub(super) fn fit_once(
    x: &DMatrix<f64>,
    n_components: usize,
    settings: &Settings,
    random: Option<&mut Generator>,
) -> Result<Fit> {
    let limits = Limits { n_iterations: settings.iterations, tolerance: settings.tolerance };
    match settings.method {
        GapMethod::Probabilistic => most_likely(x, settings.scaling, n_components, limits, random),
        GapMethod::Shrunken | GapMethod::LeastSquares => {
            let shrunken = settings.method == GapMethod::Shrunken;
            match random {
                None => iterate(x, settings.scaling, n_components, shrunken, limits, || 0.0),
                Some(generator) => {
                    let draw = || StandardNormal.sample(generator);
                    iterate(x, settings.scaling, n_components, shrunken, limits, draw)
                }
            }
        }
    }
}

/// Probabilistic components by EM.
fn most_likely(
    x: &DMatrix<f64>,
    scaling: Scaling,
    n_components: usize,
    limits: Limits,
    random: Option<&mut Generator>,
) -> Result<Fit> {
    let spread = observed_spread(x);
    let (centre, scale) = (spread.mean, working_scale(spread.deviation, scaling));
    let patterns = Patterns::new(x, &centre, &scale);
    if patterns.n_observed == x.len() {
        return closed_form(x, scaling, n_components, centre, scale);
    }
    let plain = plain_start(x, &centre, &scale, n_components)?;
    let start = match random {
        None => plain,
        Some(generator) => random_start(plain, generator),
    };
    let Climb { parameters, log_likelihoods, n_iterations, last_change, converged } =
        climb(&patterns, start, limits)?;
    let shift = log_likelihood_shift(scaling, scale[0], patterns.n_observed);
    Ok(Fit {
        n_components,
        centre,
        scale,
        coefficients: parameters.coefficients,
        ridge: parameters.noise,
        noise: parameters.noise,
        log_likelihoods: log_likelihoods.iter().map(|value| value - shift).collect(),
        status: Status { n_iterations, last_change, converged },
    })
}

/// Under covariance scaling all variables share one unit, so that the iteration neither overflows
/// nor depends on the units of the data.
pub(super) fn working_scale(deviation: Vec<f64>, scaling: Scaling) -> Vec<f64> {
    match scaling {
        Scaling::Correlation => deviation,
        Scaling::Covariance => {
            let largest = deviation.iter().copied().fold(0.0, f64::max);
            let shares = deviation.iter().map(|d| (d / largest).powi(2));
            let unit = largest * (shares.sum::<f64>() / deviation.len() as f64).sqrt();
            vec![unit; deviation.len()]
        }
    }
}

/// A density in the units of the data is smaller than in those of the fit, which differ from them
/// under covariance scaling only as far as the analysis is concerned.
fn log_likelihood_shift(scaling: Scaling, unit: f64, n_observed: usize) -> f64 {
    match scaling {
        Scaling::Correlation => 0.0,
        Scaling::Covariance => n_observed as f64 * unit.ln(),
    }
}

/// Maximum likelihood without holes: Tipping and Bishop (1999), equations 7 and 8.
fn closed_form(
    x: &DMatrix<f64>,
    scaling: Scaling,
    k: usize,
    centre: Vec<f64>,
    scale: Vec<f64>,
) -> Result<Fit> {
    let (n, p) = x.shape();
    let scaled = DMatrix::from_fn(n, p, |i, j| (x[(i, j)] - centre[j]) / scale[j]);
    let roots = roots(&scaled, false, k)?;
    let left: f64 = roots.variances.iter().skip(k).map(|root| root.max(0.0)).sum();
    let noise = left / (p - k) as f64;
    if noise.is_nan() || noise <= LEAST_NOISE {
        return Err(Error::NoNoise { n_components: k });
    }
    let mut coefficients = vec![0.0; p * (k + 1)];
    for (j, row) in coefficients.chunks_exact_mut(k + 1).enumerate() {
        for (s, loading) in row[..k].iter_mut().enumerate() {
            *loading = roots.axes[(j, s)] * (roots.variances[s] - noise).max(0.0).sqrt();
        }
    }
    let (n, p) = (n as f64, p as f64);
    let kept: f64 = roots.variances.iter().take(k).map(|root| root.ln()).sum();
    let log_likelihood =
        -0.5 * n * (p * (2.0 * std::f64::consts::PI).ln() + kept + (p - k as f64) * noise.ln() + p);
    let shift = log_likelihood_shift(scaling, scale[0], x.len());
    Ok(Fit {
        n_components: k,
        centre,
        scale,
        coefficients,
        ridge: noise,
        noise,
        log_likelihoods: vec![log_likelihood - shift],
        status: Status { n_iterations: 0, last_change: 0.0, converged: true },
    })
}

/// The closed form for the matrix with its holes at the means of their columns.
fn plain_start(x: &DMatrix<f64>, centre: &[f64], scale: &[f64], k: usize) -> Result<Parameters> {
    let (n, p) = x.shape();
    let filled = DMatrix::from_fn(n, p, |i, j| {
        let value = x[(i, j)];
        if value.is_nan() { 0.0 } else { (value - centre[j]) / scale[j] }
    });
    let roots = roots(&filled, false, k)?;
    let left: f64 = roots.variances.iter().skip(k).sum();
    // A start of no noise would never leave it.
    let noise = (left / (p - k) as f64).max(1e-4);
    let mut coefficients = vec![0.0; p * (k + 1)];
    for s in 0..k {
        // Nor would a component of no length; what the column of axes lacks is made up for.
        let length = (roots.variances[s] - noise).max(0.01 * noise).sqrt();
        let empty = roots.axes.column(s).norm_squared() < 0.5;
        for j in 0..p {
            let axis = if empty { f64::from(u8::from(j % k == s)) } else { roots.axes[(j, s)] };
            coefficients[j * (k + 1) + s] = axis * length;
        }
    }
    Ok(Parameters { n_components: k, coefficients, noise })
}

/// Loadings of random directions with the lengths of the plain start.
fn random_start(mut start: Parameters, generator: &mut Generator) -> Parameters {
    let (k, p) = (start.n_components, start.coefficients.len() / (start.n_components + 1));
    for s in 0..k {
        let places = (0..p).map(|j| j * (k + 1) + s);
        let length: f64 = places.clone().map(|at| start.coefficients[at].powi(2)).sum();
        for at in places {
            let normal: f64 = StandardNormal.sample(generator);
            start.coefficients[at] = normal * (length / p as f64).sqrt();
        }
    }
    start
}

/// What is known about the scores of the rows of one pattern.
pub(super) struct Scores {
    /// The Cholesky factor of M, lower triangle, row-major.
    factor: Vec<f64>,
    k: usize,
}

impl Fit {
    pub(super) fn loadings(&self, j: usize) -> &[f64] {
        &self.coefficients[j * (self.n_components + 1)..][..self.n_components]
    }

    pub(super) fn mean(&self, j: usize) -> f64 {
        self.coefficients[j * (self.n_components + 1) + self.n_components]
    }

    /// The unit of the fit, seen from the units of the analysis.
    pub(super) fn unit(&self, scaling: Scaling) -> f64 {
        match scaling {
            Scaling::Correlation => 1.0,
            Scaling::Covariance => self.scale[0],
        }
    }

    /// The noise variance in the units of the analysis.
    pub(super) fn noise_in_units(&self, scaling: Scaling) -> f64 {
        self.noise * self.unit(scaling).powi(2)
    }

    pub(super) fn patterns(&self, x: &DMatrix<f64>) -> Patterns {
        Patterns::new(x, &self.centre, &self.scale)
    }

    pub(super) fn scores_of(&self, group: &Group) -> Result<Scores> {
        let k = self.n_components;
        let loadings: Vec<f64> =
            group.observed.iter().flat_map(|&j| self.loadings(j)).copied().collect();
        let mut matrix = vec![0.0; k * k];
        scatter(&loadings, k, self.ridge, &mut matrix);
        if !factor(&mut matrix, k) {
            return Err(Error::ScoresUndetermined {
                n_components: k,
                row: group.rows[0] + 1,
                label: (group.rows[0] + 1).to_string(),
                n_observed: group.observed.len(),
            });
        }
        Ok(Scores { factor: matrix, k })
    }

    /// The expected scores of a row, from its observed values.
    pub(super) fn expected(&self, group: &Group, scores: &Scores, row: &[f64]) -> Vec<f64> {
        let mut t = vec![0.0; scores.k];
        for (value, &j) in row.iter().zip(&group.observed) {
            let residual = value - self.mean(j);
            for (t, loading) in t.iter_mut().zip(self.loadings(j)) {
                *t += residual * loading;
            }
        }
        solve_lower(&scores.factor, scores.k, &mut t);
        solve_upper(&scores.factor, scores.k, &mut t);
        t
    }

    /// Every hole of `x`, row by row.
    pub(super) fn estimates(&self, x: &DMatrix<f64>) -> Result<Vec<Estimate>> {
        let mut estimates = Vec::new();
        self.each_row_with_holes(x, |group, scores, row, values| {
            let t = self.expected(group, scores, values);
            for &j in &group.missing {
                let loadings = self.loadings(j);
                let value = self.mean(j) + dot(&t, loadings);
                let mut reach = loadings.to_vec();
                solve_lower(&scores.factor, scores.k, &mut reach);
                let variance = self.noise * (1.0 + dot(&reach, &reach));
                estimates.push(Estimate {
                    row,
                    column: j,
                    value: self.centre[j] + self.scale[j] * value,
                    deviation: self.scale[j] * variance.sqrt(),
                });
            }
        })?;
        estimates.sort_by_key(|estimate| (estimate.row, estimate.column));
        Ok(estimates)
    }

    /// Every hole of `x` drawn from what the fit says about it; holes of one row together.
    pub(super) fn draw(&self, x: &DMatrix<f64>, generator: &mut Generator) -> Result<DMatrix<f64>> {
        let mut drawn = x.clone();
        let root = self.noise.sqrt();
        self.each_row_with_holes(x, |group, scores, row, values| {
            let mut t: Vec<f64> = (0..scores.k).map(|_| StandardNormal.sample(generator)).collect();
            solve_upper(&scores.factor, scores.k, &mut t);
            let expected = self.expected(group, scores, values);
            t.iter_mut().zip(&expected).for_each(|(t, expected)| *t = expected + root * *t);
            for &j in &group.missing {
                let noise: f64 = StandardNormal.sample(generator);
                let value = self.mean(j) + dot(&t, self.loadings(j)) + root * noise;
                drawn[(row, j)] = self.centre[j] + self.scale[j] * value;
            }
        })?;
        Ok(drawn)
    }

    fn each_row_with_holes(
        &self,
        x: &DMatrix<f64>,
        mut row: impl FnMut(&Group, &Scores, usize, &[f64]),
    ) -> Result<()> {
        let patterns = self.patterns(x);
        for group in patterns.groups.iter().filter(|group| !group.missing.is_empty()) {
            let scores = self.scores_of(group)?;
            let width = group.observed.len();
            for (place, &i) in group.rows.iter().enumerate() {
                row(group, &scores, i, &group.values[place * width..][..width]);
            }
        }
        Ok(())
    }
}

impl Scores {
    /// M⁻¹, whole.
    pub(super) fn inverse(&self) -> DMatrix<f64> {
        let mut inverse = vec![0.0; self.k * self.k];
        super::small::inverse(&self.factor, self.k, &mut vec![0.0; self.k], &mut inverse);
        DMatrix::from_row_slice(self.k, self.k, &inverse)
    }
}
