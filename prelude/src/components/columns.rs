//! Centre, spread and scale of each column, checked before anything is decomposed.

use nalgebra::DVector;

use super::cross::Moments;
use super::options::Scaling;
use crate::error::{Error, Result};
use crate::table::DataMatrix;

/// Sums of squares beyond these cannot be multiplied and divided safely in double precision.
const LEAST_SQUARES: f64 = 1e-290;
const MOST_SQUARES: f64 = 1e290;

/// Centre, spread and scale of the columns.
pub(super) struct Columns {
    pub(super) mean: DVector<f64>,
    /// Zero where the column is constant.
    pub(super) deviation: DVector<f64>,
    pub(super) scale: DVector<f64>,
}

impl Columns {
    /// Checks the spread of each column and derives its scale.
    pub(super) fn checked(x: &DataMatrix, moments: Moments, scaling: Scaling) -> Result<Self> {
        let divisor = (x.n_rows() - 1) as f64;
        let Moments { mean, sum_squares } = moments;
        let mut deviation = sum_squares.map(|squares| (squares / divisor).sqrt());
        let mut constant = Vec::new();
        for (j, &squares) in sum_squares.iter().enumerate() {
            // The cheap test picks out the few columns that need the exact one.
            let rounding = 16.0 * f64::EPSILON * mean[j].abs();
            let suspect = squares <= rounding * rounding * x.n_rows() as f64;
            if !suspect && (LEAST_SQUARES..=MOST_SQUARES).contains(&squares) {
                continue;
            }
            let column = x.values().column(j);
            let (min, max) = (column.min(), column.max());
            if max - min <= 2.0 * f64::EPSILON * min.abs().max(max.abs()) {
                deviation[j] = 0.0;
                constant.push((x.variables()[j].clone(), column[0]));
            } else if !(LEAST_SQUARES..=MOST_SQUARES).contains(&squares) {
                return Err(Error::Magnitude {
                    column: x.variables()[j].clone(),
                    value: (max / 2.0 - min / 2.0) * 2.0,
                    least: LEAST_SQUARES.sqrt(),
                    most: MOST_SQUARES.sqrt(),
                });
            }
        }
        if constant.len() == x.n_cols() {
            return Err(Error::NoVariation { n_rows: x.n_rows() });
        }
        let scale = match scaling {
            Scaling::Covariance => DVector::repeat(x.n_cols(), 1.0),
            Scaling::Correlation if constant.is_empty() => deviation.clone(),
            Scaling::Correlation => return Err(Error::ConstantColumns { columns: constant }),
        };
        Ok(Columns { mean, deviation, scale })
    }

    pub(super) fn varies_throughout(&self) -> bool {
        self.deviation.iter().all(|deviation| *deviation > 0.0)
    }

    /// The variance that a component must exceed; see
    /// [`FittedComponents::rank`](super::FittedComponents::rank).
    pub(super) fn tolerance(&self, x: &DataMatrix, largest_singular: f64) -> f64 {
        let (n, p) = (x.n_rows(), x.n_cols());
        // |mean| + √n times the deviation bounds the largest absolute value without another pass.
        let reach = self
            .mean
            .iter()
            .zip(self.deviation.iter().zip(self.scale.iter()))
            .map(|(mean, (deviation, scale))| (mean.abs() + deviation) / scale)
            .fold(0.0, f64::max);
        let decomposition = n.max(p) as f64 * largest_singular;
        let data = ((n * p) as f64).sqrt() * reach;
        let least = f64::EPSILON * decomposition.max(data);
        least * (least / (n - 1) as f64)
    }
}
