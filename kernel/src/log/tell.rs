//! `semiaxis log`: sessions listed, shown, exported, and turned into notebooks.

use std::collections::BTreeSet;
use std::path::Path;

use super::entry::{CellEntry, What};
use super::read::{Session, State};
use crate::notebook::document::Document;
use crate::record::markup::milliseconds;

/// One line for each session.
pub fn list(sessions: &[Session]) -> String {
    if sessions.is_empty() {
        return "no session was logged\n".to_owned();
    }
    let mut out = String::new();
    for session in sessions {
        let (began, folder) = beginning(session);
        let n_cells = session.cells().count();
        let cells = if n_cells == 1 { "1 cell".to_owned() } else { format!("{n_cells} cells") };
        out.push_str(&format!(
            "{}  {began}  {cells:>9}  {folder}{}\n",
            session.id,
            remark(session)
        ));
    }
    out
}

fn beginning(session: &Session) -> (&str, &str) {
    match session.entries.first() {
        Some(entry) => match &entry.what {
            What::Began { folder, .. } => (&entry.at, folder),
            _ => (&entry.at, ""),
        },
        None => ("unknown", ""),
    }
}

fn remark(session: &Session) -> String {
    let mut remarks = Vec::new();
    match session.state {
        State::Whole => {}
        State::CutShort => remarks.push("cut short".to_owned()),
        State::Altered(n) => remarks.push(format!("altered at entry {n}, read up to there")),
    }
    if session.clock_went_back() {
        remarks.push("the clock was set back".to_owned());
    }
    if session.entries.iter().any(|entry| entry.what == What::Full) {
        remarks.push("reached its size limit".to_owned());
    }
    if remarks.is_empty() { String::new() } else { format!("  ({})", remarks.join("; ")) }
}

/// A session cell by cell.
pub fn show(session: &Session) -> String {
    let (began, folder) = beginning(session);
    let mut out = format!("session {} of {began} in {folder}{}\n", session.id, remark(session));
    for (entry, cell) in session.cells() {
        out.push_str(&format!(
            "\n[{}] {} {} ({} to compile, {} to run)",
            cell.count,
            entry.at,
            cell.outcome,
            milliseconds(cell.compile_ms),
            milliseconds(cell.run_ms)
        ));
        if let Some(id) = &cell.cell_id {
            out.push_str(&format!(", cell {id}"));
        }
        out.push('\n');
        for line in cell.source.lines() {
            out.push_str(&format!("    {line}\n"));
        }
        for table in &cell.tables {
            out.push_str(&format!(
                "  read {} ({} rows, {} columns, SHA-256 {})\n",
                table.path, table.rows, table.columns, table.sha256
            ));
        }
        for note in cell.outdated.iter().chain(&cell.message) {
            out.push_str(&format!("  {note}\n"));
        }
        for output in &cell.outputs {
            out.push_str(&format!("  {} of {} bytes\n", output.kind, output.bytes));
        }
    }
    out
}

/// The entries as JSON lines.
pub fn json_lines(session: &Session) -> String {
    let lines = session.entries.iter().filter_map(|entry| serde_json::to_string(entry).ok());
    lines.map(|line| line + "\n").collect()
}

/// A notebook of what actually ran, in order: runs that failed are left out, and runs whose cell was
/// run again later, unless something that stayed was made from them.
pub fn notebook(session: &Session) -> Document {
    let cells: Vec<&CellEntry> =
        session.cells().map(|(_, cell)| cell).filter(|cell| cell.outcome == "done").collect();
    let kept = kept(&cells);
    let mut taken = BTreeSet::new();
    let code = cells.iter().zip(kept).filter(|(_, kept)| *kept).map(|(cell, _)| {
        let wanted = cell.cell_id.clone().filter(|id| is_id(id));
        let mut id = wanted.unwrap_or_else(|| format!("run-{}", cell.count));
        while !taken.insert(id.clone()) {
            id = format!("run-{}-{}", cell.count, taken.len());
        }
        (id, cell.source.clone())
    });
    Document::of_code(code.collect::<Vec<_>>())
}

/// Identifiers as the notebook format allows them.
fn is_id(id: &str) -> bool {
    (1..=64).contains(&id.len())
        && id.chars().all(|c| c.is_ascii_alphanumeric() || "-_".contains(c))
}

fn kept(cells: &[&CellEntry]) -> Vec<bool> {
    let mut kept = vec![false; cells.len()];
    for at in (0..cells.len()).rev() {
        let cell = cells[at];
        let again = cell.cell_id.is_some()
            && cells[at + 1..].iter().any(|later| later.cell_id == cell.cell_id);
        let needed = || {
            cell.makes.iter().any(|name| {
                for later in at + 1..cells.len() {
                    if kept[later] && cells[later].uses.contains(name) {
                        return true;
                    }
                    if kept[later] && cells[later].makes.contains(name) {
                        return false;
                    }
                }
                false
            })
        };
        let keep = !again || needed();
        kept[at] = keep;
    }
    kept
}

/// Writes the notebook of a session; an older file stays until the new one is whole.
///
/// # Errors
/// The file cannot be written.
pub fn write_notebook(
    session: &Session,
    path: &Path,
    rust_release: &str,
) -> Result<usize, crate::notebook::error::NotebookError> {
    let target = crate::notebook::target::Target::choose(path, Some(path))?;
    let mut document = notebook(session);
    document.set_kernel(rust_release);
    target.write(&document.text())?;
    Ok(document.n_cells())
}

#[cfg(test)]
#[path = "tests.rs"]
mod tests;
