//! The bridge from data frames to matrices; only this module and its neighbours know data frames.

use std::collections::HashSet;

use nalgebra::DMatrix;
use polars::prelude::{Column, DataFrame, DataType};

use super::matrix::DataMatrix;
use super::nearest::nearest;
use super::notes::{DroppedRow, LabelSource, LeftOut, LeftOutReason, MatrixNotes};
use super::options::{Label, MatrixOptions, Missing};
use crate::error::{ColumnCount, Error, Result};

/// Data frames that become a [`DataMatrix`].
///
/// ```
/// use semiaxis::polars::prelude::*;
/// use semiaxis::table::{FrameToMatrix, MatrixOptions, Missing};
///
/// let table = df! {
///     "tile" => ["a", "b", "c"],
///     "length" => [Some(40.1), None, Some(39.8)],
///     "width" => [20.3, 20.1, 20.2],
/// }?;
/// assert!(table.data_matrix().is_err());
///
/// let x = table.data_matrix_with(MatrixOptions::new().missing(Missing::DropRows))?;
/// assert_eq!(x.variables(), ["length", "width"]);
/// assert_eq!(x.labels(), ["a", "c"]);
/// assert_eq!(x.notes().dropped_rows[0].label, "b");
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
pub trait FrameToMatrix {
    /// Every numeric column, in table order.
    ///
    /// Rows are labelled by the first column of text (or of categories) that is complete and has
    /// no value twice, else by their numbers from 1. Columns of other types and columns without
    /// any value are passed over and listed in the [notes](DataMatrix::notes). True and false are
    /// not numbers here, nor are dates.
    ///
    /// # Errors
    ///
    /// [`Error::MissingValues`] where a value is missing; [`Error::NonFinite`] where one is
    /// infinite or not a number; [`Error::MixedColumn`] for a column of text most cells of which
    /// are numbers; [`Error::NoNumericColumns`], [`Error::AllMissing`] and [`Error::NoRows`].
    fn data_matrix(&self) -> Result<DataMatrix> {
        self.data_matrix_with(MatrixOptions::new())
    }

    /// These columns, in this order; otherwise as [`data_matrix`](Self::data_matrix).
    ///
    /// # Errors
    ///
    /// Those of [`data_matrix`](Self::data_matrix), and [`Error::UnknownColumn`],
    /// [`Error::RepeatedRequest`] and [`Error::NotNumeric`].
    fn data_matrix_of<S: Into<String>>(
        &self,
        names: impl IntoIterator<Item = S>,
    ) -> Result<DataMatrix> {
        self.data_matrix_with(MatrixOptions::new().columns(names))
    }

    /// The columns, labels and treatment of missing values that the options say.
    ///
    /// # Errors
    ///
    /// Those of [`data_matrix_of`](Self::data_matrix_of); [`Error::MissingLabels`] and
    /// [`Error::RepeatedLabel`] for a chosen label column; [`Error::NoCompleteRow`] when every
    /// row would be dropped.
    fn data_matrix_with(&self, options: MatrixOptions) -> Result<DataMatrix>;
}

impl FrameToMatrix for DataFrame {
    fn data_matrix_with(&self, options: MatrixOptions) -> Result<DataMatrix> {
        let columns: Vec<&Column> = match &options.columns {
            Some(names) => chosen(self, names, &options.label)?,
            None => Vec::new(),
        };
        let labels = Labels::of(self, &options.label, &columns)?;
        let mut left_out = Vec::new();
        let columns = match &options.columns {
            Some(_) => columns,
            None => numeric(self, &labels.source, &mut left_out)?,
        };
        if columns.is_empty() {
            return Err(Error::NoColumns);
        }
        if self.height() == 0 {
            return Err(Error::NoRows);
        }
        let rows = Rows::kept(&columns, self.height(), options.missing)?;
        let values = extract(&columns, &rows.kept, &labels.text)?;
        let dropped_rows = rows.dropped(&columns, &labels.text);
        let names = columns.iter().map(|column| column.name().to_string()).collect();
        let kept_labels = rows.kept.iter().map(|&row| labels.text[row].clone()).collect();
        let notes = MatrixNotes {
            left_out,
            dropped_rows,
            n_table_rows: self.height(),
            estimated: Vec::new(),
        };
        DataMatrix::checked(values, names, kept_labels, labels.source, Some(notes))
    }
}

/// The columns that were asked for by name.
fn chosen<'a>(table: &'a DataFrame, names: &[String], label: &Label) -> Result<Vec<&'a Column>> {
    let mut seen = HashSet::new();
    let mut columns = Vec::with_capacity(names.len());
    for name in names {
        let column = find(table, name)?;
        let labels_rows = matches!(label, Label::Column(label) if label == name);
        if !seen.insert(name) || labels_rows {
            return Err(Error::RepeatedRequest { name: name.clone() });
        }
        if table.height() > 0 && column.null_count() == table.height() {
            return Err(Error::AllMissing { columns: vec![name.clone()] });
        }
        if !is_numeric(column) {
            return Err(not_numeric(column));
        }
        columns.push(column);
    }
    Ok(columns)
}

