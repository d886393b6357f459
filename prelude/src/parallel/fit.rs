//! Drawing tables without structure, and comparing.

use faer::dyn_stack::MemBuffer;
use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, Par};
use nalgebra::{DMatrix, DVector};
use rand::RngExt;
use rand_distr::{ChiSquared, Distribution, StandardNormal};

use super::options::{Noise, ParallelOptions};
use super::result::ParallelAnalysis;
use crate::components::spectrum::{roots_workspace, symmetric_roots};
use crate::components::views::{view, view_mut};
use crate::components::{Scaling, principal_components};
use crate::error::{Error, Result};
use crate::live::seed;
use crate::quantile::{ascending, deviation, mean, quantile};
use crate::random::Generator;
use crate::repeat::repeat;
use crate::table::DataMatrix;

/// How many components of the correlation matrix stand out from noise.
///
/// Normal noise of n rows and p columns has a cross-product about its means that follows a
/// Wishart distribution with m = n − 1 degrees of freedom. It is drawn without drawing the table:
///
/// ```text
/// W = Tᵀ T,  T upper trapezoidal with min(m, p) rows,
/// t_ii = √χ²(m − i + 1) (i from 1),  t_ij ~ N(0, 1) for j > i,  all independent
/// ```
///
/// (M. S. Bartlett (1933), "On the theory of statistical regression"; for m < p the same holds of
/// the triangular factor of a normal matrix with fewer rows than columns.) W brought to unit
/// diagonal is the correlation matrix whose roots are compared.
///
/// ```
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::parallel::{ParallelOptions, parallel_analysis};
/// use semiaxis::table::DataMatrix;
///
/// // Four columns that follow one hidden sequence stand out as one component.
/// let x = DMatrix::from_fn(60, 4, |i, j| {
///     (i as f64 * 0.7).sin() + 0.3 * ((i * (j + 3)) as f64 * 1.3).cos()
/// });
/// let x = DataMatrix::from_unnamed(x)?;
/// let analysis = parallel_analysis(&x, ParallelOptions::default().seed(1))?;
/// assert_eq!(analysis.n_by_percentile(), 1);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// Those of [`principal_components`] with [`Scaling::Correlation`]; [`Error::TooFewRows`] for
/// fewer than three rows and [`Error::TooFewColumns`] for fewer than two columns;
/// [`Error::OptionOutOfRange`].
pub fn parallel_analysis(x: &DataMatrix, options: ParallelOptions) -> Result<ParallelAnalysis> {
    options.check()?;
    let method = "parallel analysis";
    if x.n_rows() < 3 {
        return Err(Error::TooFewRows { method, needed: 3, found: x.n_rows() });
    }
    if x.n_cols() < 2 {
        return Err(Error::TooFewColumns { method, needed: 2, found: x.n_cols() });
    }
    let observed = principal_components(x, Scaling::Correlation)?;
    let seed = options.chosen_seed().unwrap_or_else(seed);
    let n_roots = (x.n_rows() - 1).min(x.n_cols());
    let roots = match options.chosen_noise() {
        Noise::Normal => {
            let noise = NormalNoise::new(x.n_rows(), x.n_cols());
            roots_of(options.n_replicates(), seed, n_roots, &noise)?
        }
        Noise::Permuted => {
            let noise = PermutedNoise::new(x, observed.mean(), observed.scale());
            roots_of(options.n_replicates(), seed, n_roots, &noise)?
        }
    };
    let n_places = observed.n_components();
    let at_place = |place| ascending(roots.iter().map(|roots| roots[place]).collect());
    let places: Vec<Vec<f64>> = (0..n_places).map(at_place).collect();
    let take = |of: &dyn Fn(&[f64]) -> f64| {
        DVector::from_iterator(n_places, places.iter().map(|roots| of(roots)))
    };
    Ok(ParallelAnalysis {
        observed: observed.variances().clone(),
        noise_mean: take(&mean),
        noise_percentile: take(&|roots| quantile(roots, options.chosen_percentile() / 100.0)),
        noise_deviation: take(&deviation),
        n_rows: x.n_rows(),
        n_variables: x.n_cols(),
        options,
        seed,
    })
}

