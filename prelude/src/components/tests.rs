//! Properties, closed forms and faults. Values from outside programs and books are in the
//! workspace's `tests/tests/references`.

mod exhibits;
mod meaning;
mod new_rows;
mod randomised;
mod routes;
mod saved;
mod weights;

use nalgebra::{DMatrix, DVector, dmatrix};
use proptest::prelude::*;
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::{PrincipalComponents, Route, Scaling, principal_components};
use crate::compare::{
    assert_all_relative, assert_columns_up_to_sign, assert_matrix, assert_relative,
    assert_same_space, assert_zero,
};
use crate::error::Error;
use crate::random::Generator;
use crate::table::DataMatrix;

const BOTH: [Scaling; 2] = [Scaling::Correlation, Scaling::Covariance];

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

/// Columns of unequal spread and offset that share two hidden sequences.
fn correlated(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let (hidden, own) = (noise(n, 2, seed), noise(n, p, seed + 1000));
    DMatrix::from_fn(n, p, |i, j| {
        let shared = hidden[(i, 0)] + hidden[(i, 1)] * (j as f64).cos();
        (shared + own[(i, j)]) * (1.0 + j as f64) + 10.0 * j as f64
    })
}

fn fit(values: DMatrix<f64>, scaling: Scaling) -> PrincipalComponents {
    principal_components(&DataMatrix::from_unnamed(values).unwrap(), scaling).unwrap()
}

fn fault(values: DMatrix<f64>, scaling: Scaling) -> Error {
    principal_components(&DataMatrix::from_unnamed(values).unwrap(), scaling).unwrap_err()
}

/// The formula of the documentation, written naively.
fn scaled(x: &DMatrix<f64>, scaling: Scaling) -> DMatrix<f64> {
    let n = x.nrows() as f64;
    let mut z = x.clone();
    for mut column in z.column_iter_mut() {
        let mean = column.sum() / n;
        column.add_scalar_mut(-mean);
        if scaling == Scaling::Correlation {
            let deviation = (column.norm_squared() / (n - 1.0)).sqrt();
            column /= deviation;
        }
    }
    z
}

/// Everything that must hold of any decomposition.
fn check_identities(x: &DMatrix<f64>, scaling: Scaling, tolerance: f64) {
    let pca = fit(x.clone(), scaling);
    let z = scaled(x, scaling);
    let (n, r) = (x.nrows() as f64, pca.n_components());
    let loadings = pca.loadings().values();
    let unit = loadings.transpose() * loadings;
    assert_matrix(&unit, &DMatrix::identity(r, r), tolerance, "loadings are orthonormal");
    assert!(pca.variances().as_slice().windows(2).all(|pair| pair[0] >= pair[1]), "descending");
    let total = z.norm_squared() / (n - 1.0);
    assert_relative(pca.total_variance(), total, tolerance, "total variance");
    assert_relative(pca.variances().sum(), total, tolerance, "variances sum to the total");
    assert_relative(pca.cumulative()[r - 1], 1.0, tolerance, "shares sum to one");
    let scores = pca.scores().values();
    assert_matrix(scores, &(&z * loadings), tolerance, "scores are the formula's");
    let spread = scores.transpose() * scores / (n - 1.0);
    let expected = DMatrix::from_diagonal(pca.variances());
    assert_matrix(&spread, &expected, tolerance, "scores are uncorrelated, with these variances");
    assert_matrix(&(scores * loadings.transpose()), &z, tolerance, "all components give the data");
    for k in 0..r {
        assert_zero(scores.column(k).mean(), tolerance * z.amax(), "scores have mean zero");
        let column = loadings.column(k);
        let largest = column.amax();
        let first = column.iter().find(|v| v.abs() >= largest * (1.0 - 1e-8)).unwrap();
        assert!(*first > 0.0, "component {k} breaks the sign rule: {column}");
    }
}

#[test]
fn identities_hold_for_every_shape_and_scaling() {
    for scaling in BOTH {
        for (n, p) in [(2, 1), (3, 3), (5, 2), (30, 7), (300, 40), (7, 30), (40, 41), (50, 600)] {
            check_identities(&correlated(n, p, 3), scaling, 1e-10);
        }
        // More rows than one block, and more than one part.
        check_identities(&correlated(9000, 12, 3), scaling, 1e-10);
    }
}

