//! A matrix whose rows and columns carry names: what the analyses hand back.

use std::fmt;
use std::ops::Deref;
use std::sync::Arc;

use nalgebra::DMatrix;

use crate::error::{Error, Result};

/// A matrix whose rows and columns carry names, such as loadings or scores.
///
/// It can be used wherever a `&DMatrix<f64>` is wanted, since it dereferences to its values;
/// products and other operators are written with [`values`](NamedMatrix::values).
#[derive(Clone, PartialEq)]
pub struct NamedMatrix {
    values: DMatrix<f64>,
    // As many as rows and columns; shared with the analysis they come from.
    row_names: Arc<[String]>,
    column_names: Arc<[String]>,
}

impl NamedMatrix {
    /// Joins values with the names of their rows and columns.
    ///
    /// # Errors
    ///
    /// [`Error::ShapeMismatch`] when there are not as many names as rows or columns.
    pub fn new(
        values: DMatrix<f64>,
        row_names: impl Into<Arc<[String]>>,
        column_names: impl Into<Arc<[String]>>,
    ) -> Result<Self> {
        let (row_names, column_names) = (row_names.into(), column_names.into());
        check_count("names of rows", values.nrows(), row_names.len())?;
        check_count("names of columns", values.ncols(), column_names.len())?;
        Ok(NamedMatrix { values, row_names, column_names })
    }

    /// The values alone.
    pub fn values(&self) -> &DMatrix<f64> {
        &self.values
    }

    /// The values alone, given away.
    pub fn into_values(self) -> DMatrix<f64> {
        self.values
    }

    /// The number of rows.
    pub fn n_rows(&self) -> usize {
        self.values.nrows()
    }

    /// The number of columns.
    pub fn n_cols(&self) -> usize {
        self.values.ncols()
    }

    /// The names of the rows, from top to bottom.
    pub fn row_names(&self) -> &[String] {
        &self.row_names
    }

    /// The names of the columns, from left to right.
    pub fn column_names(&self) -> &[String] {
        &self.column_names
    }

    pub(crate) fn shared_row_names(&self) -> Arc<[String]> {
        self.row_names.clone()
    }

    pub(crate) fn shared_column_names(&self) -> Arc<[String]> {
        self.column_names.clone()
    }

    /// The value where a named row meets a named column, if both exist.
    pub fn at(&self, row_name: &str, column_name: &str) -> Option<f64> {
        let row = self.row_names.iter().position(|name| name == row_name)?;
        let column = self.column_names.iter().position(|name| name == column_name)?;
        Some(self.values[(row, column)])
    }

    /// The first columns only, such as the loadings of the components that are kept.
    ///
    /// # Errors
    ///
    /// [`Error::ComponentOutOfRange`] when there are not so many columns, or none is asked for.
    pub fn first(&self, n_cols: usize) -> Result<NamedMatrix> {
        if !(1..=self.n_cols()).contains(&n_cols) {
            return Err(Error::ComponentOutOfRange { asked: n_cols, available: self.n_cols() });
        }
        Ok(NamedMatrix {
            values: self.values.columns(0, n_cols).into_owned(),
            row_names: self.row_names.clone(),
            column_names: self.column_names[..n_cols].into(),
        })
    }
}

fn check_count(what: &'static str, expected: usize, found: usize) -> Result<()> {
    if expected == found { Ok(()) } else { Err(Error::ShapeMismatch { what, expected, found }) }
}

impl Deref for NamedMatrix {
    type Target = DMatrix<f64>;

    fn deref(&self) -> &DMatrix<f64> {
        &self.values
    }
}

impl AsRef<DMatrix<f64>> for NamedMatrix {
    fn as_ref(&self) -> &DMatrix<f64> {
        &self.values
    }
}

impl fmt::Debug for NamedMatrix {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "NamedMatrix({} x {})", self.n_rows(), self.n_cols())
    }
}
