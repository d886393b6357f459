//! The analysis again, with each row counted as often as a weight says.
//!
//! A bootstrap sample is a weighting of the rows by whole numbers, and leaving a row out is a
//! weight of zero. No rows are copied but into the block that is multiplied, and the memory for a
//! refit is kept from one to the next.

use faer::dyn_stack::MemBuffer;
use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, MatRef, Par};
use nalgebra::DMatrix;

use super::align::{Angles, Assignment, rotated_onto};
use super::options::Alignment;
use crate::components::spectrum::{pairs_workspace, symmetric, symmetric_pairs};
use crate::components::views::{PIECES, view, view_mut};
use crate::components::{PrincipalComponents, Scaling};
use crate::error::Result;

/// Components beyond those followed that a refit of wide data works out, so that a component that
/// has slipped down in the order is still found.
const SPARE: usize = 8;

/// The share of a column's sum of squares that may be taken off its cross-product: two digits.
const MOST_TAKEN: f64 = 0.99;

/// What is refitted.
pub(super) struct Refit<'a> {
    pca: &'a PrincipalComponents,
    /// Rows centred and scaled as the analysis did, n × p.
    unit: DMatrix<f64>,
    /// Σ z zᵀ over all rows, lower triangle; empty for wide data.
    cross: DMatrix<f64>,
    /// The loadings that are followed, p × k.
    loadings: DMatrix<f64>,
    alignment: Alignment,
}

/// One refit beside the analysis.
#[derive(Debug, Clone)]
pub(super) struct Refitted {
    /// Variances, descending, as many as the analysis has components.
    pub(super) variances: Vec<f64>,
    /// Aligned loadings, p × k by columns.
    pub(super) loadings: Vec<f64>,
    /// Which component of the refit (from zero) each followed one was given.
    pub(super) places: Vec<usize>,
    /// The absolute congruence of each followed component with the one it was given.
    pub(super) congruences: Vec<f64>,
    /// Principal angles between the leading subspaces, radians, ascending.
    pub(super) angles: Vec<f64>,
}

/// A refit, or the columns (by place) that do not vary in it and so cannot be scaled. No column
/// at all means that nothing varies.
pub(super) type Outcome = std::result::Result<Refitted, Vec<usize>>;

/// Memory that one thread keeps from refit to refit.
pub(super) struct Workspace {
    /// How often each row counts.
    pub(super) weights: Vec<f64>,
    taken: Vec<usize>,
    block: Vec<f64>,
    cross: DMatrix<f64>,
    ascending: Vec<f64>,
    scratch: MemBuffer,
    /// Loadings of the refit by descending variance, p × m.
    candidates: DMatrix<f64>,
    congruence: DMatrix<f64>,
    assignment: Assignment,
    angles: Angles,
}

impl<'a> Refit<'a> {
    pub(super) fn new(pca: &'a PrincipalComponents, k: usize, alignment: Alignment) -> Self {
        let mut unit = pca.data().values().clone();
        for (j, mut column) in unit.column_iter_mut().enumerate() {
            let (mean, scale) = (pca.mean()[j], pca.scale()[j]);
            column.apply(|value| *value = (*value - mean) / scale);
        }
        let (n, p) = unit.shape();
        let mut cross = DMatrix::zeros(0, 0);
        if p <= n {
            cross = DMatrix::zeros(p, p);
            lower_product(&mut cross, view(&unit).transpose(), view(&unit), PIECES);
        }
        let loadings = pca.loadings().values().columns(0, k).into_owned();
        Refit { pca, unit, cross, loadings, alignment }
    }

    pub(super) fn workspace(&self) -> Workspace {
        let (n, p) = self.unit.shape();
        let k = self.loadings.ncols();
        let order = if self.is_wide() { 0 } else { p };
        let m = if self.is_wide() { (k + SPARE).min(n).max(k) } else { p };
        Workspace {
            weights: vec![1.0; n],
            taken: Vec::with_capacity(n),
            block: vec![0.0; n * p],
            cross: DMatrix::zeros(order, order),
            ascending: vec![0.0; order],
            // Wide data do not use it, and there is none for no rows at all.
            scratch: pairs_workspace(order.max(1)),
            candidates: DMatrix::zeros(p, m),
            congruence: DMatrix::zeros(k, m),
            assignment: Assignment::new(k, m),
            angles: Angles::new(p, k),
        }
    }