#[test]
fn equal_correlations_have_the_roots_of_the_closed_form() {
    // A correlation matrix with r everywhere off the diagonal has the root 1 + (p − 1) r once and
    // 1 − r otherwise (D. F. Morrison, "Multivariate Statistical Methods", from memory). The data
    // are built to have exactly that correlation: orthonormal columns times its square root.
    let (n, p, r) = (60, 6, 0.4_f64);
    let mut centred = noise(n, p, 11);
    for mut column in centred.column_iter_mut() {
        let mean = column.mean();
        column.add_scalar_mut(-mean);
    }
    let basis = centred.qr().q();
    // (a I + b J)² = (1 − r) I + r J with J all ones.
    let a = (1.0 - r).sqrt();
    let b = ((1.0 + (p as f64 - 1.0) * r).sqrt() - a) / p as f64;
    let root = DMatrix::from_fn(p, p, |i, j| b + if i == j { a } else { 0.0 });
    let pca = fit(basis * root, Scaling::Correlation);
    assert_relative(pca.variances()[0], 1.0 + 5.0 * r, 1e-12, "first root");
    assert_all_relative(&pca.variances().as_slice()[1..], &[1.0 - r; 5], 1e-12, "other roots");
    let ones = DMatrix::repeat(p, 1, 1.0 / (p as f64).sqrt());
    assert_columns_up_to_sign(
        &pca.loadings().values().columns(0, 1).into_owned(),
        &ones,
        1e-12,
        "first loadings",
    );
    // The other roots are equal, so only the space of their vectors is determined.
    let rest = pca.loadings().values().columns(1, 5).into_owned();
    let whole = DMatrix::identity(p, p) - &ones * ones.transpose();
    assert_matrix(&(&rest * rest.transpose()), &whole, 1e-11, "space of the equal roots");
}

#[test]
fn ties_for_the_largest_loading_are_settled_by_the_first() {
    // Two variables have loadings ±1/√2, equal but for rounding.
    let pca = fit(dmatrix![1.0, -3.0; 2.0, -1.0; 3.1, -7.0; 4.7, -2.0], Scaling::Correlation);
    assert!(pca.loadings()[(0, 0)] > 0.0 && pca.loadings()[(0, 1)] > 0.0);
}

#[test]
fn a_cross_product_about_the_mean_survives_a_large_offset() {
    // The deviations are those of 1, 2, 3 about 2, whatever the offset; 2⁵⁰ keeps them exact.
    let offset = 2.0_f64.powi(50);
    let column = |i: usize, j: usize| offset + ((i * (j + 1)) % 3) as f64;
    for n in [300, 30_000] {
        let far = fit(DMatrix::from_fn(n, 2, column), Scaling::Covariance);
        let near = fit(DMatrix::from_fn(n, 2, |i, j| column(i, j) - offset), Scaling::Covariance);
        let (far, near) = (far.variances().as_slice(), near.variances().as_slice());
        assert_all_relative(far, near, 1e-13, "variances");
    }
}

#[test]
fn rank_deficiency_is_found_and_reported() {
    // The third column is the sum of the others, the fourth twice the first.
    for (n, offset) in [(40, 0.0), (40, 1e6), (3, 0.0)] {
        let two = noise(n, 2, 5);
        let x = DMatrix::from_fn(n, 4, |i, j| {
            offset
                + match j {
                    2 => two[(i, 0)] + two[(i, 1)],
                    3 => 2.0 * two[(i, 0)],
                    _ => two[(i, j)],
                }
        });
        for scaling in BOTH {
            let pca = fit(x.clone(), scaling);
            assert_eq!(pca.rank(), 2, "n {n}, offset {offset}, {scaling}");
            assert!(pca.variances()[1] > pca.tolerance());
        }
    }
    let wide = noise(4, 2, 6) * noise(2, 50, 7);
    let pca = fit(wide.clone(), Scaling::Covariance);
    assert_eq!((pca.rank(), pca.route()), (2, Route::SingularValues));
    assert_matrix(
        pca.reconstruct(2).unwrap().values(),
        &wide,
        1e-12,
        "two components give rank-two data back",
    );
}

#[test]
fn the_route_follows_shape_and_conditioning() {
    assert_eq!(fit(noise(50, 5, 1), Scaling::Covariance).route(), Route::VariableCrossProduct);
    assert_eq!(fit(noise(5, 50, 1), Scaling::Covariance).route(), Route::RowCrossProduct);
    let mut uneven = noise(50, 5, 1);
    uneven.column_mut(0).scale_mut(1e4);
    assert_eq!(fit(uneven.clone(), Scaling::Covariance).route(), Route::SingularValues);
    assert_eq!(fit(uneven, Scaling::Correlation).route(), Route::VariableCrossProduct);
}

