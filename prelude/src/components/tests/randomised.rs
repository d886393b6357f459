//! The random search: what it finds, and whether its error is as reported and as theory has it.

use nalgebra::{DMatrix, DVector};

use super::routes::assert_orthonormal;
use super::weights::weighted_and_repeated;
use super::{BOTH, correlated, noise};
use crate::compare::{assert_all_relative, assert_columns_up_to_sign, assert_matrix, assert_zero};
use crate::components::randomised::decompose;
use crate::components::scores::Standardised;
use crate::components::{
    ComponentOptions, Decomposition, RandomisedOptions, Route, Scaling, principal_components,
    principal_components_with,
};
use crate::error::Error;
use crate::table::DataMatrix;

fn search(keep: usize, scaling: Scaling, options: RandomisedOptions) -> ComponentOptions {
    ComponentOptions::new(scaling).keep(keep).decomposition(Decomposition::Randomised(options))
}

#[test]
fn a_randomised_search_finds_the_leading_components_and_bounds_its_error() {
    // Two components stand out of many small ones of slowly declining variance.
    for (n, p) in [(300, 120), (120, 300), (6000, 60)] {
        let plain = DataMatrix::from_unnamed(correlated(n, p, 4)).unwrap();
        for x in [plain, weighted_and_repeated(n, p, 4).0] {
            for scaling in BOTH {
                let exact = principal_components(&x, scaling).unwrap();
                for power_iterations in [0, 2, 12] {
                    let options =
                        RandomisedOptions::new().seed(3).power_iterations(power_iterations);
                    let pca = principal_components_with(&x, search(3, scaling, options)).unwrap();
                    assert_eq!((pca.route(), pca.n_components()), (Route::Randomised, 3));
                    assert_orthonormal(&pca, 1e-12);
                    let quality = pca.approximation().unwrap();
                    assert_eq!((quality.n_directions(), quality.seed()), (13, 3));
                    let rounding = 1e-12 * exact.variances()[0];
                    for k in 0..3 {
                        let short = exact.variances()[k] - pca.variances()[k];
                        assert!(short >= -rounding, "variances are never too large: {short:e}");
                        assert!(short <= quality.norm_bound().powi(2), "{short:e}");
                        let nearest = exact
                            .variances()
                            .iter()
                            .map(|variance| (variance - pca.variances()[k]).abs())
                            .fold(f64::INFINITY, f64::min);
                        assert!(nearest <= quality.residuals()[k] + rounding);
                    }
                    if power_iterations == 12 {
                        let (seen, expected) = (pca.variances(), exact.variances());
                        assert_all_relative(
                            &seen.as_slice()[..2],
                            &expected.as_slice()[..2],
                            1e-10,
                            "variances",
                        );
                        assert!(quality.residuals()[0] < 1e-6 * expected[0]);
                    }
                    assert!(
                        pca.total_variance() == exact.total_variance()
                            || scaling == Scaling::Covariance
                    );
                    let left = exact.total_variance() - pca.variances().sum();
                    assert_zero(pca.left_out_variance() - left, 1e-10 * left, "residual variance");
                    // Scores belong to the loadings that were found.
                    let projected = pca.project(&x).unwrap();
                    assert_matrix(pca.scores(), &projected, 1e-10, "scores");
                }
            }
        }
    }
}

#[test]
fn a_randomised_search_is_exact_for_data_of_low_rank_far_from_the_origin() {
    for (n, p) in [(500, 90), (90, 500), (5000, 40)] {
        let x = noise(n, 4, 1) * noise(4, p, 2);
        let x = DataMatrix::from_unnamed(x.add_scalar(1e5)).unwrap();
        let exact = principal_components(&x, Scaling::Covariance).unwrap();
        let options = search(4, Scaling::Covariance, RandomisedOptions::new().seed(9));
        let pca = principal_components_with(&x, options).unwrap();
        assert_eq!(exact.rank(), 4);
        let (seen, expected) = (pca.variances(), exact.variances());
        assert_all_relative(seen.as_slice(), expected.as_slice(), 1e-10, "variances");
        assert_columns_up_to_sign(pca.loadings(), exact.loadings(), 1e-8, "loadings");
        assert!(pca.approximation().unwrap().norm_bound() < 1e-8);
        let options = search(5, Scaling::Covariance, RandomisedOptions::new().seed(9));
        assert!(matches!(
            principal_components_with(&x, options),
            Err(Error::ComponentOutOfRange { asked: 5, available: 4 })
        ));
    }
}

#[test]
fn a_randomised_search_depends_on_its_seed_only() {
    for (n, p) in [(5000, 30), (60, 3000)] {
        let x = DataMatrix::from_unnamed(correlated(n, p, 9)).unwrap();
        let run = |threads: usize, seed: u64| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            let options = RandomisedOptions::new().seed(seed).power_iterations(1);
            pool.install(|| {
                let options = search(3, Scaling::Correlation, options);
                let pca = principal_components_with(&x, options).unwrap();
                (pca.variances().clone(), pca.scores().clone(), pca.approximation().cloned())
            })
        };
        let one = run(1, 5);
        assert!(run(2, 5) == one && run(8, 5) == one, "{n} x {p}");
        assert!(run(1, 6) != one);
    }
}

#[test]
fn the_error_of_the_span_is_below_its_bound_and_on_average_below_the_theorem_s() {
    // Singular values 1, 1/2, 1/3, …, so that what is left out is large. Without power iterations
    // the expected error of k + o directions is at most (Halko, Martinsson and Tropp 2011, theorem
    // 10.6, from memory)
    //     (1 + √(k / (o − 1))) σ_k+1 + e √(k + o) / o √(Σ_{j > k} σ_j²).
    let (n, p, k, o) = (60, 40, 6, 8);
    let singular = DVector::from_fn(p, |j, _| 1.0 / (j as f64 + 1.0));
    let (left, right) = (noise(n, p, 1).qr().q(), noise(p, p, 2).qr().q());
    let x = left * DMatrix::from_diagonal(&singular) * right.transpose();
    let (mean, scale) = (DVector::zeros(p), DVector::repeat(p, 1.0));
    let data = Standardised { x: &x, mean: &mean, scale: &scale, weights: None };
    let errors: Vec<f64> = (0..40)
        .map(|seed| {
            let options = RandomisedOptions::new().oversampling(o).power_iterations(0).seed(seed);
            let found = decompose(&data, k, options).unwrap();
            let outside = &x - &x * &found.right * found.right.transpose();
            let error = outside.singular_values().max();
            let bound = found.approximation.norm_bound() * ((n - 1) as f64).sqrt();
            assert!(error <= bound, "{error} above {bound}");
            error
        })
        .collect();
    let mean = errors.iter().sum::<f64>() / errors.len() as f64;
    let (k, o) = (k as f64, o as f64);
    let tail = singular.rows(6, p - 6).norm();
    let theorem = (1.0 + (k / (o - 1.0)).sqrt()) * singular[6]
        + std::f64::consts::E * (k + o).sqrt() / o * tail;
    assert!(mean <= theorem, "{mean} above {theorem}");
    assert!(mean >= singular[14], "no 14 directions do better than the singular vectors");
}
