//! The roots of many tables without structure beside those of the data.

use faer::dyn_stack::MemBuffer;
use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, Par};
use nalgebra::{DMatrix, DVector};

use super::noise::{NoiseTable, NormalNoise, PermutedNoise};
use super::options::{Noise, ParallelOptions, RootsOf};
use super::reduced::{Reduction, reduced_roots};
use super::result::ParallelAnalysis;
use crate::components::spectrum::{roots_workspace, symmetric_roots};
use crate::components::views::{view, view_mut};
use crate::components::{Scaling, principal_components};
use crate::error::{Error, Result};
use crate::live::seed;
use crate::quantile::{ascending, deviation, mean, quantile};
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
/// [`Error::WeightsNotCovered`] for rows that carry weights; [`Error::OptionOutOfRange`]. For
/// reduced correlations, [`Error::TooFewRows`] unless there are more rows than variables, and
/// [`Error::SingularScatter`] when some variables can be computed from others.
pub fn parallel_analysis(x: &DataMatrix, options: ParallelOptions) -> Result<ParallelAnalysis> {
    options.check()?;
    let method = "parallel analysis";
    if x.n_rows() < 3 {
        return Err(Error::TooFewRows { method, needed: 3, found: x.n_rows() });
    }
    if x.n_cols() < 2 {
        return Err(Error::TooFewColumns { method, needed: 2, found: x.n_cols() });
    }
    let pca = principal_components(x, Scaling::Correlation)?;
    if pca.is_weighted() {
        return Err(Error::WeightsNotCovered { method });
    }
    let roots_of = options.chosen_roots();
    let observed = match roots_of {
        RootsOf::Correlation => pca.variances().clone(),
        RootsOf::ReducedCorrelation => {
            if x.n_rows() <= x.n_cols() {
                return Err(Error::TooFewRows {
                    method: "parallel analysis of reduced correlations",
                    needed: x.n_cols() + 1,
                    found: x.n_rows(),
                });
            }
            reduced_roots(&pca)?
        }
    };
    let seed = options.chosen_seed().unwrap_or_else(seed);
    let n_roots = (x.n_rows() - 1).min(x.n_cols());
    let roots = match options.chosen_noise() {
        Noise::Normal => {
            let noise = NormalNoise::new(x.n_rows(), x.n_cols());
            noise_roots(options.n_replicates(), seed, n_roots, &noise, roots_of)?
        }
        Noise::Permuted => {
            let noise = PermutedNoise::new(x, pca.mean(), pca.scale());
            noise_roots(options.n_replicates(), seed, n_roots, &noise, roots_of)?
        }
    };
    let n_places = observed.len();
    let at_place = |place| ascending(roots.iter().map(|roots| roots[place]).collect());
    let places: Vec<Vec<f64>> = (0..n_places).map(at_place).collect();
    let take = |of: &dyn Fn(&[f64]) -> f64| {
        DVector::from_iterator(n_places, places.iter().map(|roots| of(roots)))
    };
    Ok(ParallelAnalysis {
        observed,
        noise_mean: take(&mean),
        noise_percentile: take(&|roots| quantile(roots, options.chosen_percentile() / 100.0)),
        noise_deviation: take(&deviation),
        n_rows: x.n_rows(),
        n_variables: x.n_cols(),
        options,
        seed,
    })
}

/// Memory that one thread keeps from replicate to replicate.
struct Workspace {
    factor: DMatrix<f64>,
    cross: DMatrix<f64>,
    ascending: Vec<f64>,
    scratch: MemBuffer,
    reduced: Option<Reduction>,
}

/// The largest roots of each replicate, descending.
fn noise_roots(
    n_replicates: usize,
    seed: u64,
    n_roots: usize,
    noise: &impl NoiseTable,
    roots_of: RootsOf,
) -> Result<Vec<Vec<f64>>> {
    let (n_rows, n_cols) = noise.shape();
    // Both cross-products have the same non-zero roots; the smaller one is decomposed.
    let order = n_rows.min(n_cols);
    let workspace = || Workspace {
        factor: DMatrix::zeros(n_rows, n_cols),
        cross: DMatrix::zeros(order, order),
        ascending: vec![0.0; order],
        scratch: roots_workspace(order),
        reduced: (roots_of == RootsOf::ReducedCorrelation).then(|| Reduction::new(order)),
    };
    repeat("parallel analysis", n_replicates, seed, workspace, |workspace, generator, _| {
        let Workspace { factor, cross, ascending, scratch, reduced } = workspace;
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
        if let Some(reduced) = reduced {
            reduced.apply(cross)?;
        }
        symmetric_roots(cross, ascending, scratch)?;
        Ok(ascending.iter().rev().take(n_roots).copied().collect())
    })
}
