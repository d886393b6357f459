//! Rows grouped by which of their cells are missing, so that each pattern is factorised once.

use std::collections::HashMap;

use nalgebra::DMatrix;

/// What is observed, in the units of the analysis, pattern by pattern.
pub(super) struct Patterns {
    /// Rows that show anything.
    pub(super) n_rows: usize,
    pub(super) n_cols: usize,
    pub(super) n_observed: usize,
    /// In the order in which they first turn up.
    pub(super) groups: Vec<Group>,
    /// For each variable, whether fewer than half of its cells are missing: sums over the rows
    /// that have it are then taken as the sum over all rows less those that lack it.
    pub(super) by_complement: Vec<bool>,
}

/// The rows that share one pattern.
pub(super) struct Group {
    pub(super) observed: Vec<usize>,
    pub(super) missing: Vec<usize>,
    pub(super) rows: Vec<usize>,
    /// Observed values, centred and scaled, one row after the other.
    pub(super) values: Vec<f64>,
}

impl Patterns {
    /// Groups the rows of a matrix in which NaN marks a hole.
    pub(super) fn new(x: &DMatrix<f64>, centre: &[f64], scale: &[f64]) -> Self {
        let (n, p) = x.shape();
        let mut place_of: HashMap<Vec<u64>, usize> = HashMap::new();
        let mut groups: Vec<Group> = Vec::new();
        let mut n_missing = vec![0; p];
        let (mut n_observed, mut n_empty) = (0, 0);
        for i in 0..n {
            let mut key = vec![0_u64; p.div_ceil(64)];
            for j in 0..p {
                if x[(i, j)].is_nan() {
                    key[j / 64] |= 1 << (j % 64);
                    n_missing[j] += 1;
                } else {
                    n_observed += 1;
                }
            }
            let lacks = |j: &usize| key[j / 64] >> (j % 64) & 1 == 1;
            let new = groups.len();
            let place = *place_of.entry(key.clone()).or_insert(new);
            if place == new {
                let (missing, observed) = (0..p).partition(lacks);
                groups.push(Group { observed, missing, rows: Vec::new(), values: Vec::new() });
            }
            let group = &mut groups[place];
            group.rows.push(i);
            n_empty += usize::from(group.observed.is_empty());
            group.values.extend(group.observed.iter().map(|&j| (x[(i, j)] - centre[j]) / scale[j]));
        }
        let by_complement = n_missing.iter().map(|&missing| 2 * missing < n).collect();
        Patterns { n_rows: n - n_empty, n_cols: p, n_observed, groups, by_complement }
    }
}

/// Mean and standard deviation (divisor: observed cells less one) of what each column shows.
pub(super) struct Spread {
    pub(super) mean: Vec<f64>,
    pub(super) deviation: Vec<f64>,
}

pub(super) fn observed_spread(x: &DMatrix<f64>) -> Spread {
    let columns = x.column_iter().map(|column| {
        let seen: Vec<f64> = column.iter().copied().filter(|value| !value.is_nan()).collect();
        // The mean of the deviations takes away what rounding left in the first mean.
        let rough = crate::quantile::mean(&seen);
        let mean = rough + seen.iter().map(|value| value - rough).sum::<f64>() / seen.len() as f64;
        (mean, crate::quantile::deviation(&seen))
    });
    let (mean, deviation) = columns.unzip();
    Spread { mean, deviation }
}

/// Whether a column shows at least two different values, those apart by rounding being equal.
pub(super) fn varies(column: impl Iterator<Item = f64>) -> bool {
    let seen = column.filter(|value| !value.is_nan());
    let (least, most) = seen.fold((f64::INFINITY, f64::NEG_INFINITY), |(least, most), value| {
        (f64::min(least, value), f64::max(most, value))
    });
    most - least > 2.0 * f64::EPSILON * least.abs().max(most.abs())
}
