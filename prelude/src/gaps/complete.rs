//! From a table with holes to a completed one.

use nalgebra::DMatrix;
use rand::RngExt;

use super::choose::{choose, fitted_numbers};
use super::fit::{Best, Estimate, best_of_starts, fit_once};
use super::options::{ComponentRule, GapMethod, GapOptions, Settings};
use super::patterns::varies;
use super::result::{Completed, ComponentChoice, EstimatedCell};
use crate::error::{Error, Result};
use crate::repeat::repeat;
use crate::table::{DataMatrix, GappedMatrix};

const METHOD: &str = "the estimation of missing values";

/// Attempts at a resampled table to which components can be fitted, before giving up.
const MOST_ATTEMPTS: usize = 50;

/// Estimates the missing cells of a table from its components.
///
/// Rows are observations, columns are variables; NaN marks a hole. Each hole gets its mean given
/// the observed cells of its row and a standard deviation; observed cells stay as they are. A table
/// without holes comes back as it is. Cells are taken to be missing for reasons that do not depend
/// on what they would have shown.
///
/// ```
/// use semiaxis::gaps::{GapOptions, estimate_missing};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::table::GappedMatrix;
///
/// // Three columns that follow one hidden sequence, with a little of their own.
/// let mut x = DMatrix::from_fn(40, 3, |i, j| {
///     10.0 + (i as f64 * 0.7).sin() + 0.05 * ((i * (j + 3)) as f64 * 1.3).cos()
/// });
/// let lost = x[(7, 1)];
/// x[(7, 1)] = f64::NAN;
/// let x = GappedMatrix::from_unnamed(x)?;
/// let completed = estimate_missing(&x, GapOptions::new().components(1))?;
/// let cell = &completed.cells()[0];
/// assert_eq!((cell.label.as_str(), cell.variable.as_str()), ("8", "V2"));
/// assert!((cell.value - lost).abs() < 3.0 * cell.standard_deviation);
/// assert!(cell.standard_deviation < 0.1);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::TooFewRows`] below three rows, [`Error::TooFewColumns`] below two columns;
/// [`Error::ConstantObserved`] names columns that show one value only;
/// [`Error::ComponentOutOfRange`] unless 1 ≤ k < min(n − 1, p); [`Error::TooFewObserved`] when
/// more would be fitted than was observed; [`Error::NoNoise`] when k components describe the
/// observed cells exactly; [`Error::ScoresUndetermined`] without shrinkage, for a row with fewer
/// observed cells than components; [`Error::WeightsNotCovered`] for rows with weights;
/// [`Error::OptionOutOfRange`].
pub fn estimate_missing(x: &GappedMatrix, options: GapOptions) -> Result<Completed> {
    options.check()?;
    let available = available_components(x, METHOD)?;
    let seed = options.seed_or_drawn();
    let settings = options.settings();
    let choice = match options.chosen_rule() {
        ComponentRule::Given(_) => None,
        rule => Some(choose(x.values(), rule, options.most_tried(available)?, settings, seed)?),
    };
    let n_components = match (options.chosen_rule(), &choice) {
        (ComponentRule::Given(asked), _) if !(1..=available).contains(&asked) => {
            return Err(Error::ComponentOutOfRange { asked, available });
        }
        (ComponentRule::Given(asked), _) => asked,
        (_, choice) => choice.as_ref().map_or(0, ComponentChoice::n_components),
    };
    check_observed(x, n_components, settings.method)?;
    let named = |error| named(error, x);
    // Starts and draws have streams of their own.
    let Best { fit, n_agreeing } =
        best_of_starts(x.values(), n_components, settings, seed.wrapping_add(1)).map_err(named)?;
    let estimates = fit.estimates(x.values()).map_err(named)?;
    let mut values = x.values().clone();
    for estimate in &estimates {
        values[(estimate.row, estimate.column)] = estimate.value;
    }
    Ok(Completed {
        source: x.clone(),
        data: x.with_gaps_filled(values)?,
        cells: estimates.iter().map(|estimate| cell(x, estimate)).collect(),
        draws: draws(x, n_components, settings, options.n_draws(), seed.wrapping_add(2))
            .map_err(named)?,
        method: settings.method,
        scaling: settings.scaling,
        n_components,
        choice,
        status: fit.status,
        tolerance: settings.tolerance,
        noise: fit.noise_in_units(settings.scaling),
        n_starts: settings.random_starts + 1,
        n_agreeing,
        seed,
    })
}

