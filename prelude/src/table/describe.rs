//! What is in each column of a table, and where it has holes.

use std::collections::HashMap;

use polars::prelude::{Column, DataFrame, DataType};

use crate::error::{ColumnCount, Result};

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

/// Each column of a table in a few numbers: how many values, how many missing, how many different
/// ones, and for numbers mean, standard deviation (divisor n − 1), extremes and quartiles.
///
/// ```
/// use semiaxis::polars::prelude::*;
/// use semiaxis::table::describe_columns;
///
/// let table = df! { "length" => [Some(1.0), Some(2.0), Some(4.0), None] }?;
/// let length = describe_columns(&table)?.column("length").unwrap().numbers.unwrap();
/// assert_eq!((length.lower_quartile, length.median, length.upper_quartile), (1.5, 2.0, 3.0));
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
///
/// # Errors
///
/// Those of the data-frame library, for types it cannot count.
pub fn describe_columns(table: &DataFrame) -> Result<ColumnDescriptions> {
    let columns = table.columns().iter().map(describe).collect::<Result<_>>()?;
    Ok(ColumnDescriptions { n_rows: table.height(), columns })
}

/// Where a table has holes: how many in each column, and which columns miss values together.
///
/// ```
/// use semiaxis::polars::prelude::*;
/// use semiaxis::table::missing_values;
///
/// let table = df! {
///     "length" => [Some(1.0), None, None],
///     "width" => [Some(1.0), None, Some(2.0)],
/// }?;
/// let missing = missing_values(&table);
/// assert_eq!((missing.n_missing(), missing.n_complete_rows()), (3, 1));
/// assert_eq!(missing.patterns().len(), 3);
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
pub fn missing_values(table: &DataFrame) -> MissingValues {
    let name = |column: &Column| column.name().to_string();
    let columns: Vec<ColumnCount> = table
        .columns()
        .iter()
        .map(|column| ColumnCount { column: name(column), count: column.null_count() })
        .collect();
    let holed: Vec<&Column> = table.columns().iter().filter(|c| c.null_count() > 0).collect();
    let masks: Vec<Vec<bool>> = holed
        .iter()
        .map(|column| column.is_null().iter().map(|missing| missing == Some(true)).collect())
        .collect();
    let mut places: HashMap<Vec<bool>, usize> = HashMap::new();
    let mut patterns: Vec<MissingPattern> = Vec::new();
    for row in 0..table.height() {
        let mask: Vec<bool> = masks.iter().map(|mask| mask[row]).collect();
        let place = *places.entry(mask).or_insert_with_key(|mask| {
            let missing = holed.iter().zip(mask).filter(|(_, missing)| **missing);
            let columns = missing.map(|(column, _)| name(column)).collect();
            patterns.push(MissingPattern { columns, n_rows: 0 });
            patterns.len() - 1
        });
        patterns[place].n_rows += 1;
    }
    // Stable, so that groups of the same size keep the order of their first rows.
    patterns.sort_by_key(|pattern| std::cmp::Reverse(pattern.n_rows));
    MissingValues { n_rows: table.height(), columns, patterns }
}

fn describe(column: &Column) -> Result<ColumnDescription> {
    let missing = column.null_count();
    let numbers = if column.dtype().is_primitive_numeric() {
        let numbers = column.cast(&DataType::Float64)?;
        Some(describe_numbers(numbers.f64()?.iter().flatten().collect()))
    } else {
        None
    };
    Ok(ColumnDescription {
        column: column.name().to_string(),
        dtype: column.dtype().to_string(),
        count: column.len() - missing,
        missing,
        n_distinct: column.drop_nulls().n_unique()?,
        numbers,
    })
}

fn describe_numbers(mut values: Vec<f64>) -> NumberDescription {
    let n_values = values.len();
    values.retain(|value| value.is_finite());
    let n_not_finite = n_values - values.len();
    values.sort_unstable_by(f64::total_cmp);
    let n = values.len() as f64;
    let first = values.first().copied().unwrap_or(f64::NAN);
    // Deviations from a value of the column keep the digits that a large offset would cost.
    let mean = first + values.iter().map(|value| value - first).sum::<f64>() / n;
    let squares: f64 = values.iter().map(|value| (value - mean).powi(2)).sum();
    let standard_deviation = if n < 2.0 { f64::NAN } else { (squares / (n - 1.0)).sqrt() };
    NumberDescription {
        mean,
        standard_deviation,
        min: first,
        lower_quartile: quantile(&values, 0.25),
        median: quantile(&values, 0.5),
        upper_quartile: quantile(&values, 0.75),
        max: values.last().copied().unwrap_or(f64::NAN),
        n_not_finite,
    }
}

/// Definition 7 of Hyndman and Fan: the value at (n − 1) q, counted from zero.
fn quantile(sorted: &[f64], q: f64) -> f64 {
    if sorted.is_empty() {
        return f64::NAN;
    }
    let position = (sorted.len() - 1) as f64 * q;
    let below = position.floor() as usize;
    let above = (below + 1).min(sorted.len() - 1);
    sorted[below] + (position - below as f64) * (sorted[above] - sorted[below])
}
