//! Maximum likelihood for probabilistic components when cells are missing.
//!
//! Each observed row is normal with mean μ and covariance W Wᵀ + σ² I, cut to the cells that are
//! there. For a row with observed cells O
//!
//! ```text
//! M = W_Oᵀ W_O + σ² I,   t = M⁻¹ W_Oᵀ (x_O − μ_O),   V = σ² M⁻¹
//! ```
//!
//! are the mean and covariance of its scores given what was seen (M. E. Tipping and C. M. Bishop
//! (1999), "Probabilistic principal component analysis", JRSS B 61, section 3; for holes, A. Ilin
//! and T. Raiko (2010), "Practical approaches to principal component analysis in the presence of
//! missing values", JMLR 11, section 3). M and V are the same for all rows of a pattern. Given
//! them, the row of W and the mean of each variable come from one regression on the scores of the
//! rows that have it, and σ² is the mean expected squared residual of the observed cells.
//!
//! Three things make it fast and exact:
//!
//! - The regressions are solved for the *change* of W and μ, from residuals, so that nothing
//!   large is subtracted from anything large however small the noise is.
//! - Scores are let have any mean and covariance in the maximising step and are brought back to
//!   zero and unity afterwards: parameter-expanded EM (C. Liu, D. B. Rubin and Y. N. Wu (1998),
//!   "Parameter expansion to accelerate EM", Biometrika 85, 755–770).
//! - Pairs of steps are extrapolated, and an extrapolation is kept only if the likelihood is no
//!   smaller there (R. Varadhan and C. Roland (2008), "Simple and globally convergent methods for
//!   accelerating the convergence of any EM algorithm", Scandinavian Journal of Statistics 35,
//!   335–353, scheme S3).

use super::patterns::{Group, Patterns};
use super::small::{dot, factor, inverse, log_determinant, solve_lower, solve_upper};
use crate::error::{Error, Result};
use crate::live::interrupted;

/// Noise below this share of the mean variance is taken for none: the likelihood has no bound.
pub(super) const LEAST_NOISE: f64 = 1e-12;

/// W, μ and σ², in the units of the analysis.
#[derive(Clone)]
pub(super) struct Parameters {
    pub(super) n_components: usize,
    /// For each variable its loadings and then its mean.
    pub(super) coefficients: Vec<f64>,
    pub(super) noise: f64,
}

/// Where the climb ended.
pub(super) struct Climb {
    pub(super) parameters: Parameters,
    /// At the start and after each accepted step.
    pub(super) log_likelihoods: Vec<f64>,
    pub(super) n_iterations: usize,
    pub(super) last_change: f64,
    pub(super) converged: bool,
}

/// When to stop.
#[derive(Debug, Clone, Copy)]
pub(super) struct Limits {
    pub(super) n_iterations: usize,
    /// Of the largest change in one step.
    pub(super) tolerance: f64,
}

/// One step from a point: how good the point was and where the step leads.
struct Step {
    log_likelihood: f64,
    next: Parameters,
    /// The largest change of a coefficient, or of the logarithm of the noise.
    change: f64,
}

/// Climbs from a start to a maximum of the likelihood of the observed cells.
pub(super) fn climb(patterns: &Patterns, start: Parameters, limits: Limits) -> Result<Climb> {
    let k = start.n_components;
    let mut sums = Sums::new(patterns.n_cols, k);
    let mut climb = Climb {
        parameters: start,
        log_likelihoods: Vec::new(),
        n_iterations: 0,
        last_change: f64::INFINITY,
        converged: false,
    };
    let mut ahead: Option<Step> = None;
    while climb.n_iterations < limits.n_iterations && !climb.converged {
        let first = match ahead.take() {
            Some(step) => step,
            None => climb.advance(&mut sums, patterns, limits)?,
        };
        let from = std::mem::replace(&mut climb.parameters, first.next);
        if climb.converged || climb.n_iterations >= limits.n_iterations {
            break;
        }
        let second = climb.advance(&mut sums, patterns, limits)?;
        let middle = std::mem::replace(&mut climb.parameters, second.next);
        if climb.converged || climb.n_iterations >= limits.n_iterations {
            break;
        }
        if let Some(tried) = extrapolated(&from, &middle, &climb.parameters) {
            climb.n_iterations += 1;
            // A point too far out may have no likelihood in double precision; it is not taken.
            if let Ok(step) = sums.step(patterns, &tried)
                && step.log_likelihood >= second.log_likelihood
            {
                climb.record(&step, limits);
                climb.parameters = tried;
                ahead = Some(step);
            }
        }
    }
    if let Some(step) = ahead {
        climb.parameters = step.next;
    }
    let last = sums.step(patterns, &climb.parameters)?;
    climb.log_likelihoods.push(last.log_likelihood);
    Ok(climb)
}

