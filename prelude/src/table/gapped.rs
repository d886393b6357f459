//! A matrix some of whose values are missing, for the methods that can live with that.

use std::fmt;
use std::sync::Arc;

use nalgebra::DMatrix;

use super::matrix::{DataMatrix, check_count, check_labels, check_names};
use super::notes::{LabelSource, MatrixNotes};
use crate::error::{ColumnCount, Error, Result};

/// Numbers with gaps, rows being observations and columns being variables, with their names.
///
/// A missing value is NaN; every other value is finite. Variables have different names, rows have
/// different labels, and no row and no column is without any value. It is a type of its own and
/// is not accepted where a [`DataMatrix`] is wanted, so that no analysis takes a gap for a number:
/// [`complete`](GappedMatrix::complete) turns it into one when nothing is missing, and
/// [`complete_rows`](GappedMatrix::complete_rows) leaves out the rows with gaps. Like a
/// `DataMatrix` it cannot be changed, and a clone costs next to nothing.
#[derive(Clone)]
pub struct GappedMatrix {
    // NaN where a value is missing, else finite.
    values: Arc<DMatrix<f64>>,
    // Unique, one per column.
    variables: Arc<[String]>,
    // Unique, one per row.
    labels: Arc<[String]>,
    label_source: LabelSource,
    // Positive and finite, one per row.
    weights: Option<Arc<[f64]>>,
    notes: Arc<MatrixNotes>,
    // One per column, each below the number of rows.
    n_missing: Arc<[usize]>,
}

impl GappedMatrix {
    /// Joins values, NaN where one is missing, with the names of their columns and the labels of
    /// their rows.
    ///
    /// ```
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::GappedMatrix;
    ///
    /// let x = GappedMatrix::from_values(
    ///     dmatrix![1.0, f64::NAN; 3.0, 5.0; 4.0, 4.0],
    ///     ["length", "width"],
    ///     ["a", "b", "c"],
    /// )?;
    /// assert!(x.is_missing(0, 1) && x.n_missing() == 1);
    /// assert_eq!(x.complete_rows()?.labels(), ["b", "c"]);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::NoRows`], [`Error::NoColumns`], [`Error::ShapeMismatch`] when names and shape
    /// differ, [`Error::DuplicateColumns`], [`Error::RepeatedLabel`]; [`Error::NonFinite`] for an
    /// infinite value; [`Error::AllMissing`] and [`Error::EmptyRows`] for columns and rows without
    /// any value.
    pub fn from_values<V: Into<String>, L: Into<String>>(
        values: DMatrix<f64>,
        variables: impl IntoIterator<Item = V>,
        labels: impl IntoIterator<Item = L>,
    ) -> Result<Self> {
        let variables = variables.into_iter().map(Into::into).collect();
        let labels = labels.into_iter().map(Into::into).collect();
        Self::checked(values, variables, labels, LabelSource::Given, None)
    }

    /// Names the columns `V1`, `V2`, … and labels the rows by their numbers from 1.
    ///
    /// # Errors
    ///
    /// As [`from_values`](GappedMatrix::from_values).
    pub fn from_unnamed(values: DMatrix<f64>) -> Result<Self> {
        let variables = (1..=values.ncols()).map(|place| format!("V{place}")).collect();
        let labels = (1..=values.nrows()).map(|row| row.to_string()).collect();
        Self::checked(values, variables, labels, LabelSource::RowNumbers, None)
    }

    pub(super) fn checked(
        values: DMatrix<f64>,
        variables: Vec<String>,
        labels: Vec<String>,
        label_source: LabelSource,
        notes: Option<MatrixNotes>,
    ) -> Result<Self> {
        if values.ncols() == 0 {
            return Err(Error::NoColumns);
        }
        if values.nrows() == 0 {
            return Err(Error::NoRows);
        }
        check_count("names of columns", values.ncols(), variables.len())?;
        check_count("labels of rows", values.nrows(), labels.len())?;
        check_names(&variables)?;
        check_labels(&labels, &label_source)?;
        check_not_infinite(&values, &variables, &labels)?;
        let n_missing: Arc<[usize]> =
            values.column_iter().map(|c| c.iter().filter(|v| v.is_nan()).count()).collect();
        let empty: Vec<String> = (0..values.ncols())
            .filter(|&column| n_missing[column] == values.nrows())
            .map(|column| variables[column].clone())
            .collect();
        if !empty.is_empty() {
            return Err(Error::AllMissing { columns: empty });
        }
        let notes = notes
            .unwrap_or_else(|| MatrixNotes { n_table_rows: labels.len(), ..Default::default() });
        let matrix = GappedMatrix {
            values: Arc::new(values),
            variables: variables.into(),
            labels: labels.into(),
            label_source,
            weights: None,
            notes: Arc::new(notes),
            n_missing,
        };
        let empty: Vec<String> = matrix
            .missing_by_row()
            .iter()
            .zip(matrix.labels.iter())
            .filter(|(count, _)| **count == matrix.n_cols())
            .map(|(_, label)| label.clone())
            .collect();
        if empty.is_empty() { Ok(matrix) } else { Err(Error::EmptyRows { labels: empty }) }
    }

