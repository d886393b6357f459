//! The matrix that analyses start from: finite numbers with named columns and labelled rows.

use std::collections::HashMap;
use std::fmt;
use std::sync::Arc;

use nalgebra::DMatrix;

use super::nearest::nearest;
use super::notes::{LabelSource, MatrixNotes};
use crate::error::{ColumnCount, Error, Result};
use crate::transform::Transformation;

/// Finite numbers, rows being observations and columns being variables, with their names.
///
/// Every value is finite, variables have different names and rows different labels; whoever
/// holds a `DataMatrix` need not check that again. It cannot be changed, so that analyses share
/// its values instead of copying them, and a clone costs next to nothing.
#[derive(Clone)]
pub struct DataMatrix {
    values: Arc<DMatrix<f64>>,
    // Unique, one per column.
    variables: Arc<[String]>,
    // Unique, one per row.
    labels: Arc<[String]>,
    label_source: LabelSource,
    // Positive and finite, one per row; see `weights.rs`.
    weights: Option<Arc<[f64]>>,
    notes: Arc<MatrixNotes>,
    // What the values went through, in order.
    transformations: Arc<[Transformation]>,
}

impl DataMatrix {
    /// Joins values with the names of their columns and the labels of their rows.
    ///
    /// ```
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_values(
    ///     dmatrix![1.0, 2.0; 3.0, 5.0; 4.0, 4.0],
    ///     ["length", "width"],
    ///     ["a", "b", "c"],
    /// )?;
    /// assert_eq!((x.n_rows(), x.n_cols()), (3, 2));
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::NoRows`], [`Error::NoColumns`], [`Error::ShapeMismatch`] when names and shape
    /// differ, [`Error::DuplicateColumns`], [`Error::RepeatedLabel`], and [`Error::NonFinite`],
    /// which names the first value at fault.
    pub fn from_values<V: Into<String>, L: Into<String>>(
        values: DMatrix<f64>,
        variables: impl IntoIterator<Item = V>,
        labels: impl IntoIterator<Item = L>,
    ) -> Result<Self> {
        Self::checked(
            values,
            variables.into_iter().map(Into::into).collect(),
            labels.into_iter().map(Into::into).collect(),
            LabelSource::Given,
            None,
        )
    }

    /// Names the columns `V1`, `V2`, … and labels the rows by their numbers from 1.
    ///
    /// # Errors
    ///
    /// As [`from_values`](DataMatrix::from_values).
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
        let notes = notes
            .unwrap_or_else(|| MatrixNotes { n_table_rows: labels.len(), ..Default::default() });
        let matrix = DataMatrix {
            values: Arc::new(values),
            variables: variables.into(),
            labels: labels.into(),
            label_source,
            weights: None,
            notes: Arc::new(notes),
            transformations: Arc::new([]),
        };
        matrix.check_finite()?;
        Ok(matrix)
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

    /// The numbers alone.
    pub fn values(&self) -> &DMatrix<f64> {
        &self.values
    }

    /// Where the labels come from.
    pub fn label_source(&self) -> &LabelSource {
        &self.label_source
    }

    /// What happened on the way from the table: columns left out, rows dropped.
    pub fn notes(&self) -> &MatrixNotes {
        &self.notes
    }

    /// The transformations that the values went through, in order; none when they are as they were
    /// in the table.
    pub fn transformations(&self) -> &[Transformation] {
        &self.transformations
    }

    /// The values of one variable, in row order.
    ///
    /// # Errors
    ///
    /// [`Error::UnknownColumn`] with the nearest name.
    pub fn variable(&self, name: &str) -> Result<&[f64]> {
        let column = self.column_of(name)?;
        let n_rows = self.n_rows();
        Ok(&self.values.as_slice()[column * n_rows..(column + 1) * n_rows])
    }

    /// The values of one row, in the order of the variables.
    ///
    /// # Errors
    ///
    /// [`Error::UnknownLabel`] with the nearest label.
    pub fn row(&self, label: &str) -> Result<Vec<f64>> {
        let row = self.row_of(label)?;
        Ok(self.values.row(row).iter().copied().collect())
    }

    /// The same rows with these variables only, in this order.
    ///
    /// # Errors
    ///
    /// [`Error::UnknownColumn`], [`Error::RepeatedRequest`], or [`Error::NoColumns`] when no name
    /// is given.
    pub fn select<S: AsRef<str>>(&self, names: impl IntoIterator<Item = S>) -> Result<DataMatrix> {
        let mut places = Vec::new();
        for name in names {
            let place = self.column_of(name.as_ref())?;
            if places.contains(&place) {
                return Err(Error::RepeatedRequest { name: name.as_ref().to_owned() });
            }
            places.push(place);
        }
        if places.is_empty() {
            return Err(Error::NoColumns);
        }
        let variables: Arc<[String]> =
            places.iter().map(|&place| self.variables[place].clone()).collect();
        Ok(DataMatrix {
            values: Arc::new(self.values.select_columns(&places)),
            transformations: self
                .transformations
                .iter()
                .filter_map(|transformation| transformation.restricted_to(&variables))
                .collect(),
            variables,
            ..self.clone()
        })
    }

    /// The same variables with these rows only, in this order.
    ///
    /// # Errors
    ///
    /// [`Error::UnknownLabel`], [`Error::RepeatedRequest`], or [`Error::NoRows`] when no label is
    /// given.
    pub fn select_rows<S: AsRef<str>>(
        &self,
        labels: impl IntoIterator<Item = S>,
    ) -> Result<DataMatrix> {
        let place_of: HashMap<&str, usize> =
            self.labels.iter().enumerate().map(|(row, label)| (label.as_str(), row)).collect();
        let mut taken = vec![false; self.n_rows()];
        let mut rows = Vec::new();
        for label in labels {
            let label = label.as_ref();
            let row = *place_of.get(label).ok_or_else(|| self.unknown_label(label))?;
            if std::mem::replace(&mut taken[row], true) {
                return Err(Error::RepeatedRequest { name: label.to_owned() });
            }
            rows.push(row);
        }
        self.take_rows(&rows)
    }

    /// The rows whose label the predicate accepts, in their order.
    ///
    /// ```
    /// # use semiaxis::nalgebra::dmatrix;
    /// # use semiaxis::table::DataMatrix;
    /// # let x = DataMatrix::from_values(
    /// #     dmatrix![1.0, 2.0; 3.0, 5.0; 4.0, 4.0], ["length", "width"], ["a1", "a2", "b1"])?;
    /// let kiln_a = x.rows_where(|label| label.starts_with('a'))?;
    /// assert_eq!(kiln_a.n_rows(), 2);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::NoRows`] when it accepts none.
    pub fn rows_where(&self, mut keep: impl FnMut(&str) -> bool) -> Result<DataMatrix> {
        let rows: Vec<usize> =
            (0..self.n_rows()).filter(|&row| keep(self.labels[row].as_str())).collect();
        self.take_rows(&rows)
    }

    /// The same rows and variables with other labels.
    ///
    /// # Errors
    ///
    /// [`Error::ShapeMismatch`] and [`Error::RepeatedLabel`].
    pub fn with_labels<L: Into<String>>(
        &self,
        labels: impl IntoIterator<Item = L>,
    ) -> Result<DataMatrix> {
        let labels: Vec<String> = labels.into_iter().map(Into::into).collect();
        check_count("labels of rows", self.n_rows(), labels.len())?;
        check_labels(&labels, &LabelSource::Given)?;
        Ok(DataMatrix { labels: labels.into(), label_source: LabelSource::Given, ..self.clone() })
    }

    /// The same rows and variables, with their weights, notes and transformations, and other
    /// values: a description of these rows in the same units, such as a reconstruction.
    ///
    /// # Errors
    ///
    /// [`Error::ShapeMismatch`] and [`Error::NonFinite`].
    pub fn with_values(&self, values: DMatrix<f64>) -> Result<DataMatrix> {
        check_count("rows", self.n_rows(), values.nrows())?;
        check_count("columns", self.n_cols(), values.ncols())?;
        let matrix = DataMatrix { values: Arc::new(values), ..self.clone() };
        matrix.check_finite()?;
        Ok(matrix)
    }

    /// As [`with_values`](Self::with_values), the values having gone through this chain.
    pub(crate) fn in_other_units(
        &self,
        values: DMatrix<f64>,
        transformations: Arc<[Transformation]>,
    ) -> Result<DataMatrix> {
        Ok(DataMatrix { transformations, ..self.with_values(values)? })
    }

    pub(crate) fn shared_variables(&self) -> Arc<[String]> {
        self.variables.clone()
    }

    pub(crate) fn shared_labels(&self) -> Arc<[String]> {
        self.labels.clone()
    }

    pub(super) fn row_weights(&self) -> &Option<Arc<[f64]>> {
        &self.weights
    }

    pub(super) fn weighted_by(&self, weights: Option<Arc<[f64]>>) -> DataMatrix {
        DataMatrix { weights, ..self.clone() }
    }

    fn take_rows(&self, rows: &[usize]) -> Result<DataMatrix> {
        if rows.is_empty() {
            return Err(Error::NoRows);
        }
        Ok(DataMatrix {
            values: Arc::new(self.values.select_rows(rows)),
            labels: rows.iter().map(|&row| self.labels[row].clone()).collect(),
            weights: self.weights().map(|weights| rows.iter().map(|&row| weights[row]).collect()),
            ..self.clone()
        })
    }

    fn column_of(&self, name: &str) -> Result<usize> {
        self.variables.iter().position(|known| known == name).ok_or_else(|| Error::UnknownColumn {
            name: name.to_owned(),
            nearest: nearest(name, self.variables.iter()),
            available: self.variables.to_vec(),
        })
    }

    fn row_of(&self, label: &str) -> Result<usize> {
        self.labels.iter().position(|known| known == label).ok_or_else(|| self.unknown_label(label))
    }

    fn unknown_label(&self, label: &str) -> Error {
        Error::UnknownLabel { label: label.to_owned(), nearest: nearest(label, self.labels.iter()) }
    }

    fn check_finite(&self) -> Result<()> {
        // A product with zero is zero for finite numbers only, and sums of it vectorise: the
        // common case of a sound matrix costs one pass at the speed of memory.
        let poison: f64 = self.values.as_slice().iter().map(|value| value * 0.0).sum();
        if poison == 0.0 {
            return Ok(());
        }
        let n_rows = self.n_rows();
        let at_fault = |value: &&f64| !value.is_finite();
        let slice = self.values.as_slice();
        let count = slice.iter().filter(at_fault).count();
        match slice.iter().position(|value| !value.is_finite()) {
            None => Ok(()),
            Some(place) => {
                let label = self.labels[place % n_rows].clone();
                Err(Error::NonFinite {
                    column: self.variables[place / n_rows].clone(),
                    row: place % n_rows + 1,
                    label,
                    value: slice[place],
                    count,
                })
            }
        }
    }
}

impl fmt::Debug for DataMatrix {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "DataMatrix({} rows x {:?})", self.n_rows(), self.variables)
    }
}