impl Climb {
    fn advance(&mut self, sums: &mut Sums, patterns: &Patterns, limits: Limits) -> Result<Step> {
        if interrupted() {
            return Err(Error::Interrupted);
        }
        let step = sums.step(patterns, &self.parameters)?;
        self.n_iterations += 1;
        self.record(&step, limits);
        Ok(step)
    }

    fn record(&mut self, step: &Step, limits: Limits) {
        self.log_likelihoods.push(step.log_likelihood);
        self.last_change = step.change;
        self.converged = step.change <= limits.tolerance;
    }
}

/// The point that two steps in a row point at; none when they did not move.
fn extrapolated(from: &Parameters, middle: &Parameters, to: &Parameters) -> Option<Parameters> {
    let values = |p: &Parameters| -> Vec<f64> {
        p.coefficients.iter().copied().chain([p.noise.ln()]).collect()
    };
    let (a, b, c) = (values(from), values(middle), values(to));
    let step: Vec<f64> = b.iter().zip(&a).map(|(b, a)| b - a).collect();
    let bend: Vec<f64> = c.iter().zip(&b).zip(&step).map(|((c, b), step)| (c - b) - step).collect();
    let length = (dot(&step, &step) / dot(&bend, &bend)).sqrt();
    // At a length of one the extrapolation is the second step itself.
    if !length.is_finite() || length <= 1.0 {
        return None;
    }
    let mut reached: Vec<f64> = a
        .iter()
        .zip(step.iter().zip(&bend))
        .map(|(a, (step, bend))| a + 2.0 * length * step + length * length * bend)
        .collect();
    let noise = reached.pop()?.exp();
    Some(Parameters { n_components: to.n_components, coefficients: reached, noise })
}

/// Everything that one step sums up, kept between steps.
struct Sums {
    k: usize,
    /// For each variable, Σ t̃ t̃ᵀ over its rows with t̃ = (t, 1), lower triangle, packed.
    products: Vec<f64>,
    /// For each variable, Σ V over its rows, lower triangle, packed.
    uncertainty: Vec<f64>,
    /// For each variable, Σ e t̃ over its rows, e being its residual.
    residuals: Vec<f64>,
    all_products: Vec<f64>,
    all_uncertainty: Vec<f64>,
    squares: f64,
    log_likelihood: f64,
    /// Of one pattern.
    loadings: Vec<f64>,
    means: Vec<f64>,
    matrix: Vec<f64>,
    inverse: Vec<f64>,
    column: Vec<f64>,
    group_products: Vec<f64>,
    row: Vec<f64>,
    scores: Vec<f64>,
}

const fn packed(order: usize) -> usize {
    order * (order + 1) / 2
}

impl Sums {
    fn new(p: usize, k: usize) -> Self {
        let q = k + 1;
        Sums {
            k,
            products: vec![0.0; p * packed(q)],
            uncertainty: vec![0.0; p * packed(k)],
            residuals: vec![0.0; p * q],
            all_products: vec![0.0; packed(q)],
            all_uncertainty: vec![0.0; packed(k)],
            squares: 0.0,
            log_likelihood: 0.0,
            loadings: vec![0.0; p * k],
            means: vec![0.0; p],
            matrix: vec![0.0; q * q],
            inverse: vec![0.0; k * k],
            column: vec![0.0; k],
            group_products: vec![0.0; packed(q)],
            row: vec![0.0; p],
            scores: vec![0.0; q],
        }
    }

