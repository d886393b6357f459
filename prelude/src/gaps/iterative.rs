//! Iterative components: holes are filled from the components of the filled matrix, again and
//! again until they stay (on the way there, see `settle`).
//!
//! With the n × p matrix filled, centred and scaled afresh in every round, λ_s its roots (divisor
//! n) and S components kept, a hole becomes
//!
//! ```text
//! x̂_ij = m_j + d_j Σ_s f_s t_is v_js,   f_s = (λ_s − σ²)₊ / λ_s   (f_s = 1 without shrinkage)
//! σ² = n p / min(p, n − 1) · Σ_{s>S} λ_s / ((n − 1 − S)(p − S))
//! ```
//!
//! with t the scores, v the axes, m the means and d the scales. Without shrinkage this is least
//! squares on the observed cells, which follows noise ever more closely the more is missing; the
//! shrinkage is that of the expected scores of probabilistic components.
//!
//! Sources: J. Josse, J. Pagès and F. Husson (2009), "Gestion des données manquantes en analyse
//! en composantes principales", Journal de la SFdS 150(2), 28–51; J. Josse and F. Husson (2012),
//! "Handling missing values in exploratory multivariate data analysis methods", Journal de la
//! SFdS 153(2), 79–99; the degrees of freedom behind σ² as in M. Verbanck, J. Josse and F. Husson
//! (2015), "Regularised PCA to denoise and visualise data", Statistics and Computing 25, 471–486
//! (from memory).

use nalgebra::DMatrix;

use super::em::{LEAST_NOISE, Limits};
use super::fit::{Fit, Status};
use super::patterns::observed_spread;
use super::roots::{Roots, roots};
use super::settle::settle;
use crate::components::Scaling;
use crate::error::{Error, Result};

/// A hole: its row and its column.
type Place = (usize, usize);

/// Fills the holes of `x` from `n_components` components until they stay.
///
/// `start` says how many standard deviations from its column's mean each hole begins, column by
/// column.
pub(super) fn iterate(
    x: &DMatrix<f64>,
    scaling: Scaling,
    n_components: usize,
    shrunken: bool,
    limits: Limits,
    mut start: impl FnMut() -> f64,
) -> Result<Fit> {
    let unit = scaling == Scaling::Correlation;
    let observed = observed_spread(x);
    let mut filled = x.clone();
    let columns = 0..x.ncols();
    let holes: Vec<Place> = columns
        .flat_map(|j| (0..x.nrows()).map(move |i| (i, j)))
        .filter(|&place| x[place].is_nan())
        .collect();
    // Holes as standard deviations from the means of their columns.
    let fill = |filled: &mut DMatrix<f64>, standard: &[f64]| {
        for (&(i, j), z) in holes.iter().zip(standard) {
            filled[(i, j)] = observed.mean[j] + z * observed.deviation[j];
        }
    };
    let first: Vec<f64> = holes.iter().map(|_| start()).collect();
    let (settled, status) = settle(first, limits, |standard| {
        fill(&mut filled, standard);
        let round = Round::of(&filled, unit, n_components, shrunken)?;
        let values = round.values_at(&filled, &holes);
        let standard =
            |(&(_, j), value): (&Place, &f64)| (value - observed.mean[j]) / observed.deviation[j];
        Ok(holes.iter().zip(&values).map(standard).collect())
    })?;
    fill(&mut filled, &settled);
    let round = Round::of(&filled, unit, n_components, shrunken)?;
    let mean_variance = round.roots.variances.sum() / x.ncols() as f64;
    if shrunken && round.noise <= LEAST_NOISE * mean_variance {
        return Err(Error::NoNoise { n_components });
    }
    round.into_fit(x, &filled, status)
}

/// The components of the matrix as it is filled now.
struct Round {
    roots: Roots,
    /// What is taken from each root: the noise, or nothing.
    noise: f64,
}