    fn is_wide(&self) -> bool {
        self.unit.ncols() > self.unit.nrows()
    }

    /// The analysis with each row counted as often as `workspace.weights` says.
    pub(super) fn weighted(&self, workspace: &mut Workspace) -> Result<Outcome> {
        let (n, p) = self.unit.shape();
        let Workspace { weights, taken, block, cross, .. } = workspace;
        taken.clear();
        taken.extend((0..n).filter(|&row| weights[row] > 0.0));
        let total: f64 = weights.iter().sum();
        let n_taken = taken.len();
        let block = &mut block[..n_taken * p];
        for (j, column) in block.chunks_mut(n_taken).enumerate() {
            let values = &self.unit.as_slice()[j * n..][..n];
            let mean = taken.iter().map(|&row| weights[row] * values[row]).sum::<f64>() / total;
            for (entry, &row) in column.iter_mut().zip(taken.iter()) {
                *entry = weights[row].sqrt() * (values[row] - mean);
            }
        }
        if self.is_wide() {
            return self.wide(workspace, total);
        }
        let rows = MatRef::from_column_major_slice(block, n_taken, p);
        lower_product(cross, rows.transpose(), rows, Par::Seq);
        self.narrow(workspace, total)
    }

    /// The analysis without one row.
    ///
    /// With z the row's deviations from the means of all n rows, the cross-product about the means
    /// of the others is that of all less n / (n − 1) z zᵀ. Where that takes nearly all of a
    /// column's variation away, digits would be lost, and the others are multiplied anew.
    pub(super) fn without(&self, row: usize, workspace: &mut Workspace) -> Result<Outcome> {
        let (n, p) = self.unit.shape();
        let factor = n as f64 / (n - 1) as f64;
        let share = |j: usize| factor * self.unit[(row, j)].powi(2) / self.cross[(j, j)];
        if self.is_wide() || (0..p).any(|j| share(j) > MOST_TAKEN) {
            workspace.weights.fill(1.0);
            workspace.weights[row] = 0.0;
            return self.weighted(workspace);
        }
        workspace.taken.clear();
        workspace.taken.extend((0..n).filter(|&other| other != row));
        for j in 0..p {
            let scaled = factor * self.unit[(row, j)];
            for i in j..p {
                workspace.cross[(i, j)] = self.cross[(i, j)] - scaled * self.unit[(row, i)];
            }
        }
        self.narrow(workspace, (n - 1) as f64)
    }

    /// From a cross-product of p × p about the means of rows that count `total` times together.
    fn narrow(&self, workspace: &mut Workspace, total: f64) -> Result<Outcome> {
        let p = self.unit.ncols();
        let Workspace { taken, cross, ascending, scratch, candidates, .. } = workspace;
        let mut factors = vec![1.0 / (total - 1.0).sqrt(); p];
        if let Err(constant) = self.rescale(&mut factors, taken, total, |j| cross[(j, j)]) {
            return Ok(Err(constant));
        }
        for (j, mut column) in cross.column_iter_mut().enumerate() {
            for i in j..p {
                column[i] *= factors[i] * factors[j];
            }
        }
        symmetric_pairs(cross, ascending, candidates, scratch)?;
        for k in 0..p / 2 {
            candidates.swap_columns(k, p - 1 - k);
        }
        let variances: Vec<f64> = ascending.iter().rev().copied().collect();
        self.beside(workspace, variances)
    }

    /// From the block of centred rows, by the products of rows with one another.
    fn wide(&self, workspace: &mut Workspace, total: f64) -> Result<Outcome> {
        let p = self.unit.ncols();
        let Workspace { taken, block, candidates, .. } = workspace;
        let n_taken = taken.len();
        let block = &mut block[..n_taken * p];
        let mut factors = vec![1.0 / (total - 1.0).sqrt(); p];
        let squares: Vec<f64> =
            block.chunks(n_taken).map(|column| column.iter().map(|d| d * d).sum()).collect();
        if let Err(constant) = self.rescale(&mut factors, taken, total, |j| squares[j]) {
            return Ok(Err(constant));
        }
        for (column, factor) in block.chunks_mut(n_taken).zip(&factors) {
            column.iter_mut().for_each(|entry| *entry *= factor);
        }
        let rows = MatRef::from_column_major_slice(block, n_taken, p);
        let mut gram = DMatrix::zeros(n_taken, n_taken);
        lower_product(&mut gram, rows, rows.transpose(), Par::Seq);
        let spectrum = symmetric(gram)?;
        let rows = nalgebra::DMatrixView::from_slice(block, n_taken, p);
        candidates.fill(0.0);
        let floor = f64::EPSILON * p as f64 * spectrum.roots[0];
        for k in 0..candidates.ncols().min(n_taken) {
            let root = spectrum.roots[k];
            if root > floor {
                let mut column = candidates.column_mut(k);
                column.gemv_tr(1.0 / root.sqrt(), &rows, &spectrum.vectors.column(k), 0.0);
            }
        }
        let variances = spectrum.roots.as_slice().to_vec();
        self.beside(workspace, variances)
    }