    fn step(&mut self, patterns: &Patterns, at: &Parameters) -> Result<Step> {
        self.clear();
        // A row of which nothing was seen says nothing.
        for group in patterns.groups.iter().filter(|group| !group.observed.is_empty()) {
            self.expect(group, &patterns.by_complement, at)?;
        }
        let (n_products, n_uncertainty) = (self.all_products.len(), self.all_uncertainty.len());
        for (j, _) in patterns.by_complement.iter().enumerate().filter(|(_, by)| **by) {
            add(&mut self.products[j * n_products..][..n_products], &self.all_products, 1.0);
            let uncertainty = &mut self.uncertainty[j * n_uncertainty..][..n_uncertainty];
            add(uncertainty, &self.all_uncertainty, 1.0);
        }
        let next = self.maximise(patterns, at)?;
        let change = next
            .coefficients
            .iter()
            .zip(&at.coefficients)
            .map(|(next, at)| (next - at).abs())
            .fold((next.noise / at.noise).ln().abs(), f64::max);
        let constant = patterns.n_observed as f64 * (2.0 * std::f64::consts::PI).ln();
        let log_likelihood = -0.5 * (constant + self.log_likelihood);
        if !log_likelihood.is_finite() || !change.is_finite() {
            return Err(no_noise(self.k));
        }
        Ok(Step { log_likelihood, next, change })
    }

    fn clear(&mut self) {
        for sums in [
            &mut self.products,
            &mut self.uncertainty,
            &mut self.residuals,
            &mut self.all_products,
            &mut self.all_uncertainty,
        ] {
            sums.fill(0.0);
        }
        self.squares = 0.0;
        self.log_likelihood = 0.0;
    }

    /// The expectation for the rows of one pattern.
    fn expect(&mut self, group: &Group, by_complement: &[bool], at: &Parameters) -> Result<()> {
        let (k, q, n_seen) = (self.k, self.k + 1, group.observed.len());
        let n_rows = group.rows.len() as f64;
        for (place, &j) in group.observed.iter().enumerate() {
            let coefficients = &at.coefficients[j * q..][..q];
            self.loadings[place * k..][..k].copy_from_slice(&coefficients[..k]);
            self.means[place] = coefficients[k];
        }
        let loadings = &self.loadings[..n_seen * k];
        let matrix = &mut self.matrix[..k * k];
        scatter(loadings, k, at.noise, matrix);
        if !factor(matrix, k) {
            return Err(no_noise(k));
        }
        inverse(matrix, k, &mut self.column, &mut self.inverse);
        let log_determinant =
            (n_seen as f64 - k as f64) * at.noise.ln() + log_determinant(matrix, k);
        self.log_likelihood += n_rows * log_determinant;

        self.group_products.fill(0.0);
        let mut group_squares = 0.0;
        let mut group_scores = 0.0;
        for row in group.values.chunks_exact(n_seen) {
            let (residuals, scores) = (&mut self.row[..n_seen], &mut self.scores);
            scores.fill(0.0);
            for (place, residual) in residuals.iter_mut().enumerate() {
                *residual = row[place] - self.means[place];
                for (score, loading) in scores.iter_mut().zip(&loadings[place * k..][..k]) {
                    *score += *residual * loading;
                }
            }
            solve_lower(matrix, k, scores);
            solve_upper(matrix, k, scores);
            scores[k] = 1.0;
            for (place, residual) in residuals.iter_mut().enumerate() {
                *residual -= dot(&scores[..k], &loadings[place * k..][..k]);
            }
            group_squares += dot(residuals, residuals);
            group_scores += dot(&scores[..k], &scores[..k]);
            for (residual, &j) in residuals.iter().zip(&group.observed) {
                add(&mut self.residuals[j * q..][..q], scores, *residual);
            }
            let mut place = 0;
            for a in 0..q {
                for b in 0..=a {
                    self.group_products[place] += scores[a] * scores[b];
                    place += 1;
                }
            }
        }
        // (x − μ)ᵀ C⁻¹ (x − μ) = |e|²/σ² + |t|² with e what the scores leave: two positive terms.
        self.log_likelihood += group_squares / at.noise + group_scores;
        self.squares += group_squares;
        self.spread(group, by_complement, n_rows * at.noise);
        Ok(())
    }

    /// Adds the products and uncertainty of a pattern to the variables that they count for.
    fn spread(&mut self, group: &Group, by_complement: &[bool], factor: f64) {
        let k = self.k;
        let (n_products, n_uncertainty) = (packed(k + 1), packed(k));
        // The lower triangle of V, summed over the rows, in place of the inverse.
        let mut place = 0;
        for a in 0..k {
            for b in 0..=a {
                self.inverse[place] = self.inverse[a * k + b] * factor;
                place += 1;
            }
        }
        let uncertainty = &self.inverse[..n_uncertainty];
        add(&mut self.all_products, &self.group_products, 1.0);
        add(&mut self.all_uncertainty, uncertainty, 1.0);
        let added = group.observed.iter().filter(|j| !by_complement[**j]).map(|j| (*j, 1.0));
        let taken = group.missing.iter().filter(|j| by_complement[**j]).map(|j| (*j, -1.0));
        for (j, sign) in added.chain(taken) {
            add(&mut self.products[j * n_products..][..n_products], &self.group_products, sign);
            let into = &mut self.uncertainty[j * n_uncertainty..][..n_uncertainty];
            add(into, uncertainty, sign);
        }
    }