impl Round {
    fn of(filled: &DMatrix<f64>, unit: bool, n_components: usize, shrunken: bool) -> Result<Self> {
        let roots = roots(filled, unit, n_components)?;
        let (n, p, s) = (filled.nrows() as f64, filled.ncols() as f64, n_components as f64);
        let left: f64 = roots.variances.iter().skip(n_components).map(|root| root.max(0.0)).sum();
        let noise = n * p / p.min(n - 1.0) * left / ((n - 1.0 - s) * (p - s));
        Ok(Round { roots, noise: if shrunken { noise } else { 0.0 } })
    }

    /// The factor f_s of each component.
    fn factors(&self) -> Vec<f64> {
        let n_components = self.roots.axes.ncols();
        let kept = self.roots.variances.iter().take(n_components);
        kept.map(|root| if *root > self.noise { (root - self.noise) / root } else { 0.0 }).collect()
    }

    /// What the components say about some cells; those of one row need not stand together.
    fn values_at(&self, filled: &DMatrix<f64>, places: &[Place]) -> Vec<f64> {
        let Roots { mean, scale, axes, .. } = &self.roots;
        let factors = self.factors();
        let mut scores: Vec<Option<Vec<f64>>> = vec![None; filled.nrows()];
        let row_scores = |i: usize| -> Vec<f64> {
            let mut scores = vec![0.0; factors.len()];
            for j in 0..filled.ncols() {
                let z = (filled[(i, j)] - mean[j]) / scale[j];
                for (s, score) in scores.iter_mut().enumerate() {
                    *score += z * axes[(j, s)];
                }
            }
            scores.iter_mut().zip(&factors).for_each(|(score, factor)| *score *= factor);
            scores
        };
        let value = |&(i, j): &Place| {
            let scores = scores[i].get_or_insert_with(|| row_scores(i));
            let fitted: f64 =
                scores.iter().enumerate().map(|(s, score)| score * axes[(j, s)]).sum();
            mean[j] + scale[j] * fitted
        };
        places.iter().map(value).collect()
    }

    /// The fit as the model that both methods share: loadings of length √(λ − σ²), so that the
    /// expected scores of a row given its observed cells yield the values that stayed.
    fn into_fit(self, x: &DMatrix<f64>, filled: &DMatrix<f64>, status: Status) -> Result<Fit> {
        let k = self.roots.axes.ncols();
        let noise = observed_noise(x, filled, &self.roots)?;
        let Roots { mean, scale, variances, axes } = self.roots;
        let mut coefficients = vec![0.0; x.ncols() * (k + 1)];
        for (j, row) in coefficients.chunks_exact_mut(k + 1).enumerate() {
            for (s, loading) in row[..k].iter_mut().enumerate() {
                *loading = axes[(j, s)] * (variances[s] - self.noise).max(0.0).sqrt();
            }
        }
        Ok(Fit {
            n_components: k,
            centre: mean.iter().copied().collect(),
            scale: scale.iter().copied().collect(),
            coefficients,
            ridge: self.noise,
            noise,
            log_likelihoods: Vec::new(),
            status,
        })
    }
}

/// The variance of an observed cell about its fit, in the units of the analysis: squared residuals
/// over observed cells less what was fitted to them.
fn observed_noise(x: &DMatrix<f64>, filled: &DMatrix<f64>, roots: &Roots) -> Result<f64> {
    let k = roots.axes.ncols();
    let residual = super::choose::residual_of_observed(x, filled, roots);
    let n_observed = x.iter().filter(|value| !value.is_nan()).count();
    match super::choose::free_cells(n_observed, x.nrows(), x.ncols(), k) {
        Some(free) => Ok(residual / free as f64),
        None => Err(Error::TooFewObserved {
            n_components: k,
            found: n_observed,
            needed: super::choose::fitted_numbers(x.nrows(), x.ncols(), k) + 1,
        }),
    }
}
