//! A notebook file in memory.
//!
//! The file is checked with `nbformat`, but kept as the JSON that it is: metadata that nobody here
//! knows, attachments and cells that are not run go back to the file as they came. Everything is
//! brought up to format 4.5 on the way, the first in which cells have identifiers (The Notebook
//! Format, "Cell ids").

use std::collections::BTreeSet;
use std::fs;
use std::io;
use std::path::Path;

use serde::Serialize;
use serde_json::{Map, Value, json};

use super::error::NotebookError;

/// The name under which clients know this kernel.
const KERNEL: &str = "semiaxis";
/// The name that clients show.
const DISPLAY_NAME: &str = "Semiaxis (Rust)";
/// The tag on a cell that is meant to fail.
const MAY_FAIL: &str = "raises-exception";

/// A notebook of format 4.5.
#[derive(Debug, Clone, PartialEq)]
pub struct Document {
    root: Map<String, Value>,
    cells: Vec<Map<String, Value>>,
}

impl Document {
    /// Reads and checks a notebook.
    ///
    /// # Errors
    /// The file is missing, not JSON, not a notebook of format 4, not valid, or for another kernel.
    pub fn read(path: &Path) -> Result<Self, NotebookError> {
        let bytes = fs::read(path).map_err(|source| match source.kind() {
            io::ErrorKind::NotFound => NotebookError::Missing { path: path.to_owned() },
            io::ErrorKind::IsADirectory => NotebookError::NotANotebook {
                path: path.to_owned(),
                message: "it is a folder".to_owned(),
            },
            _ => NotebookError::Files { action: "read", path: path.to_owned(), source },
        })?;
        Self::parse(&bytes, path)
    }

    /// Checks the bytes of a notebook; the path is for messages only.
    ///
    /// # Errors
    /// As [`Document::read`], but for the file itself.
    pub fn parse(bytes: &[u8], path: &Path) -> Result<Self, NotebookError> {
        let not_a_notebook = |message: &str| NotebookError::NotANotebook {
            path: path.to_owned(),
            message: message.to_owned(),
        };
        // Some editors put a byte order mark in front, which JSON does not know.
        let bytes = bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(bytes);
        let value: Value = serde_json::from_slice(bytes).map_err(|error| {
            NotebookError::NotJson { path: path.to_owned(), message: error.to_string() }
        })?;
        let Value::Object(mut root) = value else {
            return Err(not_a_notebook("its JSON is not an object"));
        };
        let minor = check_format(&root, path)?;
        let Some(Value::Array(cells)) = root.remove("cells") else {
            return Err(not_a_notebook("it has no list of cells"));
        };
        let mut cells: Vec<Map<String, Value>> = cells
            .into_iter()
            .map(|cell| match cell {
                Value::Object(cell) => Ok(cell),
                _ => Err(not_a_notebook("one of its cells is not an object")),
            })
            .collect::<Result<_, _>>()?;
        add_ids(&mut cells);
        root.insert("nbformat_minor".to_owned(), json!(minor.max(5)));
        let document = Self { root, cells };
        document.check(path)?;
        document.check_kernel(path)?;
        Ok(document)
    }

    /// How many cells there are, of any kind.
    pub fn n_cells(&self) -> usize {
        self.cells.len()
    }

    /// The text of a cell that has something to run; `None` for other kinds and for empty ones.
    pub fn code(&self, cell_idx: usize) -> Option<String> {
        let cell = self.cells.get(cell_idx).filter(|cell| is_code(cell))?;
        let text = joined(cell.get("source")?)?;
        (!text.trim().is_empty()).then_some(text)
    }

    /// The text of a cell of any kind, empty if it has none.
    pub fn source(&self, cell_idx: usize) -> String {
        let source = self.cells.get(cell_idx).and_then(|cell| cell.get("source"));
        source.and_then(joined).unwrap_or_default()
    }

    /// `code`, `markdown` or `raw`.
    pub fn kind(&self, cell_idx: usize) -> &str {
        let kind = self.cells.get(cell_idx).and_then(|cell| cell.get("cell_type"));
        kind.and_then(Value::as_str).unwrap_or_default()
    }

    /// What a cell holds under a key, for those who only look.
    pub fn part(&self, cell_idx: usize, key: &str) -> Option<&Value> {
        self.cells.get(cell_idx)?.get(key)
    }

    /// What the notebook's own metadata hold under a key.
    pub fn metadata(&self, key: &str) -> Option<&Value> {
        self.root.get("metadata")?.get(key)
    }

    /// Whether a cell has a tag.
    pub fn has_tag(&self, cell_idx: usize, tag: &str) -> bool {
        let tags = self.cells.get(cell_idx).and_then(|cell| cell.get("metadata")?.get("tags"));
        let tags = tags.and_then(Value::as_array);
        tags.is_some_and(|tags| tags.iter().any(|found| found.as_str() == Some(tag)))
    }

