//! What the kernel and its worker say to each other.
//!
//! The kernel sends [`Command`]s down one pipe, the worker answers with [`Report`]s on another; each
//! is one frame, a length (four bytes, little end first) and that many bytes of JSON. The same file
//! is a module of both crates, so that the two sides cannot drift apart; whatever changes here
//! changes [`INTERFACE`] too, and a kernel never starts a worker of another interface.

use std::io::{self, Read, Write};
use std::path::PathBuf;

use serde::{Deserialize, Serialize};

/// The number of this set of messages.
pub const INTERFACE: u32 = 3;

/// The name of the one function that a worker process calls in the prelude.
pub const ENTRY: &str = "semiaxis_worker";

/// No frame is longer; a longer length can only be a fault, and is not allocated.
const LONGEST: u32 = 1 << 30;

/// From the kernel to the worker.
#[derive(Debug, Serialize, Deserialize)]
#[serde(tag = "do", rename_all = "snake_case")]
pub enum Command {
    /// Load the libraries not loaded yet, in this order, then run the cell.
    Run(Run),
    /// Drop these variables.
    Forget {
        /// Their names.
        names: Vec<String>,
    },
    /// Ask the running cell to stop at its next check.
    Interrupt,
    /// The exhibit of the last [`Report::Show`] is on its way; the cell may go on.
    Proceed,
}

/// One cell to run.
#[derive(Debug, Serialize, Deserialize)]
pub struct Run {
    /// Paths of compiled cells, those that others stand on first, the cell itself last.
    pub libraries: Vec<PathBuf>,
    /// The function to call in the last library.
    pub symbol: String,
    /// The number by which the person knows the cell.
    pub cell: u32,
    /// The seed of everything random in this cell.
    pub seed: u64,
    /// Variables whose type goes by a new name although its definition is the same.
    pub relabelled: Vec<String>,
}

/// From the worker to the kernel.
#[derive(Debug, Serialize, Deserialize)]
#[serde(tag = "said", rename_all = "snake_case")]
pub enum Report {
    /// The worker is up.
    Ready {
        /// [`INTERFACE`] as the worker was built with.
        interface: u32,
    },
    /// Show this now, in the middle of a cell; the worker waits for [`Command::Proceed`].
    Show {
        /// The forms of the exhibit.
        forms: Vec<Form>,
    },
    /// How far long work of the cell has come; nothing when it is over.
    Progress {
        /// The work under way.
        line: Option<Line>,
    },
    /// The cell has read a file as a table.
    Read(TableFile),
    /// The cell has ended.
    Ended(Ended),
    /// The variables are dropped.
    Forgotten {
        /// What went wrong in a destructor, if anything did.
        trouble: Option<String>,
    },
}

/// How far work has come.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Line {
    /// What is being done, in a word or two.
    pub what: String,
    /// Steps done.
    pub done: usize,
    /// Steps in all, where that is known.
    pub total: Option<usize>,
    /// Seconds since the work began.
    pub seconds: f64,
}

/// One form of an exhibit: its MIME type and its content as the messaging protocol wants it.
#[derive(Debug, Serialize, Deserialize)]
pub struct Form {
    /// The MIME type.
    pub mime: String,
    /// A string (base64 for binary types), or JSON for MIME types that are JSON.
    pub content: serde_json::Value,
}

/// A file that a cell has read as a table: the bytes that it read, not what is there now.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct TableFile {
    /// Its absolute path; bytes that are no UTF-8 stand as `U+FFFD`.
    pub path: String,
    /// Its size.
    pub bytes: u64,
    /// The SHA-256 digest of its bytes, in hexadecimal digits.
    pub sha256: String,
    /// Rows of the table.
    pub rows: usize,
    /// Columns of the table.
    pub columns: usize,
}

