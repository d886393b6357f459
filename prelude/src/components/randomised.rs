//! The leading components by random sampling, and how far they may be off.
//!
//! With A the centred, scaled and weighted data (n × p), k components to keep and o directions more:
//!
//! ```text
//! Y = Aᵀ Ω,  Ω n × (k + o) of independent standard normal values,   W = orth(Y)
//! q times:   Q = orth(A W),   W = orth(Aᵀ Q)
//! A W = U S Zᵀ   (singular values),   loadings V = W Z,   A V = U S
//! ```
//!
//! These are algorithms 4.4 and 5.1 of N. Halko, P. G. Martinsson and J. A. Tropp (2011), "Finding
//! structure with randomness: probabilistic algorithms for constructing approximate matrix
//! decompositions", SIAM Review 53, 217–288, applied to the transpose of A: loadings have unit
//! length, and the scores A V are uncorrelated with exactly the variances reported.

use nalgebra::{DMatrix, DVector};
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::options::RandomisedOptions;
use super::scores::Standardised;
use super::spectrum;
use crate::error::Result;
use crate::live::{Progress, checkpoint};
use crate::random::Generator;

/// Random vectors that the estimate of the error rests on.
const N_TESTS: usize = 10;

/// How good the components of a randomised decomposition are.
///
/// Nothing here is assumed of the data: all of it is measured after the decomposition. The variance
/// left out is [`left_out_variance`](super::FittedComponents::left_out_variance).
///
/// ```
/// use semiaxis::components::{
///     ComponentOptions, Decomposition, RandomisedOptions, Scaling, principal_components_with,
/// };
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::table::DataMatrix;
///
/// // Two hidden sequences make all 40 columns: nothing is left outside the first two components.
/// let x = DMatrix::from_fn(60, 40, |i, j| {
///     let (i, j) = (i as f64, j as f64);
///     (0.1 * i).sin() * (1.0 + j) + (0.3 * i).cos() * (10.0 - j)
/// });
/// let search = Decomposition::Randomised(RandomisedOptions::new().seed(1));
/// let options = ComponentOptions::new(Scaling::Correlation).keep(2).decomposition(search);
/// let pca = principal_components_with(&DataMatrix::from_unnamed(x)?, options)?;
/// let approximation = pca.approximation().expect("the search was random");
/// assert_eq!(approximation.n_directions(), 12);
/// assert!(approximation.norm_bound() < 1e-10);
/// assert!(pca.left_out_variance() < 1e-10);
/// # Ok::<(), semiaxis::Error>(())
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Approximation {
    pub(super) n_directions: usize,
    pub(super) power_iterations: usize,
    pub(super) seed: u64,
    pub(super) norm_bound: f64,
    pub(super) residuals: DVector<f64>,
}

impl Approximation {
    /// How many directions were searched, those not kept included.
    pub fn n_directions(&self) -> usize {
        self.n_directions
    }

    /// How often the span was refined.
    pub fn n_power_iterations(&self) -> usize {
        self.power_iterations
    }

    /// The seed of the random vectors.
    pub fn seed(&self) -> u64 {
        self.seed
    }

    /// A bound on the largest standard deviation along any direction outside the span that was
    /// searched; it fails with a probability of at most 1e-10.
    ///
    /// ```text
    /// ‖A (I − W Wᵀ)‖ / √(n − 1)  ≤  10 √(2/π) max_i ‖(I − W Wᵀ) Aᵀ ω_i‖ / √(n − 1),   i = 1 … 10
    /// ```
    ///
    /// with independent standard normal ω (Halko, Martinsson and Tropp 2011, section 4.3, equation
    /// 4.3). Its square bounds what any of the variances, kept or not, is short of its true value.
    /// It is careful rather than close: some ten to a hundred times too large where much variance
    /// is left out.
    pub fn norm_bound(&self) -> f64 {
        self.norm_bound
    }

    /// How far each kept component is from being one, as a variance.
    ///
    /// ```text
    /// ‖C v_k − λ_k v_k‖,   C the covariance or correlation matrix
    /// ```
    ///
    /// Within this distance of λₖ lies a variance of the exact decomposition (B. N. Parlett (1998),
    /// "The Symmetric Eigenvalue Problem", theorem 4.5.1); the error is nearer the square of it over
    /// the distance to the next variance.
    pub fn residuals(&self) -> &DVector<f64> {
        &self.residuals
    }
}

/// What the search found; more directions than are to be kept.
pub(super) struct Sketch {
    /// Descending.
    pub(super) singular: DVector<f64>,
    /// The loadings, p × (k + o).
    pub(super) right: DMatrix<f64>,
    /// The data along them, n × (k + o).
    pub(super) image: DMatrix<f64>,
    pub(super) approximation: Approximation,
}

pub(super) fn decompose(
    data: &Standardised<'_>,
    n_kept: usize,
    options: RandomisedOptions,
) -> Result<Sketch> {
    let (n, p) = data.shape();
    let n_directions = (n_kept + options.chosen_oversampling()).min(p).min(n);
    let power_iterations = options.n_power_iterations();
    let seed = options.chosen_seed().unwrap_or_else(crate::live::seed);
    let progress = Progress::new("randomised components", 2 * power_iterations + 3);
    let done = |product: DMatrix<f64>| {
        checkpoint();
        progress.advance(1);
        product
    };

    let mut generator = Generator::seed_from_u64(seed);
    let random =
        DMatrix::from_fn(n, n_directions + N_TESTS, |_, _| StandardNormal.sample(&mut generator));
    // The vectors that test the span go through the data together with those that make it.
    let samples = done(data.transposed_times(&random));
    let tests = samples.columns(n_directions, N_TESTS).into_owned();
    let mut span = spectrum::orthonormal(samples.columns(0, n_directions).into_owned());
    for _ in 0..power_iterations {
        let image = spectrum::orthonormal(done(data.times(&span)));
        span = spectrum::orthonormal(done(data.transposed_times(&image)));
    }
    let image = done(data.times(&span));
    let (singular, turn) = spectrum::singular(&image)?;
    let (right, image) = (span * &turn, image * turn);

    let outside = &tests - &right * (right.transpose() * &tests);
    let largest = outside.column_iter().map(|test| test.norm()).fold(0.0, f64::max);
    let divisor = (n - 1) as f64;
    let norm_bound = 10.0 * std::f64::consts::FRAC_2_PI.sqrt() * largest / divisor.sqrt();

    let kept = image.columns(0, n_kept).into_owned();
    let mut residuals = done(data.transposed_times(&kept));
    for k in 0..n_kept {
        residuals.column_mut(k).axpy(-singular[k] * singular[k], &right.column(k), 1.0);
    }
    let residuals = DVector::from_iterator(n_kept, residuals.column_iter().map(|r| r.norm()));
    Ok(Sketch {
        singular,
        right,
        image,
        approximation: Approximation {
            n_directions,
            power_iterations,
            seed,
            norm_bound,
            residuals: residuals / divisor,
        },
    })
}
