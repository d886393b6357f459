//! Parallel analysis against simulations that draw whole tables.

use nalgebra::DMatrix;
use semiaxis::parallel::{ParallelOptions, parallel_analysis};
use semiaxis::table::DataMatrix;
use semiaxis_tests::compare::{assert_relative, assert_zero};

use crate::files::{cases, load, numbers};

/// The simulation of the other program draws whole tables; here the cross-product is drawn. Means
/// of 20 000 and of as many tables may differ by five standard errors of their difference; the
/// percentile's error is taken as three times the mean's (its own, for normal roots, is 2.1 times).
#[test]
fn noise_has_the_roots_of_an_independent_simulation() {
    for case in cases(&load("parallel.json")) {
        let n = case["n_rows"].as_u64().unwrap() as usize;
        let p = case["n_variables"].as_u64().unwrap() as usize;
        let replicates = case["replicates"].as_u64().unwrap() as usize;
        // Any data of this shape that vary and have full rank will do.
        let x = DMatrix::from_fn(n, p, |i, j| ((i * i + 3 * i * j + 7 * j) as f64 * 0.37).sin());
        let x = DataMatrix::from_unnamed(x).unwrap();
        let options = ParallelOptions::new().replicates(replicates).seed(20);
        let result = parallel_analysis(&x, options).unwrap();
        let (mean, deviation) = (numbers(&case["mean"]), numbers(&case["deviation"]));
        let percentile = numbers(&case["percentile_95"]);
        assert_eq!(result.noise_mean().len(), mean.len(), "{n} x {p}");
        for k in 0..mean.len() {
            let error = deviation[k] * (2.0 / replicates as f64).sqrt();
            let what = format!("{n} x {p}, root {}", k + 1);
            assert_zero(result.noise_mean()[k] - mean[k], 5.0 * error, &what);
            assert_zero(result.noise_percentile()[k] - percentile[k], 15.0 * error, &what);
            // A standard deviation of N values has a relative error of about 1/√(2N).
            assert_relative(result.noise_deviation()[k], deviation[k], 0.05, &what);
        }
    }
}