    /// The parameters that are best given the expectations.
    fn maximise(&mut self, patterns: &Patterns, at: &Parameters) -> Result<Parameters> {
        let (k, q) = (self.k, self.k + 1);
        let mut next = at.clone();
        let mut squares = self.squares;
        for j in 0..patterns.n_cols {
            let products = &self.products[j * packed(q)..][..packed(q)];
            let uncertainty = &self.uncertainty[j * packed(k)..][..packed(k)];
            let wanted = &mut self.residuals[j * q..][..q];
            let coefficients = &mut next.coefficients[j * q..][..q];
            unpack(products, q, &mut self.matrix);
            let mut place = 0;
            for a in 0..k {
                for b in 0..=a {
                    let value = uncertainty[place];
                    self.matrix[a * q + b] += value;
                    // V w, of which only the lower triangle of V is kept.
                    wanted[a] -= value * coefficients[b];
                    squares += value * coefficients[a] * coefficients[b];
                    if a != b {
                        wanted[b] -= value * coefficients[a];
                        squares += value * coefficients[a] * coefficients[b];
                    }
                    place += 1;
                }
            }
            if !factor(&mut self.matrix, q) {
                return Err(no_noise(k));
            }
            let change = &mut self.scores;
            change.copy_from_slice(wanted);
            solve_lower(&self.matrix, q, change);
            solve_upper(&self.matrix, q, change);
            squares -= dot(change, wanted);
            add(coefficients, change, 1.0);
        }
        next.noise = squares / patterns.n_observed as f64;
        if next.noise.is_nan() || next.noise <= LEAST_NOISE {
            return Err(no_noise(k));
        }
        self.standardise(patterns.n_rows as f64, &mut next)?;
        Ok(next)
    }

    /// Brings the scores back to zero mean and unit covariance, by changing W and μ so that the
    /// rows keep their distribution.
    fn standardise(&mut self, n: f64, next: &mut Parameters) -> Result<()> {
        let (k, q) = (self.k, self.k + 1);
        let mean: Vec<f64> =
            self.all_products[packed(k)..][..k].iter().map(|sum| sum / n).collect();
        let mut covariance = vec![0.0; k * k];
        let mut place = 0;
        for a in 0..k {
            for b in 0..=a {
                let sum = self.all_products[place] + self.all_uncertainty[place];
                covariance[a * k + b] = sum / n - mean[a] * mean[b];
                place += 1;
            }
        }
        if !factor(&mut covariance, k) {
            return Err(no_noise(k));
        }
        for coefficients in next.coefficients.chunks_exact_mut(q) {
            coefficients[k] += dot(&coefficients[..k], &mean);
            // w ← Lᵀ w: column b of L starts at row b, so that later entries are still the old.
            for b in 0..k {
                coefficients[b] = (b..k).map(|a| covariance[a * k + b] * coefficients[a]).sum();
            }
        }
        Ok(())
    }
}

/// W_Oᵀ W_O + σ² I, lower triangle.
pub(super) fn scatter(loadings: &[f64], k: usize, noise: f64, matrix: &mut [f64]) {
    matrix.fill(0.0);
    for a in 0..k {
        matrix[a * k + a] = noise;
    }
    if k == 0 {
        return;
    }
    for row in loadings.chunks_exact(k) {
        for a in 0..k {
            add(&mut matrix[a * k..][..a + 1], &row[..a + 1], row[a]);
        }
    }
}

fn add(into: &mut [f64], values: &[f64], factor: f64) {
    for (into, value) in into.iter_mut().zip(values) {
        *into += factor * value;
    }
}

fn unpack(packed: &[f64], order: usize, matrix: &mut [f64]) {
    let mut place = 0;
    for a in 0..order {
        matrix[a * order..][..a + 1].copy_from_slice(&packed[place..][..a + 1]);
        place += a + 1;
    }
}

fn no_noise(n_components: usize) -> Error {
    Error::NoNoise { n_components }
}
