//! Tables without structure, as factors of their correlation matrices.

use nalgebra::{DMatrix, DVector};
use rand::RngExt;
use rand_distr::{ChiSquared, Distribution, StandardNormal};

use crate::random::Generator;
use crate::table::DataMatrix;

/// A kind of table without structure, as the cross-product it leads to.
pub(super) trait NoiseTable: Sync {
    /// Rows of the factor that is drawn, and its columns.
    fn shape(&self) -> (usize, usize);

    /// Fills a factor whose columns have unit length, so that its cross-product is a correlation
    /// matrix.
    fn draw(&self, generator: &mut Generator, factor: &mut DMatrix<f64>);
}

pub(super) struct NormalNoise {
    n_rows: usize,
    n_cols: usize,
    /// The squared diagonal of the factor, from its first row on.
    diagonal: Vec<ChiSquared<f64>>,
}

impl NormalNoise {
    pub(super) fn new(n: usize, p: usize) -> Self {
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

pub(super) struct PermutedNoise {
    /// The data with columns centred and of unit length.
    unit: DMatrix<f64>,
}

impl PermutedNoise {
    pub(super) fn new(x: &DataMatrix, mean: &DVector<f64>, scale: &DVector<f64>) -> Self {
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
