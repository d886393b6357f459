//! What can go wrong with a record.

use std::path::PathBuf;

use crate::notebook::error::NotebookError;
use crate::notebook::parameters::ParameterFault;

/// Why a record could not be made, read or run again.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum RecordError {
    /// The notebook, or the place for the record.
    #[error(transparent)]
    Notebook(#[from] NotebookError),
    /// A value given for this run.
    #[error(transparent)]
    Parameter(#[from] ParameterFault),
    /// The kit, the compiler or the worker.
    #[error("{0}")]
    Engine(String),
    /// A cell failed, and a record with errors was not asked for.
    #[error(
        "cell {place} failed ({message}), so no record was written; \
         --with-errors writes one that says so on its first page"
    )]
    CellFailed {
        /// The place of the cell in the notebook, from 1.
        place: usize,
        /// What it failed with.
        message: String,
    },
    /// There is no such file.
    #[error("there is no record at {}", path.display())]
    Missing {
        /// The path given.
        path: PathBuf,
    },
    /// A file of another kind.
    #[error("{} is not a record: {message}", path.display())]
    NotARecord {
        /// The file.
        path: PathBuf,
        /// What a record has and this has not.
        message: String,
    },
    /// The end is missing.
    #[error("{} is cut short: {message}", path.display())]
    CutShort {
        /// The file.
        path: PathBuf,
        /// What is missing.
        message: String,
    },
    /// Written by a later version of this program.
    #[error(
        "{} is a record of format {found}, and this version reads up to format {known}; \
         verify it with the version that made it",
        path.display()
    )]
    LaterFormat {
        /// The file.
        path: PathBuf,
        /// Its format.
        found: u64,
        /// The newest that is known here.
        known: u64,
    },
    /// Something in it is not as it was written.
    #[error("{} has been altered: {what}", path.display())]
    Altered {
        /// The file.
        path: PathBuf,
        /// Which part, and which digests.
        what: String,
    },
    /// The PDF could not be printed.
    #[error("the record is at {}, but it could not be printed: {message}", record.display())]
    NotPrinted {
        /// The record that was written.
        record: PathBuf,
        /// Why not.
        message: String,
    },
    /// A tolerance that is none.
    #[error("{given} is no tolerance; a number from 0 to 1 is accepted")]
    BadTolerance {
        /// What was given.
        given: String,
    },
}
