//! Congruence, Procrustes and angles by other programs, by going through all permutations, and in
//! forty digits.

use nalgebra::DMatrix;
use semiaxis::comparison::{
    ProcrustesOptions, ProcrustesTestOptions, congruence, principal_angles, procrustes,
    procrustes_test, procrustes_with,
};
use semiaxis_tests::compare::{assert_matrix, assert_relative, assert_zero};

use crate::files::{load, matrix, numbers};
use crate::rotation::named;

#[test]
fn congruence_of_components_of_two_species() {
    let case = &load("comparison.json")["congruence"];
    let first = named(matrix(&case["first"]));
    let result = congruence(&first, &named(matrix(&case["second"]))).unwrap();
    // The reference rounds to 15 decimals.
    assert_matrix(result.coefficients(), &matrix(&case["coefficients"]), 1e-14, "congruence");
}

#[test]
fn one_set_of_scores_laid_on_another() {
    let file = load("comparison.json");
    let (x, y) = (named(matrix(&file["x"])), named(matrix(&file["y"])));
    for case in file["procrustes"].as_array().unwrap() {
        let scaling = case["scaling"].as_bool().unwrap();
        let options = ProcrustesOptions::new().translation(true).scaling(scaling);
        let result = procrustes_with(&x, &y, options).unwrap();
        let what = format!("scaling {scaling}");
        assert_matrix(result.rotation_matrix(), &matrix(&case["rotation"]), 1e-12, &what);
        assert_relative(result.scale(), case["scale"].as_f64().unwrap(), 1e-12, &what);
        let residual = case["residual"].as_f64().unwrap();
        assert_relative(result.residual_sum_of_squares(), residual, 1e-12, &what);
        let shift = DMatrix::from_row_slice(2, 1, &numbers(&case["translation"]));
        let ours = DMatrix::from_column_slice(2, 1, result.translation().as_slice());
        assert_matrix(&ours, &shift, 1e-12, &what);
        for (place, expected) in numbers(&case["residuals"]).iter().enumerate() {
            assert_relative(result.residuals()[place], *expected, 1e-11, &what);
        }
        let fitted = result.fitted().rows(0, 5).into_owned();
        assert_matrix(&fitted, &matrix(&case["fitted"]), 1e-11, &what);
    }
}

#[test]
fn loadings_turned_as_the_scientific_library_turns_them() {
    let case = &load("rotation_python.json")["procrustes"];
    let (first, second) = (matrix(&case["first"]), matrix(&case["second"]));
    let result = procrustes(&named(first.clone()), &named(second.clone())).unwrap();
    assert_matrix(result.rotation_matrix(), &matrix(&case["rotation"]), 1e-12, "rotation");
    let overlap = case["overlap"].as_f64().unwrap();
    let expected = overlap / (first.norm() * second.norm());
    assert_relative(result.correlation(), expected, 1e-12, "correlation");
}

#[test]
fn permutation_tests_agree_within_their_sampling_error() {
    let file = load("comparison.json");
    let x = named(matrix(&file["x"]));
    for case in file["tests"].as_array().unwrap() {
        let options = ProcrustesTestOptions::new().permutations(20_000).seed(3);
        let test = procrustes_test(&x, &named(matrix(&case["other"])), options).unwrap();
        let what = format!("correlation {}", case["correlation"]);
        assert_relative(test.correlation(), case["correlation"].as_f64().unwrap(), 1e-11, &what);
        assert_relative(test.m_squared(), case["m_squared"].as_f64().unwrap(), 1e-11, &what);
        // Five standard errors of a share of 20 000 and of one of 99 999, and the one that each adds.
        let p = case["p_value"].as_f64().unwrap();
        let error = (p * (1.0 - p) * (1.0 / 20_000.0 + 1.0 / 99_999.0)).sqrt();
        assert_zero(test.p_value() - p, 5.0 * error + 1.0 / 20_001.0, &what);
    }
}

#[test]
fn six_rows_have_the_p_value_of_all_their_permutations() {
    let file = load("rotation_python.json");
    let case = &file["exact_test"];
    let (x, y) = (named(matrix(&case["x"])), named(matrix(&case["y"])));
    let options = ProcrustesTestOptions::new().permutations(40_000).seed(3);
    let test = procrustes_test(&x, &y, options).unwrap();
    assert_relative(test.correlation(), case["correlation"].as_f64().unwrap(), 1e-12, "exact");
    let p = case["p_value"].as_f64().unwrap();
    let error = (p * (1.0 - p) / 40_000.0).sqrt();
    assert_zero(test.p_value() - p, 5.0 * error + 1.0 / 40_001.0, "five standard errors");
}

#[test]
fn angles_by_the_scientific_library_and_in_forty_digits() {
    let file = load("rotation_python.json");
    let cases = file["angles"].as_array().unwrap();
    assert_eq!(cases.len(), 4);
    for case in cases {
        let (a, b) = (named(matrix(&case["a"])), named(matrix(&case["b"])));
        let angles = principal_angles(&a, &b).unwrap();
        let expected = numbers(&case["radians"]);
        assert_eq!(angles.radians().len(), expected.len());
        for (ours, theirs) in angles.radians().iter().zip(&expected) {
            // Absolute: an angle is known to the rounding of the bases, whatever its size.
            assert_zero(ours - theirs, 1e-14, "angle");
        }
    }
}
