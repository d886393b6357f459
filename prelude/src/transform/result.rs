//! A transformation that was fitted to the rows of a matrix, and what can be done with it.

use std::fmt;
use std::sync::Arc;

use nalgebra::DMatrix;

use super::power::{ExponentEstimate, power};
use crate::error::{Error, Result};
use crate::table::DataMatrix;

/// A fitted transformation: its columns by name, and the numbers it was fitted with.
///
/// [`DataMatrix::transformed`] makes one and keeps it with the matrix; it can be
/// [applied](Transformation::apply) to other rows and [undone](Transformation::undo).
#[derive(Debug, Clone, PartialEq)]
pub struct Transformation {
    // At least one, all different.
    pub(super) columns: Arc<[String]>,
    // What it holds by column has one entry for each.
    pub(super) formula: Formula,
}

/// What a transformation does to a value x, with the numbers it was fitted with; those of single
/// columns stand in the order of [`Transformation::columns`].
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum Formula {
    /// ln x.
    Log,
    /// The logarithm of x to base ten.
    Log10,
    /// ln(x + c).
    LogPlus {
        /// The constant c.
        constant: f64,
    },
    /// √x.
    SquareRoot,
    /// ln x less the mean of the logarithms of the row's parts.
    CentredLogRatio {
        /// The total of each row's parts when it is the same for all, else 1: what undoing
        /// brings rows to.
        total: f64,
        /// Whether all rows had that total, to a relative 10⁻⁶.
        closed: bool,
    },
    /// (x^λ − 1) / λ, or ln x for λ = 0.
    BoxCox {
        /// The exponent λ of each column.
        exponents: Vec<Exponent>,
    },
    /// (x − middle) / spread.
    Linear {
        /// What middle and spread are.
        kind: Linear,
        /// The middle of each column.
        middles: Vec<f64>,
        /// The spread of each column, above zero.
        spreads: Vec<f64>,
    },
}

/// What a linear transformation takes for the middle and the spread of a column.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum Linear {
    /// The mean, and one.
    Centred,
    /// The mean, and the standard deviation with divisor n − 1.
    Standardised,
    /// The median, and 1.4826 times the median absolute deviation from it.
    RobustlyStandardised,
    /// The least value, and the largest less the least.
    UnitRange,
}

/// An exponent of Box and Cox for one column.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Exponent {
    /// The exponent λ.
    pub value: f64,
    /// How it was estimated; `None` when it was given.
    pub estimate: Option<ExponentEstimate>,
}

impl Transformation {
    /// The columns that it transforms.
    pub fn columns(&self) -> &[String] {
        &self.columns
    }

    /// What it does, with the numbers it was fitted with.
    pub fn formula(&self) -> &Formula {
        &self.formula
    }

    /// Its name and, where one number says it all, that number.
    pub fn name(&self) -> String {
        match &self.formula {
            Formula::Log => "natural logarithm".to_owned(),
            Formula::Log10 => "logarithm to base 10".to_owned(),
            Formula::LogPlus { constant } if *constant < 0.0 => format!("ln(x − {})", -constant),
            Formula::LogPlus { constant } => format!("ln(x + {constant})"),
            Formula::SquareRoot => "square root".to_owned(),
            Formula::CentredLogRatio { .. } => "centred log-ratio".to_owned(),
            Formula::BoxCox { .. } => "Box–Cox power".to_owned(),
            Formula::Linear { kind, .. } => match kind {
                Linear::Centred => "centring",
                Linear::Standardised => "standardising",
                Linear::RobustlyStandardised => "robust standardising",
                Linear::UnitRange => "scaling to 0–1",
            }
            .to_owned(),
        }
    }

