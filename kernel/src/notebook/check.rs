//! Whether the outputs that a notebook was saved with can come from one run from top to bottom, as far
//! as that can be told without running it.
//!
//! The evidence is in the file: the numbers of the cells, which a run from top to bottom counts from 1
//! without a gap; the names that cells define and use; what is there without having been run.

use std::collections::BTreeMap;

use serde_json::Value;

use super::document::Document;
use crate::cells::names::{Names, names};

/// Something that a run from top to bottom would not have left behind, or could not do.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Finding {
    /// The place of the cell in the notebook, from 1.
    pub place: usize,
    /// What it is, in words that follow "cell 3".
    pub words: String,
}

impl std::fmt::Display for Finding {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "cell {} {}", self.place, self.words)
    }
}

/// What a check found.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Check {
    /// Code cells with something to run.
    pub n_code: usize,
    /// How many of them carry a number.
    pub n_counted: usize,
    /// What speaks against a run from top to bottom.
    pub findings: Vec<Finding>,
}

/// One code cell.
struct Cell {
    place: usize,
    count: Option<u64>,
    outputs: Vec<Value>,
    may_fail: bool,
    names: Option<Names>,
}

/// Checks a notebook as it is.
pub fn check(document: &Document) -> Check {
    let cells: Vec<Cell> = (0..document.n_cells())
        .filter_map(|cell_idx| {
            let text = document.code(cell_idx)?;
            let outputs = document.part(cell_idx, "outputs").and_then(Value::as_array);
            Some(Cell {
                place: cell_idx + 1,
                count: document.part(cell_idx, "execution_count").and_then(Value::as_u64),
                outputs: outputs.cloned().unwrap_or_default(),
                may_fail: document.may_fail(cell_idx),
                names: names(&text),
            })
        })
        .collect();
    let n_counted = cells.iter().filter(|cell| cell.count.is_some()).count();
    let mut check = Check { n_code: cells.len(), n_counted, findings: Vec::new() };
    let mut found = |cell: &Cell, words: String| {
        check.findings.push(Finding { place: cell.place, words });
    };
    let n_counted = n_counted > 0;
    order(&cells, n_counted, &mut found);
    remains(&cells, &mut found);
    definitions(&cells, &mut found);
    check.findings.sort_by_key(|finding| finding.place);
    check
}

/// The numbers of the cells.
fn order(cells: &[Cell], was_run: bool, found: &mut impl FnMut(&Cell, String)) {
    let mut last: Option<(&Cell, u64)> = None;
    for cell in cells {
        let Some(count) = cell.count else {
            if was_run {
                found(cell, "was never run, or was edited away from its outputs".to_owned());
            }
            continue;
        };
        match last {
            None if count != 1 => found(
                cell,
                format!(
                    "is the first and was run as [{count}]; in a fresh session it would be [1]"
                ),
            ),
            Some((before, earlier)) if count == earlier => found(
                cell,
                format!(
                    "was run as [{count}], as cell {} was; they are from different sessions",
                    before.place
                ),
            ),
            Some((before, earlier)) if count < earlier => found(
                cell,
                format!(
                    "was run as [{count}], before cell {} above it, which was run as [{earlier}]",
                    before.place
                ),
            ),
            Some((before, earlier)) if count > earlier + 1 => found(
                cell,
                format!(
                    "was run as [{count}] and cell {} above it as [{earlier}]; what ran in between is not to be seen",
                    before.place
                ),
            ),
            _ => {}
        }
        last = Some((cell, count));
    }
}

/// What outputs say of themselves.
fn remains(cells: &[Cell], found: &mut impl FnMut(&Cell, String)) {
    for cell in cells {
        if cell.count.is_none() && !cell.outputs.is_empty() {
            found(cell, "has outputs and no number that says when it was run".to_owned());
        }
        for output in &cell.outputs {
            let count = output["execution_count"].as_u64();
            if let (Some(count), Some(own)) = (count, cell.count)
                && count != own
            {
                found(cell, format!("was run as [{own}] and shows the result of run [{count}]"));
            }
            if output["output_type"] == "error" && !cell.may_fail {
                found(
                    cell,
                    "failed when it was run; a run from top to bottom ends there".to_owned(),
                );
            }
        }
    }
}

