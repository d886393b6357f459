//! Distances, T², Q, their limits and contributions against dense formulas and 30-digit quantiles.

use semiaxis::components::principal_components;
use semiaxis::distances::{QRule, TSquaredAndQ, distances, t_squared_and_q};
use semiaxis::table::DataMatrix;
use semiaxis_tests::compare::{assert_all_relative, assert_matrix, assert_relative};
use serde_json::Value;

use crate::files::{cases, load, matrix, numbers, scaling};

/// Both sides work from decompositions of well-conditioned tables.
const CLOSE: f64 = 1e-9;

fn table(values: &Value) -> DataMatrix {
    DataMatrix::from_unnamed(matrix(values)).unwrap()
}

fn fitted(case: &Value) -> TSquaredAndQ {
    let pca = principal_components(&table(&case["data"]), scaling(case)).unwrap();
    t_squared_and_q(&pca, case["k"].as_u64().unwrap() as usize).unwrap()
}

#[test]
fn statistics_are_those_of_dense_projectors() {
    for case in cases(&load("outliers.json")) {
        let what = case["name"].as_str().unwrap();
        let found = fitted(case);
        let expected = |of: &str| numbers(&case[of]);
        assert_all_relative(found.t_squared().as_slice(), &expected("t_squared"), CLOSE, what);
        assert_all_relative(found.q().as_slice(), &expected("q"), CLOSE, what);
        let new = found.of(&table(&case["new_rows"])).unwrap();
        assert_all_relative(new.t_squared().as_slice(), &expected("new_t_squared"), CLOSE, what);
        assert_all_relative(new.q().as_slice(), &expected("new_q"), CLOSE, what);
    }
}

#[test]
fn limits_are_those_of_thirty_digits() {
    for case in cases(&load("outliers.json")) {
        let found = fitted(case);
        let new = found.of(&table(&case["new_rows"])).unwrap();
        for limits in case["limits"].as_array().unwrap() {
            let share = limits["share"].as_f64().unwrap();
            let expected = |of: &str| limits[of].as_f64().unwrap();
            let (found, new) =
                (found.with_coverage(share).unwrap(), new.with_coverage(share).unwrap());
            let what = format!("{} at {share}", case["name"]);
            let check = |actual: Option<f64>, of: &str| {
                assert_relative(actual.unwrap(), expected(of), CLOSE, &format!("{what}, {of}"));
            };
            check(found.t_squared_limit(), "t_squared_fitted");
            check(new.t_squared_limit(), "t_squared_new");
            check(found.q_limit_by(QRule::JacksonMudholkar), "jackson_mudholkar");
            check(found.q_limit_by(QRule::Box), "box");
            check(new.q_limit_by(QRule::Box), "box");
            check(new.q_limit_by(QRule::Moments), "moments");
            assert_eq!(found.q_limit(), found.q_limit_by(QRule::JacksonMudholkar));
            match found.q_limit_by(QRule::F) {
                Some(limit) => check(Some(limit), "f"),
                None => assert_eq!(limits["f_applies"], false, "{what}"),
            }
            assert_eq!(found.q_limit_by(QRule::F).is_some(), limits["f_applies"] == true);
            let pca = principal_components(&table(&case["data"]), scaling(case)).unwrap();
            let distances = distances(&pca, found.n_components()).unwrap();
            let limit = distances.with_coverage(share).unwrap().score_limit();
            check(Some(limit), "score_distance");
        }
    }
}

#[test]
fn contributions_are_those_of_a_dense_square_root() {
    for case in cases(&load("outliers.json")) {
        let what = case["name"].as_str().unwrap();
        let label = (case["row"].as_u64().unwrap() + 1).to_string();
        let found = fitted(case).contributions(&label).unwrap();
        // A contribution may be next to nothing beside the others: errors count against the largest.
        for (actual, of) in [(found.to_t_squared(), "to_t_squared"), (found.to_q(), "to_q")] {
            let expected = numbers(&case[of]);
            let expected = nalgebra::DMatrix::from_column_slice(expected.len(), 1, &expected);
            let actual = nalgebra::DMatrix::from_column_slice(actual.len(), 1, actual.as_slice());
            // The square root of a singular matrix is good to half the digits.
            assert_matrix(&actual, &expected, 1e-6, &format!("{what}, {of}"));
        }
    }
}
