//! Tables with holes against direct optimisation, root finding and complete-data libraries.

use nalgebra::DMatrix;
use semiaxis::components::Scaling;
use semiaxis::gaps::{
    ComponentRule, EstimatedCell, GapMethod, GapOptions, ProbabilisticOptions, components_for_gaps,
    estimate_missing, probabilistic_components,
};
use semiaxis::table::{DataMatrix, GappedMatrix};
use semiaxis_tests::compare::{assert_columns_up_to_sign, assert_relative, assert_zero};
use serde_json::Value;

use crate::files::{cases, load, matrix, numbers, scaling};

fn table(file: &Value, case: &Value) -> GappedMatrix {
    let rows = file["tables"][case["table"].as_str().unwrap()].as_array().unwrap();
    let value = |i: usize, j: usize| rows[i][j].as_f64().unwrap_or(f64::NAN);
    let n_cols = rows[0].as_array().unwrap().len();
    GappedMatrix::from_unnamed(DMatrix::from_fn(rows.len(), n_cols, value)).unwrap()
}

fn of_kind<'a>(file: &'a Value, kind: &'a str) -> impl Iterator<Item = &'a Value> {
    cases(file).filter(move |case| case["kind"] == kind)
}

fn n_components(case: &Value) -> usize {
    case["n_components"].as_u64().unwrap() as usize
}

fn what(case: &Value) -> String {
    format!("{}, {} of {}", case["table"], case["n_components"], case["kind"])
}

/// Compares values, in standard deviations of their column, and standard deviations where given.
fn check_cells(x: &GappedMatrix, cells: &[EstimatedCell], case: &Value, tolerance: f64) {
    let expected = case["cells"].as_array().unwrap();
    assert_eq!((cells.len(), x.n_missing()), (expected.len(), expected.len()));
    for (cell, expected) in cells.iter().zip(expected) {
        let expected = numbers(expected);
        let place = (expected[0] as usize, expected[1] as usize);
        assert_eq!((cell.row_idx, cell.column_idx), place);
        let seen: Vec<f64> =
            x.values().column(place.1).iter().copied().filter(|value| !value.is_nan()).collect();
        let mean = seen.iter().sum::<f64>() / seen.len() as f64;
        let spread = seen.iter().map(|value| (value - mean).powi(2)).sum::<f64>();
        let unit = (spread / (seen.len() - 1) as f64).sqrt();
        assert_zero((cell.value - expected[2]) / unit, tolerance, &what(case));
        if let Some(deviation) = expected.get(3) {
            assert_relative(cell.standard_deviation, *deviation, tolerance, &what(case));
        }
    }
}

/// A quasi-Newton search on the observed-data likelihood ends where EM does. Its own slope at the
/// end, some 1e-6 to 1e-9, leaves about that much of the parameters open.
#[test]
fn the_likelihood_has_no_higher_point() {
    let file = load("gaps.json");
    let mut n_cases = 0;
    for case in of_kind(&file, "likelihood") {
        let x = table(&file, case);
        let options = ProbabilisticOptions::new()
            .scaling(scaling(case))
            .tolerance(1e-9)
            .random_starts(6)
            .seed(1);
        let ppca = probabilistic_components(&x, n_components(case), options).unwrap();
        assert!(ppca.converged());
        let expected = case["log_likelihood"].as_f64().unwrap();
        assert_relative(ppca.log_likelihood(), expected, 1e-9, &what(case));
        assert_relative(ppca.noise_variance(), case["noise"].as_f64().unwrap(), 1e-5, &what(case));
        for (s, squared) in numbers(&case["squared_lengths"]).iter().enumerate() {
            let ours = ppca.variances()[s] - ppca.noise_variance();
            assert_relative(ours, *squared, 1e-5, &what(case));
        }
        for (ours, expected) in ppca.mean().iter().zip(numbers(&case["mean"])) {
            assert_relative(*ours, expected, 1e-6, &what(case));
        }
        check_cells(&x, ppca.cells(), case, 1e-5);
        n_cases += 1;
    }
    assert_eq!(n_cases, 5);
}

#[test]
fn complete_tables_have_the_likelihood_that_another_library_gives() {
    let file = load("gaps.json");
    let mut n_cases = 0;
    for case in of_kind(&file, "complete") {
        let x = table(&file, case);
        let options = ProbabilisticOptions::new().scaling(scaling(case));
        let ppca = probabilistic_components(&x, n_components(case), options).unwrap();
        let number = |name: &str| case[name].as_f64().unwrap();
        assert_relative(ppca.log_likelihood(), number("log_likelihood"), 1e-10, &what(case));
        assert_relative(ppca.noise_variance(), number("noise"), 1e-9, &what(case));
        for (ours, expected) in ppca.variances().iter().zip(numbers(&case["variances"])) {
            assert_relative(*ours, expected, 1e-10, &what(case));
        }
        assert_columns_up_to_sign(ppca.axes().values(), &matrix(&case["axes"]), 1e-9, &what(case));
        n_cases += 1;
    }
    assert_eq!(n_cases, 2);
}

#[test]
fn least_squares_is_where_a_trust_region_search_ends() {
    let file = load("gaps.json");
    let mut n_cases = 0;
    for case in of_kind(&file, "least squares") {
        let x = table(&file, case);
        let options = GapOptions::new()
            .method(GapMethod::LeastSquares)
            .scaling(Scaling::Covariance)
            .components(n_components(case))
            .iterations(100_000)
            .tolerance(1e-10);
        let completed = estimate_missing(&x, options).unwrap();
        assert!(completed.converged());
        check_cells(&x, completed.cells(), case, 1e-5);
        n_cases += 1;
    }
    assert_eq!(n_cases, 2);
}

#[test]
fn the_shrunken_table_is_the_root_that_a_solver_finds() {
    let file = load("gaps.json");
    let mut n_cases = 0;
    for case in of_kind(&file, "shrunken") {
        let x = table(&file, case);
        let options = GapOptions::new()
            .method(GapMethod::Shrunken)
            .scaling(scaling(case))
            .components(n_components(case))
            .iterations(100_000)
            .tolerance(1e-10);
        let completed = estimate_missing(&x, options).unwrap();
        assert!(completed.converged());
        check_cells(&x, completed.cells(), case, 1e-7);
        n_cases += 1;
    }
    assert_eq!(n_cases, 4);
}

/// For no component the other program has RSS/((n − 1) p) in place of the formula with k = 0.
#[test]
fn generalised_cross_validation_by_another_library() {
    for case in cases(&load("gaps_cross_validation.json")) {
        let x = DataMatrix::from_unnamed(matrix(&case["data"])).unwrap();
        let expected = numbers(&case["errors"]);
        let options = GapOptions::new()
            .scaling(scaling(case))
            .components_by(ComponentRule::Generalised)
            .most_components(expected.len() - 1);
        let choice = components_for_gaps(&x, options).unwrap();
        assert_eq!(choice.n_components(), n_components(case));
        for (error, expected) in choice.errors().iter().zip(&expected).skip(1) {
            assert_relative(error.mean_squared.unwrap(), *expected, 1e-10, "error");
        }
    }
}
