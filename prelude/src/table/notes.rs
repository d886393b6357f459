//! What happened on the way from a table to a matrix, kept with the matrix.

use std::fmt;

use crate::error::ColumnCount;

/// Where the labels of a matrix's rows come from.
#[derive(Debug, Clone, PartialEq, Eq)]
#[non_exhaustive]
pub enum LabelSource {
    /// The column of that name.
    Column(String),
    /// Row numbers, counted from 1 in the table before any row was dropped.
    RowNumbers,
    /// They were given together with the values.
    Given,
}

/// A column of the table that is not in the matrix.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct LeftOut {
    /// The column.
    pub column: String,
    /// Why it was left out.
    pub reason: LeftOutReason,
}

/// Why a column is not in the matrix.
#[derive(Debug, Clone, PartialEq, Eq)]
#[non_exhaustive]
pub enum LeftOutReason {
    /// It is not numeric but of this type.
    NotNumeric(String),
    /// It holds no value at all.
    Empty,
    /// It labels the rows.
    Labels,
    /// It holds the weights of the rows.
    Weights,
    /// It was to be left out.
    Unwanted,
    /// It misses more values than columns were allowed to miss.
    Missing {
        /// Values that it misses.
        n_missing: usize,
        /// Rows in the table.
        n_rows: usize,
    },
}

/// A row of the table that was dropped because it misses values.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct DroppedRow {
    /// Its number, counted from 1 in the table.
    pub row: usize,
    /// Its label.
    pub label: String,
    /// The columns in which it misses a value.
    pub missing_in: Vec<String>,
}

/// What happened on the way from a table to a matrix.
///
/// Columns that no choice of columns fits are not listed: only those that were passed over when
/// every numeric column was wanted, or those of a pattern or type, and those that miss too much.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct MatrixNotes {
    /// Columns that were passed over.
    pub left_out: Vec<LeftOut>,
    /// Rows that were dropped, in table order.
    pub dropped_rows: Vec<DroppedRow>,
    /// Rows in the table.
    pub n_table_rows: usize,
    /// The column that weighs the rows, if one does.
    pub weights: Option<String>,
    /// Columns in which missing values were replaced by estimates, and how many in each.
    pub estimated: Vec<ColumnCount>,
}

impl fmt::Display for LabelSource {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            LabelSource::Column(name) => write!(f, "labelled by column {name}"),
            LabelSource::RowNumbers => write!(f, "labelled by row number"),
            LabelSource::Given => write!(f, "labels as given"),
        }
    }
}

impl fmt::Display for LeftOutReason {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            LeftOutReason::NotNumeric(dtype) => write!(f, "not numeric ({dtype})"),
            LeftOutReason::Empty => write!(f, "holds no value"),
            LeftOutReason::Labels => write!(f, "labels the rows"),
            LeftOutReason::Weights => write!(f, "weighs the rows"),
            LeftOutReason::Unwanted => write!(f, "not wanted"),
            LeftOutReason::Missing { n_missing, n_rows } => {
                write!(f, "misses {n_missing} of {n_rows} values")
            }
        }
    }
}