/// The number of components that predicts hidden cells best, without completing the table.
///
/// The rule of the options says how; a rule that gives the number stands for cross-validation in 5
/// parts. Tables without holes are welcome, as `&DataMatrix`.
///
/// ```
/// use semiaxis::gaps::{GapOptions, components_for_gaps};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::table::DataMatrix;
///
/// let x = DMatrix::from_fn(60, 5, |i, j| {
///     (i as f64 * 0.7).sin() + 0.1 * ((i * (j + 3)) as f64 * 1.3).cos()
/// });
/// let x = DataMatrix::from_unnamed(x)?;
/// let choice = components_for_gaps(&x, GapOptions::new().seed(1))?;
/// assert_eq!(choice.n_components(), 1);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// As [`estimate_missing`].
pub fn components_for_gaps(
    x: impl Into<GappedMatrix>,
    options: GapOptions,
) -> Result<ComponentChoice> {
    options.check()?;
    let x = x.into();
    let available = available_components(&x, "the choice of the number of components")?;
    let rule = match options.chosen_rule() {
        ComponentRule::Given(_) => ComponentRule::CrossValidated { folds: 5 },
        rule => rule,
    };
    let most = options.most_tried(available)?;
    choose(x.values(), rule, most, options.settings(), options.seed_or_drawn())
}

/// The largest number of components that leaves noise to estimate, after the checks that every
/// method needs.
pub(super) fn available_components(x: &GappedMatrix, method: &'static str) -> Result<usize> {
    if x.n_rows() < 3 {
        return Err(Error::TooFewRows { method, needed: 3, found: x.n_rows() });
    }
    if x.n_cols() < 2 {
        return Err(Error::TooFewColumns { method, needed: 2, found: x.n_cols() });
    }
    if x.weights().is_some() {
        return Err(Error::WeightsNotCovered { method });
    }
    let mut constant = Vec::new();
    for (column, name) in x.values().column_iter().zip(x.variables()) {
        if !varies(column.iter().copied()) {
            let mut seen = column.iter().copied().filter(|value| !value.is_nan());
            let count = seen.clone().count();
            constant.push((name.clone(), seen.next().unwrap_or(f64::NAN), count));
        }
    }
    if !constant.is_empty() {
        return Err(Error::ConstantObserved { columns: constant });
    }
    Ok((x.n_rows() - 1).min(x.n_cols()) - 1)
}

/// Refuses more components than the observed cells can tell.
pub(super) fn check_observed(x: &GappedMatrix, k: usize, method: GapMethod) -> Result<()> {
    let (n, p) = (x.n_rows(), x.n_cols());
    let needed = match method {
        // Means, loadings up to a rotation, and the noise.
        GapMethod::Probabilistic => p + p * k - k * k.saturating_sub(1) / 2 + 1,
        GapMethod::Shrunken | GapMethod::LeastSquares => fitted_numbers(n, p, k) + 1,
    };
    let found = n * p - x.n_missing();
    if found < needed {
        return Err(Error::TooFewObserved { n_components: k, found, needed });
    }
    if method == GapMethod::LeastSquares {
        let bare = x.missing_by_row().iter().position(|missing| p - missing < k);
        if let Some(row) = bare {
            return Err(Error::ScoresUndetermined {
                row: row + 1,
                label: x.labels()[row].clone(),
                n_observed: p - x.missing_by_row()[row],
                n_components: k,
            });
        }
    }
    Ok(())
}

/// Gives the row of an error its label.
pub(super) fn named(error: Error, x: &GappedMatrix) -> Error {
    match error {
        Error::ScoresUndetermined { row, n_observed, n_components, label } => {
            let label = x.labels().get(row.wrapping_sub(1)).cloned().unwrap_or(label);
            Error::ScoresUndetermined { row, label, n_observed, n_components }
        }
        error => error,
    }
}

pub(super) fn cell(x: &GappedMatrix, estimate: &Estimate) -> EstimatedCell {
    EstimatedCell {
        row_idx: estimate.row,
        column_idx: estimate.column,
        label: x.labels()[estimate.row].clone(),
        variable: x.variables()[estimate.column].clone(),
        value: estimate.value,
        standard_deviation: estimate.deviation,
    }
}

/// Completed tables that differ by all that is unknown about the holes.
fn draws(
    x: &GappedMatrix,
    n_components: usize,
    settings: &Settings,
    n_draws: usize,
    seed: u64,
) -> Result<Vec<DataMatrix>> {
    let values = x.values();
    let drawn: Vec<DMatrix<f64>> = repeat(
        "drawing completed tables",
        n_draws,
        seed,
        || (),
        |(), generator, _| {
            let n = values.nrows();
            let mut attempt = 1;
            loop {
                let rows: Vec<usize> = (0..n).map(|_| generator.random_range(0..n)).collect();
                let resampled = values.select_rows(&rows);
                // Rows drawn twice can leave a column without variation, or no noise.
                let sound = resampled.column_iter().all(|column| varies(column.iter().copied()));
                let drawn = if sound {
                    fit_once(&resampled, n_components, settings, None)
                        .and_then(|fit| fit.draw(values, generator))
                } else {
                    Err(Error::NoNoise { n_components })
                };
                match drawn {
                    Ok(drawn) => return Ok(drawn),
                    Err(Error::Interrupted) => return Err(Error::Interrupted),
                    Err(error) if attempt == MOST_ATTEMPTS => return Err(error),
                    Err(_) => attempt += 1,
                }
            }
        },
    )?;
    drawn.into_iter().map(|values| x.with_gaps_filled(values)).collect()
}