    /// Repeats the transformation on other rows, with the numbers it was fitted with before.
    /// Columns are found by name; those that it does not know stay as they are.
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`] names columns that the rows lack; [`Error::OutsideDomain`] names
    /// the first value that cannot be transformed.
    pub fn apply(&self, x: &DataMatrix) -> Result<DataMatrix> {
        let values = self.applied(x)?;
        let mut chain = x.transformations().to_vec();
        chain.push(self.clone());
        x.in_other_units(values, chain.into())
    }

    /// Brings rows back to the units from before the transformation: the rows it was applied to,
    /// or others in the same units, such as a reconstruction.
    ///
    /// Where the transformation is the last that the matrix remembers, it is forgotten there.
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`] names columns that the rows lack; [`Error::OutsideDomain`] names
    /// the first value that no untransformed value leads to; [`Error::TransformationsDiffer`] when
    /// the matrix remembers that something else was done last.
    pub fn undo(&self, x: &DataMatrix) -> Result<DataMatrix> {
        let chain = match x.transformations() {
            [] => &[],
            [earlier @ .., last] if last == self => earlier,
            [.., last] => {
                return Err(Error::TransformationsDiffer {
                    wanted: vec![self.to_string()],
                    found: vec![last.to_string()],
                });
            }
        };
        let chain = chain.into();
        x.in_other_units(self.undone(x)?, chain)
    }

    pub(super) fn applied(&self, x: &DataMatrix) -> Result<DMatrix<f64>> {
        let places = places(&self.columns, x)?;
        if let Formula::CentredLogRatio { .. } = self.formula {
            return self.log_ratios(x, &places);
        }
        let accepted = self.domain();
        self.each_value(x, &places, "the transformation", &accepted, |j, value| {
            self.forward(j, value)
        })
    }

    fn undone(&self, x: &DataMatrix) -> Result<DMatrix<f64>> {
        let places = places(&self.columns, x)?;
        if let Formula::CentredLogRatio { total, .. } = self.formula {
            return Ok(parts(x, &places, total));
        }
        let accepted = |j: usize| self.range(j);
        self.each_value(x, &places, "undoing the transformation", &accepted, |j, value| {
            self.backward(j, value)
        })
    }

    /// Every value of the columns through a function, which answers with what is not finite when
    /// it has no answer.
    fn each_value(
        &self,
        x: &DataMatrix,
        places: &[usize],
        action: &'static str,
        accepted: &dyn Fn(usize) -> String,
        function: impl Fn(usize, f64) -> f64,
    ) -> Result<DMatrix<f64>> {
        let mut values = x.values().clone();
        for (j, &place) in places.iter().enumerate() {
            for (row, value) in values.column_mut(place).iter_mut().enumerate() {
                let before = *value;
                *value = function(j, before);
                if !value.is_finite() {
                    return Err(Error::OutsideDomain {
                        action: format!("{action} ({})", self.name()),
                        column: self.columns[j].clone(),
                        row: row + 1,
                        label: x.labels()[row].clone(),
                        value: before,
                        accepted: accepted(j),
                    });
                }
            }
        }
        Ok(values)
    }

    fn forward(&self, j: usize, x: f64) -> f64 {
        match &self.formula {
            Formula::Log => x.ln(),
            Formula::Log10 => x.log10(),
            Formula::LogPlus { constant } => (x + constant).ln(),
            Formula::SquareRoot => x.sqrt(),
            Formula::BoxCox { exponents } if x > 0.0 => power(exponents[j].value, x.ln()),
            Formula::BoxCox { .. } => f64::NAN,
            Formula::Linear { middles, spreads, .. } => (x - middles[j]) / spreads[j],
            // Needs a whole row.
            Formula::CentredLogRatio { .. } => f64::NAN,
        }
    }

    fn backward(&self, j: usize, y: f64) -> f64 {
        match &self.formula {
            Formula::Log => y.exp(),
            Formula::Log10 => 10_f64.powf(y),
            Formula::LogPlus { constant } => y.exp() - constant,
            Formula::SquareRoot if y >= 0.0 => y * y,
            Formula::SquareRoot => f64::NAN,
            Formula::BoxCox { exponents } => match exponents[j].value {
                0.0 => y.exp(),
                // NaN where λy + 1 is negative.
                exponent => ((exponent * y).ln_1p() / exponent).exp(),
            },
            Formula::Linear { middles, spreads, .. } => middles[j] + spreads[j] * y,
            Formula::CentredLogRatio { .. } => f64::NAN,
        }
    }

    /// What can be transformed, in words.
    fn domain(&self) -> impl Fn(usize) -> String + '_ {
        |_| match &self.formula {
            Formula::Log | Formula::Log10 | Formula::CentredLogRatio { .. } => {
                "numbers above 0".to_owned()
            }
            Formula::LogPlus { constant } => format!("numbers above {}", 0.0 - constant),
            Formula::SquareRoot => "numbers not below 0".to_owned(),
            Formula::BoxCox { .. } => "numbers above 0 whose power is not too large".to_owned(),
            Formula::Linear { .. } => "numbers far below the largest a double holds".to_owned(),
        }
    }

    /// What can be brought back, in words.
    fn range(&self, j: usize) -> String {
        match &self.formula {
            Formula::SquareRoot => "numbers not below 0".to_owned(),
            Formula::BoxCox { exponents } => match exponents[j].value {
                exponent if exponent > 0.0 => format!("numbers above {}", -1.0 / exponent),
                exponent if exponent < 0.0 => format!("numbers below {}", -1.0 / exponent),
                _ => "numbers whose exponential is not too large".to_owned(),
            },
            _ => "numbers whose original is not too large".to_owned(),
        }
    }

    fn log_ratios(&self, x: &DataMatrix, places: &[usize]) -> Result<DMatrix<f64>> {
        let logs = Transformation { columns: self.columns.clone(), formula: Formula::Log };
        let mut values = logs.applied(x)?;
        for mut row in values.row_iter_mut() {
            let mean = places.iter().map(|&j| row[j]).sum::<f64>() / places.len() as f64;
            for &j in places {
                row[j] -= mean;
            }
        }
        Ok(values)
    }

    /// The same for the columns that are still there; `None` when none is. Log-ratios stay whole,
    /// since every part has a share in each of them.
    pub(crate) fn restricted_to(&self, columns: &[String]) -> Option<Transformation> {
        let there: std::collections::HashSet<&String> = columns.iter().collect();
        let kept: Vec<usize> =
            (0..self.columns.len()).filter(|&j| there.contains(&self.columns[j])).collect();
        if kept.is_empty() {
            return None;
        }
        let of = |numbers: &[f64]| kept.iter().map(|&j| numbers[j]).collect();
        let formula = match &self.formula {
            Formula::CentredLogRatio { .. } => return Some(self.clone()),
            Formula::BoxCox { exponents } => {
                Formula::BoxCox { exponents: kept.iter().map(|&j| exponents[j]).collect() }
            }
            Formula::Linear { kind, middles, spreads } => {
                Formula::Linear { kind: *kind, middles: of(middles), spreads: of(spreads) }
            }
            other => other.clone(),
        };
        let columns = kept.iter().map(|&j| self.columns[j].clone()).collect();
        Some(Transformation { columns, formula })
    }
}

