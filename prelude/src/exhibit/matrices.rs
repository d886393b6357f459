//! Matrices and vectors, plain and named, and what is in the columns of a table.

use nalgebra::{DMatrix, DVector};

use super::numbers::{counted, grouped};
use super::tables::{Abridged, NumberFormat, Table, TableColumn, stacked};
use super::{Bundle, Exhibit};
use crate::table::{
    ColumnCheck, ColumnDescription, ColumnDescriptions, DataMatrix, GappedMatrix, LabelSource,
    MatrixNotes, MissingValues, NamedMatrix, NumberDescription,
};

const DATA: NumberFormat = NumberFormat::Stored(6);
const RESULTS: NumberFormat = NumberFormat::Significant(4);
const DESCRIPTION: NumberFormat = NumberFormat::Stored(5);
const ROWS: (usize, usize, usize) = (24, 12, 6);
const COLUMNS: (usize, usize, usize) = (16, 10, 4);
const MOST_LISTED: usize = 8;

impl Exhibit for DMatrix<f64> {
    fn exhibit(&self) -> Bundle {
        let caption = format!("matrix, {} × {}", rows(self.nrows()), columns(self.ncols()));
        let number = |idx: usize| (idx + 1).to_string();
        matrix_table(caption, "", self, number, number, DATA, false)
            .note("Numbers to at most 6 significant digits; rows and columns counted from 1.")
            .exhibit()
    }
}

impl Exhibit for DVector<f64> {
    fn exhibit(&self) -> Bundle {
        let shown = Abridged::of(self.len(), ROWS.0, ROWS.1, ROWS.2);
        let places = shown.indices().map(|idx| Some((idx + 1).to_string()));
        Table::new(format!("vector of {}", counted(self.len(), "value")))
            .with_rows_left_out(shown.head, shown.left_out)
            .column(TableColumn::written("place", true, places).as_row_heads())
            .column(TableColumn::numbers("value", shown.indices().map(|idx| self[idx]), DATA))
            .note("Numbers to at most 6 significant digits; places counted from 1.")
            .exhibit()
    }
}

impl Exhibit for NamedMatrix {
    fn exhibit(&self) -> Bundle {
        let caption = format!("matrix, {} × {}", rows(self.n_rows()), columns(self.n_cols()));
        let row_name = |idx: usize| self.row_names()[idx].clone();
        let column_name = |idx: usize| self.column_names()[idx].clone();
        matrix_table(caption, "", self.values(), row_name, column_name, RESULTS, false)
            .note("Numbers to 4 significant digits.")
            .exhibit()
    }
}

impl Exhibit for DataMatrix {
    fn exhibit(&self) -> Bundle {
        let caption = format!(
            "data matrix, {} × {}",
            rows(self.n_rows()),
            counted(self.n_cols(), "variable")
        );
        let label = |idx: usize| self.labels()[idx].clone();
        let variable = |idx: usize| self.variables()[idx].clone();
        let mut table = matrix_table(caption, "row", self.values(), label, variable, DATA, false);
        for note in matrix_notes(self.label_source(), self.weights(), self.notes()) {
            table = table.note(note);
        }
        if !self.transformations().is_empty() {
            let steps: Vec<String> = self.transformations().iter().map(|t| t.to_string()).collect();
            table = table.note(format!("Transformed, in this order: {}.", steps.join("; ")));
        }
        table.exhibit()
    }
}

impl Exhibit for GappedMatrix {
    fn exhibit(&self) -> Bundle {
        let caption = format!(
            "matrix with gaps, {} × {}; {} missing ({})",
            rows(self.n_rows()),
            counted(self.n_cols(), "variable"),
            counted(self.n_missing(), "value"),
            NumberFormat::Percent.format(self.share_missing())
        );
        let label = |idx: usize| self.labels()[idx].clone();
        let variable = |idx: usize| self.variables()[idx].clone();
        let mut table = matrix_table(caption, "row", self.values(), label, variable, DATA, true);
        let holed: Vec<String> = self
            .variables()
            .iter()
            .zip(self.missing_by_column())
            .filter(|(_, count)| **count > 0)
            .map(|(name, count)| format!("{count} in {name}"))
            .collect();
        if !holed.is_empty() {
            table = table.note(format!(
                "Missing: {}; {} complete.",
                listed(holed.iter().map(String::as_str)),
                rows(self.n_complete_rows())
            ));
        }
        for note in matrix_notes(self.label_source(), self.weights(), self.notes()) {
            table = table.note(note);
        }
        table.exhibit()
    }
}

