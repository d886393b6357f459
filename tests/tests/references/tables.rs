//! Column summaries of data frames.

use semiaxis::polars::prelude::{Column, DataFrame, NamedFrom, Series};
use semiaxis::table::describe_columns;
use semiaxis_tests::compare::{assert_all_relative, assert_relative};

use crate::files::{cases, data, load, numbers};

#[test]
fn column_summaries_by_the_statistics_language() {
    let file = load("arrests.json");
    let case = cases(&file).next().unwrap();
    let x = data(case);
    let columns: Vec<Column> = x
        .variables()
        .iter()
        .map(|name| Series::new(name.as_str().into(), x.variable(name).unwrap()).into())
        .collect();
    let described = describe_columns(&DataFrame::new(x.n_rows(), columns).unwrap()).unwrap();
    for summary in file["summaries"].as_array().unwrap() {
        let name = summary["column"].as_str().unwrap();
        let actual = described.column(name).unwrap().numbers.unwrap();
        assert_relative(actual.mean, summary["mean"].as_f64().unwrap(), 1e-14, name);
        let deviation = summary["standard_deviation"].as_f64().unwrap();
        assert_relative(actual.standard_deviation, deviation, 1e-14, name);
        let quartiles = numbers(&summary["quartiles"]);
        let ours =
            [actual.min, actual.lower_quartile, actual.median, actual.upper_quartile, actual.max];
        assert_all_relative(&ours, &quartiles, 1e-14, name);
    }
}
