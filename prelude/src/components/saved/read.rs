//! Text as an analysis, checked throughout.

use std::collections::HashSet;
use std::sync::Arc;

use nalgebra::{DMatrix, DVector};

use super::fields::Fields;
use super::write::{route_word, scaling_word};
use super::{FORMAT, VERSION};
use crate::components::fitted::FittedComponents;
use crate::components::options::{Route, Scaling};
use crate::components::randomised::Approximation;
use crate::components::scores::transposed_product;
use crate::error::{Error, Result};
use crate::table::NamedMatrix;
use crate::transform::Transformation;

const FIELDS: [&str; 19] = [
    "format",
    "version",
    "scaling",
    "route",
    "rows",
    "divisor",
    "weighted",
    "rank",
    "rank_tolerance",
    "variables",
    "transformations",
    "mean",
    "scale",
    "deviations",
    "total_variance",
    "variances",
    "loadings",
    "approximation",
    "scores",
];

/// How far loadings may be from perpendicular and of unit length, and sums from one another: far
/// above what rounding leaves, far below any digit that was changed by hand.
const CLOSE: f64 = 1e-8;

pub(super) fn fitted(text: &str) -> Result<FittedComponents> {
    let fields = Fields::of(text, "")?;
    let format = fields.text("format")?;
    if format != FORMAT {
        return Err(fields.fault("format", &format!("`{format}`"), FORMAT));
    }
    let version = fields.integer("version")?;
    if version != VERSION {
        return Err(Error::SavedVersion { format: FORMAT, found: version, known: VERSION });
    }
    fields.check_names(&FIELDS)?;

    let scalings = [Scaling::Correlation, Scaling::Covariance];
    let scaling = word(&fields, "scaling", scalings, scaling_word)?;
    let routes = [
        Route::VariableCrossProduct,
        Route::RowCrossProduct,
        Route::SingularValues,
        Route::Randomised,
    ];
    let route = word(&fields, "route", routes, route_word)?;
    let n_rows = fields.count("rows")?;
    if n_rows < 2 {
        return Err(fields.fault("rows", &n_rows.to_string(), "2 or more"));
    }
    let divisor = fields.count("divisor")?;
    if divisor != n_rows - 1 {
        let accepted = format!("{}, one less than `rows`", n_rows - 1);
        return Err(fields.fault("divisor", &divisor.to_string(), &accepted));
    }
    let variables: Arc<[String]> = names(&fields, "variables")?.into();
    let p = variables.len();
    let variances = variances(&fields, p.min(n_rows - 1))?;
    let r = variances.len();
    let loadings = DMatrix::from_vec(p, r, fields.columns("loadings", p, r)?);
    check_orthonormal(&fields, &loadings)?;
    let components: Arc<[String]> = (1..=r).map(|k| format!("PC{k}")).collect();
    let fitted = FittedComponents {
        scaling,
        route,
        approximation: approximation(&fields, route, r)?,
        n_rows,
        transformations: transformations(&fields)?,
        is_weighted: fields.truth("weighted")?,
        rank: fields.count("rank")?,
        tolerance: fields.number("rank_tolerance")?,
        mean: fields.numbers("mean", p)?.into(),
        scale: fields.numbers("scale", p)?.into(),
        deviation: fields.numbers("deviations", p)?.into(),
        total_variance: fields.number("total_variance")?,
        variances,
        loadings: NamedMatrix::new(loadings, variables, components.clone())?,
        saved_scores: scores(&fields, n_rows, components)?,
    };
    check_whole(&fields, &fitted)?;
    Ok(fitted)
}

/// One of a few words.
fn word<T: Copy, const N: usize>(
    fields: &Fields<'_>,
    name: &str,
    known: [T; N],
    word: impl Fn(T) -> &'static str,
) -> Result<T> {
    let found = fields.text(name)?;
    known
        .into_iter()
        .find(|value| word(*value) == found)
        .ok_or_else(|| fields.fault(name, &format!("`{found}`"), &known.map(&word).join(", ")))
}

/// Names that differ, at least one.
fn names(fields: &Fields<'_>, name: &str) -> Result<Vec<String>> {
    let names = fields.texts(name)?;
    if names.is_empty() {
        return Err(fields.fault(name, "empty", "at least one name"));
    }
    let mut seen = HashSet::new();
    match names.iter().find(|name| !seen.insert(name.as_str())) {
        Some(twice) => {
            Err(fields.fault(name, &format!("a list with `{twice}` twice"), "names that differ"))
        }
        None => Ok(names),
    }
}

fn transformations(fields: &Fields<'_>) -> Result<Arc<[Transformation]>> {
    let saved: Vec<serde_json::Value> = fields.list("transformations")?;
    let read = |(place, saved)| {
        Transformation::from_json(saved).map_err(|error| match error {
            Error::SavedForm { part, found, accepted } => {
                let part = format!("`transformations[{place}]`: {part}");
                Error::SavedForm { part, found, accepted }
            }
            other => other,
        })
    };
    saved.iter().enumerate().map(read).collect()
}

fn variances(fields: &Fields<'_>, most: usize) -> Result<DVector<f64>> {
    let variances = fields.number_list("variances")?;
    if !(1..=most).contains(&variances.len()) {
        let found = format!("a list of {}", variances.len());
        return Err(fields.fault("variances", &found, &format!("a list of 1 to {most}")));
    }
    let descend = variances.windows(2).all(|pair| pair[0] >= pair[1]);
    if !(descend && variances[variances.len() - 1] > 0.0) {
        let found = "a list that increases, or reaches 0";
        return Err(fields.fault("variances", found, "numbers above 0 that do not increase"));
    }
    Ok(variances.into())
}

