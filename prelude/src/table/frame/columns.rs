//! Which columns of a table are variables.

use std::collections::HashSet;

use polars::prelude::{Column, DataFrame, DataType};

use crate::error::{ColumnCount, Error, Result};
use crate::table::nearest::nearest;
use crate::table::notes::{LeftOut, LeftOutReason};
use crate::table::options::{Choice, MatrixOptions, NumberType};
use crate::table::pattern::fits;

/// The columns that become variables, and those that do not.
pub(super) struct Variables<'a> {
    pub columns: Vec<&'a Column>,
    // In table order.
    pub left_out: Vec<LeftOut>,
}

/// Columns that serve another purpose or are not wanted, each with that reason.
pub(super) struct Reserved<'a> {
    pub label: Option<&'a str>,
    pub weights: Option<&'a str>,
    unwanted: HashSet<&'a str>,
}

impl<'a> Reserved<'a> {
    pub(super) fn of(
        table: &'a DataFrame,
        options: &'a MatrixOptions,
        label: Option<&'a str>,
    ) -> Result<Self> {
        let weights = options.weights.as_deref();
        if let Some(name) = weights.filter(|name| label == Some(name)) {
            return Err(Error::RepeatedRequest { name: name.to_owned() });
        }
        let mut unwanted = HashSet::new();
        for choice in &options.left_out {
            match choice {
                Choice::Named(names) => {
                    for name in names {
                        find(table, name)?;
                        unwanted.insert(name.as_str());
                    }
                }
                choice => {
                    unwanted.extend(fitting(table, choice)?.iter().map(|c| c.name().as_str()));
                }
            }
        }
        Ok(Reserved { label, weights, unwanted })
    }

    fn reason(&self, name: &str) -> Option<LeftOutReason> {
        if self.label == Some(name) {
            Some(LeftOutReason::Labels)
        } else if self.weights == Some(name) {
            Some(LeftOutReason::Weights)
        } else {
            self.unwanted.contains(name).then_some(LeftOutReason::Unwanted)
        }
    }
}

impl<'a> Variables<'a> {
    /// The columns that the options choose, or every numeric one.
    pub(super) fn of(
        table: &'a DataFrame,
        options: &MatrixOptions,
        reserved: &Reserved<'_>,
    ) -> Result<Self> {
        let mut variables = Variables { columns: Vec::new(), left_out: Vec::new() };
        match &options.chosen {
            None => variables.take_numeric(table.columns(), table.height(), reserved)?,
            Some(choices) => {
                for choice in choices {
                    match choice {
                        Choice::Named(names) => variables.take_named(table, names, reserved)?,
                        choice => {
                            let columns = fitting(table, choice)?;
                            variables.take_numeric(columns, table.height(), reserved)?;
                        }
                    }
                }
                let place = |name: &str| table.get_column_index(name).unwrap_or(table.width());
                variables.left_out.sort_by_key(|left| place(&left.column));
                variables.left_out.dedup();
            }
        }
        if variables.columns.is_empty() {
            return Err(variables.none(table));
        }
        variables.drop_holed(table.height(), options.most_missing)?;
        Ok(variables)
    }

    /// Columns that were asked for by name, none of which may be passed over.
    fn take_named(
        &mut self,
        table: &'a DataFrame,
        names: &[String],
        reserved: &Reserved<'_>,
    ) -> Result<()> {
        let mut seen = HashSet::new();
        for name in names {
            let column = find(table, name)?;
            match reserved.reason(name) {
                Some(LeftOutReason::Unwanted) => {
                    return Err(Error::WantedAndUnwanted { name: name.clone() });
                }
                Some(_) => return Err(Error::RepeatedRequest { name: name.clone() }),
                None => {}
            }
            if !seen.insert(name) {
                return Err(Error::RepeatedRequest { name: name.clone() });
            }
            if is_empty(column, table.height()) {
                return Err(Error::AllMissing { columns: vec![name.clone()] });
            }
            if !is_numeric(column) {
                return Err(not_numeric(column));
            }
            self.take(column);
        }
        Ok(())
    }

    /// Those of the columns that are numeric and free; the others are noted, or refused when they
    /// look like numbers gone wrong.
    fn take_numeric(
        &mut self,
        columns: impl IntoIterator<Item = &'a Column>,
        height: usize,
        reserved: &Reserved<'_>,
    ) -> Result<()> {
        for column in columns {
            let reason = if let Some(reason) = reserved.reason(column.name()) {
                reason
            } else if is_empty(column, height) {
                LeftOutReason::Empty
            } else if is_numeric(column) {
                self.take(column);
                continue;
            } else {
                refuse_mixed(column)?;
                LeftOutReason::NotNumeric(column.dtype().to_string())
            };
            self.left_out.push(LeftOut { column: column.name().to_string(), reason });
        }
        Ok(())
    }

    fn take(&mut self, column: &'a Column) {
        if !self.columns.iter().any(|known| known.name() == column.name()) {
            self.columns.push(column);
        }
    }

