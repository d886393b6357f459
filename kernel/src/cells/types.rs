//! What goes into the engine and what comes out of it: plain data shared by the wire, the command
//! line and the help.
//!
//! Nothing here knows sockets or notebook files: a request is text and a number, an event is what a
//! cell showed while it ran, a reply says how it ended.

use std::path::PathBuf;
use std::time::Duration;

use crate::worker::message::{Line, OpenedFile, TableFile};

/// The forms of one exhibit, as the notebook format and the messaging protocol write `data`.
pub type MimeBundle = serde_json::Map<String, serde_json::Value>;

/// What a session starts from.
#[derive(Debug, Clone, Default)]
pub struct EngineOptions {
    /// The seed from which every cell's random numbers are derived.
    pub seed: u64,
    /// Where cells run, so that relative paths mean what the analyst expects.
    pub working_dir: Option<PathBuf>,
}

/// One cell to be run.
#[derive(Debug, Clone)]
pub struct CellRequest {
    /// The text of the cell, header included.
    pub code: String,
    /// The number shown as cell `[n]`.
    pub count: u32,
    /// A silent cell shows nothing and is not counted.
    pub silent: bool,
    /// Which cell of a notebook it is, where that is known.
    pub origin: Origin,
}

/// Which cell of a notebook a text came from, as far as a client says.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Origin {
    /// The identifier of the cell.
    pub cell_id: Option<String>,
    /// Identifiers of cells that were deleted since the last request.
    pub deleted: Vec<String>,
}

/// Which of the two streams a text was written to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum StreamName {
    /// What `println!` writes to.
    Stdout,
    /// What `eprintln!` writes to.
    Stderr,
}

impl StreamName {
    /// The name that the protocol and the notebook format use.
    pub fn as_str(self) -> &'static str {
        match self {
            StreamName::Stdout => "stdout",
            StreamName::Stderr => "stderr",
        }
    }
}

/// Something a cell showed while it ran, in the order in which it happened.
#[derive(Debug, Clone, PartialEq)]
pub enum CellEvent {
    /// Text as it came, not necessarily whole lines.
    Stream {
        /// Where it was written.
        name: StreamName,
        /// What was written.
        text: String,
    },
    /// An exhibit shown in the middle of the cell.
    Display(MimeBundle),
    /// The exhibit of the cell's final expression.
    Result(MimeBundle),
    /// How far long work has come; nothing when it is over.
    Progress(Option<Line>),
}

/// How a cell ended and how long it took.
#[derive(Debug, Clone)]
pub struct CellReply {
    /// How it ended.
    pub outcome: Outcome,
    /// How long it took.
    pub timings: Timings,
    /// What it stood on and what it left behind.
    pub facts: Facts,
}

impl CellReply {
    /// The end of a cell that took no time because it did not come to run.
    pub fn at_once(outcome: Outcome) -> Self {
        Self { outcome, timings: Timings::default(), facts: Facts::default() }
    }
}

/// What a run stood on and what it left behind, beside its outputs.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Facts {
    /// The seed of its random numbers; none if it did not come to run.
    pub seed: Option<u64>,
    /// Files that were read as tables.
    pub tables: Vec<TableFile>,
    /// All files that were opened.
    pub opened: Vec<OpenedFile>,
    /// Variables and items of earlier cells that it used.
    pub uses: Vec<String>,
    /// Variables and items that it defined or changed.
    pub makes: Vec<String>,
    /// What it used that is not what its defining cell would make now, in words.
    pub outdated: Vec<String>,
}

/// How a cell ended.
#[derive(Debug, Clone)]
pub enum Outcome {
    /// It ran to its end.
    Done,
    /// It did not compile, returned an error, panicked or took its worker with it.
    Failed(CellFailure),
    /// It was interrupted; the failure says what was kept and what was lost.
    Interrupted(CellFailure),
}

/// Why a cell failed, in the words that a client shows.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct CellFailure {
    /// The kind of failure, the protocol's `ename`.
    pub name: String,
    /// One line of text, the protocol's `evalue`.
    pub message: String,
    /// The whole story, line by line, coloured with ANSI sequences.
    pub traceback: Vec<String>,
    /// The line of the cell at fault, counted from 1, where there is one.
    pub line: Option<u32>,
}

/// How long the parts of a cell took.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct Timings {
    /// From the request to a library ready to be loaded.
    pub compile: Duration,
    /// Loading and running it.
    pub run: Duration,
    /// Whether the compiler was called; false if the library was taken from the cache.
    pub compiled: bool,
}

/// What a session defines, as completion and inspection need it.
#[derive(Debug, Clone, Default)]
pub struct Scope {
    /// The variables on the shelf.
    pub variables: Vec<VariableInfo>,
    /// The newest definition of each item.
    pub items: Vec<ItemInfo>,
}

/// One variable on the shelf.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct VariableInfo {
    /// Its name.
    pub name: String,
    /// Its type as rustc prints it, without the path of the prelude where that reads better.
    pub type_text: String,
    /// Whether it was bound with `mut`.
    pub mutable: bool,
    /// The number of the cell that made it.
    pub cell: u32,
}

/// One item that a cell defined.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ItemInfo {
    /// Its name.
    pub name: String,
    /// What it is.
    pub kind: ItemKind,
    /// Its declaration without its body.
    pub signature: String,
    /// Its documentation comment, empty if it has none.
    pub docs: String,
    /// The number of the cell that defined it.
    pub cell: u32,
    /// Name, signature and documentation of each method in its inherent impl blocks.
    pub methods: Vec<(String, String, String)>,
}

/// What an item is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ItemKind {
    /// `fn`
    Function,
    /// `struct` or `union`
    Struct,
    /// `enum`
    Enum,
    /// `trait`
    Trait,
    /// `type`
    TypeAlias,
    /// `const`
    Const,
    /// `static`
    Static,
    /// `mod`
    Module,
    /// `macro_rules!`
    Macro,
}

impl ItemKind {
    /// The word for it, as a client shows it beside a completion.
    pub fn as_str(self) -> &'static str {
        match self {
            ItemKind::Function => "function",
            ItemKind::Struct => "struct",
            ItemKind::Enum => "enum",
            ItemKind::Trait => "trait",
            ItemKind::TypeAlias => "type",
            ItemKind::Const => "const",
            ItemKind::Static => "static",
            ItemKind::Module => "module",
            ItemKind::Macro => "macro",
        }
    }
}
