//! Rows that count more than others.

use nalgebra::DMatrix;

use super::{BOTH, correlated};
use crate::compare::{
    assert_all_relative, assert_columns_up_to_sign, assert_matrix, assert_relative, assert_zero,
};
use crate::components::{Route, Scaling, principal_components};
use crate::table::DataMatrix;

/// Weighted data, and the same rows repeated as often as their weights say.
pub(super) fn weighted_and_repeated(n: usize, p: usize, seed: u64) -> (DataMatrix, DataMatrix) {
    let x = correlated(n, p, seed);
    let times: Vec<usize> = (0..n).map(|i| 1 + (i * i + i / 3) % 4).collect();
    let rows: Vec<usize> = (0..n).flat_map(|i| std::iter::repeat_n(i, times[i])).collect();
    let repeated = DataMatrix::from_unnamed(x.select_rows(&rows)).unwrap();
    let weights = times.iter().map(|times| 0.3 * *times as f64);
    (DataMatrix::from_unnamed(x).unwrap().with_weights(weights).unwrap(), repeated)
}

#[test]
fn a_weight_acts_as_repeated_rows_but_for_the_divisor() {
    // Both cross-products, the singular values (one variable is nearly a copy), and several blocks.
    for (n, p) in [(30, 4), (9, 40), (4000, 30)] {
        let (weighted, repeated) = weighted_and_repeated(n, p, 17);
        for scaling in BOTH {
            let one = principal_components(&weighted, scaling).unwrap();
            let other = principal_components(&repeated, scaling).unwrap();
            assert!(one.is_weighted() && !other.is_weighted());
            let factor = match scaling {
                Scaling::Correlation => 1.0,
                Scaling::Covariance => {
                    let (n, repeated) = (n as f64, repeated.n_rows() as f64);
                    (n / (n - 1.0)) / (repeated / (repeated - 1.0))
                }
            };
            let expected = other.variances().rows(0, one.n_components()) * factor;
            assert_all_relative(one.variances().as_slice(), expected.as_slice(), 1e-9, "variances");
            let loadings = other.loadings().columns(0, one.n_components()).into_owned();
            assert_columns_up_to_sign(one.loadings(), &loadings, 1e-8, "loadings");
            assert_all_relative(one.mean().as_slice(), other.mean().as_slice(), 1e-12, "means");
            // Scores have weighted mean zero, and their weighted cross-product is the variances.
            let mut scores = one.scores().values().clone();
            let means: f64 = scores
                .row_iter()
                .zip(one.row_weights().unwrap())
                .map(|(row, weight)| row[0] * weight)
                .sum();
            assert_zero(means / n as f64, 1e-12 * scores.amax(), "weighted mean of scores");
            for (mut row, weight) in scores.row_iter_mut().zip(one.row_weights().unwrap()) {
                row *= weight.sqrt();
            }
            let spread = scores.transpose() * scores / (n as f64 - 1.0);
            let diagonal = DMatrix::from_diagonal(one.variances());
            assert_matrix(&spread, &diagonal, 1e-11, "weighted cross-product of scores");
            let kept = one.reconstruct(2).unwrap();
            let left_out = (n as f64 - 1.0) * one.variances().iter().skip(2).sum::<f64>();
            assert_relative(kept.residual_sum_of_squares(), left_out, 1e-9, "residual");
            assert_eq!(kept.data_matrix().weights(), weighted.weights());
        }
    }
}

#[test]
fn weights_survive_ill_conditioned_columns_and_a_large_offset() {
    let (weighted, _) = weighted_and_repeated(60, 4, 5);
    let widened = |offset: f64, copy: f64, of: usize| {
        let values = weighted.values();
        let x = DMatrix::from_fn(60, 4, |i, j| {
            offset + if j < 3 { values[(i, j)] } else { values[(i, 0)] + copy * values[(i, of)] }
        });
        DataMatrix::from_unnamed(x)
            .unwrap()
            .with_weights(weighted.weights().unwrap().iter().copied())
            .unwrap()
    };
    let near = principal_components(&widened(0.0, 1e-4, 3), Scaling::Covariance).unwrap();
    assert_eq!((near.route(), near.rank()), (Route::SingularValues, 4));
    let sum: f64 = near.variable_deviations().iter().map(|d| d * d).sum();
    assert_relative(near.variances().sum(), sum, 1e-12, "total");
    let copy = principal_components(&widened(0.0, 0.0, 1), Scaling::Covariance).unwrap();
    assert_eq!(copy.rank(), 3);
    let far =
        principal_components(&widened(2.0_f64.powi(40), 1.0, 1), Scaling::Correlation).unwrap();
    let near = principal_components(&widened(0.0, 1.0, 1), Scaling::Correlation).unwrap();
    assert_eq!(far.rank(), 3);
    // The offset leaves some 1e-4 of the values' digits.
    assert_all_relative(
        &far.variances().as_slice()[..3],
        &near.variances().as_slice()[..3],
        1e-3,
        "variances",
    );
}

#[test]
fn equal_weights_change_nothing() {
    for (n, p) in [(30, 4), (9, 40)] {
        let x = DataMatrix::from_unnamed(correlated(n, p, 3)).unwrap();
        let weighted = x.with_weights(vec![0.3; n]).unwrap();
        let (one, other) = (
            principal_components(&x, Scaling::Covariance).unwrap(),
            principal_components(&weighted, Scaling::Covariance).unwrap(),
        );
        assert!(one.variances() == other.variances() && one.scores() == other.scores());
        assert!(!other.is_weighted());
    }
}