impl Exhibit for ColumnCheck {
    fn exhibit(&self) -> Bundle {
        if self.is_sound() {
            let caption = format!(
                "{} over {}: each varies, and no two are perfectly correlated",
                counted(self.n_cols(), "column"),
                rows(self.n_rows())
            );
            return Table::new(caption).exhibit();
        }
        let n_odd = self.constant().len() + self.equal().len() + self.linear().len();
        let number = |value: f64| DATA.format(value);
        let mut lines: Vec<(String, String)> = Vec::new();
        for (column, value) in self.constant() {
            lines.push((column.clone(), format!("{} in every row", number(*value))));
        }
        for (column, earlier) in self.equal() {
            lines.push((column.clone(), format!("equal to {earlier}")));
        }
        for pair in self.linear() {
            let (shift, sign) = (number(pair.shift), if pair.factor < 0.0 { "−" } else { "+" });
            let factor = number(pair.factor.abs());
            lines
                .push((pair.column.clone(), format!("{shift} {sign} {factor} × {}", pair.earlier)));
        }
        let (names, findings): (Vec<String>, Vec<String>) = lines.into_iter().unzip();
        Table::new(format!(
            "{} of {} say nothing of their own",
            n_odd,
            counted(self.n_cols(), "column")
        ))
        .column(TableColumn::texts("column", names).as_row_heads())
        .column(TableColumn::texts("finding", findings))
        .note(
            "Perfectly correlated: a correlation within 5 × 10⁻¹³ of 1 or −1. Such columns count \
             twice in an analysis; a column that does not vary cannot be standardised.",
        )
        .exhibit()
    }
}

impl Exhibit for ColumnDescriptions {
    fn exhibit(&self) -> Bundle {
        let columns = self.columns();
        let texts = |of: fn(&ColumnDescription) -> &str| {
            columns.iter().map(move |column| of(column).to_owned()).collect::<Vec<String>>()
        };
        let counts =
            |of: fn(&ColumnDescription) -> usize| columns.iter().map(of).collect::<Vec<usize>>();
        let numbers = |heading: &str, of: fn(&NumberDescription) -> f64| {
            let values = columns.iter().map(|column| column.numbers.as_ref().map(of));
            TableColumn::numbers_where(heading, values, DESCRIPTION)
        };
        let caption =
            format!("{} of a table with {}", counted(columns.len(), "column"), rows(self.n_rows()));
        let mut table = Table::new(caption)
            .column(TableColumn::texts("column", texts(|column| &column.column)).as_row_heads())
            .column(TableColumn::texts("type", texts(|column| &column.dtype)))
            .column(TableColumn::counts("values", counts(|column| column.count)))
            .column(TableColumn::counts("missing", counts(|column| column.missing)))
            .column(TableColumn::counts("different", counts(|column| column.n_distinct)))
            .column(numbers("mean", |numbers| numbers.mean))
            .column(numbers("deviation", |numbers| numbers.standard_deviation))
            .column(numbers("min", |numbers| numbers.min))
            .column(numbers("25 %", |numbers| numbers.lower_quartile))
            .column(numbers("median", |numbers| numbers.median))
            .column(numbers("75 %", |numbers| numbers.upper_quartile))
            .column(numbers("max", |numbers| numbers.max))
            .note(
                "Numbers to at most 5 significant digits. Deviation: standard deviation with divisor \
                 n − 1. Quartiles (25 and 75 %): linear interpolation (definition 7 of Hyndman and Fan 1996).",
            );
        for column in columns {
            if let Some(numbers) = column.numbers.filter(|numbers| numbers.n_not_finite > 0) {
                table = table.note(format!(
                    "{}: {} not finite and left out of every number here.",
                    column.column,
                    counted(numbers.n_not_finite, "value")
                ));
            }
        }
        table.exhibit()
    }
}

