//! The appendix of a record: everything that its results rest on, for a person to read.

use super::evidence::{FileFacts, Manifest};
use super::markup::{escaped, milliseconds, size};

/// What holds for every record.
const CAUTION: &str = "Statistical limits are not safety limits. Whether something is strong enough, \
    an alarm is due or equipment fits is decided by the standards that apply and by people licensed \
    to decide, not by this analysis.";

/// The appendix as HTML.
pub fn html(manifest: &Manifest) -> String {
    let mut out = String::from("<h2 id=\"appendix\">Appendix: what this rests on</h2>\n");
    cautions(manifest, &mut out);
    as_saved(manifest, &mut out);
    out.push_str("<h3>Files read</h3>\n");
    files(&manifest.files_read, "No cell read a file, as far as could be seen.", true, &mut out);
    out.push_str("<h3>Files written</h3>\n");
    files(
        &manifest.files_written,
        "No cell wrote a file, as far as could be seen.",
        false,
        &mut out,
    );
    out.push_str(
        "<p class=\"cut\">Files that other programs open for a cell are not seen; nor is what comes \
         over a network.</p>\n",
    );
    options(manifest, &mut out);
    cells(manifest, &mut out);
    build(manifest, &mut out);
    out.push_str("<h3>Host</h3>\n<dl>\n");
    for (name, value) in &manifest.host {
        out.push_str(&format!("<dt>{}</dt><dd>{}</dd>\n", escaped(name), escaped(value)));
    }
    out.push_str("</dl>\n");
    out
}

fn list(lines: &[String], out: &mut String) {
    out.push_str("<ul>\n");
    for line in lines {
        out.push_str(&format!("<li>{}</li>\n", escaped(line)));
    }
    out.push_str("</ul>\n");
}

fn cautions(manifest: &Manifest, out: &mut String) {
    out.push_str(&format!("<h3>Cautions</h3>\n<p>{CAUTION}</p>\n"));
    if !manifest.cautions.is_empty() {
        out.push_str("<p>Exhibits of this record say:</p>\n");
        list(&manifest.cautions, out);
    }
    let warned: Vec<String> = manifest
        .cells
        .iter()
        .filter(|cell| !cell.warnings.is_empty())
        .map(|cell| format!("cell {}: {}", cell.place, cell.warnings.join(" / ")))
        .collect();
    if !warned.is_empty() {
        out.push_str("<p>Said on standard error:</p>\n");
        list(&warned, out);
    }
}

fn as_saved(manifest: &Manifest, out: &mut String) {
    if manifest.as_saved.is_empty() {
        return;
    }
    out.push_str(
        "<h3>The notebook as it was saved</h3>\n\
         <p>This record comes from a run from top to bottom in a fresh session. The notebook had been \
         saved with something else:</p>\n",
    );
    list(&manifest.as_saved, out);
}

fn files(files: &[FileFacts], none: &str, read: bool, out: &mut String) {
    if files.is_empty() {
        out.push_str(&format!("<p>{none}</p>\n"));
        return;
    }
    out.push_str("<div class=\"wide\" tabindex=\"0\"><table><thead><tr><th scope=\"col\">File</th><th scope=\"col\">Size</th>");
    if read {
        out.push_str("<th scope=\"col\">Rows</th><th scope=\"col\">Columns</th>");
    }
    out.push_str(
        "<th scope=\"col\">Cells</th><th scope=\"col\">SHA-256</th></tr></thead><tbody>\n",
    );
    for file in files {
        let number = |n: Option<usize>| n.map_or("–".to_owned(), |n| n.to_string());
        let cells: Vec<String> = file.cells.iter().map(ToString::to_string).collect();
        let made = if file.made_here { " (written by this notebook)" } else { "" };
        out.push_str(&format!(
            "<tr><th scope=\"row\">{}{made}</th><td>{}</td>",
            escaped(&file.path),
            size(file.bytes)
        ));
        if read {
            out.push_str(&format!(
                "<td>{}</td><td>{}</td>",
                number(file.rows),
                number(file.columns)
            ));
        }
        out.push_str(&format!(
            "<td>{}</td><td class=\"mono\">{}</td></tr>\n",
            if cells.is_empty() { "text".to_owned() } else { cells.join(", ") },
            escaped(&file.sha256)
        ));
    }
    out.push_str("</tbody></table></div>\n");
}

fn options(manifest: &Manifest, out: &mut String) {
    out.push_str("<h3>Values and seeds</h3>\n");
    for set in &manifest.set {
        out.push_str(&format!(
            "<p>Set for this run: <code>{} = {}</code> instead of <code>{}</code>.</p>\n",
            escaped(&set.name),
            escaped(&set.value),
            escaped(&set.instead_of)
        ));
    }
    out.push_str(&format!(
        "<p>Random numbers follow from the session's seed, {}, and the text of each cell; the seeds of \
         the cells stand in the table below.</p>\n",
        manifest.seed
    ));
}

fn cells(manifest: &Manifest, out: &mut String) {
    out.push_str(
        "<h3>Cells</h3>\n<div class=\"wide\" tabindex=\"0\"><table><thead><tr><th scope=\"col\">Cell</th>\
         <th scope=\"col\">Run</th><th scope=\"col\">Outcome</th><th scope=\"col\">Compiled in</th>\
         <th scope=\"col\">Ran for</th><th scope=\"col\">Seed</th></tr></thead><tbody>\n",
    );
    for cell in &manifest.cells {
        let run = if cell.count > 0 { format!("[{}]", cell.count) } else { "–".to_owned() };
        let seed = cell.seed.map_or("–".to_owned(), |seed| format!("{seed:016x}"));
        out.push_str(&format!(
            "<tr><th scope=\"row\">{}</th><td>{run}</td><td>{}</td><td>{}</td><td>{}</td><td class=\"mono\">{seed}</td></tr>\n",
            cell.place,
            escaped(&cell.outcome),
            milliseconds(cell.compile_ms),
            milliseconds(cell.run_ms),
        ));
    }
    out.push_str("</tbody></table></div>\n");
}

fn build(manifest: &Manifest, out: &mut String) {
    let build = &manifest.build;
    out.push_str("<h3>Build</h3>\n<dl>\n");
    for (name, value) in [
        ("semiaxis", &build.semiaxis),
        ("prelude", &build.prelude),
        ("sources of the prelude", &build.sources),
        ("compiler", &build.compiler),
    ] {
        out.push_str(&format!("<dt>{name}</dt><dd class=\"mono\">{}</dd>\n", escaped(value)));
    }
    for extra in &build.extra {
        out.push_str(&format!(
            "<dt>asked for by a cell</dt><dd class=\"mono\">{}</dd>\n",
            escaped(extra)
        ));
    }
    out.push_str("</dl>\n");
    out.push_str(&format!(
        "<details class=\"always\"><summary>{} crates</summary><ul class=\"crates\">\n",
        build.crates.len()
    ));
    for (name, version) in &build.crates {
        out.push_str(&format!("<li>{} {}</li>\n", escaped(name), escaped(version)));
    }
    out.push_str("</ul></details>\n");
}
