//! Sequences of cells kept as data, and what each cell must do.
//!
//! `cells/README.md` describes the format. The same data go to the kernel and to an independent
//! evaluator, so that the expectations are checked by a second implementation too.

use std::path::{Path, PathBuf};

use serde::Deserialize;

/// Cells that are sent to one session, one after the other.
#[derive(Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Sequence {
    /// What the sequence shows.
    pub name: String,
    /// Why the independent evaluator cannot do it, if it cannot.
    pub evaluator: Option<String>,
    /// The cells, in order.
    #[serde(rename = "cell")]
    pub cells: Vec<Cell>,
}

/// One cell and what it must do; see `cells/README.md` for each field.
#[derive(Debug, Deserialize)]
#[serde(deny_unknown_fields)]
#[allow(missing_docs)]
pub struct Cell {
    pub code: String,
    pub stdout: Option<String>,
    #[serde(default)]
    pub stdout_has: Vec<String>,
    #[serde(default)]
    pub stdout_unordered: Vec<String>,
    pub stdout_bytes: Option<usize>,
    pub stderr: Option<String>,
    #[serde(default)]
    pub stderr_has: Vec<String>,
    pub text: Option<String>,
    #[serde(default)]
    pub text_has: Vec<String>,
    pub html: Option<String>,
    #[serde(default)]
    pub displays: Vec<String>,
    #[serde(default)]
    pub error: Vec<String>,
    #[serde(default)]
    pub error_codes: Vec<String>,
    pub error_name: Option<String>,
    pub error_line: Option<u32>,
    #[serde(default)]
    pub ansi: bool,
    pub evaluator_text: Option<String>,
    pub evaluator_outcome: Option<String>,
    pub evaluator_skip: Option<String>,
}

/// What a cell did.
#[derive(Debug, Default, Clone)]
pub struct Seen {
    /// All that it wrote to its standard output.
    pub stdout: String,
    /// All that it wrote to its standard error.
    pub stderr: String,
    /// `text/plain` and `text/html` of its final expression.
    pub text: Option<String>,
    /// See `text`.
    pub html: Option<String>,
    /// `text/plain` of what it showed on the way.
    pub displays: Vec<String>,
    /// Its failure, if it failed.
    pub failure: Option<Failure>,
}

/// A failure as the protocol tells it.
#[derive(Debug, Default, Clone)]
pub struct Failure {
    /// The kind of failure.
    pub name: String,
    /// The message.
    pub value: String,
    /// The lines shown to a person, with their colours.
    pub traceback: String,
}

impl Failure {
    /// Everything a person can read of it, without colours.
    pub fn plain(&self) -> String {
        format!("{}\n{}\n{}", self.name, self.value, without_colours(&self.traceback))
    }
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct File {
    sequence: Vec<Sequence>,
}

/// The folder of the data.
pub fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("cells")
}

/// Reads one file of sequences, such as `moves`.
///
/// # Panics
/// When the file is missing or is not as the format says, with the place.
pub fn read(name: &str) -> Vec<Sequence> {
    let path = folder().join(format!("{name}.toml"));
    let text = std::fs::read_to_string(&path).unwrap_or_else(|e| panic!("{}: {e}", path.display()));
    let file: File = toml::from_str(&text).unwrap_or_else(|e| panic!("{}: {e}", path.display()));
    file.sequence
}

/// The names of all files of sequences, in alphabetical order.
pub fn names() -> Vec<String> {
    let entries = std::fs::read_dir(folder()).expect("the folder of cells is part of the project");
    let mut names: Vec<String> = entries
        .map(|entry| entry.expect("a folder of the project can be listed").path())
        .filter(|path| path.extension().is_some_and(|extension| extension == "toml"))
        .filter_map(|path| Some(path.file_stem()?.to_str()?.to_owned()))
        .collect();
    names.sort();
    names
}

impl Cell {
    /// Whether the cell must fail.
    pub fn must_fail(&self) -> bool {
        !self.error.is_empty()
            || !self.error_codes.is_empty()
            || self.error_name.is_some()
            || self.error_line.is_some()
    }

