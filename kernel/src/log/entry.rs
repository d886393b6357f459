//! One entry of a session's log.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

use crate::worker::message::{OpenedFile, TableFile};

/// What stands before the first line.
pub const ORIGIN: &str = "0000000000000000000000000000000000000000000000000000000000000000";

/// A line of the file: an entry in the chain.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Line {
    /// The digest of `before`, a line end and the entry's JSON.
    pub hash: String,
    /// The hash of the line before.
    pub before: String,
    /// The entry.
    pub entry: Entry,
}

/// Something that happened in a session.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Entry {
    /// Its number, from 0.
    pub n: u64,
    /// The wall clock (RFC 3339), which may have been set meanwhile.
    pub at: String,
    /// Milliseconds since the session began, by a clock that only goes forward.
    pub ms: u64,
    /// What happened.
    #[serde(flatten)]
    pub what: What,
}

/// What happened.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(tag = "what", rename_all = "snake_case")]
pub enum What {
    /// The session began.
    Began {
        /// The version of the program.
        semiaxis: String,
        /// The folder that it was started in.
        folder: String,
        /// The seed of the session.
        seed: u64,
    },
    /// A cell was run.
    Cell(Box<CellEntry>),
    /// The file has reached its limit; what follows is not kept.
    Full,
    /// The session ended in order.
    Ended,
}

/// A cell that was run.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct CellEntry {
    /// Its number in the session.
    pub count: u32,
    /// Its identifier, where the client sent one.
    pub cell_id: Option<String>,
    /// Whether the client asked for nothing to be shown.
    pub silent: bool,
    /// Its text.
    pub source: String,
    /// `done`, `failed` or `interrupted`.
    pub outcome: String,
    /// Why it failed.
    pub message: Option<String>,
    /// The seed of its random numbers.
    pub seed: Option<u64>,
    /// Time until the library was there, in milliseconds.
    pub compile_ms: f64,
    /// Time to run it, in milliseconds.
    pub run_ms: f64,
    /// What it showed, by digest.
    pub outputs: Vec<OutputEntry>,
    /// Tables that it read.
    pub tables: Vec<TableFile>,
    /// Files that it opened.
    pub opened: Vec<OpenedFile>,
    /// Names of earlier cells that it used.
    pub uses: Vec<String>,
    /// Names that it defined or changed.
    pub makes: Vec<String>,
    /// What it used that was outdated, in words.
    pub outdated: Vec<String>,
}

/// One output, by digest.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct OutputEntry {
    /// `stdout`, `stderr`, `display` or `result`.
    pub kind: String,
    /// Its size in bytes.
    pub bytes: u64,
    /// The SHA-256 digest of each form, or of the text under `text`.
    pub sha256: BTreeMap<String, String>,
}
