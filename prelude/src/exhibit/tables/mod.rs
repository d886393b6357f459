//! A small table: what every tabular exhibit is made of.
//!
//! A table has a caption, columns and notes. A column has a heading, an optional detail under it
//! (a type, a count of missing values), an alignment and cells; numbers are formatted when the
//! column is made, with a stated rule, and stand aligned at the decimal point. Long tables are
//! abridged when they are drawn: the head and the tail are shown, and how many rows lie between.
//!
//! The same table is drawn as HTML, which follows the colours of the page it stands on, as Markdown
//! for reports, and as plain text for consoles.

mod html;
mod markdown;
mod plain;
#[cfg(test)]
mod tests;

use super::numbers::{fixed, grouped, percent, significant, stored};
use super::{Bundle, Content, Exhibit};

// A table of up to MOST_ROWS rows is shown whole, a longer one by its head and tail.
const MOST_ROWS: usize = 24;
const HEAD_ROWS: usize = 12;
const TAIL_ROWS: usize = 6;

/// How the numbers of a column are written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum NumberFormat {
    /// This many significant digits, trailing zeros kept: for computed results.
    Significant(usize),
    /// This many decimals: for numbers of one known range, such as loadings.
    Decimals(usize),
    /// At most this many significant digits, no trailing zeros: for data as they were recorded.
    Stored(usize),
    /// A share of one, as per cent with one decimal.
    Percent,
}

impl NumberFormat {
    /// Writes one number.
    pub fn format(self, value: f64) -> String {
        match self {
            NumberFormat::Significant(digits) => significant(value, digits),
            NumberFormat::Decimals(decimals) => fixed(value, decimals),
            NumberFormat::Stored(digits) => stored(value, digits),
            NumberFormat::Percent => percent(value),
        }
    }
}

/// A table to show: caption, columns, notes.
///
/// ```
/// use semiaxis::exhibit::{NumberFormat, Table, TableColumn};
///
/// let table = Table::new("Shrinkage by kiln")
///     .column(TableColumn::texts("kiln", ["north", "south"]).as_row_heads())
///     .column(TableColumn::numbers("mean, %", [6.25, 11.5], NumberFormat::Significant(3)))
///     .note("Means of 60 tiles each.");
/// assert!(table.plain().contains("11.5"));
/// ```
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Table {
    caption: String,
    columns: Vec<TableColumn>,
    notes: Vec<String>,
    // Set where rows were left out before the table was made: after which row, and how many.
    rows_left_out: Option<(usize, usize)>,
}

/// One column of a [`Table`].
#[derive(Debug, Clone, PartialEq)]
pub struct TableColumn {
    heading: String,
    detail: String,
    align: Align,
    row_heads: bool,
    cells: Vec<Cell>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Align {
    Start,
    Point,
    Middle,
}

#[derive(Debug, Clone, PartialEq)]
struct Cell {
    text: String,
    // The number behind the text, for dimming and shading.
    value: Option<f64>,
    look: Look,
    // From -1 to 1: the cell's background, by sign and size.
    shade: f64,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Look {
    Plain,
    Dimmed,
    Missing,
}

// What a drawn row stands for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum ShownRow {
    Cells(usize),
    LeftOut(usize),
}

impl Table {
    /// A table without columns.
    pub fn new(caption: impl Into<String>) -> Self {
        Table { caption: caption.into(), ..Table::default() }
    }

    /// Adds a column on the right.
    pub fn column(mut self, column: TableColumn) -> Self {
        self.columns.push(column);
        self
    }

    /// Adds a line under the table.
    pub fn note(mut self, note: impl Into<String>) -> Self {
        self.notes.push(note.into());
        self
    }

    /// Says that rows were left out before the table was made.
    pub(crate) fn with_rows_left_out(mut self, after: usize, count: usize) -> Self {
        self.rows_left_out = (count > 0).then_some((after, count));
        self
    }

    /// The table as HTML that needs nothing else and follows the page's colours.
    pub fn html(&self) -> String {
        html::draw(self)
    }

    /// The table as Markdown, for reports that are written as text.
    pub fn markdown(&self) -> String {
        markdown::draw(self)
    }

    /// The table as text for consoles.
    pub fn plain(&self) -> String {
        plain::draw(self)
    }

    fn n_rows(&self) -> usize {
        self.columns.iter().map(|column| column.cells.len()).max().unwrap_or(0)
    }

    fn shown_rows(&self) -> Vec<ShownRow> {
        let n_rows = self.n_rows();
        if let Some((after, count)) = self.rows_left_out {
            let after = after.min(n_rows);
            let mut rows: Vec<ShownRow> = (0..after).map(ShownRow::Cells).collect();
            rows.push(ShownRow::LeftOut(count));
            rows.extend((after..n_rows).map(ShownRow::Cells));
            return rows;
        }
        let cut = Abridged::of(n_rows, MOST_ROWS, HEAD_ROWS, TAIL_ROWS);
        let mut rows: Vec<ShownRow> = (0..cut.head).map(ShownRow::Cells).collect();
        if cut.left_out > 0 {
            rows.push(ShownRow::LeftOut(cut.left_out));
        }
        rows.extend((cut.head + cut.left_out..n_rows).map(ShownRow::Cells));
        rows
    }
}

impl Exhibit for Table {
    fn exhibit(&self) -> Bundle {
        stacked(&[self])
    }
}

/// Several tables in one exhibit, one under the other.
pub(crate) fn stacked(tables: &[&Table]) -> Bundle {
    let html: String = tables.iter().map(|table| table.html()).collect();
    let markdown: Vec<String> = tables.iter().map(|table| table.markdown()).collect();
    let plain: Vec<String> = tables.iter().map(|table| table.plain()).collect();
    Bundle::new()
        .with_html(html)
        .with("text/markdown", Content::Text(markdown.join("\n")))
        .with_plain(plain.join("\n\n"))
}

impl TableColumn {
    /// A column of text.
    pub fn texts<S: Into<String>>(
        heading: impl Into<String>,
        cells: impl IntoIterator<Item = S>,
    ) -> Self {
        Self::new(heading, Align::Start, cells.into_iter().map(|text| Cell::of(text.into())))
    }