impl Exhibit for MissingValues {
    fn exhibit(&self) -> Bundle {
        let caption = format!(
            "{} missing in {}; {} complete",
            counted(self.n_missing(), "value"),
            rows(self.n_rows()),
            rows(self.n_complete_rows())
        );
        let names = self.columns().iter().map(|column| column.column.clone());
        let by_column = Table::new(caption)
            .column(TableColumn::texts("column", names).as_row_heads())
            .column(TableColumn::counts("missing", self.columns().iter().map(|c| c.count)));
        let patterns = self.patterns().iter().map(|pattern| match &pattern.columns[..] {
            [] => "nothing (complete rows)".to_owned(),
            columns => listed(columns.iter().map(String::as_str)),
        });
        let by_pattern = Table::new("Rows by what they miss")
            .column(TableColumn::texts("missing together", patterns).as_row_heads())
            .column(TableColumn::counts("rows", self.patterns().iter().map(|p| p.n_rows)));
        stacked(&[&by_column, &by_pattern])
    }
}

fn matrix_table(
    caption: String,
    corner: &str,
    values: &DMatrix<f64>,
    row_name: impl Fn(usize) -> String,
    column_name: impl Fn(usize) -> String,
    format: NumberFormat,
    is_gapped: bool,
) -> Table {
    let shown_rows = Abridged::of(values.nrows(), ROWS.0, ROWS.1, ROWS.2);
    let shown = Abridged::of(values.ncols(), COLUMNS.0, COLUMNS.1, COLUMNS.2);
    let names = shown_rows.indices().map(row_name);
    let mut table = Table::new(caption)
        .with_rows_left_out(shown_rows.head, shown_rows.left_out)
        .column(TableColumn::texts(corner, names).as_row_heads());
    for (place, idx) in shown.indices().enumerate() {
        if shown.left_out > 0 && place == shown.head {
            let n_rows = shown_rows.head + shown_rows.tail;
            table = table.column(TableColumn::left_out(shown.left_out, n_rows));
        }
        let cells = shown_rows.indices().map(|row| values[(row, idx)]);
        table = table.column(if is_gapped {
            let cells = cells.map(|value| (!value.is_nan()).then(|| format.format(value)));
            TableColumn::written(column_name(idx), true, cells)
        } else {
            TableColumn::numbers(column_name(idx), cells, format)
        });
    }
    table
}

// What a reader must know to read the numbers, and what was left out on the way from the table, so
// that nobody takes the matrix for all of it.
fn matrix_notes(labels: &LabelSource, weights: Option<&[f64]>, notes: &MatrixNotes) -> Vec<String> {
    let mut lines = vec![format!("Numbers to at most 6 significant digits; rows {labels}.")];
    if let Some(weights) = weights {
        let by =
            notes.weights.as_ref().map_or(String::new(), |column| format!(" by column {column}"));
        let least = weights.iter().fold(f64::INFINITY, |least, weight| least.min(*weight));
        let most = weights.iter().fold(0.0, |most: f64, weight| most.max(*weight));
        lines.push(format!(
            "Rows weighted{by}, from {} to {}.",
            DATA.format(least),
            DATA.format(most)
        ));
    }
    if !notes.left_out.is_empty() {
        let columns: Vec<String> =
            notes.left_out.iter().map(|left| format!("{}: {}", left.column, left.reason)).collect();
        lines.push(format!("Columns left out: {}.", listed(columns.iter().map(String::as_str))));
    }
    if !notes.dropped_rows.is_empty() {
        let labels = listed(notes.dropped_rows.iter().map(|row| row.label.as_str()));
        lines.push(format!(
            "{} of {} dropped for missing values: {labels}.",
            grouped(notes.dropped_rows.len()),
            rows(notes.n_table_rows)
        ));
    }
    if !notes.estimated.is_empty() {
        let n_cells = notes.estimated.iter().map(|column| column.count).sum();
        let columns: Vec<String> =
            notes.estimated.iter().map(|c| format!("{} in {}", c.count, c.column)).collect();
        lines.push(format!(
            "{} estimated, not measured: {}.",
            counted(n_cells, "missing value"),
            listed(columns.iter().map(String::as_str))
        ));
    }
    lines
}

fn listed<'a>(items: impl ExactSizeIterator<Item = &'a str>) -> String {
    let count = items.len();
    let shown: Vec<&str> = items.take(MOST_LISTED).collect();
    match count.saturating_sub(MOST_LISTED) {
        0 => shown.join(", "),
        more => format!("{} and {} more", shown.join(", "), grouped(more)),
    }
}

fn rows(count: usize) -> String {
    counted(count, "row")
}

fn columns(count: usize) -> String {
    counted(count, "column")
}
