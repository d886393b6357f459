//! The visible page of a record.
//!
//! It needs nothing but itself: styles stand in its head, pictures in their places, and its content
//! security policy forbids scripts and the network to whatever a cell may have put on it.

use std::collections::BTreeMap;
use std::path::Path;

use serde_json::Value;

use super::appendix;
use super::evidence::Manifest;
use super::exhibits;
use super::highlight::highlighted;
use super::markup::{escaped, milliseconds, size};
use super::narrative::{Narrative, PictureFile, titles};
use crate::notebook::document::Document;

const STYLE: &str = include_str!("style.css");

/// What a browser may do with the page: show it.
const POLICY: &str = "default-src 'none'; img-src data:; style-src 'unsafe-inline'; \
    base-uri 'none'; form-action 'none'";

/// The parts of a page that do not depend on its manifest.
pub struct Body {
    cells: String,
    contents: String,
    /// Pictures that the text took from files.
    pub pictures: Vec<PictureFile>,
}

/// Writes narrative, cells and exhibits.
pub fn body(
    document: &Document,
    shown: &BTreeMap<usize, Vec<Value>>,
    manifest: &Manifest,
    folder: &Path,
) -> Body {
    let of_level_one = (0..document.n_cells())
        .filter(|cell_idx| document.kind(*cell_idx) == "markdown")
        .flat_map(|cell_idx| titles(&document.source(cell_idx)))
        .filter(|heading| heading.trim() != manifest.title.trim())
        .count();
    let mut narrative = Narrative::new(folder, &manifest.title, u8::from(of_level_one > 0));
    let mut cells = String::new();
    for cell_idx in 0..document.n_cells() {
        let place = cell_idx + 1;
        match document.kind(cell_idx) {
            "markdown" => {
                let attachments = document.part(cell_idx, "attachments");
                let html = narrative.html(&document.source(cell_idx), attachments);
                cells.push_str(&format!("<div class=\"narrative\">\n{html}</div>\n"));
            }
            "raw" => cells.push_str(&super::sanitise::preformatted(&document.source(cell_idx))),
            _ => {
                if let Some(code) = document.code(cell_idx) {
                    cells.push_str(&cell(place, &code, shown.get(&place), manifest));
                }
            }
        }
    }
    let contents = contents(&narrative);
    Body { cells, contents, pictures: narrative.pictures }
}

fn cell(place: usize, code: &str, shown: Option<&Vec<Value>>, manifest: &Manifest) -> String {
    let facts = manifest.cells.iter().find(|cell| cell.place == place);
    let how = match facts {
        Some(facts) if facts.count > 0 => format!(
            "Cell {place}, run [{}], {}{}",
            facts.count,
            milliseconds(facts.run_ms),
            if facts.outcome == "done" { String::new() } else { format!(", {}", facts.outcome) }
        ),
        _ => format!("Cell {place}, not run"),
    };
    let outputs = shown.map_or(String::new(), |outputs| exhibits::html(outputs));
    format!(
        "<div class=\"cell\" id=\"cell-{place}\">\n<details open><summary>{}</summary>\
         <pre tabindex=\"0\"><code>{}</code></pre></details>\n{outputs}</div>\n",
        escaped(&how),
        highlighted(code)
    )
}

fn contents(narrative: &Narrative<'_>) -> String {
    let mut out = String::from("<nav aria-label=\"Contents\">\n<p>Contents</p>\n<ol>\n");
    for heading in narrative.headings.iter().filter(|heading| heading.level <= 3) {
        let class = if heading.level > 2 { " class=\"deep\"" } else { "" };
        let text = if heading.text.trim().is_empty() { "…" } else { &heading.text };
        out.push_str(&format!(
            "<li{class}><a href=\"#{}\">{}</a></li>\n",
            heading.id,
            escaped(text)
        ));
    }
    out.push_str(
        "<li><a href=\"#appendix\">Appendix: what this rests on</a></li>\n</ol>\n</nav>\n",
    );
    out
}

/// The page up to the parts for programs; `line` goes into its head, `digest` is shown.
pub fn page(manifest: &Manifest, body: &Body, language: &str, line: &str, digest: &str) -> String {
    let title = escaped(&manifest.title);
    let mut out = format!(
        "<!doctype html>\n<html lang=\"{}\">\n<head>\n<meta charset=\"utf-8\">\n\
         <meta http-equiv=\"Content-Security-Policy\" content=\"{POLICY}\">\n\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n\
         <meta name=\"generator\" content=\"semiaxis {}\">\n{line}<title>{title}</title>\n\
         <style>\n{STYLE}</style>\n</head>\n<body>\n",
        escaped(language),
        env!("CARGO_PKG_VERSION")
    );
    out.push_str(&format!(
        "<header>\n<h1>{title}</h1>\n<p class=\"byline\">{}</p>\n",
        byline(manifest)
    ));
    notices(manifest, &mut out);
    out.push_str(&format!(
        "<p class=\"seal\">SHA-256 of the manifest: {digest}<br>Check this record with <code>semiaxis verify</code>.</p>\n</header>\n"
    ));
    out.push_str(&body.contents);
    out.push_str("<main>\n");
    out.push_str(&body.cells);
    out.push_str(&appendix::html(manifest));
    out.push_str("</main>\n");
    out.push_str(&format!(
        "<footer><p>Made by semiaxis {} from {} on {}. This file holds the notebook, its outputs and the \
         manifest in a form for programs, too.</p></footer>\n",
        escaped(&manifest.build.semiaxis),
        escaped(&manifest.notebook),
        escaped(&manifest.made)
    ));
    out
}

fn byline(manifest: &Manifest) -> String {
    let mut parts: Vec<String> = manifest.authors.iter().map(|author| escaped(author)).collect();
    parts.push(escaped(&manifest.date));
    parts.join(" · ")
}

fn notices(manifest: &Manifest, out: &mut String) {
    if manifest.failed {
        let failed: Vec<String> = manifest
            .cells
            .iter()
            .filter(|cell| cell.outcome == "failed" || cell.outcome == "interrupted")
            .map(|cell| format!("<a href=\"#cell-{0}\">cell {0}</a>", cell.place))
            .collect();
        let not_run = manifest.cells.iter().filter(|cell| cell.outcome == "not run").count();
        out.push_str(&format!(
            "<div class=\"notice alert\"><p><strong>This record has errors.</strong> Failed: {}. Cells not run: \
             {not_run}. What is concluded here may rest on results that are not there.</p></div>\n",
            failed.join(", ")
        ));
    }
    let data: Vec<String> = manifest
        .files_read
        .iter()
        .filter(|file| !file.made_here)
        .map(|file| match (file.rows, file.columns) {
            (Some(rows), Some(columns)) => {
                format!(
                    "{} ({rows} rows, {columns} columns, {})",
                    escaped(&file.path),
                    size(file.bytes)
                )
            }
            _ => format!("{} ({})", escaped(&file.path), size(file.bytes)),
        })
        .collect();
    let data = if data.is_empty() { "none".to_owned() } else { data.join("; ") };
    out.push_str(&format!(
        "<div class=\"notice\"><p>Run from top to bottom in a fresh session on {}, in {}. Data: {data}.</p>",
        escaped(&manifest.made),
        milliseconds(manifest.took_ms)
    ));
    for set in &manifest.set {
        out.push_str(&format!(
            "<p>Set for this run: <code>{} = {}</code> instead of <code>{}</code>.</p>",
            escaped(&set.name),
            escaped(&set.value),
            escaped(&set.instead_of)
        ));
    }
    out.push_str("</div>\n");
}
