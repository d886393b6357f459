//! A table as Markdown, for reports that are written as text.
//!
//! The pipe tables that most renderers know (GitHub Flavored Markdown, section 4.10). Everything
//! from a table is escaped, so that a name can make neither markup nor a column.

use super::{Align, ShownRow, Table, TableColumn, rows_between};
use crate::exhibit::text::visible;

pub(super) fn draw(table: &Table) -> String {
    let mut out = String::new();
    if !table.caption.is_empty() {
        out.push_str(&format!("**{}**\n\n", escaped(&table.caption)));
    }
    if !table.columns.is_empty() {
        let heading = |column: &TableColumn| match column.detail.is_empty() {
            true => escaped(&column.heading),
            false => format!("{} ({})", escaped(&column.heading), escaped(&column.detail)),
        };
        push_row(&mut out, table.columns.iter().map(heading));
        let rule = |column: &TableColumn| match column.align {
            Align::Start => "---".to_owned(),
            Align::Point => "---:".to_owned(),
            Align::Middle => ":---:".to_owned(),
        };
        push_row(&mut out, table.columns.iter().map(rule));
        for row in table.shown_rows() {
            match row {
                ShownRow::Cells(row) => {
                    let cell = |column: &TableColumn| {
                        column.cells.get(row).map_or(String::new(), |cell| escaped(&cell.text))
                    };
                    push_row(&mut out, table.columns.iter().map(cell));
                }
                ShownRow::LeftOut(count) => {
                    let mut cells = vec![String::new(); table.columns.len()];
                    cells[0] = escaped(&rows_between(count));
                    push_row(&mut out, cells.into_iter());
                }
            }
        }
    }
    for note in &table.notes {
        out.push_str(&format!("\n{}\n", escaped(note)));
    }
    out
}

fn push_row(out: &mut String, cells: impl Iterator<Item = String>) {
    for cell in cells {
        out.push_str("| ");
        out.push_str(&cell);
        out.push(' ');
    }
    out.push_str("|\n");
}

/// Text that a renderer shows as it is.
fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in visible(text).chars() {
        match c {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            // Escaping these wherever they stand is allowed and easier to trust than rules about
            // where they mean something (CommonMark 0.31, section 2.4).
            '\\' | '`' | '*' | '_' | '{' | '}' | '[' | ']' | '#' | '|' | '~' | '$' => {
                out.push('\\');
                out.push(c);
            }
            c => out.push(c),
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::super::{NumberFormat, Table, TableColumn};

    #[test]
    fn a_table_is_a_pipe_table_with_its_caption_and_notes() {
        let table = Table::new("Shrinkage by kiln")
            .column(TableColumn::texts("kiln", ["north", "mill"]).as_row_heads())
            .column(
                TableColumn::numbers("mean", [6.25, 11.5], NumberFormat::Significant(3))
                    .with_detail("%"),
            )
            .note("Means of 60 tiles each.");
        assert_eq!(
            table.markdown(),
            "**Shrinkage by kiln**\n\n| kiln | mean (%) |\n| --- | ---: |\n| north | 6.25 |\n\
             | mill | 11.5 |\n\nMeans of 60 tiles each.\n"
        );
    }

    #[test]
    fn names_make_neither_markup_nor_columns() {
        let names = ["a|b", "<script>", "*bold*", "[x](y)", "line\nbreak", "`code`", "$x$"];
        let table = Table::new("").column(TableColumn::texts("name", names));
        let lines: Vec<String> = table.markdown().lines().skip(2).map(str::to_owned).collect();
        assert_eq!(
            lines,
            [
                "| a\\|b |",
                "| &lt;script&gt; |",
                "| \\*bold\\* |",
                "| \\[x\\](y) |",
                "| line\\\\nbreak |",
                "| \\`code\\` |",
                "| \\$x\\$ |"
            ]
        );
    }
}