    /// What is wrong with what the kernel did, in words; empty when all is as it must be.
    pub fn check(&self, seen: &Seen) -> Vec<String> {
        let mut wrong = Vec::new();
        self.check_stdout(&seen.stdout, &mut wrong);
        if let Some(expected) = &self.stderr
            && *expected != seen.stderr
        {
            wrong.push(format!("stderr is {:?}, not {expected:?}", seen.stderr));
        }
        has_all("stderr", &seen.stderr, &self.stderr_has, &mut wrong);
        check_text(self.text.as_deref(), &self.text_has, seen.text.as_deref(), &mut wrong);
        if let Some(expected) = &self.html
            && Some(expected) != seen.html.as_ref()
        {
            wrong.push(format!("text/html is {:?}, not {expected:?}", seen.html));
        }
        if self.displays != seen.displays {
            wrong.push(format!("displays are {:?}, not {:?}", seen.displays, self.displays));
        }
        match &seen.failure {
            None if self.must_fail() => wrong.push("the cell did not fail".to_owned()),
            None => {}
            Some(failure) if self.must_fail() => self.check_failure(failure, &mut wrong),
            Some(failure) => wrong.push(format!("the cell failed: {}", failure.plain())),
        }
        wrong
    }

    /// What is wrong with a standard output.
    pub fn check_stdout(&self, stdout: &str, wrong: &mut Vec<String>) {
        if let Some(length) = self.stdout_bytes {
            if stdout.len() != length {
                wrong.push(format!("stdout has {} bytes, not {length}", stdout.len()));
            }
        } else if !self.stdout_unordered.is_empty() {
            let mut lines: Vec<&str> = stdout.lines().collect();
            let mut expected: Vec<&str> =
                self.stdout_unordered.iter().map(String::as_str).collect();
            lines.sort_unstable();
            expected.sort_unstable();
            if lines != expected {
                wrong.push(format!("stdout has the lines {lines:?}, not {expected:?}"));
            }
        } else if !self.stdout_has.is_empty() {
            has_all("stdout", stdout, &self.stdout_has, wrong);
        } else if stdout != self.stdout.as_deref().unwrap_or_default() {
            wrong.push(format!("stdout is {stdout:?}, not {:?}", self.stdout));
        }
    }

    fn check_failure(&self, failure: &Failure, wrong: &mut Vec<String>) {
        let plain = failure.plain();
        has_all("the failure", &plain, &self.error, wrong);
        has_all("the failure", &plain, &self.error_codes, wrong);
        if let Some(name) = &self.error_name
            && *name != failure.name
        {
            wrong.push(format!("the failure's name is {:?}, not {name:?}", failure.name));
        }
        if let Some(line) = self.error_line
            && first_place(&plain) != Some(line)
        {
            wrong.push(format!("the failure does not point at line {line}: {plain}"));
        }
        if self.ansi && !failure.traceback.contains("\u{1b}[") {
            wrong.push("the failure has no colours".to_owned());
        }
    }
}

/// What is wrong with the text of a final expression.
pub fn check_text(
    exact: Option<&str>,
    parts: &[String],
    seen: Option<&str>,
    wrong: &mut Vec<String>,
) {
    if !parts.is_empty() {
        has_all("text/plain", seen.unwrap_or_default(), parts, wrong);
    } else if exact != seen {
        wrong.push(format!("text/plain is {seen:?}, not {exact:?}"));
    }
}

fn has_all(what: &str, text: &str, parts: &[String], wrong: &mut Vec<String>) {
    for part in parts {
        if !text.contains(part.as_str()) {
            wrong.push(format!("{what} lacks {part:?}: {text}"));
        }
    }
}

/// The line number of the first `cell [n]:line:column` in a failure.
fn first_place(plain: &str) -> Option<u32> {
    let mut rest = plain;
    while let Some(at) = rest.find("cell [") {
        rest = &rest[at + "cell [".len()..];
        let place = rest.split_once("]:").filter(|(n, _)| n.chars().all(|c| c.is_ascii_digit()));
        if let Some((_, place)) = place {
            let digits = place.split(|c: char| !c.is_ascii_digit()).next()?;
            if let Ok(line) = digits.parse() {
                return Some(line);
            }
        }
    }
    None
}

/// Text without the escape sequences that colour it.
pub fn without_colours(text: &str) -> String {
    let mut plain = String::with_capacity(text.len());
    let mut characters = text.chars();
    while let Some(c) = characters.next() {
        if c == '\u{1b}' {
            // A colour is an escape, a bracket, digits and semicolons, and a letter.
            for c in characters.by_ref() {
                if c.is_ascii_alphabetic() {
                    break;
                }
            }
        } else {
            plain.push(c);
        }
    }
    plain
}
