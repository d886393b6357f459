//! A table as text for consoles.
//!
//! Columns are set by console cells, so that wide characters and combining marks do not shift
//! what stands right of them. A table wider than [`MOST_CELLS`] loses columns from its middle
//! and says how many, because a console would wrap its lines into a muddle.

use super::{Align, Look, ShownRow, Table, TableColumn, rows_between};
use crate::exhibit::text::{console_width, shortened, visible};

const MOST_CELLS: usize = 132;
const MOST_CHARACTERS: usize = 32;
const BETWEEN: usize = 2;

pub(super) fn draw(table: &Table) -> String {
    let rows = table.shown_rows();
    let columns = fitting(table.columns.iter().map(|column| Drawn::of(column, &rows)).collect());
    let mut lines = Vec::new();
    if !table.caption.is_empty() {
        lines.push(visible(&table.caption).into_owned());
        lines.push(String::new());
    }
    if !columns.is_empty() {
        let has_details = columns.iter().any(|column| !column.detail.is_empty());
        lines.push(join(&columns, |column| column.set(&column.heading)));
        if has_details {
            lines.push(join(&columns, |column| column.set(&column.detail)));
        }
        lines.push(join(&columns, |column| "─".repeat(column.width)));
        for (place, row) in rows.iter().enumerate() {
            match row {
                ShownRow::LeftOut(count) => lines.push(rows_between(*count)),
                ShownRow::Cells(_) => lines.push(join(&columns, |c| c.set(&c.cells[place]))),
            }
        }
    }
    if !table.notes.is_empty() {
        lines.push(String::new());
        lines.extend(table.notes.iter().map(|note| visible(note).into_owned()));
    }
    lines.join("\n")
}

// A column with its texts ready: numbers already padded to meet at the decimal point.
struct Drawn {
    heading: String,
    detail: String,
    cells: Vec<String>,
    align: Align,
    row_heads: bool,
    width: usize,
    // How many columns of the table this one stands for, when it is a gap.
    stands_for: Option<usize>,
}

impl Drawn {
    fn of(column: &TableColumn, rows: &[ShownRow]) -> Self {
        let heading = clean(&column.heading);
        let detail = clean(&column.detail);
        let most_decimals = column.cells.iter().map(|cell| cell.n_decimals()).max().unwrap_or(0);
        let text_of = |row: &ShownRow| match row {
            ShownRow::LeftOut(_) => String::new(),
            ShownRow::Cells(row) => column.cells.get(*row).map_or(String::new(), |cell| {
                let mut text = clean(&cell.text);
                if column.align == Align::Point && cell.look != Look::Missing {
                    let decimals = cell.n_decimals();
                    let point = usize::from(decimals == 0 && most_decimals > 0);
                    text.push_str(&" ".repeat(most_decimals - decimals + point));
                }
                text
            }),
        };
        let cells: Vec<String> = rows.iter().map(text_of).collect();
        let texts = [&heading, &detail].into_iter().chain(&cells);
        let width = texts.map(|text| console_width(text)).max().unwrap_or(0);
        let is_gap = column.align == Align::Middle;
        let stands_for = is_gap.then(|| {
            let digits: String = column.detail.chars().filter(char::is_ascii_digit).collect();
            digits.parse().unwrap_or(0)
        });
        let (align, row_heads) = (column.align, column.row_heads);
        Drawn { heading, detail, cells, align, row_heads, width, stands_for }
    }

    fn gap(count: usize, n_cells: usize) -> Self {
        let detail = format!("{count} more");
        Drawn {
            heading: "…".to_owned(),
            width: console_width(&detail),
            detail,
            cells: vec!["…".to_owned(); n_cells],
            align: Align::Middle,
            row_heads: false,
            stands_for: Some(count),
        }
    }

    fn set(&self, text: &str) -> String {
        let free = self.width.saturating_sub(console_width(text));
        match self.align {
            Align::Start => format!("{text}{}", " ".repeat(free)),
            Align::Point => format!("{}{text}", " ".repeat(free)),
            Align::Middle => {
                let before = free / 2;
                format!("{}{text}{}", " ".repeat(before), " ".repeat(free - before))
            }
        }
    }
}

fn clean(text: &str) -> String {
    visible(&shortened(text, MOST_CHARACTERS)).into_owned()
}

fn join(columns: &[Drawn], text: impl Fn(&Drawn) -> String) -> String {
    let texts: Vec<String> = columns.iter().map(text).collect();
    texts.join(&" ".repeat(BETWEEN)).trim_end().to_owned()
}

// Takes columns from the left and the right, two to one, until the line is full; row heads and
// at least one more column always stay.
fn fitting(columns: Vec<Drawn>) -> Vec<Drawn> {
    let room = |column: &Drawn| column.width + BETWEEN;
    let total: usize = columns.iter().map(room).sum();
    if total <= MOST_CELLS + BETWEEN {
        return columns;
    }
    let n_cells = columns.first().map_or(0, |column| column.cells.len());
    let n_heads = columns.iter().take_while(|column| column.row_heads).count();
    let gap_room = room(&Drawn::gap(columns.len(), n_cells)) + 3;
    let (mut left, mut right) = (n_heads, columns.len());
    let mut used = gap_room + columns[..n_heads].iter().map(room).sum::<usize>();
    loop {
        let from_left = (left - n_heads) <= 2 * (columns.len() - right);
        let next = if from_left { left } else { right - 1 };
        if left >= right {
            break;
        }
        let more = room(&columns[next]);
        if used + more > MOST_CELLS + BETWEEN && left > n_heads {
            break;
        }
        used += more;
        if from_left { left += 1 } else { right -= 1 }
    }
    if left >= right {
        return columns;
    }
    let hidden = columns[left..right].iter().map(|column| column.stands_for.unwrap_or(1)).sum();
    let mut columns = columns;
    let tail = columns.split_off(right);
    columns.truncate(left);
    columns.push(Drawn::gap(hidden, n_cells));
    columns.extend(tail);
    columns
}