/// A kind of table without structure, as the cross-product it leads to.
trait NoiseTable: Sync {
    /// Rows of the factor that is drawn, and its columns.
    fn shape(&self) -> (usize, usize);

    /// Fills a factor whose columns have unit length, so that its cross-product is a correlation
    /// matrix.
    fn draw(&self, generator: &mut Generator, factor: &mut DMatrix<f64>);
}

/// Memory that one thread keeps from replicate to replicate.
struct Workspace {
    factor: DMatrix<f64>,
    cross: DMatrix<f64>,
    ascending: Vec<f64>,
    scratch: MemBuffer,
}

/// The largest roots of each replicate, descending.
fn roots_of(
    n_replicates: usize,
    seed: u64,
    n_roots: usize,
    noise: &impl NoiseTable,
) -> Result<Vec<Vec<f64>>> {
    let (n_rows, n_cols) = noise.shape();
    // Both cross-products have the same non-zero roots; the smaller one is decomposed.
    let order = n_rows.min(n_cols);
    let workspace = || Workspace {
        factor: DMatrix::zeros(n_rows, n_cols),
        cross: DMatrix::zeros(order, order),
        ascending: vec![0.0; order],
        scratch: roots_workspace(order),
    };
    repeat("parallel analysis", n_replicates, seed, workspace, |workspace, generator, _| {
        let Workspace { factor, cross, ascending, scratch } = workspace;
        noise.draw(generator, factor);
        let factor = view(factor);
        let (a, b) = if n_cols <= n_rows {
            (factor.transpose(), factor)
        } else {
            (factor, factor.transpose())
        };
        triangular::matmul(
            view_mut(cross),
            BlockStructure::TriangularLower,
            Accum::Replace,
            a,
            BlockStructure::Rectangular,
            b,
            BlockStructure::Rectangular,
            1.0,
            Par::Seq,
        );
        symmetric_roots(cross, ascending, scratch)?;
        Ok(ascending.iter().rev().take(n_roots).copied().collect())
    })
}

struct NormalNoise {
    n_rows: usize,
    n_cols: usize,
    /// The squared diagonal of the factor, from its first row on.
    diagonal: Vec<ChiSquared<f64>>,
}

impl NormalNoise {
    fn new(n: usize, p: usize) -> Self {
        let freedom = n - 1;
        let n_rows = freedom.min(p);
        let diagonal = (0..n_rows)
            .map(|i| {
                ChiSquared::new((freedom - i) as f64)
                    .expect("at least one degree of freedom, since i < n − 1")
            })
            .collect();
        NormalNoise { n_rows, n_cols: p, diagonal }
    }
}

impl NoiseTable for NormalNoise {
    fn shape(&self) -> (usize, usize) {
        (self.n_rows, self.n_cols)
    }

    fn draw(&self, generator: &mut Generator, factor: &mut DMatrix<f64>) {
        for (j, mut column) in factor.column_iter_mut().enumerate() {
            let above = j.min(self.n_rows);
            for i in 0..above {
                column[i] = StandardNormal.sample(generator);
            }
            if j < self.n_rows {
                column[j] = self.diagonal[j].sample(generator).sqrt();
            }
            let length = column.norm();
            column /= length;
        }
    }
}

struct PermutedNoise {
    /// The data with columns centred and of unit length.
    unit: DMatrix<f64>,
}

impl PermutedNoise {
    fn new(x: &DataMatrix, mean: &DVector<f64>, scale: &DVector<f64>) -> Self {
        let mut unit = x.values().clone();
        let root = ((x.n_rows() - 1) as f64).sqrt();
        for (j, mut column) in unit.column_iter_mut().enumerate() {
            column.add_scalar_mut(-mean[j]);
            column /= scale[j] * root;
        }
        PermutedNoise { unit }
    }
}

impl NoiseTable for PermutedNoise {
    fn shape(&self) -> (usize, usize) {
        self.unit.shape()
    }

    fn draw(&self, generator: &mut Generator, factor: &mut DMatrix<f64>) {
        factor.copy_from(&self.unit);
        // One column may stay as it is: only the order relative to one another matters.
        for mut column in factor.column_iter_mut().skip(1) {
            for last in (1..column.len()).rev() {
                column.swap_rows(last, generator.random_range(0..=last));
            }
        }
    }
}
