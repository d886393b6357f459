//! Tables as HTML and as text: everything there, everything aligned, nothing that escapes.

use super::*;
use crate::exhibit::text::console_width;

fn sample() -> Table {
    Table::new("Shrinkage")
        .column(TableColumn::texts("kiln", ["north", "高い窯", "s"]).as_row_heads())
        .column(TableColumn::numbers("mean", [6.25, 11.5, -0.0125], NumberFormat::Stored(4)))
        .column(TableColumn::counts("tiles", [60, 12345, 7]).with_detail("2 missing"))
        .note("Means of all tiles.")
}

#[test]
fn plain_tables_are_aligned_by_console_cells() {
    // Written by hand: wide characters take two cells, numbers meet at the decimal point.
    let expected = "\
Shrinkage

kiln       mean        tiles
                    2 missing
──────  ───────  ─────────
north    6.25           60
高い窯  11.5         12345
s       -0.0125          7

Means of all tiles.";
    let lines: Vec<&str> = expected.lines().collect();
    let plain = sample().plain();
    let found: Vec<&str> = plain.lines().collect();
    assert_eq!(found[5..8], lines[5..8]);
    assert_eq!(found[4], lines[4]);
    assert_eq!(found[0], "Shrinkage");
    assert_eq!(found[9], "Means of all tiles.");
    assert!(found[2].starts_with("kiln"));
    assert_eq!(console_width(found[2]), console_width(found[4]));
    assert_eq!(found[3].trim(), "2 missing");
}

#[test]
fn html_tables_have_heads_scopes_and_notes() {
    let html = sample().html();
    assert_eq!(html.matches("<th scope=\"col\"").count(), 3);
    assert_eq!(html.matches("<th scope=\"row\"").count(), 3);
    assert_eq!(html.matches("<tr>").count(), 4);
    assert!(html.contains("<small>2 missing</small>"));
    assert!(html.contains("<p dir=\"auto\">Means of all tiles.</p>"));
    assert!(html.contains(">-0.0125</td>"), "{html}");
    for foreign in ["http", "src=", "href=", "@import", "url("] {
        assert!(!html.contains(foreign), "{foreign}");
    }
}

#[test]
fn numbers_paste_as_numbers() {
    // A cell must hold the number alone: what a spreadsheet gets is the cell's text.
    let html = sample().html();
    for cell in html.split("<td").skip(1).map(|rest| rest.split('<').next().unwrap_or("")) {
        let text = cell.split('>').nth(1).unwrap_or("");
        assert!(text.parse::<f64>().is_ok(), "{text:?}");
    }
}

#[test]
fn hostile_text_is_shown_and_does_nothing() {
    let hostile = ["<script>alert(1)</script>", "\"'&", "a\nb\tc", "\u{1b}[2J", "\u{202e}x", "🧱"];
    let table = Table::new(hostile[0])
        .column(TableColumn::texts(hostile[0], hostile).with_detail(hostile[1]).as_row_heads())
        .column(TableColumn::texts(hostile[3], hostile))
        .note(hostile[4]);
    let html = table.html();
    assert!(!html.contains("<script"));
    assert!(html.contains("&lt;script&gt;alert(1)&lt;/script&gt;"));
    assert!(html.contains("🧱"));
    let plain = table.plain();
    for text in [&html, &plain] {
        assert!(!text.chars().any(|c| c.is_control() && c != '\n'), "{text:?}");
        assert!(!text.contains('\u{202e}'));
    }
    // Line breaks inside cells must not break rows.
    assert_eq!(plain.lines().count(), 2 + 2 + 1 + hostile.len() + 2);
}

#[test]
fn long_text_is_cut_and_kept_in_the_title() {
    let long = "tile ".repeat(500);
    let table = Table::new("").column(TableColumn::texts("name", [long.as_str()]));
    let html = table.html();
    assert!(html.contains("…</td>"));
    assert!(html.contains("title=\"tile tile"));
    assert!(html.len() < 6_000, "{}", html.len());
    assert!(table.plain().lines().all(|line| console_width(line) <= 40));
}

