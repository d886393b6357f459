//! The choices between a table and its matrix: which columns, which labels, what of missing values.

/// How a table becomes a matrix.
///
/// The default takes every numeric column, labels rows by the first column of text whose values
/// are complete and all different (else by row numbers from 1), and refuses missing values.
///
/// ```
/// use semiaxis::table::{MatrixOptions, Missing};
///
/// let options = MatrixOptions::new()
///     .columns(["length", "width"])
///     .label("tile")
///     .missing(Missing::DropRows);
/// assert_eq!(options.chosen_columns().unwrap().len(), 2);
/// ```
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct MatrixOptions {
    pub(super) columns: Option<Vec<String>>,
    pub(super) label: Label,
    pub(super) missing: Missing,
}

/// What rows of a matrix are labelled by.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
#[non_exhaustive]
pub enum Label {
    /// The first column of text (or of categories) that is complete and has no value twice;
    /// row numbers from 1 where there is none.
    #[default]
    Automatic,
    /// A column by name. It must be complete and have no value twice.
    Column(String),
    /// Row numbers, counted from 1 in the table before any row is dropped.
    RowNumbers,
}

/// What happens to missing values. Nothing happens to them silently.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
#[non_exhaustive]
pub enum Missing {
    /// Refuse the table with an error that names columns and counts.
    #[default]
    Refuse,
    /// Drop each row that misses a value in a chosen column; the matrix lists those rows.
    DropRows,
}

impl MatrixOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// Takes these columns, in this order, instead of every numeric one.
    pub fn columns<S: Into<String>>(mut self, names: impl IntoIterator<Item = S>) -> Self {
        self.columns = Some(names.into_iter().map(Into::into).collect());
        self
    }

    /// Labels rows by this column, which then is not a variable.
    pub fn label(mut self, name: impl Into<String>) -> Self {
        self.label = Label::Column(name.into());
        self
    }

    /// Labels rows by their numbers, counted from 1.
    pub fn row_numbers(mut self) -> Self {
        self.label = Label::RowNumbers;
        self
    }

    /// Says what happens to missing values.
    pub fn missing(mut self, missing: Missing) -> Self {
        self.missing = missing;
        self
    }

    /// The columns that were chosen by name, if any were.
    pub fn chosen_columns(&self) -> Option<&[String]> {
        self.columns.as_deref()
    }
}
