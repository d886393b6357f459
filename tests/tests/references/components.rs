//! Components of open data, of ill-conditioned data in many digits, and of a handbook's example.

use nalgebra::dmatrix;
use semiaxis::components::{
    ComponentOptions, Decomposition, RandomisedOptions, Scaling, principal_components,
    principal_components_with,
};
use semiaxis::table::DataMatrix;
use semiaxis_tests::compare::{
    assert_all_relative, assert_columns_up_to_sign, assert_relative, assert_zero,
};
use serde_json::Value;

use crate::files::{cases, data, load, matrix, numbers, scaling};

/// Compares everything a case holds; `vectors` is the tolerance for loadings and scores.
fn check_components(case: &Value, roots: f64, vectors: f64) {
    let x = data(case);
    let pca = principal_components(&x, scaling(case)).unwrap();
    let what = format!("{} by {} ({})", case["name"], case["by"], scaling(case));
    let expected = numbers(&case["variances"]);
    assert_eq!(pca.n_components(), expected.len(), "{what}");
    assert_all_relative(pca.variances().as_slice(), &expected, roots, &what);
    if !case["proportions"].is_null() {
        let expected = numbers(&case["proportions"]);
        assert_all_relative(pca.proportions().as_slice(), &expected, roots, &what);
    }
    let loadings = matrix(&case["loadings"]);
    assert_columns_up_to_sign(pca.loadings(), &loadings, vectors, &what);
    if !case["scores"].is_null() {
        // A score has the sign of its component's loadings, here ours.
        let mut expected = matrix(&case["scores"]);
        for (k, mut column) in expected.column_iter_mut().enumerate() {
            if loadings.column(k).dot(&pca.loadings().column(k)) < 0.0 {
                column.neg_mut();
            }
        }
        let scores = pca.scores().rows(0, expected.nrows()).into_owned();
        semiaxis_tests::compare::assert_matrix(&scores, &expected, vectors, &what);
    }
}

/// NIST/SEMATECH e-Handbook of Statistical Methods, section 6.5.5.2, "Numerical example": the
/// table, its correlation matrix's roots and vectors, and the factor structure, as printed with
/// four decimals. From memory; numpy 2.4.6 gives the same digits.
#[test]
fn the_worked_example_of_the_engineering_statistics_handbook() {
    let x = dmatrix![
        7.0, 4.0, 3.0; 4.0, 1.0, 8.0; 6.0, 3.0, 5.0; 8.0, 6.0, 1.0; 8.0, 5.0, 7.0;
        7.0, 2.0, 9.0; 5.0, 3.0, 3.0; 9.0, 5.0, 8.0; 7.0, 4.0, 5.0; 8.0, 2.0, 2.0
    ];
    let x = DataMatrix::from_unnamed(x).unwrap();
    let pca = principal_components(&x, Scaling::Correlation).unwrap();
    let half_a_unit = 0.5e-4;
    for (actual, printed) in pca.variances().iter().zip([1.7688, 0.9271, 0.3041]) {
        assert_zero(actual - printed, half_a_unit + 1e-6, "root"); // 0.30415 was cut, not rounded
    }
    let printed = dmatrix![
        0.6420, 0.3847, -0.6632; 0.6864, 0.0971, 0.7207; -0.3417, 0.9179, 0.2017
    ];
    assert_columns_up_to_sign(pca.loadings(), &printed, half_a_unit / 0.9179, "vectors");
    let structure = dmatrix![
        0.8538, 0.3704, -0.3658; 0.9128, 0.0935, 0.3975; -0.4544, 0.8838, 0.1112
    ];
    let actual = pca.structure();
    assert_columns_up_to_sign(&actual, &structure, half_a_unit / 0.9128, "structure");
    assert_zero(pca.mean()[0] - 6.9, 1e-12, "mean of the first variable");
}

#[test]
fn open_data_by_a_full_singular_value_decomposition() {
    let file = load("components.json");
    let mut n_cases = 0;
    for case in cases(&file).filter(|case| case["by"].as_str().unwrap().contains("PCA")) {
        // Loadings of the breast cancer data belong to roots over ten orders of magnitude; the
        // reference itself holds those of the smallest to some nine digits only.
        let cancer = case["name"] == "breast_cancer";
        let (roots, vectors) = if cancer { (1e-8, 1e-8) } else { (1e-10, 1e-10) };
        check_components(case, roots, vectors);
        n_cases += 1;
    }
    assert_eq!(n_cases, 8);
}

#[test]
fn a_randomised_search_keeps_within_its_error_of_exact_components() {
    let file = load("components.json");
    for case in cases(&file).filter(|case| case["name"] == "breast_cancer") {
        let exact = numbers(&case["variances"]);
        for power_iterations in [0, 1, 8] {
            let search = RandomisedOptions::new().seed(5).power_iterations(power_iterations);
            let options = ComponentOptions::new(scaling(case))
                .keep(4)
                .decomposition(Decomposition::Randomised(search));
            let pca = principal_components_with(&data(case), options).unwrap();
            let quality = pca.approximation().unwrap();
            let rounding = 1e-12 * exact[0];
            for (k, variance) in pca.variances().iter().enumerate() {
                let short = exact[k] - variance;
                assert!((-rounding..=quality.norm_bound().powi(2)).contains(&short), "{short:e}");
                let distance = |other: &f64| (other - variance).abs();
                let nearest = exact.iter().map(distance).fold(f64::INFINITY, f64::min);
                assert!(nearest <= quality.residuals()[k] + rounding, "{nearest:e}");
            }
            if power_iterations == 8 {
                let what = format!("{} after 8 iterations", scaling(case));
                assert_all_relative(pca.variances().as_slice(), &exact[..4], 1e-8, &what);
                let loadings = matrix(&case["loadings"]).columns(0, 4).into_owned();
                assert_columns_up_to_sign(pca.loadings(), &loadings, 1e-4, &what);
            }
        }
    }
}

#[test]
fn open_data_by_the_statistics_language() {
    for case in cases(&load("arrests.json")) {
        check_components(case, 1e-10, 1e-10);
    }
}

#[test]
fn ill_conditioned_data_in_sixty_digits() {
    let file = load("components.json");
    let mut n_cases = 0;
    for case in cases(&file).filter(|case| case["by"].as_str().unwrap().contains("mpmath")) {
        let x = data(case);
        let pca = principal_components(&x, scaling(case)).unwrap();
        let expected = numbers(&case["variances"]);
        let what = format!("{} ({})", case["name"], scaling(case));
        // Each singular value is known to about ε times the largest (twice that for its square);
        // far from the origin, to ε times the offset, a thousand times the spread.
        let far = case["name"].as_str().unwrap().contains("1000");
        let unit = f64::EPSILON * if far { 3000.0 } else { 1.0 };
        for (k, expected) in expected.iter().enumerate() {
            if k >= pca.n_components() {
                // What is not reported lies below what the rounding of the data allows to know.
                assert!(*expected <= pca.tolerance(), "{what}: root {k}, {expected:e}");
                continue;
            }
            let allowed = 20.0 * unit * (numbers(&case["variances"])[0] / expected).sqrt();
            assert_relative(pca.variances()[k], *expected, allowed.max(1e-13), &what);
        }
        assert!(pca.n_components() >= if far { 4 } else { 7 }, "{what}: {}", pca.n_components());
        n_cases += 1;
    }
    assert_eq!(n_cases, 4);
}