pub(super) fn check_count(what: &'static str, expected: usize, found: usize) -> Result<()> {
    if expected == found { Ok(()) } else { Err(Error::ShapeMismatch { what, expected, found }) }
}

/// Refuses names that stand there more than once.
pub(crate) fn check_names(names: &[String]) -> Result<()> {
    let mut counts: HashMap<&str, usize> = HashMap::new();
    for name in names {
        *counts.entry(name).or_default() += 1;
    }
    if counts.len() == names.len() {
        return Ok(());
    }
    let mut columns: Vec<ColumnCount> = Vec::new();
    for name in names {
        let count = counts[name.as_str()];
        if count > 1 && !columns.iter().any(|known| known.column == *name) {
            columns.push(ColumnCount { column: name.clone(), count });
        }
    }
    Err(Error::DuplicateColumns { columns })
}

pub(super) fn check_labels(labels: &[String], source: &LabelSource) -> Result<()> {
    if matches!(source, LabelSource::RowNumbers) {
        return Ok(());
    }
    let mut first_row: HashMap<&str, usize> = HashMap::with_capacity(labels.len());
    for (row, label) in labels.iter().enumerate() {
        if let Some(first) = first_row.insert(label, row) {
            let column = match source {
                LabelSource::Column(name) => Some(name.clone()),
                _ => None,
            };
            let rows = (first + 1, row + 1);
            return Err(Error::RepeatedLabel { column, label: label.clone(), rows });
        }
    }
    Ok(())
}