    /// Turns factors that make sums of squares into variances into those that make unit variance,
    /// where the analysis asks for that.
    fn rescale(
        &self,
        factors: &mut [f64],
        taken: &[usize],
        total: f64,
        sum_squares: impl Fn(usize) -> f64,
    ) -> std::result::Result<(), Vec<usize>> {
        let constant = |j: usize| {
            // Scaled columns have variance one; only a suspicious one is looked at in full.
            let spread = self.pca.variable_deviations()[j] / self.pca.scale()[j];
            sum_squares(j) <= 1e-20 * total * spread * spread && self.is_constant(j, taken)
        };
        let at_fault: Vec<usize> = (0..factors.len()).filter(|&j| constant(j)).collect();
        match self.pca.scaling() {
            Scaling::Covariance if at_fault.len() == factors.len() => return Err(Vec::new()),
            Scaling::Covariance => {}
            Scaling::Correlation if !at_fault.is_empty() => return Err(at_fault),
            Scaling::Correlation => {
                for (j, factor) in factors.iter_mut().enumerate() {
                    *factor = 1.0 / sum_squares(j).sqrt();
                }
            }
        }
        Ok(())
    }

    /// The rule of the analysis itself: values that are equal to within their rounding.
    fn is_constant(&self, j: usize, taken: &[usize]) -> bool {
        let column = self.pca.data().values().column(j);
        let values = taken.iter().map(|&row| column[row]);
        let (min, max) = values
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(min, max), x| (min.min(x), max.max(x)));
        max - min <= 2.0 * f64::EPSILON * min.abs().max(max.abs())
    }

    /// Puts the candidates beside the loadings of the analysis.
    fn beside(&self, workspace: &mut Workspace, mut variances: Vec<f64>) -> Result<Outcome> {
        let Workspace { candidates, congruence, assignment, angles, .. } = workspace;
        let k = self.loadings.ncols();
        // A root that should be zero may come out below it by rounding.
        variances.iter_mut().for_each(|variance| *variance = variance.max(0.0));
        variances.resize(self.pca.n_components(), 0.0);
        congruence.gemm_tr(1.0, &self.loadings, candidates, 0.0);
        let mut places = vec![0; k];
        assignment.solve(congruence, &mut places);
        let congruences: Vec<f64> =
            (0..k).map(|component| congruence[(component, places[component])].abs()).collect();
        let loadings = match self.alignment {
            Alignment::Procrustes => rotated_onto(&self.loadings, candidates).as_slice().to_vec(),
            Alignment::Matching => {
                let mut loadings = Vec::with_capacity(candidates.nrows() * k);
                for (component, &place) in places.iter().enumerate() {
                    let sign = 1.0_f64.copysign(congruence[(component, place)]);
                    loadings.extend(candidates.column(place).iter().map(|v| sign * v));
                }
                loadings
            }
        };
        let angles = angles.between(&self.loadings, candidates)?;
        Ok(Ok(Refitted { variances, loadings, places, congruences, angles }))
    }

    /// Rows centred and scaled as the analysis did.
    pub(super) fn unit(&self) -> &DMatrix<f64> {
        &self.unit
    }
}

fn lower_product(into: &mut DMatrix<f64>, a: MatRef<'_, f64>, b: MatRef<'_, f64>, par: Par) {
    triangular::matmul(
        view_mut(into),
        BlockStructure::TriangularLower,
        Accum::Replace,
        a,
        BlockStructure::Rectangular,
        b,
        BlockStructure::Rectangular,
        1.0,
        par,
    );
}
