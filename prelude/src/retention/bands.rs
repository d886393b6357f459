//! Bootstrap intervals of the variances, and the rules that rest on them.

use faer::dyn_stack::MemBuffer;
use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, Par};
use nalgebra::{DMatrix, DVector};
use rand::RngExt;

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion, Reason};
use crate::components::Scaling;
use crate::components::spectrum::{roots_workspace, symmetric_roots};
use crate::components::views::{view, view_mut};
use crate::error::Result;
use crate::quantile::{ascending, quantile};
use crate::repeat::repeat;

/// Share of resampled tables that may have a constant column before the intervals are given up.
const MOST_FAILED: f64 = 0.05;

/// Percentile intervals of the variances over tables of rows drawn with replacement.
///
/// Variances of resampled tables are sorted, so that where neighbours are close the intervals say
/// something about places and not about directions.
#[derive(Debug, Clone, PartialEq)]
pub struct VarianceBands {
    lower: DVector<f64>,
    upper: DVector<f64>,
    coverage: f64,
    n_replicates: usize,
    n_failed: usize,
}

impl VarianceBands {
    /// The lower limits, one for each variance.
    pub fn lower(&self) -> &DVector<f64> {
        &self.lower
    }

    /// The upper limits, one for each variance.
    pub fn upper(&self) -> &DVector<f64> {
        &self.upper
    }

    /// What share of the resampled variances lies between the limits.
    pub fn coverage(&self) -> f64 {
        self.coverage
    }

    /// How many resampled tables the limits rest on.
    pub fn n_replicates(&self) -> usize {
        self.n_replicates
    }

    /// How many more were drawn and left out, because a column of theirs had no variation.
    pub fn n_failed(&self) -> usize {
        self.n_failed
    }
}

/// Memory that one thread keeps from replicate to replicate.
struct Workspace {
    rows: DMatrix<f64>,
    cross: DMatrix<f64>,
    ascending: Vec<f64>,
    scratch: MemBuffer,
}

pub(super) fn bands(subject: &Subject) -> Result<std::result::Result<VarianceBands, Reason>> {
    if let Err(reason) = fits(subject) {
        return Ok(Err(reason));
    }
    let (n, p) = (subject.n, subject.p);
    let scaled = subject.scaled_rows();
    let correlations = subject.pca.scaling() == Scaling::Correlation;
    let divisor = (n - 1) as f64;
    let n_replicates = subject.options.n_replicates();
    let workspace = || Workspace {
        rows: DMatrix::zeros(n, p),
        cross: DMatrix::zeros(p, p),
        ascending: vec![0.0; p],
        scratch: roots_workspace(p),
    };
    let drawn =
        repeat("bootstrap", n_replicates, subject.seed, workspace, |work, generator, _| {
            let chosen: Vec<usize> = (0..n).map(|_| generator.random_range(0..n)).collect();
            for (mut into, from) in work.rows.column_iter_mut().zip(scaled.column_iter()) {
                let mut sum = 0.0;
                for (value, row) in into.iter_mut().zip(&chosen) {
                    *value = from[*row];
                    sum += *value;
                }
                // The columns were centred before, so no digits of an offset are lost here.
                let mean = sum / n as f64;
                into.add_scalar_mut(-mean);
            }
            if correlations {
                for mut column in work.rows.column_iter_mut() {
                    let variance = column.norm_squared() / divisor;
                    if !(variance > f64::EPSILON) {
                        return Ok(None);
                    }
                    column /= variance.sqrt();
                }
            }
            triangular::matmul(
                view_mut(&mut work.cross),
                BlockStructure::TriangularLower,
                Accum::Replace,
                view(&work.rows).transpose(),
                BlockStructure::Rectangular,
                view(&work.rows),
                BlockStructure::Rectangular,
                1.0 / divisor,
                Par::Seq,
            );
            symmetric_roots(&work.cross, &mut work.ascending, &mut work.scratch)?;
            Ok(Some(work.ascending.iter().rev().copied().collect::<Vec<f64>>()))
        })?;
    let roots: Vec<Vec<f64>> = drawn.into_iter().flatten().collect();
    let n_failed = n_replicates - roots.len();
    if n_failed as f64 > MOST_FAILED * n_replicates as f64 {
        return Ok(Err(Reason::ConstantWhenResampled { n_failed, n_replicates }));
    }
    let coverage = 1.0 - subject.options.chosen_level();
    let limit = |share: f64| {
        DVector::from_fn(p, |place, _| {
            quantile(&ascending(roots.iter().map(|roots| roots[place]).collect()), share)
        })
    };
    Ok(Ok(VarianceBands {
        lower: limit(0.5 * (1.0 - coverage)),
        upper: limit(0.5 * (1.0 + coverage)),
        coverage,
        n_replicates: roots.len(),
        n_failed,
    }))
}

fn fits(subject: &Subject) -> std::result::Result<(), Reason> {
    subject.needs_equal_rows()?;
    subject.needs_more_rows()?;
    subject.needs_components(2)?;
    let (n, p) = (subject.n as f64, subject.p as f64);
    subject.needs_time(subject.options.n_replicates() as f64 * (n * p * p + 5.0 * p.powi(3)))
}

/// Lower limits against the mean root.
pub(super) fn against_mean(
    subject: &Subject,
    bands: &std::result::Result<VarianceBands, Reason>,
) -> Answer {
    let bands = bands.as_ref().map_err(Reason::clone)?;
    let values = bands.lower.as_slice().to_vec();
    let thresholds = vec![subject.mean_root(); values.len()];
    Ok(with_failures(Comparison::new("lower limit", Criterion::Above, values, thresholds), bands))
}

/// Each lower limit against the upper limit of the next variance.
pub(super) fn gaps(bands: &std::result::Result<VarianceBands, Reason>) -> Answer {
    let bands = bands.as_ref().map_err(Reason::clone)?;
    let values = bands.lower.as_slice()[..bands.lower.len() - 1].to_vec();
    let thresholds = bands.upper.as_slice()[1..].to_vec();
    Ok(with_failures(Comparison::new("lower limit", Criterion::Above, values, thresholds), bands))
}

fn with_failures(comparison: Comparison, bands: &VarianceBands) -> Comparison {
    if bands.n_failed == 0 {
        return comparison;
    }
    comparison.with_remark(format!(
        "{} more resampled tables had a column without variation and were left out.",
        bands.n_failed
    ))
}