    pub(super) fn weighted_by(self, weights: Option<Arc<[f64]>>) -> Self {
        GappedMatrix { weights, ..self }
    }

    /// The number of rows, which are observations.
    pub fn n_rows(&self) -> usize {
        self.values.nrows()
    }

    /// The number of columns, which are variables.
    pub fn n_cols(&self) -> usize {
        self.values.ncols()
    }

    /// The names of the columns, from left to right.
    pub fn variables(&self) -> &[String] {
        &self.variables
    }

    /// The labels of the rows, from top to bottom.
    pub fn labels(&self) -> &[String] {
        &self.labels
    }

    /// The numbers alone, NaN where one is missing.
    pub fn values(&self) -> &DMatrix<f64> {
        &self.values
    }

    /// Where the labels come from.
    pub fn label_source(&self) -> &LabelSource {
        &self.label_source
    }

    /// The same rows without weights.
    pub fn without_weights(&self) -> GappedMatrix {
        self.clone().weighted_by(None)
    }

    /// The weights of the rows, in row order; `None` when none were given.
    pub fn weights(&self) -> Option<&[f64]> {
        self.weights.as_deref()
    }

    /// What happened on the way from the table: columns left out, rows dropped.
    pub fn notes(&self) -> &MatrixNotes {
        &self.notes
    }

    /// Whether the value in this row and column, both counted from zero, is missing; false for a
    /// place outside the matrix.
    pub fn is_missing(&self, row_idx: usize, column_idx: usize) -> bool {
        self.values.get((row_idx, column_idx)).is_some_and(|value| value.is_nan())
    }

    /// How many values are missing.
    pub fn n_missing(&self) -> usize {
        self.n_missing.iter().sum()
    }

    /// The share of missing values in all places of the matrix.
    pub fn share_missing(&self) -> f64 {
        self.n_missing() as f64 / self.values.len() as f64
    }

    /// How many values each column misses, in the order of the variables.
    pub fn missing_by_column(&self) -> &[usize] {
        &self.n_missing
    }

    /// How many values each row misses, in row order.
    pub fn missing_by_row(&self) -> Vec<usize> {
        let mut counts = vec![0; self.n_rows()];
        for column in self.values.column_iter() {
            for (count, value) in counts.iter_mut().zip(column.iter()) {
                *count += usize::from(value.is_nan());
            }
        }
        counts
    }

    /// How many rows miss nothing.
    pub fn n_complete_rows(&self) -> usize {
        self.missing_by_row().iter().filter(|count| **count == 0).count()
    }

    /// The same matrix for the analyses that need every value.
    ///
    /// # Errors
    ///
    /// [`Error::MissingValues`] names the columns with gaps and counts them.
    pub fn complete(&self) -> Result<DataMatrix> {
        if self.n_missing() == 0 {
            return self.with_gaps_filled((*self.values).clone());
        }
        Err(Error::MissingValues {
            columns: self.gaps(),
            n_rows: self.n_rows(),
            n_complete: self.n_complete_rows(),
        })
    }

    /// The rows that miss nothing.
    ///
    /// # Errors
    ///
    /// [`Error::NoCompleteRow`] when every row misses something.
    pub fn complete_rows(&self) -> Result<DataMatrix> {
        let counts = self.missing_by_row();
        let rows: Vec<usize> = (0..self.n_rows()).filter(|&row| counts[row] == 0).collect();
        if rows.is_empty() {
            return Err(Error::NoCompleteRow { columns: self.gaps(), n_rows: self.n_rows() });
        }
        let labels = rows.iter().map(|&row| self.labels[row].clone()).collect();
        let complete = DataMatrix::checked(
            self.values.select_rows(&rows),
            self.variables.to_vec(),
            labels,
            self.label_source.clone(),
            Some((*self.notes).clone()),
        )?;
        match &self.weights {
            Some(weights) => complete.with_weights(rows.iter().map(|&row| weights[row])),
            None => Ok(complete),
        }
    }

    /// The same rows, variables and weights with these values, which have no gaps: how an estimate
    /// of the missing values becomes a matrix. Its notes say in which columns, and how many.
    pub(crate) fn with_gaps_filled(&self, values: DMatrix<f64>) -> Result<DataMatrix> {
        let notes = MatrixNotes { estimated: self.gaps(), ..(*self.notes).clone() };
        let filled = DataMatrix::checked(
            values,
            self.variables.to_vec(),
            self.labels.to_vec(),
            self.label_source.clone(),
            Some(notes),
        )?;
        match &self.weights {
            Some(weights) => filled.with_weights(weights.iter().copied()),
            None => Ok(filled),
        }
    }

    /// The columns with gaps, and how many each has.
    fn gaps(&self) -> Vec<ColumnCount> {
        self.variables
            .iter()
            .zip(self.n_missing.iter())
            .filter(|(_, count)| **count > 0)
            .map(|(column, count)| ColumnCount { column: column.clone(), count: *count })
            .collect()
    }
}