/// Names that are used above the only cells that define them.
fn definitions(cells: &[Cell], found: &mut impl FnMut(&Cell, String)) {
    let mut places: BTreeMap<&str, Vec<(usize, bool)>> = BTreeMap::new();
    for cell in cells {
        let Some(names) = &cell.names else { continue };
        for name in &names.variables {
            places.entry(name).or_default().push((cell.place, false));
        }
        for name in &names.items {
            places.entry(name).or_default().push((cell.place, true));
        }
    }
    for cell in cells {
        let Some(names) = &cell.names else {
            found(cell, "is not Rust that can be read, so it cannot run".to_owned());
            continue;
        };
        let uses = names.uses.iter().map(|name| (name, false));
        let item_uses = names.item_uses.iter().map(|name| (name, true));
        let mut told = std::collections::BTreeSet::new();
        for (name, by_item) in uses.chain(item_uses) {
            let Some(defined) = places.get(name.as_str()) else { continue };
            let mut seen = defined.iter().filter(|(_, is_item)| *is_item || !by_item);
            let Some((first, _)) = seen.clone().next() else { continue };
            // A cell that declares a name anew from its old value needs the old one from above.
            if seen.all(|(place, _)| *place >= cell.place) && told.insert(name) {
                let words = match *first == cell.place {
                    true => format!("uses `{name}` before it is defined; no cell above defines it"),
                    false => {
                        format!("uses `{name}`, which is first defined in cell {first}, below it")
                    }
                };
                found(cell, words);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    fn findings(cells: &[(&str, Option<u64>)]) -> Vec<String> {
        let cells: Vec<Value> = cells
            .iter()
            .enumerate()
            .map(|(idx, (source, count))| {
                json!({"cell_type": "code", "id": format!("c{idx}"), "metadata": {},
                    "source": source, "execution_count": count, "outputs": []})
            })
            .collect();
        let text = json!({"nbformat": 4, "nbformat_minor": 5, "metadata": {}, "cells": cells});
        check_text(&text)
    }

    fn check_text(text: &Value) -> Vec<String> {
        let path = std::path::Path::new("x.ipynb");
        let document = Document::parse(text.to_string().as_bytes(), path).unwrap();
        check(&document).findings.iter().map(ToString::to_string).collect()
    }

    #[test]
    fn a_straight_run_and_a_notebook_that_was_never_run_leave_nothing_to_say() {
        assert!(findings(&[("let x = 1;", Some(1)), ("x", Some(2)), ("  ", None)]).is_empty());
        assert!(findings(&[("let x = 1;", None), ("x", None)]).is_empty());
    }

    #[test]
    fn counts_that_a_straight_run_cannot_leave_are_told() {
        assert_eq!(
            findings(&[
                ("1", Some(2)),
                ("2", Some(5)),
                ("3", Some(4)),
                ("4", Some(4)),
                ("5", None)
            ]),
            [
                "cell 1 is the first and was run as [2]; in a fresh session it would be [1]",
                "cell 2 was run as [5] and cell 1 above it as [2]; what ran in between is not to be seen",
                "cell 3 was run as [4], before cell 2 above it, which was run as [5]",
                "cell 4 was run as [4], as cell 3 was; they are from different sessions",
                "cell 5 was never run, or was edited away from its outputs",
            ]
        );
    }

    #[test]
    fn names_defined_below_their_use_are_told() {
        assert_eq!(
            findings(&[("y + 1", None), ("let y = 2;", None), ("y", None)]),
            ["cell 1 uses `y`, which is first defined in cell 2, below it"]
        );
        assert_eq!(
            findings(&[("let n = n + 1;", None)]),
            ["cell 1 uses `n` before it is defined; no cell above defines it"]
        );
        assert_eq!(
            findings(&[("fn f() -> u8 { g() }", None), ("fn g() -> u8 { 1 }", None)]),
            ["cell 1 uses `g`, which is first defined in cell 2, below it"]
        );
        // Its own, a field, a method, a closure's own: nothing to say.
        assert!(
            findings(&[
                ("let a = vec![1]; a.iter().map(|row| row.tiles).sum()", None),
                ("let row = 1; let tiles = 2; let iter = 3;", None)
            ])
            .is_empty()
        );
        assert_eq!(
            findings(&[("let = 3", None)]),
            ["cell 1 is not Rust that can be read, so it cannot run"]
        );
    }

    #[test]
    fn outputs_that_are_not_from_their_cells_run_are_told() {
        let cell = |count: Value, outputs: Value, tags: Value| {
            json!({"nbformat": 4, "nbformat_minor": 5, "metadata": {}, "cells": [
                {"cell_type": "code", "id": "a", "metadata": {"tags": tags}, "source": "1",
                 "execution_count": count, "outputs": outputs}]})
        };
        let result = json!([{"output_type": "execute_result", "execution_count": 3, "data": {}, "metadata": {}}]);
        assert_eq!(
            check_text(&cell(json!(1), result.clone(), json!([]))),
            ["cell 1 was run as [1] and shows the result of run [3]"]
        );
        assert!(check_text(&cell(Value::Null, result, json!([])))[0].contains("no number"));
        let error = json!([{"output_type": "error", "ename": "e", "evalue": "v", "traceback": []}]);
        assert!(check_text(&cell(json!(1), error.clone(), json!([])))[0].contains("failed when"));
        assert!(check_text(&cell(json!(1), error, json!(["raises-exception"]))).is_empty());
    }
}