fn check_orthonormal(fields: &Fields<'_>, loadings: &DMatrix<f64>) -> Result<()> {
    let mut products = transposed_product(loadings);
    for k in 0..products.ncols() {
        products[(k, k)] -= 1.0;
    }
    // NaN, from products that overflow, is off as well.
    match products.iter().find(|product| product.is_nan() || product.abs() > CLOSE) {
        None => Ok(()),
        Some(off) => Err(fields.fault(
            "loadings",
            &format!("a list of columns whose lengths or angles are off by {off:.1e}"),
            "columns of unit length, perpendicular to one another",
        )),
    }
}

fn approximation(fields: &Fields<'_>, route: Route, r: usize) -> Result<Option<Approximation>> {
    let needed = route == Route::Randomised;
    if fields.is_null("approximation")? == needed {
        let accepted = if needed { "an object for this `route`" } else { "null for this `route`" };
        let found = if needed { "null" } else { "an object" };
        return Err(fields.fault("approximation", found, accepted));
    }
    if !needed {
        return Ok(None);
    }
    let fields = Fields::of(fields.raw("approximation")?, "`approximation`: ")?;
    fields.check_names(&["directions", "power_iterations", "seed", "norm_bound", "residuals"])?;
    let approximation = Approximation {
        n_directions: fields.count("directions")?,
        power_iterations: fields.count("power_iterations")?,
        seed: fields.integer("seed")?,
        norm_bound: fields.number("norm_bound")?,
        residuals: fields.numbers("residuals", r)?.into(),
    };
    if approximation.n_directions < r {
        let found = approximation.n_directions.to_string();
        return Err(fields.fault("directions", &found, &format!("{r} or more")));
    }
    if approximation.norm_bound < 0.0 {
        let found = approximation.norm_bound.to_string();
        return Err(fields.fault("norm_bound", &found, "a number not below 0"));
    }
    if approximation.residuals.iter().any(|residual| *residual < 0.0) {
        return Err(fields.fault(
            "residuals",
            "a list with a number below 0",
            "numbers not below 0",
        ));
    }
    Ok(Some(approximation))
}

fn scores(
    fields: &Fields<'_>,
    n_rows: usize,
    components: Arc<[String]>,
) -> Result<Option<NamedMatrix>> {
    if fields.is_null("scores")? {
        return Ok(None);
    }
    let fields = Fields::of(fields.raw("scores")?, "`scores`: ")?;
    fields.check_names(&["labels", "values"])?;
    let labels = names(&fields, "labels")?;
    fields.check_length("labels", labels.len(), n_rows)?;
    let values = fields.columns("values", n_rows, components.len())?;
    let values = DMatrix::from_vec(n_rows, components.len(), values);
    NamedMatrix::new(values, labels, components).map(Some)
}

/// What must hold between the parts.
fn check_whole(fields: &Fields<'_>, fitted: &FittedComponents) -> Result<()> {
    let FittedComponents { scale, deviation, variances, total_variance, .. } = fitted;
    let (p, r) = (fitted.n_variables(), fitted.n_components());
    let ranks =
        if fitted.route == Route::Randomised { r..=r } else { r..=p.min(fitted.n_rows - 1) };
    if !ranks.contains(&fitted.rank) {
        let accepted = format!("{} to {}", ranks.start(), ranks.end());
        return Err(fields.fault("rank", &fitted.rank.to_string(), &accepted));
    }
    if !(0.0..variances[r - 1]).contains(&fitted.tolerance) {
        let found = fitted.tolerance.to_string();
        let accepted = "a number not below 0 and below the last of `variances`";
        return Err(fields.fault("rank_tolerance", &found, accepted));
    }
    if let Some(below) = deviation.iter().find(|deviation| **deviation < 0.0) {
        return Err(fields.fault(
            "deviations",
            &format!("a list with {below}"),
            "no number below 0",
        ));
    }
    let scales_fit = match fitted.scaling {
        Scaling::Correlation => scale == deviation && scale.iter().all(|scale| *scale > 0.0),
        Scaling::Covariance => scale.iter().all(|scale| *scale == 1.0),
    };
    if !scales_fit {
        let accepted = "`deviations`, all above 0, under correlation; ones under covariance";
        return Err(fields.fault("scale", "at odds with `scaling`", accepted));
    }
    let total: f64 = match fitted.scaling {
        Scaling::Correlation => p as f64,
        Scaling::Covariance => deviation.iter().map(|deviation| deviation * deviation).sum(),
    };
    let is_close = |found: f64, wanted: f64| (found - wanted).abs() <= CLOSE * wanted;
    if !is_close(*total_variance, total) {
        let accepted = format!("the sum of the variances of the variables, {total}");
        return Err(fields.fault("total_variance", &total_variance.to_string(), &accepted));
    }
    let sum = variances.sum();
    if !(if fitted.is_complete() { is_close(sum, total) } else { sum <= total * (1.0 + CLOSE) }) {
        let accepted = "numbers whose sum is `total_variance`, or less when some were left out";
        return Err(fields.fault("variances", &format!("a list of sum {sum}"), accepted));
    }
    Ok(())
}
