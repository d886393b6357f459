//! What can be wrong with a notebook file or with the place for its results.

use std::io;
use std::path::{Path, PathBuf};

/// Why a notebook could not be run or its results not be written.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum NotebookError {
    /// There is no such file.
    #[error("there is no notebook at {}", path.display())]
    Missing {
        /// The path given.
        path: PathBuf,
    },
    /// The file is not JSON.
    #[error("{} is not a notebook: it is not JSON ({message})", path.display())]
    NotJson {
        /// The file.
        path: PathBuf,
        /// What the parser says, with line and column.
        message: String,
    },
    /// JSON of another kind.
    #[error("{} is not a notebook: {message}", path.display())]
    NotANotebook {
        /// The file.
        path: PathBuf,
        /// What a notebook has and this has not.
        message: String,
    },
    /// A notebook of another major version.
    #[error(
        "{} is in notebook format {found}, and format 4 is accepted; \
         open it in a notebook client and save it there to bring it up to date",
        path.display()
    )]
    OtherFormat {
        /// The file.
        path: PathBuf,
        /// Its version as it says.
        found: String,
    },
    /// A notebook that some other kernel runs.
    #[error(
        "{} is for the kernel `{kernel}` ({language}), and this is the kernel `semiaxis` (rust); \
         choose Semiaxis for it in a notebook client if its cells are Rust",
        path.display()
    )]
    OtherKernel {
        /// The file.
        path: PathBuf,
        /// The kernel that it names.
        kernel: String,
        /// The language that it names.
        language: String,
    },
    /// Something in it is not as the format demands.
    #[error("{} is not a valid notebook: {message}", path.display())]
    Invalid {
        /// The file.
        path: PathBuf,
        /// What is wrong, with the index of the cell.
        message: String,
    },
    /// The place for the results cannot be used.
    #[error("cannot write {}: {message}; name another file with --output", path.display())]
    BadOutput {
        /// The path.
        path: PathBuf,
        /// Why not.
        message: String,
    },
    /// The disk is full.
    #[error(
        "no space left on the disk that holds {}; what was there before is unchanged",
        path.display()
    )]
    DiskFull {
        /// The file to be written.
        path: PathBuf,
    },
    /// Another failure of the file system.
    #[error("could not {action} {}: {source}", path.display())]
    Files {
        /// What was tried.
        action: &'static str,
        /// On what.
        path: PathBuf,
        /// What the system said.
        source: io::Error,
    },
}

impl NotebookError {
    /// Says what was tried on which path, and recognises a full disk.
    pub fn files<'a>(action: &'static str, path: &'a Path) -> impl FnOnce(io::Error) -> Self + 'a {
        move |source| match source.kind() {
            io::ErrorKind::StorageFull
            | io::ErrorKind::QuotaExceeded
            | io::ErrorKind::FileTooLarge => NotebookError::DiskFull { path: path.to_owned() },
            _ => NotebookError::Files { action, path: path.to_owned(), source },
        }
    }
}