impl fmt::Display for Transformation {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        const SHOWN: usize = 6;
        let shown: Vec<&str> = self.columns.iter().take(SHOWN).map(String::as_str).collect();
        write!(f, "{} of {}", self.name(), shown.join(", "))?;
        match self.columns.len().saturating_sub(SHOWN) {
            0 => Ok(()),
            more => write!(f, " and {more} more"),
        }
    }
}

/// Where the columns stand in a matrix.
pub(super) fn places(columns: &[String], x: &DataMatrix) -> Result<Vec<usize>> {
    let place_of: std::collections::HashMap<&str, usize> =
        x.variables().iter().enumerate().map(|(place, name)| (name.as_str(), place)).collect();
    let missing: Vec<String> =
        columns.iter().filter(|name| !place_of.contains_key(name.as_str())).cloned().collect();
    if missing.is_empty() {
        Ok(columns.iter().map(|name| place_of[name.as_str()]).collect())
    } else {
        Err(Error::VariablesDiffer { missing, extra: Vec::new(), order: None })
    }
}

/// The parts of the total whose centred log-ratios the rows hold.
fn parts(x: &DataMatrix, places: &[usize], total: f64) -> DMatrix<f64> {
    let mut values = x.values().clone();
    for mut row in values.row_iter_mut() {
        // Taken off first, so that no exponential overflows.
        let largest = places.iter().fold(f64::NEG_INFINITY, |largest, &j| largest.max(row[j]));
        let sum: f64 = places.iter().map(|&j| (row[j] - largest).exp()).sum();
        for &j in places {
            row[j] = total * (row[j] - largest).exp() / sum;
        }
    }
    values
}
