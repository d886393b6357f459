//! What a record keeps for programs: the manifest and the outputs.
//!
//! Texts are kept whole up to a limit; longer ones by their beginning, their size and their digest,
//! so that a cell that prints a hundred megabytes makes a record that can still be opened. Pictures
//! are kept on the page and by their digest; what is compared are the numbers behind them.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};
use serde_json::{Map, Value};
use sha2::{Digest, Sha256};

use super::markup::head;

/// The format of records that this version writes, and the newest that it reads.
pub const FORMAT: u64 = 1;

/// The MIME type of the numbers behind an exhibit.
pub const NUMBERS: &str = "application/vnd.semiaxis.numbers+json";

/// As much of a text is kept whole, in bytes.
pub const MOST_KEPT: usize = 256 * 1024;

/// The SHA-256 digest of bytes, in hexadecimal digits.
pub fn digest(bytes: &[u8]) -> String {
    finished(Sha256::new_with_prefix(bytes))
}

/// The digest of all that a hasher was given, in hexadecimal digits.
pub fn finished(hasher: Sha256) -> String {
    hasher.finalize().iter().map(|byte| format!("{byte:02x}")).collect()
}

/// Everything that the results rest on.
#[derive(Debug, Clone, Default, Serialize, Deserialize)]
pub struct Manifest {
    /// The format of the record.
    pub format: u64,
    /// The title.
    pub title: String,
    /// The authors, as the notebook's metadata name them.
    pub authors: Vec<String>,
    /// The date that the notebook's metadata give, or else the day of the run.
    pub date: String,
    /// When the run began (RFC 3339).
    pub made: String,
    /// How long it took, in milliseconds.
    pub took_ms: f64,
    /// Whether a cell failed that was not meant to.
    pub failed: bool,
    /// The file name of the notebook.
    pub notebook: String,
    /// Values given for this run, as they were given.
    pub set: Vec<Set>,
    /// The seed of the session.
    pub seed: u64,
    /// The code cells, in order.
    pub cells: Vec<CellFacts>,
    /// Files that cells read.
    pub files_read: Vec<FileFacts>,
    /// Files that cells wrote.
    pub files_written: Vec<FileFacts>,
    /// With what the cells were built.
    pub build: Build,
    /// On what they ran.
    pub host: BTreeMap<String, String>,
    /// Cautions that exhibits carry.
    pub cautions: Vec<String>,
    /// Signs in the notebook as it was saved that its outputs did not come from a run from top to
    /// bottom, and where they differ from this run.
    pub as_saved: Vec<String>,
    /// Digests of the other parts, by name.
    pub digests: BTreeMap<String, String>,
}

/// A value given for one run.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Set {
    /// The variable.
    pub name: String,
    /// The value as it was given.
    pub value: String,
    /// The text that stands in the notebook.
    pub instead_of: String,
}

/// What is known of the run of one code cell.
#[derive(Debug, Clone, Default, Serialize, Deserialize)]
pub struct CellFacts {
    /// Its place in the notebook, from 1.
    pub place: usize,
    /// Its identifier.
    pub id: String,
    /// Its number in the run; 0 if it was not run.
    pub count: u32,
    /// `done`, `failed`, `interrupted`, or `not run`.
    pub outcome: String,
    /// The seed of its random numbers.
    pub seed: Option<u64>,
    /// Time until the library was there, in milliseconds.
    pub compile_ms: f64,
    /// Time to run it, in milliseconds.
    pub run_ms: f64,
    /// What it said on standard error, in its first lines.
    pub warnings: Vec<String>,
    /// Variables and items of earlier cells that it used.
    pub uses: Vec<String>,
    /// Variables and items that it defined or changed.
    pub makes: Vec<String>,
}

/// A file that was read or written.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct FileFacts {
    /// Its path, from the folder of the notebook.
    pub path: String,
    /// Its size.
    pub bytes: u64,
    /// The SHA-256 digest of its bytes.
    pub sha256: String,
    /// Rows, if it was read as a table.
    pub rows: Option<usize>,
    /// Columns, if it was read as a table.
    pub columns: Option<usize>,
    /// The places of the cells.
    pub cells: Vec<usize>,
    /// Whether a cell of the same run had written it before.
    pub made_here: bool,
}

/// With what cells were built.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Build {
    /// The version of this program.
    pub semiaxis: String,
    /// The hash of the prelude's library.
    pub prelude: String,
    /// The hash of the prelude's sources.
    pub sources: String,
    /// What `rustc -vV` says.
    pub compiler: String,
    /// Name and version of every crate.
    pub crates: Vec<(String, String)>,
    /// Crates that headers of cells asked for.
    pub extra: Vec<String>,
}

/// The outputs of all code cells that were run.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Outputs {
    /// By the place of the cell in the notebook.
    pub cells: BTreeMap<usize, CellOutputs>,
}