    /// Why there is nothing left.
    fn none(&self, table: &DataFrame) -> Error {
        let empty: Vec<String> = self
            .left_out
            .iter()
            .filter(|left| left.reason == LeftOutReason::Empty)
            .map(|left| left.column.clone())
            .collect();
        if !empty.is_empty() {
            return Error::AllMissing { columns: empty };
        }
        if table.columns().iter().any(is_numeric) {
            return Error::NoColumns;
        }
        let type_of = |column: &Column| (column.name().to_string(), column.dtype().to_string());
        Error::NoNumericColumns { columns: table.columns().iter().map(type_of).collect() }
    }

    fn drop_holed(&mut self, height: usize, most_missing: Option<f64>) -> Result<()> {
        let Some(share) = most_missing else { return Ok(()) };
        let is_holed = |column: &Column| column.null_count() as f64 > share * height as f64;
        let (holed, kept): (Vec<&Column>, Vec<&Column>) =
            self.columns.iter().partition(|column| is_holed(column));
        if kept.is_empty() {
            let count =
                |c: &&Column| ColumnCount { column: c.name().to_string(), count: c.null_count() };
            let columns = holed.iter().map(count).collect();
            return Err(Error::NoColumnLeft { columns, n_rows: height, share });
        }
        self.left_out.extend(holed.iter().map(|column| LeftOut {
            column: column.name().to_string(),
            reason: LeftOutReason::Missing { n_missing: column.null_count(), n_rows: height },
        }));
        self.columns = kept;
        Ok(())
    }
}

/// The columns that a pattern or a type fits, of which there must be one.
fn fitting<'a>(table: &'a DataFrame, choice: &Choice) -> Result<Vec<&'a Column>> {
    let fitting: Vec<&Column> = table
        .columns()
        .iter()
        .filter(|column| match choice {
            Choice::Named(names) => names.iter().any(|name| name == column.name().as_str()),
            Choice::Like(pattern) => fits(pattern, column.name()),
            Choice::OfType(NumberType::Integer) => column.dtype().is_integer(),
            Choice::OfType(NumberType::Float) => column.dtype().is_float(),
        })
        .collect();
    if !fitting.is_empty() {
        return Ok(fitting);
    }
    let columns = table.columns();
    Err(match choice {
        Choice::OfType(number_type) => Error::NoColumnOfType {
            number_type: *number_type,
            columns: columns
                .iter()
                .map(|c| (c.name().to_string(), c.dtype().to_string()))
                .collect(),
        },
        Choice::Like(pattern) => Error::NoColumnLike {
            pattern: pattern.clone(),
            available: columns.iter().map(|column| column.name().to_string()).collect(),
        },
        Choice::Named(_) => Error::NoColumns,
    })
}

/// Refuses text of which more than half the values are numbers: leaving it out would lose a
/// variable over a few slips.
pub(super) fn refuse_mixed(column: &Column) -> Result<()> {
    let Ok(text) = column.str() else { return Ok(()) };
    let is_number = |cell: &str| cell.trim().parse::<f64>().is_ok();
    let n_values = text.len() - text.null_count();
    let n_numbers = text.iter().flatten().filter(|cell| is_number(cell)).count();
    if 2 * n_numbers <= n_values {
        return Ok(());
    }
    let example = text
        .iter()
        .enumerate()
        .find_map(|(row, cell)| cell.filter(|cell| !is_number(cell)).map(|c| (c, row + 1)));
    // Text that is numbers throughout comes from a source that said it is text (an identity
    // number, say), and is left out like other text.
    let Some((value, row)) = example else { return Ok(()) };
    Err(Error::MixedColumn {
        column: column.name().to_string(),
        n_numbers,
        n_others: n_values - n_numbers,
        example: (value.to_owned(), row),
    })
}

pub(super) fn find<'a>(table: &'a DataFrame, name: &str) -> Result<&'a Column> {
    let names = || table.columns().iter().map(|column| column.name().to_string());
    table.columns().iter().find(|column| column.name().as_str() == name).ok_or_else(|| {
        Error::UnknownColumn {
            name: name.to_owned(),
            nearest: nearest(name, names()),
            available: names().collect(),
        }
    })
}

fn is_empty(column: &Column, height: usize) -> bool {
    height > 0 && column.null_count() == height
}

fn is_numeric(column: &Column) -> bool {
    column.dtype().is_primitive_numeric()
}

pub(super) fn is_text(column: &Column) -> bool {
    matches!(column.dtype(), DataType::String | DataType::Categorical(_, _) | DataType::Enum(_, _))
}

/// Refuses a column that is not numeric, with an example of what it holds.
pub(super) fn check_numeric(column: &Column) -> Result<()> {
    if is_numeric(column) { Ok(()) } else { Err(not_numeric(column)) }
}

fn not_numeric(column: &Column) -> Error {
    let example = column.str().ok().and_then(|text| {
        text.iter()
            .enumerate()
            .find_map(|(row, cell)| {
                Some((cell?, row + 1)).filter(|c| c.0.trim().parse::<f64>().is_err())
            })
            .map(|(cell, row)| (cell.to_owned(), row))
    });
    Error::NotNumeric {
        column: column.name().to_string(),
        dtype: column.dtype().to_string(),
        example,
    }
}