#[test]
fn both_sides_and_singular_values_agree() {
    // One row more than columns, and its transpose-like twin: the routes differ, the roots do not.
    let x = correlated(21, 20, 8);
    let pca = fit(x.clone(), Scaling::Covariance);
    let z = scaled(&x, Scaling::Covariance) / 20.0_f64.sqrt();
    let svd = z.svd(false, true);
    let mut expected: Vec<f64> = svd.singular_values.iter().map(|s| s * s).collect();
    expected.sort_by(|a, b| b.total_cmp(a));
    assert_all_relative(pca.variances().as_slice(), &expected, 1e-10, "against nalgebra's svd");
    let wide = correlated(20, 31, 8);
    let pca = fit(wide.clone(), Scaling::Correlation);
    assert_eq!(pca.route(), Route::RowCrossProduct);
    let z = scaled(&wide, Scaling::Correlation) / 19.0_f64.sqrt();
    let svd = z.svd(false, true);
    let mut order: Vec<usize> = (0..20).collect();
    order.sort_by(|a, b| svd.singular_values[*b].total_cmp(&svd.singular_values[*a]));
    let vectors = svd.v_t.unwrap().transpose().select_columns(&order[..19]);
    assert_columns_up_to_sign(pca.loadings(), &vectors, 1e-10, "against nalgebra's svd");
}

#[test]
fn structure_is_the_correlation_of_variables_with_scores() {
    for scaling in BOTH {
        let x = correlated(40, 5, 21);
        let pca = fit(x.clone(), scaling);
        let z = scaled(&x, Scaling::Correlation);
        let scores = scaled(pca.scores(), Scaling::Correlation);
        let expected = z.transpose() * scores / 39.0;
        assert_matrix(pca.structure().values(), &expected, 1e-10, "structure");
    }
}

#[test]
fn a_constant_column_is_named_under_correlation_and_carried_under_covariance() {
    let mut x = noise(20, 3, 2);
    x.column_mut(1).fill(0.1);
    match fault(x.clone(), Scaling::Correlation) {
        Error::ConstantColumns { columns } => assert_eq!(columns, [("V2".to_owned(), 0.1)]),
        other => panic!("{other}"),
    }
    let pca = fit(x, Scaling::Covariance);
    assert_eq!(pca.rank(), 2);
    assert_eq!(pca.variable_deviations()[1], 0.0);
    assert!(pca.structure().row(1).iter().all(|value| value.is_nan()));
    assert!(pca.loadings().row(1).iter().all(|value| value.abs() < 1e-15));
    // Values that differ in their last digit only are a constant that was computed twice.
    let mut x = noise(20, 3, 2);
    x.column_mut(2).fill(1.0);
    x[(3, 2)] = 1.0 + f64::EPSILON;
    assert!(matches!(fault(x, Scaling::Correlation), Error::ConstantColumns { .. }));
}

#[test]
fn too_little_data_is_refused() {
    assert!(matches!(
        fault(dmatrix![1.0, 2.0], Scaling::Covariance),
        Error::TooFewRows { needed: 2, found: 1, .. }
    ));
    assert!(matches!(
        fault(dmatrix![1.0, 2.0; 1.0, 2.0], Scaling::Covariance),
        Error::NoVariation { n_rows: 2 }
    ));
}

#[test]
fn magnitudes_beyond_squaring_are_refused_and_others_are_exact() {
    for size in [1e160, 1e-160] {
        for scaling in BOTH {
            match fault(noise(9, 2, 4) * size, scaling) {
                Error::Magnitude { column, value, .. } => {
                    assert_eq!(column, "V1");
                    assert!(value > size / 10.0 && value < size * 10.0, "{value:e}");
                }
                other => panic!("{other}"),
            }
        }
    }
    let pca = fit(noise(9, 3, 4), Scaling::Covariance);
    for size in [2.0_f64.powi(400), 2.0_f64.powi(-400)] {
        let scaled = fit(noise(9, 3, 4) * size, Scaling::Covariance);
        let expected = pca.variances() * size * size;
        assert_all_relative(scaled.variances().as_slice(), expected.as_slice(), 1e-12, "variances");
    }
}

#[test]
fn results_do_not_depend_on_the_number_of_threads() {
    for (n, p) in [(5000, 30), (700, 400), (60, 3000), (300, 301)] {
        let x = DataMatrix::from_unnamed(correlated(n, p, 9)).unwrap();
        for scaling in BOTH {
            let run = |threads: usize| {
                let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
                pool.install(|| {
                    let pca = principal_components(&x, scaling).unwrap();
                    (pca.variances().clone(), pca.loadings().clone(), pca.scores().clone())
                })
            };
            let one = run(1);
            for threads in [2, 3, 8] {
                assert!(run(threads) == one, "{n} x {p} {scaling} on {threads} threads");
            }
        }
    }
}

