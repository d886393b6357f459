//! The choices between a table and its matrix: which columns, labels and weights, and what of missing
//! values.

use std::fmt;

use crate::error::{Error, Result};

/// How a table becomes a matrix.
///
/// The default takes every numeric column, labels rows by the first column of text whose values
/// are complete and all different (else by row numbers from 1), weighs all rows alike, and refuses
/// missing values.
///
/// Columns can be chosen [by name](MatrixOptions::columns), [by
/// pattern](MatrixOptions::columns_like) and [by type](MatrixOptions::columns_of_type), more than
/// once and together: the matrix has them in the order of the choices, a column that several
/// choices fit stands where the first put it. Others can be [left
/// out](MatrixOptions::without) whatever was chosen.
///
/// ```
/// use semiaxis::polars::prelude::*;
/// use semiaxis::table::{FrameToMatrix, MatrixOptions, Missing};
///
/// let table = df! {
///     "tile" => ["a", "b", "c"],
///     "batch" => [7, 7, 8],
///     "colour_red" => [Some(0.41), Some(0.44), None],
///     "colour_green" => [0.22, 0.20, 0.23],
///     "length" => [40.1, 40.3, 39.8],
///     "pieces" => [10, 20, 10],
/// }?;
/// let options = MatrixOptions::new()
///     .columns(["length"])
///     .columns_like("colour_*")
///     .weights("pieces")
///     .missing(Missing::DropRows);
/// let x = table.data_matrix_with(options)?;
/// assert_eq!(x.variables(), ["length", "colour_red", "colour_green"]);
/// assert_eq!(x.labels(), ["a", "b"]);
/// assert_eq!(x.weights(), Some(&[10.0, 20.0][..]));
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Debug, Clone, Default, PartialEq)]
pub struct MatrixOptions {
    // None means every numeric column.
    pub(super) chosen: Option<Vec<Choice>>,
    pub(super) left_out: Vec<Choice>,
    pub(super) label: Label,
    pub(super) weights: Option<String>,
    pub(super) most_missing: Option<f64>,
    pub(super) missing: Missing,
}

/// One way in which columns were asked for.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Choice {
    Named(Vec<String>),
    Like(String),
    OfType(NumberType),
}

/// A type of numeric columns, as the table stores them.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum NumberType {
    /// Whole numbers: counts, codes, years. A column of a text file has this type when every
    /// value in it is written without a decimal point.
    Integer,
    /// Floating-point numbers: measurements.
    Float,
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

/// What happens to rows that miss a value in a column of the matrix. Nothing happens to them
/// silently.
///
/// Estimating what is missing needs a matrix that keeps its gaps: see
/// [`gapped_matrix`](super::FrameToMatrix::gapped_matrix).
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

    /// Takes these columns, in this order, instead of every numeric one. Each must exist and be
    /// numeric.
    pub fn columns<S: Into<String>>(self, names: impl IntoIterator<Item = S>) -> Self {
        self.choose(Choice::Named(names.into_iter().map(Into::into).collect()))
    }

    /// Takes the numeric columns whose whole name fits a pattern, in table order, instead of every
    /// numeric one.
    ///
    /// In a pattern `*` stands for any run of characters, also none, and `?` for one character;
    /// every other character stands for itself, capitals included. Columns that fit but are not
    /// numeric are listed in the notes.
    pub fn columns_like(self, pattern: impl Into<String>) -> Self {
        self.choose(Choice::Like(pattern.into()))
    }

    /// Takes the columns of a numeric type, in table order, instead of every numeric one.
    pub fn columns_of_type(self, number_type: NumberType) -> Self {
        self.choose(Choice::OfType(number_type))
    }

    /// Leaves these columns out. Each must exist, and must not also be asked for by name.
    pub fn without<S: Into<String>>(mut self, names: impl IntoIterator<Item = S>) -> Self {
        self.left_out.push(Choice::Named(names.into_iter().map(Into::into).collect()));
        self
    }

    /// Leaves out the columns whose name fits a pattern, as in
    /// [`columns_like`](Self::columns_like).
    pub fn without_like(mut self, pattern: impl Into<String>) -> Self {
        self.left_out.push(Choice::Like(pattern.into()));
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

    /// Weighs rows by this column, which then is not a variable: positive finite numbers, of which
    /// only ratios matter (see [`DataMatrix::with_weights`](super::DataMatrix::with_weights)).
    pub fn weights(mut self, name: impl Into<String>) -> Self {
        self.weights = Some(name.into());
        self
    }

    /// Leaves out columns that miss more than this share of their values, from 0 to below 1; the
    /// matrix lists them. What the remaining columns miss is then a matter of
    /// [`missing`](Self::missing), and so refused unless that says otherwise.
    pub fn without_missing_above(mut self, share: f64) -> Self {
        self.most_missing = Some(share);
        self
    }

    /// Says what happens to rows that miss values.
    pub fn missing(mut self, missing: Missing) -> Self {
        self.missing = missing;
        self
    }

    /// Whether a column was asked for by its name.
    pub(super) fn asks_for(&self, column: &str) -> bool {
        self.chosen.iter().flatten().any(|choice| match choice {
            Choice::Named(names) => names.iter().any(|name| name == column),
            Choice::Like(_) | Choice::OfType(_) => false,
        })
    }

    pub(super) fn check(&self) -> Result<()> {
        match self.most_missing {
            Some(value) if !(0.0..1.0).contains(&value) => Err(Error::OptionOutOfRange {
                option: "without_missing_above",
                value,
                accepted: "a share from 0 to below 1",
            }),
            _ => Ok(()),
        }
    }

    fn choose(mut self, choice: Choice) -> Self {
        self.chosen.get_or_insert_default().push(choice);
        self
    }
}

impl fmt::Display for NumberType {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            NumberType::Integer => "whole numbers",
            NumberType::Float => "floating-point numbers",
        })
    }
}