    /// A column of numbers, aligned at the decimal point.
    pub fn numbers(
        heading: impl Into<String>,
        values: impl IntoIterator<Item = f64>,
        format: NumberFormat,
    ) -> Self {
        let cell = |value| Cell { value: Some(value), ..Cell::of(format.format(value)) };
        Self::new(heading, Align::Point, values.into_iter().map(cell))
    }

    /// As [`numbers`](TableColumn::numbers), with an empty cell where there is none.
    pub(crate) fn numbers_where(
        heading: impl Into<String>,
        values: impl IntoIterator<Item = Option<f64>>,
        format: NumberFormat,
    ) -> Self {
        let cell = |value: Option<f64>| match value {
            Some(value) => Cell { value: Some(value), ..Cell::of(format.format(value)) },
            None => Cell::of(String::new()),
        };
        Self::new(heading, Align::Point, values.into_iter().map(cell))
    }

    /// A column of counts.
    pub fn counts(heading: impl Into<String>, counts: impl IntoIterator<Item = usize>) -> Self {
        Self::new(heading, Align::Point, counts.into_iter().map(|n| Cell::of(n.to_string())))
    }

    /// Numbers that are written already, or are missing where there is `None`.
    pub(crate) fn written(
        heading: impl Into<String>,
        numeric: bool,
        cells: impl IntoIterator<Item = Option<String>>,
    ) -> Self {
        let align = if numeric { Align::Point } else { Align::Start };
        Self::new(
            heading,
            align,
            cells.into_iter().map(|cell| cell.map_or(Cell::missing(), Cell::of)),
        )
    }

    /// The column that stands for `count` columns that were left out.
    pub(crate) fn left_out(count: usize, n_rows: usize) -> Self {
        let cells = std::iter::repeat_n(Cell::of("…".to_owned()), n_rows);
        Self::new("…", Align::Middle, cells).with_detail(format!("{} more", grouped(count)))
    }

    /// Small print under the heading, such as a type or a count of missing values.
    pub fn with_detail(mut self, detail: impl Into<String>) -> Self {
        self.detail = detail.into();
        self
    }

    /// Makes the column's cells the heads of their rows.
    pub fn as_row_heads(mut self) -> Self {
        self.row_heads = true;
        self
    }

    /// Dims numbers whose absolute value lies below a threshold; say so in a note.
    pub fn dimmed_below(mut self, threshold: f64) -> Self {
        for cell in &mut self.cells {
            if cell.value.is_some_and(|value| value.abs() < threshold) {
                cell.look = Look::Dimmed;
            }
        }
        self
    }

    /// Shades numbers by sign and by size in relation to `full`, which gets the deepest shade.
    pub fn shaded_up_to(mut self, full: f64) -> Self {
        for cell in &mut self.cells {
            if let Some(value) = cell.value.filter(|value| value.is_finite() && full > 0.0) {
                cell.shade = (value / full).clamp(-1.0, 1.0);
            }
        }
        self
    }

    fn new(
        heading: impl Into<String>,
        align: Align,
        cells: impl IntoIterator<Item = Cell>,
    ) -> Self {
        TableColumn {
            heading: heading.into(),
            detail: String::new(),
            align,
            row_heads: false,
            cells: cells.into_iter().collect(),
        }
    }
}

impl Cell {
    fn of(text: String) -> Self {
        Cell { text, value: None, look: Look::Plain, shade: 0.0 }
    }

    fn missing() -> Self {
        Cell { look: Look::Missing, ..Cell::of("missing".to_owned()) }
    }

    // Digits after the decimal point; what has an exponent is not aligned.
    fn n_decimals(&self) -> usize {
        let number = self.text.strip_suffix(" %").unwrap_or(&self.text);
        if number.contains(['e', 'N', 'n']) {
            return 0;
        }
        number.split_once('.').map_or(0, |(_, decimals)| decimals.len())
    }
}

/// Which rows or columns of a long table are shown: `head` first ones, then a gap of `left_out`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Abridged {
    pub head: usize,
    pub left_out: usize,
    pub tail: usize,
}

impl Abridged {
    /// Shows all of `count` up to `most`, else `head` and `tail` of them.
    pub fn of(count: usize, most: usize, head: usize, tail: usize) -> Self {
        if count <= most {
            Abridged { head: count, left_out: 0, tail: 0 }
        } else {
            Abridged { head, left_out: count - head - tail, tail }
        }
    }

    /// The indices that are shown, in order.
    pub fn indices(self) -> impl Iterator<Item = usize> + Clone {
        let from = self.head + self.left_out;
        (0..self.head).chain(from..from + self.tail)
    }
}

// The words in the gap of an abridged table.
fn rows_between(count: usize) -> String {
    match count {
        1 => "… 1 more row …".to_owned(),
        _ => format!("… {} more rows …", grouped(count)),
    }
}