/// What one cell showed.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct CellOutputs {
    /// All that it wrote to standard output.
    pub stdout: Kept,
    /// All that it wrote to standard error.
    pub stderr: Kept,
    /// What it showed, in order.
    pub exhibits: Vec<Exhibit>,
    /// What it failed with: kind and message.
    pub failure: Option<(String, String)>,
}

/// One exhibit.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Exhibit {
    /// The numbers behind it, where it gives them.
    pub numbers: Option<Value>,
    /// Its plain text, where there are no numbers.
    pub plain: Option<Kept>,
    /// The digest of each form.
    pub forms: BTreeMap<String, String>,
}

/// A text, or what is kept of it.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Kept {
    /// The text, or its beginning.
    pub text: String,
    /// Size and digest of the whole, where only the beginning is kept.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub whole: Option<(u64, String)>,
}

impl Kept {
    /// Keeps a text, or the beginning of a long one.
    pub fn of(text: &str) -> Self {
        if text.len() <= MOST_KEPT {
            return Self { text: text.to_owned(), whole: None };
        }
        let whole = Some((text.len() as u64, digest(text.as_bytes())));
        Self { text: head(text, MOST_KEPT / 4).to_owned(), whole }
    }
}

impl CellOutputs {
    /// From the outputs as the notebook format has them.
    pub fn of(outputs: &[Value]) -> Self {
        let (mut stdout, mut stderr) = (String::new(), String::new());
        let mut cell = Self::default();
        for output in outputs {
            match output["output_type"].as_str() {
                Some("stream") if output["name"] == "stderr" => stderr += &joined(&output["text"]),
                Some("stream") => stdout += &joined(&output["text"]),
                Some("error") => {
                    let text = |key: &str| output[key].as_str().unwrap_or_default().to_owned();
                    cell.failure = Some((text("ename"), text("evalue")));
                }
                _ => cell.exhibits.extend(output["data"].as_object().map(Exhibit::of)),
            }
        }
        cell.stdout = Kept::of(&stdout);
        cell.stderr = Kept::of(&stderr);
        cell
    }
}

impl Exhibit {
    fn of(forms: &Map<String, Value>) -> Self {
        let numbers =
            forms.get(NUMBERS).filter(|numbers| numbers.to_string().len() <= MOST_NUMBERS);
        let plain = match numbers {
            Some(_) => None,
            None => forms.get("text/plain").map(|text| Kept::of(&joined(text))),
        };
        let digests = forms.iter().map(|(mime, content)| {
            let bytes = match content {
                Value::String(_) | Value::Array(_) => joined(content),
                other => other.to_string(),
            };
            (mime.clone(), digest(bytes.as_bytes()))
        });
        Self { numbers: numbers.cloned(), plain, forms: digests.collect() }
    }
}

/// Numbers that would take more than this are compared by digest.
const MOST_NUMBERS: usize = 4 << 20;

/// Text that the notebook format lets be one string or a list of lines.
pub fn joined(text: &Value) -> String {
    match text {
        Value::String(text) => text.clone(),
        Value::Array(lines) if lines.iter().all(Value::is_string) => {
            lines.iter().filter_map(Value::as_str).collect()
        }
        other => other.to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    #[test]
    fn long_texts_are_kept_by_digest() {
        assert_eq!(Kept::of("short").whole, None);
        let long = "é".repeat(MOST_KEPT);
        let kept = Kept::of(&long);
        assert!(kept.text.len() <= MOST_KEPT / 4 && long.starts_with(&kept.text));
        assert_eq!(kept.whole, Some((long.len() as u64, digest(long.as_bytes()))));
    }

    #[test]
    fn outputs_are_taken_from_a_notebook_whatever_order_their_streams_came_in() {
        let outputs = [
            json!({"output_type": "stream", "name": "stdout", "text": ["a\n", "b"]}),
            json!({"output_type": "stream", "name": "stderr", "text": "careful\n"}),
            json!({"output_type": "stream", "name": "stdout", "text": "c"}),
            json!({"output_type": "execute_result", "data": {"text/plain": ["1"], NUMBERS: {"kind": "x"}}}),
            json!({"output_type": "display_data", "data": {"text/plain": "p", "image/png": "AAAA"}}),
            json!({"output_type": "error", "ename": "Panic", "evalue": "no", "traceback": []}),
        ];
        let cell = CellOutputs::of(&outputs);
        assert_eq!(cell.stdout.text, "a\nbc");
        assert_eq!(cell.stderr.text, "careful\n");
        assert_eq!(cell.exhibits[0].numbers, Some(json!({"kind": "x"})));
        assert_eq!(cell.exhibits[0].plain, None);
        assert_eq!(cell.exhibits[1].plain.as_ref().unwrap().text, "p");
        assert_eq!(cell.exhibits[1].forms["image/png"], digest(b"AAAA"));
        assert_eq!(cell.failure, Some(("Panic".to_owned(), "no".to_owned())));
    }
}
