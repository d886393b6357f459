//! Rows that were not analysed, seen by an analysis.

use nalgebra::DMatrix;

use super::{correlated, noise};
use crate::compare::assert_matrix;
use crate::components::{FittedComponents, PrincipalComponents, Scaling, principal_components};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::table::DataMatrix;
use crate::transform::Transform;

const NAMES: [&str; 4] = ["clay", "sand", "lime", "salt"];

fn rows(values: DMatrix<f64>, names: &[&str]) -> DataMatrix {
    let labels: Vec<String> = (0..values.nrows()).map(|row| format!("batch {row}")).collect();
    DataMatrix::from_values(values, names.iter().copied(), labels).unwrap()
}

/// Positive amounts.
fn amounts(n: usize, seed: u64) -> DataMatrix {
    rows(noise(n, 4, seed).map(f64::exp), &NAMES)
}

fn transformed_analysis() -> (DataMatrix, PrincipalComponents) {
    let raw = amounts(30, 1);
    let x = raw.transformed(Transform::log()).unwrap();
    let x = x.transformed(Transform::standardise()).unwrap();
    let pca = principal_components(&x, Scaling::Covariance).unwrap();
    (raw, pca)
}

#[test]
fn raw_rows_go_through_the_numbers_fitted_to_the_rows_analysed() {
    let (raw, pca) = transformed_analysis();
    assert!(pca.project_raw(&raw).unwrap() == *pca.scores());
    let new = amounts(5, 2);
    let logs = raw.values().map(f64::ln);
    let expected = DMatrix::from_fn(5, 4, |i, j| {
        let column = logs.column(j);
        let deviation = (column.variance() * 30.0 / 29.0).sqrt();
        (new.values()[(i, j)].ln() - column.mean()) / deviation
    });
    let expected = expected * pca.loadings().values();
    assert_matrix(&pca.project_raw(&new).unwrap(), &expected, 1e-11, "by hand");
    // By name: another order and another column do no harm.
    let order = ["salt", "lime", "mica", "clay", "sand"];
    let wider = DMatrix::from_fn(5, 5, |i, j| match order[j] {
        "mica" => 1.0,
        name => new.variable(name).unwrap()[i],
    });
    let wider = pca.project_raw(&rows(wider, &order)).unwrap();
    assert_matrix(&wider, &expected, 1e-11, "by name");
    // Half the way gone already.
    let logs = new.transformed(Transform::log()).unwrap();
    assert_matrix(&pca.project_raw(&logs).unwrap(), &expected, 1e-11, "logs");
    // An analysis that was saved does the same, to the bit.
    let loaded = FittedComponents::from_json(&pca.to_json()).unwrap();
    assert!(loaded == *pca.fitted());
    assert!(loaded.project_raw(&new).unwrap() == pca.project_raw(&new).unwrap());
    let text = loaded.exhibit().text("text/plain").unwrap().to_owned();
    assert!(text.contains("Transformed beforehand: "), "{text}");
}

#[test]
fn rows_in_other_units_are_refused() {
    let (raw, pca) = transformed_analysis();
    let count = |wanted: usize, found: usize, x: &DataMatrix| match pca.project(x) {
        Err(Error::TransformationsDiffer { wanted: w, found: f }) => {
            assert_eq!((w.len(), f.len()), (wanted, found));
        }
        other => panic!("{other:?}"),
    };
    count(2, 0, &raw);
    // Standardised by their own means instead of those of the analysis.
    let others = amounts(30, 2).transformed(Transform::log()).unwrap();
    let others = others.transformed(Transform::standardise()).unwrap();
    count(2, 2, &others);
    assert!(matches!(pca.project_raw(&others), Err(Error::TransformationsDiffer { .. })));
    assert!(pca.project(&amounts(9, 3).transformed_as(pca.data()).unwrap()).is_ok());
    // An analysis of raw rows refuses transformed ones.
    let plain = principal_components(&raw, Scaling::Correlation).unwrap();
    assert!(matches!(plain.project(pca.data()), Err(Error::TransformationsDiffer { .. })));

    let negative = rows(correlated(5, 4, 1).map(|value| -value.abs()), &NAMES);
    assert!(matches!(pca.project_raw(&negative), Err(Error::OutsideDomain { .. })));
    let fewer = raw.select(["clay", "sand", "lime"]).unwrap();
    match pca.project_raw(&fewer) {
        Err(Error::VariablesDiffer { missing, .. }) => assert_eq!(missing, ["salt"]),
        other => panic!("{other:?}"),
    }
}

#[test]
fn rows_out_of_order_are_told_the_way_out() {
    let raw = amounts(30, 1);
    let pca = principal_components(&raw, Scaling::Correlation).unwrap();
    let turned = raw.select(["salt", "clay", "sand", "lime"]).unwrap();
    let error = pca.project(&turned).unwrap_err();
    assert!(error.to_string().contains("`x.select(pca.variables())?`"), "{error}");
    let mended = turned.select(pca.variables()).unwrap();
    assert!(pca.project(&mended).unwrap() == *pca.scores());
}
