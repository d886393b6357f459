//! What is in each column of a table, and where it has holes.

use crate::error::ColumnCount;

/// Each column of a table in a few numbers; made by [`describe_columns`].
#[derive(Debug, Clone, PartialEq)]
pub struct ColumnDescriptions {
    n_rows: usize,
    columns: Vec<ColumnDescription>,
}

/// One column in a few numbers.
#[derive(Debug, Clone, PartialEq)]
pub struct ColumnDescription {
    /// The column.
    pub column: String,
    /// Its type, in the data-frame library's words.
    pub dtype: String,
    /// How many of its cells hold a value.
    pub count: usize,
    /// How many are missing.
    pub missing: usize,
    /// How many different values it holds, missing cells aside.
    pub n_distinct: usize,
    /// What only numbers have.
    pub numbers: Option<NumberDescription>,
}

/// The numbers of a numeric column. Values that are not finite count in `n_not_finite` and in
/// nothing else; a statistic of no values is NaN.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct NumberDescription {
    /// The mean.
    pub mean: f64,
    /// The standard deviation with divisor n − 1; NaN for fewer than two values.
    pub standard_deviation: f64,
    /// The smallest value.
    pub min: f64,
    /// The lower quartile, by linear interpolation at 1 + (n − 1)/4 (definition 7 of Hyndman and
    /// Fan 1996, "Sample quantiles in statistical packages").
    pub lower_quartile: f64,
    /// The median.
    pub median: f64,
    /// The upper quartile, by the same definition.
    pub upper_quartile: f64,
    /// The largest value.
    pub max: f64,
    /// How many values are infinite or not a number.
    pub n_not_finite: usize,
}

/// Where a table has holes; made by [`missing_values`].
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct MissingValues {
    n_rows: usize,
    columns: Vec<ColumnCount>,
    patterns: Vec<MissingPattern>,
}

/// Rows that miss a value in the same columns.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct MissingPattern {
    /// The columns in which these rows miss a value; none for complete rows.
    pub columns: Vec<String>,
    /// How many rows there are.
    pub n_rows: usize,
}

impl ColumnDescriptions {
    /// The number of rows in the table.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// The columns, in table order.
    pub fn columns(&self) -> &[ColumnDescription] {
        &self.columns
    }

    /// The description of one column, if the table has it.
    pub fn column(&self, name: &str) -> Option<&ColumnDescription> {
        self.columns.iter().find(|description| description.column == name)
    }
}

impl MissingValues {
    /// The number of rows in the table.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// Every column with the number of its missing cells, in table order.
    pub fn columns(&self) -> &[ColumnCount] {
        &self.columns
    }

    /// Rows grouped by the columns in which they miss a value, the largest group first; groups of
    /// the same size stand in the order of their first rows.
    pub fn patterns(&self) -> &[MissingPattern] {
        &self.patterns
    }

    /// The number of missing cells.
    pub fn n_missing(&self) -> usize {
        self.columns.iter().map(|column| column.count).sum()
    }

    /// The number of rows without a missing cell.
    pub fn n_complete_rows(&self) -> usize {
        self.patterns.iter().filter(|pattern| pattern.columns.is_empty()).map(|p| p.n_rows).sum()
    }
}
