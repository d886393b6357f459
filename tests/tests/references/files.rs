//! Reading the files of reference values.

use nalgebra::DMatrix;
use semiaxis::components::Scaling;
use semiaxis::table::DataMatrix;
use serde_json::Value;

pub fn load(name: &str) -> Value {
    let path = format!("{}/references/{name}", env!("CARGO_MANIFEST_DIR"));
    serde_json::from_str(&std::fs::read_to_string(path).unwrap()).unwrap()
}

pub fn cases(file: &Value) -> impl Iterator<Item = &Value> {
    file["cases"].as_array().unwrap().iter()
}

pub fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().unwrap().iter().map(|number| number.as_f64().unwrap()).collect()
}

pub fn matrix(value: &Value) -> DMatrix<f64> {
    let rows: Vec<Vec<f64>> = value.as_array().unwrap().iter().map(numbers).collect();
    DMatrix::from_fn(rows.len(), rows[0].len(), |i, j| rows[i][j])
}

pub fn data(case: &Value) -> DataMatrix {
    let values = matrix(&case["data"]);
    let names: Vec<&str> =
        case["variables"].as_array().unwrap().iter().map(|name| name.as_str().unwrap()).collect();
    let labels: Vec<String> = (1..=values.nrows()).map(|row| row.to_string()).collect();
    DataMatrix::from_values(values, names, labels).unwrap()
}

pub fn scaling(case: &Value) -> Scaling {
    match case["scaling"].as_str().unwrap() {
        "correlation" => Scaling::Correlation,
        "covariance" => Scaling::Covariance,
        other => panic!("{other}"),
    }
}
