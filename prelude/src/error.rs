//! The one error type of the prelude: what went wrong, where, and what would be accepted.
//!
//! Messages are lower case without a final period. They name the column, row, line or file at
//! fault, the limit that was passed, and a way out where there is one. Rows are counted from 1 as
//! rows of data, lines from 1 as lines of the file.
//!
//! Names that come from a user's file are shown between backquotes, cut when long, with control
//! characters escaped, so that a hostile name cannot forge a message or move a terminal's cursor.

mod message;
#[cfg(test)]
mod tests;

use std::path::PathBuf;

use polars::prelude::PolarsError;

use crate::table::NumberType;

/// The prelude's result.
pub type Result<T, E = Error> = std::result::Result<T, E>;

/// A column together with a count, as errors and notes report it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ColumnCount {
    /// The column's name.
    pub column: String,
    /// How many of its cells are meant.
    pub count: usize,
}

/// What can go wrong in the prelude.
#[derive(Debug)]
#[non_exhaustive]
pub enum Error {
    // Reading files.
    /// There is no file at the path.
    FileMissing {
        /// The path as it was asked for.
        path: PathBuf,
        /// The folder that relative paths start from.
        working_dir: PathBuf,
        /// Files in the same folder with a name much like it.
        similar: Vec<String>,
    },
    /// The path leads to a folder.
    IsFolder {
        /// The path as it was asked for.
        path: PathBuf,
        /// Files inside it that could be read as a table.
        readable: Vec<String>,
    },
    /// The file's name does not end in an extension that says how to read or write it.
    UnknownExtension {
        /// The path as it was asked for.
        path: PathBuf,
        /// The extensions that are accepted.
        accepted: &'static [&'static str],
    },
    /// The file holds no bytes, or nothing but white space.
    EmptyFile {
        /// The file.
        path: PathBuf,
    },
    /// A file that should be text holds bytes that no text holds.
    NotText {
        /// The file.
        path: PathBuf,
        /// The line of the first such byte.
        line: usize,
        /// The byte.
        byte: u8,
    },
    /// A row has another number of fields than the header.
    RaggedRows {
        /// The file.
        path: PathBuf,
        /// The line of the first such row.
        line: usize,
        /// Fields in the header.
        expected: usize,
        /// Fields in that row.
        found: usize,
        /// Rows that differ from the header.
        n_ragged: usize,
        /// Rows of data in the file.
        n_rows: usize,
    },
    /// The header is one field that holds another delimiter.
    WrongDelimiter {
        /// The file.
        path: PathBuf,
        /// The delimiter that was used.
        used: char,
        /// The delimiter that the header seems to use.
        seen: char,
        /// The fields that delimiter would give.
        n_fields: usize,
    },
    /// A quoted field is never closed.
    UnclosedQuote {
        /// The file.
        path: PathBuf,
        /// The line where the quote opens.
        line: usize,
    },
    /// A quote stands inside a field that is not quoted, or text follows a closing quote.
    StrayQuote {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
    },
    /// A delimiter that could also be part of a number, a quote or a line end.
    BadDelimiter {
        /// The delimiter.
        delimiter: char,
        /// Whether numbers are written with a comma.
        decimal_comma: bool,
    },
    /// A column of the file has no name.
    UnnamedColumn {
        /// The file.
        path: PathBuf,
        /// Its place, counted from 1.
        position: usize,
    },
    /// Several columns have the same name.
    DuplicateColumns {
        /// Each repeated name and how often it stands there.
        columns: Vec<ColumnCount>,
    },
    /// A line of a JSON-lines file is not a JSON object.
    BadJsonLine {
        /// The file.
        path: PathBuf,
        /// The line.
        line: usize,
        /// What the JSON reader found.
        reason: String,
    },
    /// A column of a JSON-lines file holds values of two kinds.
    MixedKinds {
        /// The file.
        path: PathBuf,
        /// The column.
        column: String,
        /// The kind it begins with, and the line.
        first: (&'static str, usize),
        /// The other kind, and the line where it turns up.
        other: (&'static str, usize),
    },
    /// The file is damaged, cut short, or not of the kind its extension says.
    Unreadable {
        /// The file.
        path: PathBuf,
        /// The kind of file its extension names.
        format: &'static str,
        /// What the reader of that kind found.
        reason: String,
    },
    /// The operating system refused.
    Io {
        /// What was attempted.
        action: &'static str,
        /// The file, where one is known.
        path: Option<PathBuf>,
        /// The system's own error.
        source: std::io::Error,
    },
    /// A data-frame operation failed.
    Polars {
        /// The data-frame library's own error.
        source: PolarsError,
    },

    // From table to matrix.
    /// A column that was asked for does not exist.
    UnknownColumn {
        /// The name that was asked for.
        name: String,
        /// The name most like it.
        nearest: Option<String>,
        /// The names there are.
        available: Vec<String>,
    },
    /// A row label that was asked for does not exist.
    UnknownLabel {
        /// The label that was asked for.
        label: String,
        /// The label most like it.
        nearest: Option<String>,
    },
    /// The same name was asked for twice.
    RepeatedRequest {
        /// The name.
        name: String,
    },
    /// A column was asked for by name and was also to be left out.
    WantedAndUnwanted {
        /// The name.
        name: String,
    },
    /// No column has a name that fits a pattern.
    NoColumnLike {
        /// The pattern.
        pattern: String,
        /// The names there are.
        available: Vec<String>,
    },
    /// No column has a type that was asked for.
    NoColumnOfType {
        /// The type.
        number_type: NumberType,
        /// The columns there are, each with its type.
        columns: Vec<(String, String)>,
    },
    /// Leaving out columns with missing values would leave none.
    NoColumnLeft {
        /// The columns, and how many values each misses.
        columns: Vec<ColumnCount>,
        /// Rows in the table.
        n_rows: usize,
        /// The share of values that a column may miss.
        share: f64,
    },
    /// The table has no numeric column.
    NoNumericColumns {
        /// The columns there are, each with its type.
        columns: Vec<(String, String)>,
    },
    /// A column that was asked for as numbers holds something else.
    NotNumeric {
        /// The column.
        column: String,
        /// Its type.
        dtype: String,
        /// The first value that is not a number, and its row.
        example: Option<(String, usize)>,
    },
    /// Most cells of a column are numbers and some are not, so that it was read as text.
    MixedColumn {
        /// The column.
        column: String,
        /// Cells that are numbers.
        n_numbers: usize,
        /// Cells that are not.
        n_others: usize,
        /// The first value that is not a number, and its row.
        example: (String, usize),
    },
    /// Values are missing and no policy for them was chosen.
    MissingValues {
        /// Columns with missing values, and how many each.
        columns: Vec<ColumnCount>,
        /// Rows in the table.
        n_rows: usize,
        /// Rows without a missing value.
        n_complete: usize,
    },
    /// Columns hold no value at all.
    AllMissing {
        /// The columns.
        columns: Vec<String>,
    },
    /// Rows hold no value at all.
    EmptyRows {
        /// Their labels.
        labels: Vec<String>,
    },
    /// Dropping rows with missing values would leave none.
    NoCompleteRow {
        /// Columns with missing values, and how many each.
        columns: Vec<ColumnCount>,
        /// Rows in the table.
        n_rows: usize,
    },
    /// Values are infinite, or not a number.
    NonFinite {
        /// The column of the first of them.
        column: String,
        /// Its row.
        row: usize,
        /// Its row's label.
        label: String,
        /// The value.
        value: f64,
        /// How many such values there are.
        count: usize,
    },
    /// The table or the selection has no rows.
    NoRows,
    /// The table or the selection has no columns.
    NoColumns,
    /// A label column has missing labels.
    MissingLabels {
        /// The label column.
        column: String,
        /// The first row without a label.
        row: usize,
        /// How many labels are missing.
        count: usize,
    },
    /// Two rows carry the same label.
    RepeatedLabel {
        /// The label column, where there is one.
        column: Option<String>,
        /// The label.
        label: String,
        /// The first two rows that carry it.
        rows: (usize, usize),
    },
    /// The weight of a row is not a positive finite number.
    BadWeight {
        /// The column of the table that holds the weights, where there is one.
        column: Option<String>,
        /// The first such row, counted from 1.
        row: usize,
        /// Its label.
        label: String,
        /// The weight that was given.
        value: f64,
    },
    /// A weight column has missing weights.
    MissingWeights {
        /// The weight column.
        column: String,
        /// The first row without a weight.
        row: usize,
        /// How many weights are missing.
        count: usize,
    },
    /// Counts that should agree do not.
    ShapeMismatch {
        /// What was counted.
        what: &'static str,
        /// The count that was needed.
        expected: usize,
        /// The count that was given.
        found: usize,
    },

    /// A value lies outside the domain of a transformation, or of the way back from one.
    OutsideDomain {
        /// What was attempted.
        action: String,
        /// The column.
        column: String,
        /// The first such row, counted from 1.
        row: usize,
        /// Its label.
        label: String,
        /// The value.
        value: f64,
        /// What is accepted, in words.
        accepted: String,
    },
    /// Columns have no spread that they could be divided by.
    NoSpread {
        /// Each such column and its middle.
        columns: Vec<(String, f64)>,
        /// The measure of spread that is zero or beyond what a number can hold.
        measure: &'static str,
    },
    /// Rows did not go through the transformations that were expected of them.
    TransformationsDiffer {
        /// The transformations that were expected, in order.
        wanted: Vec<String>,
        /// Those that the rows went through, in order.
        found: Vec<String>,
    },
    /// Something that was saved cannot be read back.
    SavedForm {
        /// The part at fault.
        part: String,
        /// What stands there.
        found: String,
        /// What would be accepted.
        accepted: String,
    },
    /// Something was saved in a version that is not known.
    SavedVersion {
        /// What was saved.
        format: &'static str,
        /// Its version.
        found: u64,
        /// The version that is known.
        known: u64,
    },
    /// An analysis that was saved holds no such thing.
    NotSaved {
        /// What was asked for.
        what: &'static str,
        /// The way out.
        remedy: &'static str,
    },

    // Statistics.
    /// A method needs more rows.
    TooFewRows {
        /// The method.
        method: &'static str,
        /// Rows it needs.
        needed: usize,
        /// Rows there are.
        found: usize,
    },
    /// A method needs more columns.
    TooFewColumns {
        /// The method.
        method: &'static str,
        /// Columns it needs.
        needed: usize,
        /// Columns there are.
        found: usize,
    },
    /// Columns do not vary, and so cannot be brought to unit variance.
    ConstantColumns {
        /// Each such column and the value it holds throughout.
        columns: Vec<(String, f64)>,
    },
    /// No column varies.
    NoVariation {
        /// Rows there are.
        n_rows: usize,
    },
    /// A value is too large or a spread too small to be squared in double precision.
    Magnitude {
        /// The column.
        column: String,
        /// The largest absolute deviation from the column's mean.
        value: f64,
        /// The smallest deviation that is accepted.
        least: f64,
        /// The largest deviation that is accepted.
        most: f64,
    },
    /// The theory behind a method does not cover rows of unequal weight.
    WeightsNotCovered {
        /// The method.
        method: &'static str,
    },
    /// A scatter matrix has no inverse: some variables can be computed from the others.
    SingularScatter {
        /// The method.
        method: &'static str,
        /// The rank of the matrix.
        rank: usize,
        /// Its order, which is the number of variables.
        order: usize,
    },
    /// So many rows satisfy one linear equation exactly that the most compact ones have no volume.
    ExactFit {
        /// The method.
        method: &'static str,
        /// Rows that satisfy the equation.
        n_on: usize,
        /// Rows there are.
        n_rows: usize,
        /// Variables of the equation, each with its coefficient.
        coefficients: Vec<(String, f64)>,
        /// What the products of coefficients and variables sum to.
        constant: f64,
        /// Labels of the rows that do not satisfy it.
        off: Vec<String>,
    },
    /// Half or more of the values of a column are equal, so that it has no robust spread.
    NoRobustSpread {
        /// Each such column and its median.
        columns: Vec<(String, f64)>,
    },
    /// Too many resamples could not be analysed, since columns did not vary in them.
    DegenerateResamples {
        /// Resamples that could be analysed.
        usable: usize,
        /// Resamples that were drawn.
        drawn: usize,
        /// Columns that did not vary, and in how many resamples each.
        columns: Vec<ColumnCount>,
    },
    /// More components were asked for than there are.
    ComponentOutOfRange {
        /// How many, or which, was asked for.
        asked: usize,
        /// How many there are.
        available: usize,
    },
    /// Columns show one and the same value wherever they show any.
    ConstantObserved {
        /// Each such column, the value, and how many cells hold it.
        columns: Vec<(String, f64, usize)>,
    },
    /// A fit would choose as many numbers as there are observed cells, or more.
    TooFewObserved {
        /// Components that were asked for.
        n_components: usize,
        /// Observed cells.
        found: usize,
        /// The cells that are needed.
        needed: usize,
    },
    /// Components describe the observed cells exactly, so that no noise is left to estimate.
    NoNoise {
        /// How many components.
        n_components: usize,
    },
    /// A row shows too little to tell its scores.
    ScoresUndetermined {
        /// The row.
        row: usize,
        /// Its label.
        label: String,
        /// Cells that it shows.
        n_observed: usize,
        /// Components whose scores are wanted.
        n_components: usize,
    },
    /// New rows do not have the variables that an analysis was made with.
    VariablesDiffer {
        /// Variables of the analysis that the new rows lack.
        missing: Vec<String>,
        /// Variables of the new rows that the analysis does not know.
        extra: Vec<String>,
        /// The first place, counted from 1, where the order differs: wanted and found.
        order: Option<(usize, String, String)>,
    },
    /// A table does not have the rows that an analysis was made with.
    RowsDiffer {
        /// Labels of the analysis that the table lacks.
        missing: Vec<String>,
        /// Labels of the table that the analysis does not know; when none is missing or unknown,
        /// the order differs.
        extra: Vec<String>,
    },
    /// An option lies outside its range.
    OptionOutOfRange {
        /// The option.
        option: &'static str,
        /// The value that was given.
        value: f64,
        /// What is accepted, in words.
        accepted: &'static str,
    },
    /// A choice needs an option that was not given.
    OptionNeeded {
        /// The option.
        option: &'static str,
        /// What needs it.
        needed_by: &'static str,
    },
    /// The computation was asked to stop.
    Interrupted,
    /// A chart was given a setting that its kind does not have.
    SettingNotForChart {
        /// The setting.
        setting: &'static str,
        /// The kind of chart.
        chart: &'static str,
        /// The settings that it has.
        available: Vec<&'static str>,
    },
    /// Rows of a matrix are zero and so cannot be brought to unit length.
    ZeroRows {
        /// Their names.
        rows: Vec<String>,
    },
    /// Columns of a matrix are combinations of one another.
    DependentColumns {
        /// The matrix.
        what: &'static str,
        /// Its rank.
        rank: usize,
        /// Its columns.
        n_cols: usize,
    },
    /// Columns are zero and so have no direction to compare.
    ZeroColumns {
        /// The matrix.
        what: &'static str,
        /// Their names.
        columns: Vec<String>,
    },
    /// An oblique rotation let components fall together from every start.
    RotationCollapsed {
        /// The rotation.
        rotation: String,
        /// The number of starts.
        n_starts: usize,
    },
    /// Two matrices that are compared do not have the same rows.
    RowNamesDiffer {
        /// Rows of the first that the second lacks.
        missing: Vec<String>,
        /// Rows of the second that the first lacks.
        extra: Vec<String>,
        /// The first place, counted from 1, where the order differs: in the first and the second.
        order: Option<(usize, String, String)>,
    },
    /// An iteration ended without a usable answer.
    NoConvergence {
        /// The method.
        method: &'static str,
    },
}

impl std::error::Error for Error {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Error::Io { source, .. } => Some(source),
            Error::Polars { source } => Some(source),
            _ => None,
        }
    }
}

impl From<PolarsError> for Error {
    fn from(source: PolarsError) -> Self {
        Error::Polars { source }
    }
}

impl From<std::io::Error> for Error {
    fn from(source: std::io::Error) -> Self {
        Error::Io { action: "read or write", path: None, source }
    }
}