/// Every numeric column but the label; the others are noted, or refused when they look like
/// numbers gone wrong.
fn numeric<'a>(
    table: &'a DataFrame,
    label: &LabelSource,
    left_out: &mut Vec<LeftOut>,
) -> Result<Vec<&'a Column>> {
    let mut columns = Vec::new();
    for column in table.columns() {
        let reason = if matches!(label, LabelSource::Column(label) if *label == **column.name()) {
            LeftOutReason::Labels
        } else if table.height() > 0 && column.null_count() == table.height() {
            LeftOutReason::Empty
        } else if is_numeric(column) {
            columns.push(column);
            continue;
        } else {
            refuse_mixed(column)?;
            LeftOutReason::NotNumeric(column.dtype().to_string())
        };
        left_out.push(LeftOut { column: column.name().to_string(), reason });
    }
    if columns.is_empty() {
        let empty: Vec<String> = left_out
            .iter()
            .filter(|column| column.reason == LeftOutReason::Empty)
            .map(|column| column.column.clone())
            .collect();
        if !empty.is_empty() {
            return Err(Error::AllMissing { columns: empty });
        }
        let type_of = |column: &Column| (column.name().to_string(), column.dtype().to_string());
        let columns = table.columns().iter().map(type_of).collect();
        return Err(Error::NoNumericColumns { columns });
    }
    Ok(columns)
}

/// Refuses text of which more than half the values are numbers: leaving it out would lose a
/// variable over a few slips.
fn refuse_mixed(column: &Column) -> Result<()> {
    let Ok(text) = column.str() else { return Ok(()) };
    let is_number = |cell: &str| cell.trim().parse::<f64>().is_ok();
    let n_values = text.len() - text.null_count();
    let n_numbers = text.iter().flatten().filter(|cell| is_number(cell)).count();
    if 2 * n_numbers <= n_values {
        return Ok(());
    }
    let example = text
        .iter()
        .enumerate()
        .find_map(|(row, cell)| cell.filter(|cell| !is_number(cell)).map(|c| (c, row + 1)));
    // Text that is numbers throughout comes from a source that said it is text (an identity
    // number, say), and is left out like other text.
    let Some((value, row)) = example else { return Ok(()) };
    Err(Error::MixedColumn {
        column: column.name().to_string(),
        n_numbers,
        n_others: n_values - n_numbers,
        example: (value.to_owned(), row),
    })
}

fn find<'a>(table: &'a DataFrame, name: &str) -> Result<&'a Column> {
    let names = || table.columns().iter().map(|column| column.name().to_string());
    table.columns().iter().find(|column| column.name().as_str() == name).ok_or_else(|| {
        Error::UnknownColumn {
            name: name.to_owned(),
            nearest: nearest(name, names()),
            available: names().collect(),
        }
    })
}

fn is_numeric(column: &Column) -> bool {
    column.dtype().is_primitive_numeric()
}

fn is_text(column: &Column) -> bool {
    matches!(column.dtype(), DataType::String | DataType::Categorical(_, _) | DataType::Enum(_, _))
}

fn not_numeric(column: &Column) -> Error {
    let example = column.str().ok().and_then(|text| {
        text.iter()
            .enumerate()
            .find_map(|(row, cell)| {
                Some((cell?, row + 1)).filter(|c| c.0.trim().parse::<f64>().is_err())
            })
            .map(|(cell, row)| (cell.to_owned(), row))
    });
    Error::NotNumeric {
        column: column.name().to_string(),
        dtype: column.dtype().to_string(),
        example,
    }
}

/// A label for every row of the table.
struct Labels {
    text: Vec<String>,
    source: LabelSource,
}

impl Labels {
    fn of(table: &DataFrame, choice: &Label, variables: &[&Column]) -> Result<Labels> {
        match choice {
            Label::RowNumbers => Ok(Labels::row_numbers(table)),
            Label::Column(name) => Labels::named(find(table, name)?),
            Label::Automatic => {
                let fits = |column: &&Column| {
                    is_text(column)
                        && refuse_mixed(column).is_ok()
                        && column.null_count() == 0
                        && !variables.iter().any(|variable| variable.name() == column.name())
                        && matches!(column.n_unique(), Ok(unique) if unique == column.len())
                };
                match table.columns().iter().find(fits) {
                    Some(column) if table.height() > 0 => Labels::named(column),
                    _ => Ok(Labels::row_numbers(table)),
                }
            }
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
        Ok(Labels { text, source: LabelSource::Column(name) })
    }
}

/// Which rows go into the matrix.
struct Rows {
    kept: Vec<usize>,
    incomplete: Vec<usize>,
}

impl Rows {
    fn kept(columns: &[&Column], height: usize, policy: Missing) -> Result<Rows> {
        let counts: Vec<ColumnCount> = columns
            .iter()
            .filter(|column| column.null_count() > 0)
            .map(|c| ColumnCount { column: c.name().to_string(), count: c.null_count() })
            .collect();
        if counts.is_empty() {
            return Ok(Rows { kept: (0..height).collect(), incomplete: Vec::new() });
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

    fn dropped(&self, columns: &[&Column], labels: &[String]) -> Vec<DroppedRow> {
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
}

/// The kept rows of the columns, as finite numbers.
fn extract(columns: &[&Column], kept: &[usize], labels: &[String]) -> Result<DMatrix<f64>> {
    let mut values: Vec<f64> = Vec::with_capacity(columns.len() * kept.len());
    let mut first: Option<(&Column, usize, f64)> = None;
    let mut count = 0;
    for column in columns {
        let numbers = column.cast(&DataType::Float64)?;
        let numbers = numbers.f64()?.rechunk();
        let start = values.len();
        match numbers.cont_slice() {
            Ok(slice) if slice.len() == kept.len() => values.extend_from_slice(slice),
            // Rows that are kept hold a value in every column.
            _ => values.extend(kept.iter().map(|&row| numbers.get(row).unwrap_or(f64::NAN))),
        }
        for (value, &row) in values[start..].iter().zip(kept) {
            if !value.is_finite() {
                count += 1;
                first.get_or_insert((column, row, *value));
            }
        }
    }
    match first {
        None => Ok(DMatrix::from_vec(kept.len(), columns.len(), values)),
        Some((column, row, value)) => Err(Error::NonFinite {
            column: column.name().to_string(),
            row: row + 1,
            label: labels[row].clone(),
            value,
            count,
        }),
    }
}