/// A file that the worker's process has opened while a cell ran.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub struct OpenedFile {
    /// Its absolute path; bytes that are no UTF-8 stand as `U+FFFD`.
    pub path: String,
    /// Whether it was opened to be written.
    pub written: bool,
}

/// What the host's `semiaxis_take_opened` calls with each file that was opened since the last call:
/// the context, the bytes of the path and their count, and whether it was opened to be written.
pub type TakeOpened = extern "C" fn(*mut std::ffi::c_void, *const u8, usize, bool);

/// How a cell ended.
#[derive(Debug, Serialize, Deserialize)]
pub struct Ended {
    /// Whether it ran to its end, and what stopped it if not.
    pub how: How,
    /// What its final expression shows.
    pub result: Vec<Form>,
    /// Variables that were taken off the shelf and did not come back.
    pub gone: Vec<String>,
    /// Variables that were put on the shelf.
    pub kept: Vec<String>,
    /// Files that were opened meanwhile, each path once.
    pub opened: Vec<OpenedFile>,
}

/// Whether a cell ran to its end.
#[derive(Debug, Serialize, Deserialize)]
#[serde(tag = "how", rename_all = "snake_case")]
pub enum How {
    /// It did.
    Done,
    /// It left by an early `return`; what it had declared by then is dropped.
    Left,
    /// A `?` at its top level met an error.
    Failed(Trouble),
    /// It panicked.
    Panicked(Trouble),
    /// It stopped at a check after an interrupt.
    Interrupted,
    /// It could not be started: a library would not load, or a variable was not there.
    NotStarted(Trouble),
}

/// What stopped a cell, and where.
#[derive(Debug, Clone, Serialize, Deserialize)]
pub struct Trouble {
    /// In words.
    pub message: String,
    /// The type of an error, where there is one.
    pub type_name: Option<String>,
    /// Where in the source, where it is known.
    pub place: Option<Place>,
}

/// A place in a source file.
#[derive(Debug, Clone, Serialize, Deserialize)]
pub struct Place {
    /// The file as the compiler was told its name.
    pub file: String,
    /// Its line, from 1.
    pub line: u32,
    /// Its column, from 1.
    pub column: u32,
}

/// What the dynamic linker says; the error around it only says that it failed.
pub fn linker_words(error: &dyn std::error::Error) -> String {
    error.source().map_or_else(
        || error.to_string(),
        |cause| format!("{cause:?}").trim_matches('"').to_owned(),
    )
}

/// Writes one frame.
///
/// # Errors
/// Whatever the pipe reports; a broken pipe means that the other side has gone.
pub fn write_frame(pipe: &mut impl Write, message: &impl Serialize) -> io::Result<()> {
    let body = serde_json::to_vec(message)?;
    let length = u32::try_from(body.len()).ok().filter(|length| *length <= LONGEST);
    let length = length.ok_or_else(|| {
        io::Error::new(io::ErrorKind::InvalidData, "an exhibit is larger than one gigabyte")
    })?;
    let mut frame = Vec::with_capacity(body.len() + 4);
    frame.extend_from_slice(&length.to_le_bytes());
    frame.extend_from_slice(&body);
    pipe.write_all(&frame)?;
    pipe.flush()
}

/// Reads one frame; `None` at the end of the pipe.
///
/// # Errors
/// A frame cut short, one that is too long, or one that does not hold a message.
pub fn read_frame<T: for<'de> Deserialize<'de>>(pipe: &mut impl Read) -> io::Result<Option<T>> {
    let mut length = [0u8; 4];
    match pipe.read(&mut length)? {
        0 => return Ok(None),
        got => pipe.read_exact(&mut length[got..])?,
    }
    let length = u32::from_le_bytes(length);
    if length > LONGEST {
        return Err(io::Error::new(io::ErrorKind::InvalidData, "a frame is too long"));
    }
    let mut body = vec![0; length as usize];
    pipe.read_exact(&mut body)?;
    Ok(Some(serde_json::from_slice(&body)?))
}
