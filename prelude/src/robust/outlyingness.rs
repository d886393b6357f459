//! How outlying rows are in the worst of many directions.
//!
//! ```text
//! o_i = max over directions d of | x_iᵀd − m_d | / s_d
//! ```
//!
//! with m and s the exact univariate minimum covariance determinant of the projected rows. The
//! directions pass through two rows each. W. A. Stahel (1981) and D. L. Donoho (1982); with these
//! m and s in M. Hubert, P. J. Rousseeuw and K. Vanden Branden (2005), section 2.1.

use nalgebra::{DMatrix, DVector};
use rand::RngExt;

use super::univariate::univariate;
use crate::error::{Error, Result};
use crate::live::interrupted;
use crate::random::Generator;
use crate::repeat::repeat;

/// Directions looked along in one go.
const BATCH: usize = 10;

/// Draws after which two rows that differ count as not to be found.
const MOST_DRAWS: usize = 100;

/// Spreads below this share of the range of all rows are what rounding leaves of none.
const NO_SPREAD: f64 = 1e-12;

pub(super) enum Outlying {
    /// For each row.
    By(Vec<f64>),
    /// h or more rows have the same coordinate along a direction of unit length.
    Flat { direction: DVector<f64>, at: f64 },
}

/// The outlyingness of rows, along all directions through two rows where these are no more than
/// `n_directions`, else along so many drawn at random.
pub(super) fn outlyingness(
    x: &DMatrix<f64>,
    h: usize,
    n_directions: usize,
    seed: u64,
) -> Result<Outlying> {
    let n = x.nrows();
    // Rows one after the other in memory, since pairs of them are taken.
    let rows = x.transpose();
    let all = all_pairs(n, n_directions);
    let count = all.as_ref().map_or(n_directions, Vec::len);
    let batch = |memory: &mut Memory, generator: &mut Generator, number: usize| {
        let mut worst = vec![0.0_f64; n];
        for place in number * BATCH..count.min((number + 1) * BATCH) {
            if interrupted() {
                return Err(Error::Interrupted);
            }
            let direction = match &all {
                Some(pairs) => through(&rows, pairs[place]),
                None => drawn(&rows, generator),
            };
            let Some(direction) = direction else { continue };
            if let Some(at) = memory.look_along(x, &direction, h, &mut worst) {
                return Ok(Outlying::Flat { direction, at });
            }
        }
        Ok(Outlying::By(worst))
    };
    let mut worst = vec![0.0_f64; n];
    let batches = repeat("outlyingness", count.div_ceil(BATCH), seed, Memory::default, batch)?;
    for batch in batches {
        match batch {
            Outlying::By(found) => {
                worst.iter_mut().zip(found).for_each(|(worst, found)| *worst = worst.max(found));
            }
            flat => return Ok(flat),
        }
    }
    Ok(Outlying::By(worst))
}

#[derive(Default)]
struct Memory {
    projected: DVector<f64>,
    ascending: Vec<f64>,
}

impl Memory {
    /// Takes one direction into account; the coordinate of h equal rows if it has them.
    fn look_along(
        &mut self,
        x: &DMatrix<f64>,
        direction: &DVector<f64>,
        h: usize,
        worst: &mut [f64],
    ) -> Option<f64> {
        if self.projected.len() != x.nrows() {
            self.projected = DVector::zeros(x.nrows());
        }
        self.projected.gemv(1.0, x, direction, 0.0);
        self.ascending.clear();
        self.ascending.extend(self.projected.iter());
        self.ascending.sort_unstable_by(f64::total_cmp);
        let found = univariate(&self.ascending, h).raw;
        let range = self.ascending.last()? - self.ascending.first()?;
        if found.spread <= NO_SPREAD * range {
            return Some(found.centre);
        }
        for (worst, projected) in worst.iter_mut().zip(self.projected.iter()) {
            *worst = worst.max((projected - found.centre).abs() / found.spread);
        }
        None
    }
}

fn all_pairs(n: usize, most: usize) -> Option<Vec<(usize, usize)>> {
    (n * (n - 1) / 2 <= most)
        .then(|| (0..n).flat_map(|a| (a + 1..n).map(move |b| (a, b))).collect())
}

fn drawn(rows: &DMatrix<f64>, generator: &mut Generator) -> Option<DVector<f64>> {
    let n = rows.ncols();
    (0..MOST_DRAWS)
        .find_map(|_| through(rows, (generator.random_range(0..n), generator.random_range(0..n))))
}

/// The direction from one row to another; none when they are equal.
fn through(rows: &DMatrix<f64>, (a, b): (usize, usize)) -> Option<DVector<f64>> {
    let direction = rows.column(a) - rows.column(b);
    let length = direction.norm();
    (length > 0.0).then(|| direction / length)
}
