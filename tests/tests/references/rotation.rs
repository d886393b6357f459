//! Rotated components of open data, by programs that take other ways: singular value decompositions
//! of the whole gradient, gradient projection of another criterion, a normalised least-squares fit.

use nalgebra::DMatrix;
use semiaxis::rotation::{Rotation, RotationOptions, rotate_with};
use semiaxis::table::NamedMatrix;
use semiaxis_tests::compare::assert_matrix;
use serde_json::Value;

use crate::files::{cases, load, matrix};

pub fn named(values: DMatrix<f64>) -> NamedMatrix {
    let rows: Vec<String> = (1..=values.nrows()).map(|row| row.to_string()).collect();
    let columns: Vec<String> = (1..=values.ncols()).map(|column| column.to_string()).collect();
    NamedMatrix::new(values, rows, columns).unwrap()
}

fn rotation(case: &Value) -> Rotation {
    let number = |name: &str| case[name].as_f64().unwrap();
    match case["rotation"].as_str().unwrap() {
        "varimax" => Rotation::Varimax,
        "quartimax" => Rotation::Quartimax,
        "equamax" => Rotation::Equamax,
        "promax" => Rotation::Promax { power: number("power") },
        "oblimin" => Rotation::Oblimin { gamma: number("gamma") },
        other => panic!("{other}"),
    }
}

/// For each column of `ours`, the column of `theirs` most like it, and the sign that fits: order and
/// signs are each program's own.
fn matched(ours: &DMatrix<f64>, theirs: &DMatrix<f64>) -> Vec<(usize, f64)> {
    ours.column_iter()
        .map(|column| {
            let likeness: Vec<f64> = theirs
                .column_iter()
                .map(|other| column.dot(&other) / (column.norm() * other.norm()))
                .collect();
            let size = |place: usize| likeness[place].abs();
            let best = (0..likeness.len()).max_by(|&a, &b| size(a).total_cmp(&size(b))).unwrap();
            (best, likeness[best].signum())
        })
        .collect()
}

fn check(case: &Value, matrices: &Value, tolerance: f64) {
    let name = case["name"].as_str().unwrap();
    let loadings = named(matrix(&matrices[name]));
    let options =
        RotationOptions::new().seed(1).kaiser_normalisation(case["kaiser"].as_bool().unwrap());
    let result = rotate_with(&loadings, rotation(case), options).unwrap();
    let what =
        format!("{name}, {} by {}, Kaiser {}", result.rotation(), case["by"], case["kaiser"]);
    assert!(result.converged(), "{what}");
    let (expected, phi) = (matrix(&case["loadings"]), matrix(&case["phi"]));
    let places = matched(result.loadings(), &expected);
    let aligned = DMatrix::from_fn(expected.nrows(), expected.ncols(), |row, column| {
        places[column].1 * expected[(row, places[column].0)]
    });
    let aligned_phi = DMatrix::from_fn(phi.nrows(), phi.ncols(), |row, column| {
        places[row].1 * places[column].1 * phi[(places[row].0, places[column].0)]
    });
    assert_matrix(result.loadings(), &aligned, tolerance, &what);
    assert_matrix(result.factor_correlations(), &aligned_phi, tolerance, &what);
}

#[test]
fn open_data_by_the_statistics_language() {
    let file = load("rotation.json");
    let mut n_cases = 0;
    for case in cases(&file) {
        // Gradient projection stopped at 1e-8 of its own gradient, and a flat criterion leaves the
        // loadings some ten to a hundred times that; varimax there stops when the criterion does.
        check(case, &file["matrices"], 2e-6);
        n_cases += 1;
    }
    assert_eq!(n_cases, 44);
}

#[test]
fn open_data_by_a_factor_analysis_library() {
    let matrices = &load("rotation.json")["matrices"];
    let mut n_cases = 0;
    for case in cases(&load("rotation_python.json")) {
        // Its varimax stops when the criterion no longer grows in double precision, which leaves
        // the loadings to the root of that.
        check(case, matrices, 1e-6);
        n_cases += 1;
    }
    assert_eq!(n_cases, 12);
}
