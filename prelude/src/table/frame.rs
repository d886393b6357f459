//! The bridge from data frames to matrices; only this module and its neighbours know data frames.

mod columns;
mod rows;

use std::sync::Arc;

use nalgebra::DMatrix;
use polars::prelude::DataFrame;

use self::columns::{Reserved, Variables, find};
use self::rows::{Labels, Rows};
use super::gapped::GappedMatrix;
use super::matrix::DataMatrix;
use super::notes::{LabelSource, MatrixNotes};
use super::options::{MatrixOptions, Missing};
use crate::error::{Error, Result};

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

    /// The columns, labels, weights and treatment of missing values that the options say.
    ///
    /// # Errors
    ///
    /// Those of [`data_matrix_of`](Self::data_matrix_of); [`Error::NoColumnLike`] and
    /// [`Error::NoColumnOfType`] for a pattern or type that fits no column,
    /// [`Error::WantedAndUnwanted`] for a column both asked for and left out;
    /// [`Error::MissingLabels`] and [`Error::RepeatedLabel`] for a chosen label column;
    /// [`Error::BadWeight`] and [`Error::MissingWeights`] for a weight column;
    /// [`Error::NoColumnLeft`] and [`Error::NoCompleteRow`] when every column or row would be
    /// dropped.
    fn data_matrix_with(&self, options: MatrixOptions) -> Result<DataMatrix>;

    /// Every numeric column, in table order, missing values kept as gaps: for the methods that
    /// estimate them or can do without. Otherwise as [`data_matrix`](Self::data_matrix).
    ///
    /// ```
    /// use semiaxis::polars::prelude::*;
    /// use semiaxis::table::FrameToMatrix;
    ///
    /// let table = df! { "length" => [Some(40.1), None], "width" => [20.3, 20.1] }?;
    /// let x = table.gapped_matrix()?;
    /// assert_eq!((x.n_rows(), x.n_missing()), (2, 1));
    /// assert!(x.is_missing(1, 0));
    /// # Ok::<(), Box<dyn std::error::Error>>(())
    /// ```
    ///
    /// # Errors
    ///
    /// Those of [`data_matrix`](Self::data_matrix) but for missing values, and
    /// [`Error::EmptyRows`], which names rows without any value.
    fn gapped_matrix(&self) -> Result<GappedMatrix> {
        self.gapped_matrix_with(MatrixOptions::new())
    }

    /// The columns, labels and weights that the options say, missing values kept as gaps.
    ///
    /// [`Missing::Refuse`] has nothing to say here, since gaps are what was asked for;
    /// [`Missing::DropRows`] still drops the rows that have some.
    ///
    /// # Errors
    ///
    /// Those of [`data_matrix_with`](Self::data_matrix_with) but for missing values, and
    /// [`Error::EmptyRows`].
    fn gapped_matrix_with(&self, options: MatrixOptions) -> Result<GappedMatrix>;
}

impl FrameToMatrix for DataFrame {
    fn data_matrix_with(&self, options: MatrixOptions) -> Result<DataMatrix> {
        let parts = Parts::of(self, &options, false)?;
        let Parts { values, names, labels, label_source, weights, notes } = parts;
        let matrix = DataMatrix::checked(values, names, labels, label_source, Some(notes))?;
        Ok(matrix.weighted_by(weights))
    }

    fn gapped_matrix_with(&self, options: MatrixOptions) -> Result<GappedMatrix> {
        let parts = Parts::of(self, &options, true)?;
        let Parts { values, names, labels, label_source, weights, notes } = parts;
        let matrix = GappedMatrix::checked(values, names, labels, label_source, Some(notes))?;
        Ok(matrix.weighted_by(weights))
    }
}

/// What a matrix is made of.
struct Parts {
    values: DMatrix<f64>,
    names: Vec<String>,
    labels: Vec<String>,
    label_source: LabelSource,
    weights: Option<Arc<[f64]>>,
    notes: MatrixNotes,
}

impl Parts {
    fn of(table: &DataFrame, options: &MatrixOptions, keep_gaps: bool) -> Result<Parts> {
        options.check()?;
        let height = table.height();
        let labels = Labels::of(table, options)?;
        let weights = options.weights.as_deref().map(|name| find(table, name)).transpose()?;
        let reserved = Reserved::of(table, options, labels.column())?;
        let Variables { columns, left_out } = Variables::of(table, options, &reserved)?;
        if height == 0 {
            return Err(Error::NoRows);
        }
        let rows = match options.missing {
            Missing::Refuse if keep_gaps => Rows::all(height),
            policy => Rows::complete(&columns, height, policy)?,
        };
        let values = rows.values(&columns, &labels.text)?;
        let notes = MatrixNotes {
            left_out,
            dropped_rows: rows.dropped(&columns, &labels.text),
            n_table_rows: height,
            weights: options.weights.clone(),
            estimated: Vec::new(),
        };
        Ok(Parts {
            values,
            names: columns.iter().map(|column| column.name().to_string()).collect(),
            weights: weights.map(|column| rows.weights(column, &labels.text)).transpose()?,
            labels: rows.kept.iter().map(|&row| labels.text[row].clone()).collect(),
            label_source: labels.source,
            notes,
        })
    }
}
