//! Data frames, their columns, and frames that are not computed yet.
//!
//! Each column says its type and how many of its values are missing. Rows are counted from 1, as
//! everywhere in messages and labels.

use std::fmt::Write;

use polars::prelude::{AnyValue, Column, DataFrame, DataType, LazyFrame, Series};

use super::numbers::{counted, grouped, stored};
use super::tables::{Abridged, Table, TableColumn};
use super::text::{push_markup, visible};
use super::{Bundle, Exhibit};

const DIGITS: usize = 6;
const ROWS: (usize, usize, usize) = (24, 12, 6);
const COLUMNS: (usize, usize, usize) = (20, 12, 6);

impl Exhibit for DataFrame {
    fn exhibit(&self) -> Bundle {
        let caption =
            format!("{} × {}", counted(self.height(), "row"), counted(self.width(), "column"));
        table_of(caption, self.columns(), self.height()).exhibit()
    }
}

impl Exhibit for Column {
    fn exhibit(&self) -> Bundle {
        let caption = format!("column of {}", counted(self.len(), "value"));
        table_of(caption, std::slice::from_ref(self), self.len()).exhibit()
    }
}

impl Exhibit for Series {
    fn exhibit(&self) -> Bundle {
        let caption = format!("series of {}", counted(self.len(), "value"));
        table_of(caption, &[Column::from(self.clone())], self.len()).exhibit()
    }
}

/// A frame that is not computed yet shows its columns and its plan; nothing is read or computed.
impl Exhibit for LazyFrame {
    fn exhibit(&self) -> Bundle {
        // Resolving the columns works on a copy, since it stores what it finds in the frame.
        let mut copy = self.clone();
        let (names, types): (Vec<String>, Vec<String>) = match copy.collect_schema() {
            Ok(schema) => {
                schema.iter().map(|(name, dtype)| (name.to_string(), dtype.to_string())).unzip()
            }
            Err(error) => {
                let text = format!("lazy table whose columns cannot be resolved: {error}");
                return Bundle::new().with_plain(text);
            }
        };
        let caption = format!("lazy table of {}, not computed yet", counted(names.len(), "column"));
        let table = Table::new(caption)
            .column(TableColumn::texts("column", names).as_row_heads())
            .column(TableColumn::texts("type", types))
            .note("collect() computes it.");
        let plan = copy.describe_plan().unwrap_or_else(|error| error.to_string());
        let mut html = table.html();
        html.push_str("<details><summary>Plan</summary><pre>");
        let mut plain = format!("{}\n\nPlan:", table.plain());
        for line in plan.lines() {
            push_markup(&mut html, line);
            html.push('\n');
            let _ = write!(plain, "\n{}", visible(line));
        }
        html.push_str("</pre></details>");
        Bundle::new().with_html(html).with_plain(plain)
    }
}

fn table_of(caption: String, columns: &[Column], n_rows: usize) -> Table {
    let rows = Abridged::of(n_rows, ROWS.0, ROWS.1, ROWS.2);
    let shown = Abridged::of(columns.len(), COLUMNS.0, COLUMNS.1, COLUMNS.2);
    let numbers = rows.indices().map(|row| Some((row + 1).to_string()));
    let mut table = Table::new(caption)
        .column(TableColumn::written("row", true, numbers).as_row_heads())
        .with_rows_left_out(rows.head, rows.left_out);
    for (place, idx) in shown.indices().enumerate() {
        if shown.left_out > 0 && place == shown.head {
            table = table.column(TableColumn::left_out(shown.left_out, rows.head + rows.tail));
        }
        table = table.column(column_of(&columns[idx], rows));
    }
    if columns.iter().any(|column| column.dtype().is_float()) {
        table = table.note(format!("Numbers to at most {DIGITS} significant digits."));
    }
    table
}

fn column_of(column: &Column, rows: Abridged) -> TableColumn {
    let dtype = column.dtype();
    let mut detail = dtype.to_string();
    let n_missing = column.null_count();
    if n_missing > 0 {
        let _ = write!(detail, ", {} missing", grouped(n_missing));
    }
    let cells = rows.indices().map(|row| column.get(row).ok().and_then(|value| written(&value)));
    TableColumn::written(column.name().as_str(), is_number(dtype), cells).with_detail(detail)
}

fn written(value: &AnyValue) -> Option<String> {
    match value {
        AnyValue::Null => None,
        AnyValue::Float64(number) => Some(stored(*number, DIGITS)),
        AnyValue::Float32(number) => Some(stored(f64::from(*number), DIGITS)),
        other => Some(other.str_value().into_owned()),
    }
}

fn is_number(dtype: &DataType) -> bool {
    dtype.is_primitive_numeric()
}