    /// Replaces the text of a cell.
    pub fn set_source(&mut self, cell_idx: usize, text: &str) {
        if let Some(cell) = self.cells.get_mut(cell_idx) {
            cell.insert("source".to_owned(), lines(text));
        }
    }

    /// A notebook of nothing but code cells, each with an identifier.
    pub fn of_code(cells: impl IntoIterator<Item = (String, String)>) -> Self {
        let mut document = Self { root: Map::new(), cells: Vec::new() };
        document.root.insert("nbformat".to_owned(), json!(4));
        document.root.insert("nbformat_minor".to_owned(), json!(5));
        document.root.insert("metadata".to_owned(), json!({}));
        for (id, text) in cells {
            let cell = json!({
                "cell_type": "code", "id": id, "metadata": {}, "source": lines(&text),
                "execution_count": null, "outputs": [],
            });
            document.cells.extend(cell.as_object().cloned());
        }
        document
    }

    /// The identifier of a cell.
    pub fn id(&self, cell_idx: usize) -> Option<&str> {
        self.cells.get(cell_idx)?.get("id")?.as_str()
    }

    /// Whether a cell says of itself that it may fail.
    pub fn may_fail(&self, cell_idx: usize) -> bool {
        self.has_tag(cell_idx, MAY_FAIL)
    }

    /// Forgets the results of an earlier run: a cell that is not reached this time must not look as
    /// if it had been.
    pub fn clear_results(&mut self) {
        for cell in self.cells.iter_mut().filter(|cell| is_code(cell)) {
            cell.insert("outputs".to_owned(), json!([]));
            cell.insert("execution_count".to_owned(), Value::Null);
            if let Some(Value::Object(metadata)) = cell.get_mut("metadata") {
                metadata.remove("execution");
                metadata.remove(KERNEL);
            }
        }
    }

    /// Writes the results of one cell into it.
    pub fn set_result(
        &mut self,
        cell_idx: usize,
        count: u32,
        outputs: Vec<Value>,
        execution: Value,
        timings: Value,
    ) {
        let Some(cell) = self.cells.get_mut(cell_idx) else { return };
        cell.insert("execution_count".to_owned(), json!(count));
        cell.insert("outputs".to_owned(), Value::Array(outputs));
        if let Some(Value::Object(metadata)) = cell.get_mut("metadata") {
            metadata.insert("execution".to_owned(), execution);
            metadata.insert(KERNEL.to_owned(), timings);
        }
    }

    /// Names the kernel and the language, where the notebook did not.
    pub fn set_kernel(&mut self, rust_release: &str) {
        let metadata = self.root.entry("metadata").or_insert_with(|| json!({}));
        let Value::Object(metadata) = metadata else { return };
        metadata.entry("kernelspec").or_insert_with(
            || json!({"name": KERNEL, "display_name": DISPLAY_NAME, "language": "rust"}),
        );
        metadata.insert(
            "language_info".to_owned(),
            json!({
                "name": "rust", "version": rust_release, "mimetype": "text/x-rust",
                "file_extension": ".rs", "pygments_lexer": "rust", "codemirror_mode": "rust",
            }),
        );
    }

    /// The text of the file: keys in order, one space of indentation and a final line end, as other
    /// writers of the format do it, so that version control shows what changed and nothing else.
    pub fn text(&self) -> String {
        let mut bytes = Vec::new();
        let formatter = serde_json::ser::PrettyFormatter::with_indent(b" ");
        let mut serializer = serde_json::Serializer::with_formatter(&mut bytes, formatter);
        sorted(self.whole())
            .serialize(&mut serializer)
            .expect("a JSON value is written to memory without error");
        bytes.push(b'\n');
        String::from_utf8(bytes).expect("JSON is UTF-8")
    }

    fn whole(&self) -> Value {
        let mut root = self.root.clone();
        let cells = self.cells.iter().cloned().map(Value::Object).collect();
        root.insert("cells".to_owned(), Value::Array(cells));
        Value::Object(root)
    }

    /// Lets `nbformat` check everything but earlier outputs, which are about to be replaced.
    fn check(&self, path: &Path) -> Result<(), NotebookError> {
        let mut copy = self.clone();
        copy.clear_results();
        // A later minor version only adds; the checker knows those up to 5.
        copy.root.insert("nbformat_minor".to_owned(), json!(5));
        match nbformat::parse_notebook(&copy.whole().to_string()) {
            Ok(_) => Ok(()),
            Err(error) => {
                Err(NotebookError::Invalid { path: path.to_owned(), message: error.to_string() })
            }
        }
    }

