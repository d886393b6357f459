//! The numbers behind a table, as they are handed on: unrounded where the table knows them, so that a
//! check can compare them within a tolerance and not digit by printed digit.

use serde_json::{Value, json};

use super::{Cell, Look, ShownRow, Table, TableColumn};

// Longer tables are handed on as they are drawn, with head and tail.
const MOST_ROWS: usize = 10_000;

/// One table.
fn table(table: &Table) -> Value {
    let n_rows = table.n_rows();
    let rows: Vec<usize> = match n_rows <= MOST_ROWS {
        true => (0..n_rows).collect(),
        false => table
            .shown_rows()
            .into_iter()
            .filter_map(|row| match row {
                ShownRow::Cells(row_idx) => Some(row_idx),
                ShownRow::LeftOut(_) => None,
            })
            .collect(),
    };
    let columns: Vec<Value> = table.columns.iter().map(|found| column(found, &rows)).collect();
    json!({
        "kind": "table",
        "caption": table.caption,
        "columns": columns,
        "notes": table.notes,
    })
}

/// One table, or several that stand one under the other.
pub(super) fn tables(tables: &[&Table]) -> Value {
    if let [one] = tables {
        return table(one);
    }
    let tables: Vec<Value> = tables.iter().map(|found| table(found)).collect();
    json!({"kind": "tables", "tables": tables})
}

fn column(column: &TableColumn, rows: &[usize]) -> Value {
    let values: Vec<Value> =
        rows.iter().map(|row| column.cells.get(*row).map_or(Value::Null, value)).collect();
    json!({"heading": column.heading, "detail": column.detail, "values": values})
}

fn value(cell: &Cell) -> Value {
    match cell.value {
        _ if cell.look == Look::Missing => Value::Null,
        Some(number) if number.is_finite() => json!(number),
        // What is not finite has no number in JSON; its text says what it is.
        _ => json!(cell.text),
    }
}