#[test]
fn long_tables_show_head_and_tail_and_count_the_rest() {
    let table = Table::new("")
        .column(TableColumn::counts("n", 1..=1000).as_row_heads())
        .column(TableColumn::numbers("x", (1..=1000).map(f64::from), NumberFormat::Stored(6)));
    let plain = table.plain();
    assert!(plain.contains("… 982 more rows …"), "{plain}");
    assert!(plain.lines().any(|line| line.trim_start().starts_with("12 ")));
    assert!(!plain.lines().any(|line| line.trim_start().starts_with("13 ")));
    assert!(plain.lines().any(|line| line.trim_start().starts_with("995 ")));
    let html = table.html();
    assert_eq!(html.matches("<th scope=\"row\"").count(), 18);
    assert!(html.contains("… 982 more rows …"));
    // As many rows as fit whole are not abridged.
    let table = Table::new("").column(TableColumn::counts("n", 1..=24));
    assert!(!table.plain().contains('…'));
}

#[test]
fn wide_tables_lose_columns_in_consoles_and_say_how_many() {
    let mut table = Table::new("").column(TableColumn::counts("row", 1..=2).as_row_heads());
    for place in 1..=60 {
        let heading = format!("column {place}");
        table = table.column(TableColumn::numbers(heading, [1.5, 2.5], NumberFormat::Stored(4)));
    }
    let plain = table.plain();
    assert!(plain.lines().all(|line| console_width(line) <= 132), "{plain}");
    let shown = plain.matches("column ").count();
    assert!(shown >= 6, "{plain}");
    assert!(plain.contains("column 1 ") && plain.contains("column 60"));
    assert!(plain.contains(&format!("{} more", 60 - shown)), "{plain}");
    assert_eq!(table.html().matches("column ").count(), 60);
}

#[test]
fn dimming_and_shading_follow_the_stated_threshold() {
    let column = TableColumn::numbers("x", [0.5, -0.1, 0.1, -0.9], NumberFormat::Decimals(2))
        .dimmed_below(0.2)
        .shaded_up_to(1.0);
    let html = Table::new("").column(column).html();
    assert_eq!(html.matches("class=\"p d\"").count(), 2);
    assert_eq!(html.matches("background:rgba").count(), 4);
}

#[test]
fn tables_without_rows_or_columns_are_drawn() {
    assert!(Table::new("empty").html().contains("empty"));
    assert_eq!(Table::new("empty").plain(), "empty\n");
    let table = Table::new("").column(TableColumn::texts("a", Vec::<String>::new()));
    assert!(table.plain().starts_with('a'));
    // Columns of different length leave blanks rather than panic.
    let table = Table::new("")
        .column(TableColumn::counts("a", [1, 2]))
        .column(TableColumn::counts("b", [1]));
    assert!(table.html().contains("<td></td>"));
    assert_eq!(table.plain().lines().count(), 4);
}

#[test]
fn the_numbers_behind_a_table_are_handed_on_unrounded() {
    let table = Table::new("c <x>")
        .column(TableColumn::texts("kiln", ["north", "mill"]).as_row_heads())
        .column(TableColumn::numbers("mean", [1.0 / 3.0, f64::NAN], NumberFormat::Decimals(1)))
        .note("n");
    let found = table.exhibit();
    let numbers = found.entries().iter().find_map(|(mime, content)| match content {
        Content::Json(json) if mime == NUMBERS => Some(json.clone()),
        _ => None,
    });
    let expected = serde_json::json!({
        "kind": "table", "caption": "c <x>", "notes": ["n"],
        "columns": [
            {"heading": "kiln", "detail": "", "values": ["north", "mill"]},
            {"heading": "mean", "detail": "", "values": [1.0 / 3.0, "NaN"]},
        ],
    });
    assert_eq!(numbers, Some(expected));
}
