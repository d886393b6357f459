//! Fitting a transformation to the rows of a matrix.

use super::options::{Transform, Wanted};
use super::power::{estimate, weighted_mean};
use super::result::{Exponent, Formula, Linear, Transformation};
use crate::error::{Error, Result};
use crate::quantile::median;
use crate::repeat::repeat;
use crate::table::DataMatrix;

/// What makes the median absolute deviation of normal values estimate their standard deviation:
/// 1 / Φ⁻¹(¾) = 1.4826 to the digits in common use (common practice, no source).
const NORMAL_DEVIATION: f64 = 1.4826;

impl Transform {
    /// The transformation with the numbers that these rows give, without applying it.
    ///
    /// ```
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    /// use semiaxis::transform::{Formula, Transform};
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0; 2.0; 6.0])?;
    /// let fitted = Transform::centre().fit(&x)?;
    /// let Formula::Linear { middles, .. } = fitted.formula() else { unreachable!() };
    /// assert_eq!(middles, &[3.0]);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// As [`DataMatrix::transformed`].
    pub fn fit(&self, x: &DataMatrix) -> Result<Transformation> {
        self.check()?;
        let columns = match &self.columns {
            Some(names) => names.clone(),
            None => x.variables().to_vec(),
        };
        // Checks that the names exist, and that none stands there twice.
        let chosen = x.select(&columns)?;
        let mut fitted = Transformation { columns: columns.into(), formula: Formula::Log };
        fitted.formula = match self.wanted {
            Wanted::Log => Formula::Log,
            Wanted::Log10 => Formula::Log10,
            Wanted::LogPlus(constant) => Formula::LogPlus { constant },
            Wanted::SquareRoot => Formula::SquareRoot,
            Wanted::CentredLogRatio => log_ratio(&chosen)?,
            Wanted::BoxCox(value) => Formula::BoxCox {
                exponents: vec![Exponent { value, estimate: None }; chosen.n_cols()],
            },
            Wanted::BoxCoxBetween(least, most) => {
                // Every value must have a logarithm.
                let power = vec![Exponent { value: 0.0, estimate: None }; chosen.n_cols()];
                fitted.formula = Formula::BoxCox { exponents: power };
                fitted.applied(&chosen)?;
                exponents(&chosen, (least, most))?
            }
            Wanted::Centre => linear(&chosen, Linear::Centred)?,
            Wanted::Standardise => linear(&chosen, Linear::Standardised)?,
            Wanted::StandardiseRobustly => linear(&chosen, Linear::RobustlyStandardised)?,
            Wanted::UnitRange => linear(&chosen, Linear::UnitRange)?,
        };
        Ok(fitted)
    }
}

fn log_ratio(x: &DataMatrix) -> Result<Formula> {
    if x.n_cols() < 2 {
        let method = "the centred log-ratio";
        return Err(Error::TooFewColumns { method, needed: 2, found: x.n_cols() });
    }
    let totals: Vec<f64> = x.values().row_iter().map(|row| row.sum()).collect();
    let total = totals.iter().sum::<f64>() / totals.len() as f64;
    let closed = totals.iter().all(|each| ((each - total) / total).abs() <= 1e-6);
    Ok(Formula::CentredLogRatio { total: if closed { total } else { 1.0 }, closed })
}

fn exponents(x: &DataMatrix, bounds: (f64, f64)) -> Result<Formula> {
    if x.n_rows() < 3 {
        let method = "the estimate of an exponent";
        return Err(Error::TooFewRows { method, needed: 3, found: x.n_rows() });
    }
    refuse_constant(x, "spread")?;
    let weights = x.relative_weights();
    // Nothing is drawn at random: the loop is there for its progress and its threads.
    let exponents = repeat(
        "exponents",
        x.n_cols(),
        0,
        || (),
        |(), _, j| {
            let (value, estimate) = estimate(column(x, j), weights.as_deref(), bounds)?;
            Ok(Exponent { value, estimate: Some(estimate) })
        },
    )?;
    Ok(Formula::BoxCox { exponents })
}

fn linear(x: &DataMatrix, kind: Linear) -> Result<Formula> {
    let weights = x.relative_weights();
    let weights = weights.as_deref();
    let columns = || (0..x.n_cols()).map(|j| column(x, j));
    let means = || columns().map(|values| mean(values, weights)).collect::<Vec<f64>>();
    let (middles, spreads, measure): (Vec<f64>, Vec<f64>, &'static str) = match kind {
        Linear::Centred => (means(), vec![1.0; x.n_cols()], "spread"),
        Linear::Standardised => {
            refuse_constant(x, "standard deviation")?;
            let middles = means();
            let spreads =
                columns().zip(&middles).map(|(v, mean)| deviation(v, *mean, weights)).collect();
            (middles, spreads, "standard deviation")
        }
        Linear::RobustlyStandardised => {
            let middles: Vec<f64> = columns().map(|values| median(values.to_vec())).collect();
            let far = |(values, middle): (&[f64], &f64)| {
                let distances = values.iter().map(|value| (value - middle).abs()).collect();
                NORMAL_DEVIATION * median(distances)
            };
            let spreads = columns().zip(&middles).map(far).collect();
            (middles, spreads, "median absolute deviation")
        }
        Linear::UnitRange => {
            let least = |values: &[f64]| values.iter().fold(f64::INFINITY, |a, b| a.min(*b));
            let most = |values: &[f64]| values.iter().fold(f64::NEG_INFINITY, |a, b| a.max(*b));
            let spreads = columns().map(|values| most(values) - least(values)).collect();
            (columns().map(least).collect(), spreads, "range")
        }
    };
    let flat: Vec<(String, f64)> = (0..x.n_cols())
        .filter(|&j| spreads[j] <= 0.0 || !spreads[j].is_finite())
        .map(|j| (x.variables()[j].clone(), middles[j]))
        .collect();
    if flat.is_empty() {
        Ok(Formula::Linear { kind, middles, spreads })
    } else {
        Err(Error::NoSpread { columns: flat, measure })
    }
}

/// Rounding can leave a column that holds one value throughout with a tiny standard deviation.
fn refuse_constant(x: &DataMatrix, measure: &'static str) -> Result<()> {
    let flat: Vec<(String, f64)> = (0..x.n_cols())
        .filter(|&j| column(x, j).iter().all(|value| *value == x.values()[(0, j)]))
        .map(|j| (x.variables()[j].clone(), x.values()[(0, j)]))
        .collect();
    if flat.is_empty() { Ok(()) } else { Err(Error::NoSpread { columns: flat, measure }) }
}

fn column(x: &DataMatrix, j: usize) -> &[f64] {
    &x.values().as_slice()[j * x.n_rows()..(j + 1) * x.n_rows()]
}

/// The mean, the rounding error of the sum taken off in a second pass.
fn mean(values: &[f64], weights: Option<&[f64]>) -> f64 {
    let first = weighted_mean(values, weights);
    let rest: Vec<f64> = values.iter().map(|value| value - first).collect();
    first + weighted_mean(&rest, weights)
}

/// The standard deviation with divisor n − 1, weights summing to n. Squares are taken of shares of
/// the largest distance, so that none overflows.
fn deviation(values: &[f64], mean: f64, weights: Option<&[f64]>) -> f64 {
    let reach = values.iter().fold(0.0, |reach: f64, value| reach.max((value - mean).abs()));
    let squares: Vec<f64> = values.iter().map(|value| ((value - mean) / reach).powi(2)).collect();
    let n = values.len() as f64;
    reach * (weighted_mean(&squares, weights) * n / (n - 1.0)).sqrt()
}