impl From<&DataMatrix> for GappedMatrix {
    /// A matrix that happens to have no gaps.
    fn from(x: &DataMatrix) -> Self {
        GappedMatrix {
            values: Arc::new(x.values().clone()),
            variables: x.shared_variables(),
            labels: x.shared_labels(),
            label_source: x.label_source().clone(),
            weights: x.weights().map(Into::into),
            notes: Arc::new(x.notes().clone()),
            n_missing: vec![0; x.n_cols()].into(),
        }
    }
}

impl From<&GappedMatrix> for GappedMatrix {
    /// The same matrix; nothing is copied.
    fn from(x: &GappedMatrix) -> Self {
        x.clone()
    }
}

impl fmt::Debug for GappedMatrix {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let missing = self.n_missing();
        write!(f, "GappedMatrix({} rows x {:?}, {missing} missing)", self.n_rows(), self.variables)
    }
}

fn check_not_infinite(
    values: &DMatrix<f64>,
    variables: &[String],
    labels: &[String],
) -> Result<()> {
    let slice = values.as_slice();
    match slice.iter().position(|value| value.is_infinite()) {
        None => Ok(()),
        Some(place) => {
            let (column, row) = (place / values.nrows(), place % values.nrows());
            Err(Error::NonFinite {
                column: variables[column].clone(),
                row: row + 1,
                label: labels[row].clone(),
                value: slice[place],
                count: slice.iter().filter(|value| value.is_infinite()).count(),
            })
        }
    }
}

#[cfg(test)]
mod tests {
    use nalgebra::dmatrix;

    use super::*;

    const GAP: f64 = f64::NAN;

    fn made(values: DMatrix<f64>) -> Result<GappedMatrix> {
        GappedMatrix::from_values(values, ["length", "width"], ["a", "b", "c"])
    }

    #[test]
    fn gaps_are_counted_by_column_and_by_row() {
        let x = made(dmatrix![1.0, GAP; GAP, 5.0; 4.0, 4.0]).unwrap();
        assert_eq!((x.n_missing(), x.missing_by_column()), (2, &[1, 1][..]));
        assert_eq!((x.missing_by_row(), x.n_complete_rows()), (vec![1, 1, 0], 1));
        assert!(x.is_missing(0, 1) && !x.is_missing(0, 0) && !x.is_missing(9, 9));
        assert_eq!(x.share_missing(), 1.0 / 3.0);
    }

    #[test]
    fn what_is_complete_becomes_a_data_matrix_and_nothing_else_does() {
        let x = made(dmatrix![1.0, GAP; GAP, 5.0; 4.0, 4.0]).unwrap();
        match x.complete() {
            Err(Error::MissingValues { columns, n_rows: 3, n_complete: 1 }) => {
                assert_eq!((columns[1].column.as_str(), columns[1].count), ("width", 1));
            }
            other => panic!("{other:?}"),
        }
        let rows = x.clone().weighted_by(Some([1.0, 2.0, 3.0].into())).complete_rows().unwrap();
        assert_eq!((rows.labels(), rows.weights()), (&["c".to_owned()][..], Some(&[3.0][..])));
        assert!(GappedMatrix::from(&rows).without_weights().weights().is_none());
        let none = made(dmatrix![1.0, GAP; GAP, 5.0; 4.0, GAP]).unwrap();
        assert!(matches!(none.complete_rows(), Err(Error::NoCompleteRow { n_rows: 3, .. })));
        let whole = made(dmatrix![1.0, 2.0; 3.0, 5.0; 4.0, 4.0]).unwrap().complete().unwrap();
        assert_eq!(GappedMatrix::from(&whole).n_missing(), 0);
        assert_eq!(GappedMatrix::from(&whole).complete().unwrap().values(), whole.values());
    }

    #[test]
    fn what_cannot_be_a_matrix_with_gaps_is_named() {
        match made(dmatrix![1.0, GAP; GAP, f64::INFINITY; 4.0, 4.0]) {
            Err(Error::NonFinite { column, row: 2, label, count: 1, .. }) => {
                assert_eq!((column.as_str(), label.as_str()), ("width", "b"));
            }
            other => panic!("{other:?}"),
        }
        match made(dmatrix![1.0, GAP; 2.0, GAP; 4.0, GAP]) {
            Err(Error::AllMissing { columns }) => assert_eq!(columns, ["width"]),
            other => panic!("{other:?}"),
        }
        match made(dmatrix![1.0, 2.0; GAP, GAP; 4.0, GAP]) {
            Err(Error::EmptyRows { labels }) => assert_eq!(labels, ["b"]),
            other => panic!("{other:?}"),
        }
        assert!(matches!(GappedMatrix::from_unnamed(DMatrix::zeros(0, 1)), Err(Error::NoRows)));
        assert!(matches!(GappedMatrix::from_unnamed(DMatrix::zeros(1, 0)), Err(Error::NoColumns)));
        let twice = GappedMatrix::from_values(dmatrix![1.0, GAP], ["a", "a"], ["r"]);
        assert!(matches!(twice, Err(Error::DuplicateColumns { .. })));
    }
}
