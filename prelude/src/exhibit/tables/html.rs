//! A table as HTML.
//!
//! Colours come from the page (`currentColor`, transparent backgrounds), so the table reads on
//! light and on dark pages. The style block names one class only and is repeated with every
//! table, because any output of a notebook may be shown alone. Where a client strips style
//! blocks from notebooks that it does not trust, a plain table remains.

use std::fmt::Write;

use super::{Align, Cell, Look, ShownRow, Table, TableColumn, rows_between};
use crate::exhibit::text::{push_markup, shortened};

// Characters of a cell or heading that are shown; the whole text stays in the cell's title.
const MOST_CHARACTERS: usize = 60;
const MOST_IN_TITLE: usize = 1000;

// The doubled class outranks what notebook clients say about every table of an output.
const STYLE: &str = "<style>\
.semiaxis-table{overflow-x:auto;margin:.4em 0;font-size:13px;line-height:1.4}\
.semiaxis-table.semiaxis-table table{border-collapse:collapse;border:0;margin:0;width:auto;\
table-layout:auto;font-size:inherit;font-variant-numeric:tabular-nums;color:inherit}\
.semiaxis-table.semiaxis-table caption{caption-side:top;text-align:left;font-weight:600;\
padding:0 0 .4em;color:inherit;white-space:nowrap}\
.semiaxis-table.semiaxis-table tr:nth-child(n){background:none;border:0}\
.semiaxis-table.semiaxis-table th,.semiaxis-table.semiaxis-table td{border:0;padding:.2em .8em;\
text-align:left;vertical-align:baseline;white-space:pre;max-width:none;color:inherit;\
font-weight:400}\
.semiaxis-table.semiaxis-table thead th{font-weight:600;vertical-align:bottom;\
border-bottom:1px solid currentColor}\
.semiaxis-table.semiaxis-table tbody tr:last-child>*{border-bottom:1px solid currentColor}\
.semiaxis-table.semiaxis-table .p{text-align:right}\
.semiaxis-table.semiaxis-table .m{text-align:center}\
.semiaxis-table.semiaxis-table small{display:block;font-size:11px;font-weight:400;opacity:.75}\
.semiaxis-table.semiaxis-table .d{opacity:.6}\
.semiaxis-table.semiaxis-table .x{opacity:.75;font-style:italic}\
.semiaxis-table p{margin:.4em 0 0;font-size:12px;opacity:.85;max-width:64em}\
</style>";

pub(super) fn draw(table: &Table) -> String {
    let mut out = String::with_capacity(2048);
    out.push_str("<div class=\"semiaxis-table\">");
    out.push_str(STYLE);
    out.push_str("<table>");
    if !table.caption.is_empty() {
        out.push_str("<caption dir=\"auto\">");
        push_markup(&mut out, &table.caption);
        out.push_str("</caption>");
    }
    draw_header(table, &mut out);
    draw_body(table, &mut out);
    out.push_str("</table>");
    for note in &table.notes {
        out.push_str("<p dir=\"auto\">");
        push_markup(&mut out, note);
        out.push_str("</p>");
    }
    out.push_str("</div>");
    out
}

fn draw_header(table: &Table, out: &mut String) {
    out.push_str("<thead><tr>");
    for column in &table.columns {
        let _ = write!(out, "<th scope=\"col\"{}", class(column.align, Look::Plain));
        push_title(out, &column.heading);
        out.push_str("><bdi>");
        push_markup(out, &shortened(&column.heading, MOST_CHARACTERS));
        out.push_str("</bdi>");
        if !column.detail.is_empty() {
            // The break serves clients that strip the style block.
            out.push_str("<br><small>");
            push_markup(out, &column.detail);
            out.push_str("</small>");
        }
        out.push_str("</th>");
    }
    out.push_str("</tr></thead>");
}

fn draw_body(table: &Table, out: &mut String) {
    let most_decimals: Vec<usize> = table
        .columns
        .iter()
        .map(|column| column.cells.iter().map(Cell::n_decimals).max().unwrap_or(0))
        .collect();
    out.push_str("<tbody>");
    for row in table.shown_rows() {
        match row {
            ShownRow::LeftOut(count) => {
                let span = table.columns.len().max(1);
                let _ = write!(out, "<tr><td class=\"d\" colspan=\"{span}\">");
                out.push_str(&rows_between(count));
                out.push_str("</td></tr>");
            }
            ShownRow::Cells(row) => {
                out.push_str("<tr>");
                for (column, &most) in table.columns.iter().zip(&most_decimals) {
                    draw_cell(column, row, most, out);
                }
                out.push_str("</tr>");
            }
        }
    }
    out.push_str("</tbody>");
}

fn draw_cell(column: &TableColumn, row: usize, most_decimals: usize, out: &mut String) {
    let Some(cell) = column.cells.get(row) else {
        out.push_str("<td></td>");
        return;
    };
    let (tag, scope) = if column.row_heads { ("th", " scope=\"row\"") } else { ("td", "") };
    let _ = write!(out, "<{tag}{scope}{}", class(column.align, cell.look));
    push_style(column.align, cell, most_decimals, out);
    push_title(out, &cell.text);
    if column.align == Align::Start {
        out.push_str(" dir=\"auto\"");
    }
    out.push('>');
    push_markup(out, &shortened(&cell.text, MOST_CHARACTERS));
    let _ = write!(out, "</{tag}>");
}

// Right-aligned numbers meet at the decimal point when shorter fractions get padding: invisible
// characters would do the same but come along when the table is pasted into a spreadsheet.
fn push_style(align: Align, cell: &Cell, most_decimals: usize, out: &mut String) {
    let mut style = String::new();
    let decimals = cell.n_decimals();
    if align == Align::Point && decimals < most_decimals && cell.look != Look::Missing {
        let point = if decimals == 0 { 0.5 } else { 0.0 };
        let lacking = (most_decimals - decimals) as f64 + point;
        let _ = write!(style, "padding-right:calc(.8em + {lacking}ch)");
    }
    if cell.shade != 0.0 {
        let hue = if cell.shade > 0.0 { "36,149,224" } else { "202,112,60" };
        let separator = if style.is_empty() { "" } else { ";" };
        let _ = write!(style, "{separator}background:rgba({hue},{:.2})", 0.45 * cell.shade.abs());
    }
    if !style.is_empty() {
        let _ = write!(out, " style=\"{style}\"");
    }
}

fn push_title(out: &mut String, text: &str) {
    if text.chars().nth(MOST_CHARACTERS).is_some() {
        out.push_str(" title=\"");
        push_markup(out, &shortened(text, MOST_IN_TITLE));
        out.push('"');
    }
}

fn class(align: Align, look: Look) -> &'static str {
    match (align, look) {
        (Align::Start, Look::Plain) => "",
        (Align::Start, Look::Dimmed) => " class=\"d\"",
        (Align::Start, Look::Missing) => " class=\"x\"",
        (Align::Point, Look::Plain) => " class=\"p\"",
        (Align::Point, Look::Dimmed) => " class=\"p d\"",
        (Align::Point, Look::Missing) => " class=\"p x\"",
        (Align::Middle, _) => " class=\"m d\"",
    }
}