#[test]
fn projection_repeats_scores_and_refuses_other_variables() {
    let x = correlated(30, 4, 1);
    let names = ["a", "b", "c", "d"];
    let labels = |n: usize| (0..n).map(|i| i.to_string()).collect::<Vec<_>>();
    let data = DataMatrix::from_values(x.clone(), names, labels(30)).unwrap();
    let pca = principal_components(&data, Scaling::Correlation).unwrap();
    assert!(pca.project(&data).unwrap() == *pca.scores());
    let mean = DMatrix::from_rows(&[pca.mean().transpose()]);
    let mean = DataMatrix::from_values(mean, names, ["mean"]).unwrap();
    assert_zero(pca.project(&mean).unwrap().amax(), 1e-12, "the mean goes to the origin");
    let other = |names: &[&str]| {
        let values = x.columns(0, names.len()).into_owned();
        let data = DataMatrix::from_values(values, names.iter().copied(), labels(30)).unwrap();
        match pca.project(&data) {
            Err(Error::VariablesDiffer { missing, extra, order }) => (missing, extra, order),
            other => panic!("{other:?}"),
        }
    };
    assert_eq!(other(&["a", "b", "c"]).0, ["d"]);
    assert_eq!(other(&["a", "b", "c", "e"]).1, ["e"]);
    assert_eq!(other(&["a", "c", "b", "d"]).2, Some((2, "b".to_owned(), "c".to_owned())));
}

#[test]
fn reconstruction_leaves_the_variances_it_leaves_out() {
    let x = correlated(25, 6, 13);
    for scaling in BOTH {
        let pca = fit(x.clone(), scaling);
        let two = pca.reconstruct(2).unwrap();
        let left_out = 24.0 * pca.variances().rows(2, 4).sum();
        assert_relative(two.residual_sum_of_squares(), left_out, 1e-10, "residual");
        assert_relative(two.proportion(), pca.cumulative()[1], 1e-12, "share kept");
        assert_matrix(pca.reconstruct(6).unwrap().values(), &x, 1e-12, "everything kept");
        for k in [0, 7] {
            assert!(matches!(
                pca.reconstruct(k),
                Err(Error::ComponentOutOfRange { asked, available: 6 }) if asked == k
            ));
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    #[test]
    fn identities_hold_for_random_shapes(
        n in 2usize..40, p in 1usize..40, seed in 0u64..1_000_000, which in 0usize..2,
    ) {
        check_identities(&correlated(n, p, seed), BOTH[which], 1e-9); // few rows leave small roots
    }

    #[test]
    fn a_rotation_of_the_input_rotates_the_loadings(seed in 0u64..1_000_000) {
        let x = correlated(40, 4, seed);
        let rotation = noise(4, 4, seed + 1).qr().q();
        let (before, after) = (
            fit(x.clone(), Scaling::Covariance),
            fit(x * &rotation, Scaling::Covariance),
        );
        assert_all_relative(
            after.variances().as_slice(), before.variances().as_slice(), 1e-9, "variances");
        let first_two = |pca: &PrincipalComponents| pca.loadings().columns(0, 2).into_owned();
        let gap = before.variances()[1] / before.variances()[2];
        prop_assume!(gap > 1.05); // closer roots leave the space undetermined
        assert_same_space(
            &first_two(&after), &(rotation.transpose() * first_two(&before)), 1e-8, "space");
    }

    #[test]
    fn units_do_not_matter_under_correlation_nor_row_order_at_all(seed in 0u64..1_000_000) {
        let x = correlated(30, 5, seed);
        let units = DVector::from_fn(5, |j, _| 10.0_f64.powi(3 * j as i32 - 6));
        let in_units = DMatrix::from_fn(30, 5, |i, j| x[(i, j)] * units[j]);
        let before = fit(x.clone(), Scaling::Correlation);
        let after = fit(in_units, Scaling::Correlation);
        assert_all_relative(
            after.variances().as_slice(), before.variances().as_slice(), 1e-9, "units");
        let turned = DMatrix::from_fn(30, 5, |i, j| x[(29 - i, j)]);
        for scaling in BOTH {
            let (a, b) = (fit(x.clone(), scaling), fit(turned.clone(), scaling));
            assert_all_relative(
                a.variances().as_slice(), b.variances().as_slice(), 1e-9, "row order");
        }
    }
}
