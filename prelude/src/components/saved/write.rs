//! An analysis as text.

use serde_json::{Value, json};

use super::{FORMAT, VERSION};
use crate::components::fitted::FittedComponents;
use crate::components::options::{Route, Scaling};

/// The word for a scaling.
pub(super) fn scaling_word(scaling: Scaling) -> &'static str {
    match scaling {
        Scaling::Correlation => "correlation",
        Scaling::Covariance => "covariance",
    }
}

/// The word for a route.
pub(super) fn route_word(route: Route) -> &'static str {
    match route {
        Route::VariableCrossProduct => "variable-cross-product",
        Route::RowCrossProduct => "row-cross-product",
        Route::SingularValues => "singular-values",
        Route::Randomised => "randomised",
    }
}

/// The whole analysis, a field to a line.
pub(super) fn json(fitted: &FittedComponents) -> String {
    let columns = |values: &nalgebra::DMatrix<f64>| -> Vec<Value> {
        values.column_iter().map(|column| numbers(column.iter())).collect()
    };
    let approximation = fitted.approximation.as_ref().map(|search| {
        json!({
            "directions": search.n_directions,
            "power_iterations": search.power_iterations,
            "seed": search.seed,
            "norm_bound": search.norm_bound,
            "residuals": numbers(search.residuals.iter()),
        })
    });
    let scores = fitted
        .saved_scores
        .as_ref()
        .map(|scores| json!({ "labels": scores.row_names(), "values": columns(scores.values()) }));
    let fields = [
        ("format", json!(FORMAT)),
        ("version", json!(VERSION)),
        ("scaling", json!(scaling_word(fitted.scaling))),
        ("route", json!(route_word(fitted.route))),
        ("rows", json!(fitted.n_rows)),
        ("divisor", json!(fitted.divisor())),
        ("weighted", json!(fitted.is_weighted)),
        ("rank", json!(fitted.rank)),
        ("rank_tolerance", json!(fitted.tolerance)),
        ("variables", json!(fitted.variables())),
        ("transformations", fitted.transformations.iter().map(|t| t.to_json()).collect()),
        ("mean", numbers(fitted.mean.iter())),
        ("scale", numbers(fitted.scale.iter())),
        ("deviations", numbers(fitted.deviation.iter())),
        ("total_variance", json!(fitted.total_variance)),
        ("variances", numbers(fitted.variances.iter())),
        ("loadings", Value::Array(columns(fitted.loadings.values()))),
        ("approximation", json!(approximation)),
        ("scores", json!(scores)),
    ];
    let lines: Vec<String> =
        fields.iter().map(|(name, value)| format!("  {}: {value}", json!(name))).collect();
    format!("{{\n{}\n}}", lines.join(",\n"))
}

fn numbers<'a>(values: impl Iterator<Item = &'a f64>) -> Value {
    values.map(|value| json!(value)).collect()
}