    fn check_kernel(&self, path: &Path) -> Result<(), NotebookError> {
        let metadata = self.root.get("metadata");
        let text = |section: &str, key: &str| {
            metadata.and_then(|metadata| metadata.get(section)?.get(key)?.as_str())
        };
        let name = text("kernelspec", "name");
        let language = text("kernelspec", "language").or_else(|| text("language_info", "name"));
        let ours = name.is_none_or(|name| name == KERNEL)
            && language.is_none_or(|language| language.eq_ignore_ascii_case("rust"));
        if ours {
            return Ok(());
        }
        Err(NotebookError::OtherKernel {
            path: path.to_owned(),
            kernel: name.unwrap_or("unnamed").to_owned(),
            language: language.unwrap_or("unknown language").to_owned(),
        })
    }
}

/// The minor version of a notebook of format 4.
fn check_format(root: &Map<String, Value>, path: &Path) -> Result<i64, NotebookError> {
    let Some(major) = root.get("nbformat") else {
        return Err(NotebookError::NotANotebook {
            path: path.to_owned(),
            message: "it does not say which `nbformat` it is in".to_owned(),
        });
    };
    let minor = root.get("nbformat_minor").cloned().unwrap_or(json!(0));
    match (major.as_i64(), minor.as_i64()) {
        (Some(4), Some(minor)) if minor >= 0 => Ok(minor),
        _ => Err(NotebookError::OtherFormat {
            path: path.to_owned(),
            found: format!("{major}.{minor}"),
        }),
    }
}

/// Gives every cell without an identifier one that depends on its place and text alone, so that the
/// same notebook becomes the same file again.
fn add_ids(cells: &mut [Map<String, Value>]) {
    let text = |cell: &Map<String, Value>| {
        cell.get("id").and_then(Value::as_str).filter(|id| !id.is_empty()).map(str::to_owned)
    };
    let mut taken: BTreeSet<String> = cells.iter().filter_map(text).collect();
    for (cell_idx, cell) in cells.iter_mut().enumerate() {
        if text(cell).is_some() {
            continue;
        }
        let source = cell.get("source").map(Value::to_string).unwrap_or_default();
        let mut attempt = 0;
        let id = loop {
            let seed = format!("{cell_idx}\n{attempt}\n{source}");
            let id = blake3::hash(seed.as_bytes()).to_hex()[..8].to_owned();
            if taken.insert(id.clone()) {
                break id;
            }
            attempt += 1;
        };
        cell.insert("id".to_owned(), Value::String(id));
    }
}

fn is_code(cell: &Map<String, Value>) -> bool {
    cell.get("cell_type").and_then(Value::as_str) == Some("code")
}

/// Text that the format lets be one string or a list of lines.
fn joined(source: &Value) -> Option<String> {
    match source {
        Value::String(text) => Some(text.clone()),
        Value::Array(lines) => lines.iter().map(Value::as_str).collect(),
        _ => None,
    }
}

/// Text as a list of lines, as the format likes it.
fn lines(text: &str) -> Value {
    text.split_inclusive('\n').map(|line| Value::String(line.to_owned())).collect()
}

