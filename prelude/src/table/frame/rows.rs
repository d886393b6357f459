//! Which rows of a table go into the matrix, what they are called, how much they count, and their
//! numbers.

use std::sync::Arc;

use nalgebra::DMatrix;
use polars::prelude::{Column, DataFrame, DataType};

use super::columns::{check_numeric, find, is_text, refuse_mixed};
use crate::error::{ColumnCount, Error, Result};
use crate::table::matrix::check_labels;
use crate::table::notes::{DroppedRow, LabelSource};
use crate::table::options::{Label, MatrixOptions, Missing};

/// A label for every row of the table.
pub(super) struct Labels {
    pub text: Vec<String>,
    pub source: LabelSource,
}

impl Labels {
    pub(super) fn of(table: &DataFrame, options: &MatrixOptions) -> Result<Labels> {
        match &options.label {
            Label::RowNumbers => Ok(Labels::row_numbers(table)),
            Label::Column(name) => Labels::named(find(table, name)?),
            Label::Automatic => {
                let fits = |column: &&Column| {
                    is_text(column)
                        // Whoever asks for a column of text as numbers is to hear that it is text.
                        && !options.asks_for(column.name())
                        && refuse_mixed(column).is_ok()
                        && column.null_count() == 0
                        && matches!(column.n_unique(), Ok(unique) if unique == column.len())
                };
                match table.columns().iter().find(fits) {
                    Some(column) if table.height() > 0 => Labels::named(column),
                    _ => Ok(Labels::row_numbers(table)),
                }
            }
        }
    }

    /// The name of the column that the labels come from.
    pub(super) fn column(&self) -> Option<&str> {
        match &self.source {
            LabelSource::Column(name) => Some(name),
            _ => None,
        }
    }

    fn row_numbers(table: &DataFrame) -> Labels {
        let text = (1..=table.height()).map(|row| row.to_string()).collect();
        Labels { text, source: LabelSource::RowNumbers }
    }

    fn named(column: &Column) -> Result<Labels> {
        let name = column.name().to_string();
        let count = column.null_count();
        let cast = column.cast(&DataType::String)?;
        let mut text = Vec::with_capacity(cast.len());
        for (row, cell) in cast.str()?.iter().enumerate() {
            match cell {
                Some(cell) => text.push(cell.to_owned()),
                None => return Err(Error::MissingLabels { column: name, row: row + 1, count }),
            }
        }
        let source = LabelSource::Column(name);
        // Here, since rows have their numbers in the table only until some are dropped.
        check_labels(&text, &source)?;
        Ok(Labels { text, source })
    }
}

/// Which rows go into the matrix.
pub(super) struct Rows {
    pub kept: Vec<usize>,
    incomplete: Vec<usize>,
}

impl Rows {
    pub(super) fn all(height: usize) -> Rows {
        Rows { kept: (0..height).collect(), incomplete: Vec::new() }
    }

    /// Rows that miss nothing; with others there, what the policy says.
    pub(super) fn complete(columns: &[&Column], height: usize, policy: Missing) -> Result<Rows> {
        let counts: Vec<ColumnCount> = columns
            .iter()
            .filter(|column| column.null_count() > 0)
            .map(|c| ColumnCount { column: c.name().to_string(), count: c.null_count() })
            .collect();
        if counts.is_empty() {
            return Ok(Rows::all(height));
        }
        let mut complete = vec![true; height];
        for column in columns.iter().filter(|column| column.null_count() > 0) {
            for (complete, missing) in complete.iter_mut().zip(column.is_null().iter()) {
                *complete &= missing != Some(true);
            }
        }
        let kept: Vec<usize> = (0..height).filter(|&row| complete[row]).collect();
        let n_complete = kept.len();
        match policy {
            Missing::Refuse => {
                Err(Error::MissingValues { columns: counts, n_rows: height, n_complete })
            }
            Missing::DropRows if n_complete == 0 => {
                Err(Error::NoCompleteRow { columns: counts, n_rows: height })
            }
            Missing::DropRows => {
                Ok(Rows { kept, incomplete: (0..height).filter(|&row| !complete[row]).collect() })
            }
        }
    }

    pub(super) fn dropped(&self, columns: &[&Column], labels: &[String]) -> Vec<DroppedRow> {
        let missing_in = |row: usize| {
            columns
                .iter()
                .filter(|column| column.null_count() > 0 && column.is_null().get(row) == Some(true))
                .map(|column| column.name().to_string())
                .collect()
        };
        self.incomplete
            .iter()
            .map(|&row| DroppedRow {
                row: row + 1,
                label: labels[row].clone(),
                missing_in: missing_in(row),
            })
            .collect()
    }

    /// The weights of the rows that are kept, from a column of the table.
    pub(super) fn weights(&self, column: &Column, labels: &[String]) -> Result<Arc<[f64]>> {
        check_numeric(column)?;
        let name = || column.name().to_string();
        let numbers = column.cast(&DataType::Float64)?;
        let numbers = numbers.f64()?;
        let mut weights = Vec::with_capacity(self.kept.len());
        for &row in &self.kept {
            match numbers.get(row) {
                Some(weight) if weight > 0.0 && weight.is_finite() => weights.push(weight),
                Some(value) => {
                    let (row, label) = (row + 1, labels[row].clone());
                    return Err(Error::BadWeight { column: Some(name()), row, label, value });
                }
                None => {
                    let missing = |row: &&usize| numbers.get(**row).is_none();
                    let count = self.kept.iter().filter(missing).count();
                    return Err(Error::MissingWeights { column: name(), row: row + 1, count });
                }
            }
        }
        Ok(weights.into())
    }

    /// The kept rows of the columns as numbers, NaN where a value is missing.
    pub(super) fn values(&self, columns: &[&Column], labels: &[String]) -> Result<DMatrix<f64>> {
        let mut values: Vec<f64> = Vec::with_capacity(columns.len() * self.kept.len());
        let mut first: Option<(&Column, usize, f64)> = None;
        let mut count = 0;
        for column in columns {
            let numbers = column.cast(&DataType::Float64)?;
            let numbers = numbers.f64()?.rechunk();
            let start = values.len();
            match numbers.cont_slice() {
                Ok(slice) if slice.len() == self.kept.len() => values.extend_from_slice(slice),
                _ => {
                    values
                        .extend(self.kept.iter().map(|&row| numbers.get(row).unwrap_or(f64::NAN)));
                }
            }
            for (value, &row) in values[start..].iter().zip(&self.kept) {
                // A number that is not finite is no missing value: NaN in the table is refused.
                if !value.is_finite() && numbers.get(row).is_some() {
                    count += 1;
                    first.get_or_insert((column, row, *value));
                }
            }
        }
        match first {
            None => Ok(DMatrix::from_vec(self.kept.len(), columns.len(), values)),
            Some((column, row, value)) => Err(Error::NonFinite {
                column: column.name().to_string(),
                row: row + 1,
                label: labels[row].clone(),
                value,
                count,
            }),
        }
    }
}