fn sorted(value: Value) -> Value {
    match value {
        Value::Object(map) => {
            let mut entries: Vec<(String, Value)> = map.into_iter().collect();
            entries.sort_by(|a, b| a.0.cmp(&b.0));
            Value::Object(entries.into_iter().map(|(key, value)| (key, sorted(value))).collect())
        }
        Value::Array(items) => Value::Array(items.into_iter().map(sorted).collect()),
        other => other,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn parse(text: &str) -> Result<Document, NotebookError> {
        Document::parse(text.as_bytes(), Path::new("kiln.ipynb"))
    }

    fn refusal(text: &str) -> String {
        parse(text).unwrap_err().to_string()
    }

    const OLD: &str = r#"{"nbformat": 4, "nbformat_minor": 2, "extra": 1,
        "metadata": {"unknown": {"b": [1.5, null]}},
        "cells": [
            {"cell_type": "markdown", "metadata": {"x": 1}, "source": ["a\n", "b"],
             "attachments": {"p.png": {"image/png": "AAAA"}}},
            {"cell_type": "raw", "metadata": {}, "source": "r", "attachments": {"q": {}}},
            {"cell_type": "code", "metadata": {"tags": ["raises-exception"], "mine": true},
             "source": ["let x = 1;\n", "x"], "execution_count": 7,
             "outputs": [{"output_type": "nobody knows"}]},
            {"cell_type": "code", "metadata": {}, "source": " \n", "execution_count": null, "outputs": []}
        ]}"#;

    #[test]
    fn an_older_notebook_is_brought_up_to_date_and_keeps_what_it_has() {
        let mut document = parse(OLD).unwrap();
        assert_eq!(document.code(2).as_deref(), Some("let x = 1;\nx"));
        assert_eq!(document.code(0), None);
        assert_eq!(document.code(3), None, "there is nothing to run in an empty cell");
        assert!(document.may_fail(2) && !document.may_fail(3));
        document.clear_results();
        document.set_kernel("1.95.0");
        let text = document.text();
        let value: Value = serde_json::from_str(&text).unwrap();
        assert_eq!(value["nbformat_minor"], 5);
        assert_eq!(value["metadata"]["unknown"], json!({"b": [1.5, null]}));
        assert_eq!(value["metadata"]["kernelspec"]["name"], "semiaxis");
        assert_eq!(value["extra"], 1);
        assert_eq!(value["cells"][0]["attachments"]["p.png"]["image/png"], "AAAA");
        assert_eq!(value["cells"][0]["source"], json!(["a\n", "b"]));
        assert_eq!(value["cells"][1]["attachments"], json!({"q": {}}));
        assert_eq!(value["cells"][2]["metadata"]["mine"], true);
        assert_eq!(value["cells"][2]["execution_count"], Value::Null);
        let ids: BTreeSet<&str> = (0..4).map(|cell_idx| document.id(cell_idx).unwrap()).collect();
        assert_eq!(ids.len(), 4);
        assert_eq!(
            parse(OLD).unwrap().id(2),
            document.id(2),
            "identifiers are the same every time"
        );
        assert_eq!(parse(&text).unwrap().text(), text, "what was written is read back as it was");
    }

    #[test]
    fn what_is_not_a_notebook_of_format_4_is_refused_by_what_it_is() {
        assert!(refusal("{\n \"nbformat\": 4,").contains("not JSON (EOF while parsing"));
        assert!(refusal("PK\u{3}\u{4}").contains("not JSON"));
        assert!(refusal("[]").contains("its JSON is not an object"));
        assert!(refusal("{}").contains("does not say which `nbformat`"));
        assert!(
            refusal(r#"{"nbformat": 3, "nbformat_minor": 0}"#).contains("in notebook format 3.0")
        );
        assert!(refusal(r#"{"nbformat": "4"}"#).contains("in notebook format \"4\".0"));
        assert!(refusal(r#"{"nbformat": 4, "nbformat_minor": 5}"#).contains("no list of cells"));
        let cell = r#"{"nbformat": 4, "nbformat_minor": 5, "metadata": {}, "cells": [{"cell_type": "song"}]}"#;
        assert!(refusal(cell).contains("cell at index 0"), "{}", refusal(cell));
        let twice = r#"{"nbformat": 4, "nbformat_minor": 5, "metadata": {}, "cells": [
            {"cell_type": "raw", "id": "a", "metadata": {}, "source": ""},
            {"cell_type": "raw", "id": "a", "metadata": {}, "source": ""}]}"#;
        assert!(refusal(twice).contains("Duplicate"), "{}", refusal(twice));
        let missing = Document::read(Path::new("no/such.ipynb")).unwrap_err();
        assert_eq!(missing.to_string(), "there is no notebook at no/such.ipynb");
    }

    #[test]
    fn a_notebook_for_another_kernel_is_refused_by_name() {
        let with = |metadata: &str| {
            format!(
                r#"{{"nbformat": 4, "nbformat_minor": 5, "cells": [], "metadata": {metadata}}}"#
            )
        };
        let other =
            with(r#"{"kernelspec": {"name": "abacus", "display_name": "A", "language": "beads"}}"#);
        assert!(refusal(&other).contains("for the kernel `abacus` (beads)"));
        let language = with(r#"{"language_info": {"name": "beads"}}"#);
        assert!(refusal(&language).contains("`unnamed` (beads)"));
        for accepted in [
            "{}",
            r#"{"kernelspec": {"name": "semiaxis", "display_name": "S", "language": "rust"}}"#,
            r#"{"kernelspec": {"name": "semiaxis", "display_name": "S"}, "language_info": {"name": "Rust"}}"#,
        ] {
            parse(&with(accepted)).unwrap();
        }
    }

    #[test]
    fn a_later_minor_version_is_read_and_kept() {
        let text = r#"{"nbformat": 4, "nbformat_minor": 9, "metadata": {}, "cells": []}"#;
        let value: Value = serde_json::from_str(&parse(text).unwrap().text()).unwrap();
        assert_eq!(value["nbformat_minor"], 9);
    }

    proptest::proptest! {
        #[test]
        fn any_bytes_are_a_notebook_or_an_error(bytes in proptest::collection::vec(0u8.., 0..64)) {
            let _ = Document::parse(&bytes, Path::new("x"));
        }
    }
}
