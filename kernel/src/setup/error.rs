//! What can go wrong before the first cell, each with what would be accepted.

use std::io;
use std::path::{Path, PathBuf};

/// Why there is no kit to compile cells against.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum SetupError {
    /// No compiler where one is looked for.
    #[error(
        "found no rust compiler: no `rustc` on PATH or in {}; \
         install Rust {needed} or newer (for example with rustup) and start again",
        cargo_bin.display()
    )]
    NoCompiler {
        /// The folder looked into after `PATH`.
        cargo_bin: PathBuf,
        /// The oldest release that serves.
        needed: String,
    },
    /// Something called `rustc` that does not answer as a compiler.
    #[error("`{} -vV` does not answer as a rust compiler: {said}", path.display())]
    NotACompiler {
        /// What was started.
        path: PathBuf,
        /// What it said instead, or why it did not start.
        said: String,
    },
    /// A compiler that is too old for the prelude.
    #[error(
        "the rust compiler {} is release {found}, but the prelude needs {needed} or newer; \
         update it (for example with `rustup update`) or put a newer one first on PATH",
        path.display()
    )]
    OldCompiler {
        /// The compiler.
        path: PathBuf,
        /// Its release.
        found: String,
        /// The oldest release that serves.
        needed: String,
    },
    /// A compiler without cargo.
    #[error(
        "found no `cargo` on PATH or beside {}; install it together with the compiler \
         (for example with rustup) and start again",
        rustc.display()
    )]
    NoCargo {
        /// The compiler that was found.
        rustc: PathBuf,
    },
    /// Nothing to build from and nothing built.
    #[error(
        "the sources that this program was built from are gone from {} and no kit built from \
         them is left in {}; put the sources back there or build the program again from where they are now",
        workspace.display(), kits.display()
    )]
    NoSources {
        /// Where the sources were.
        workspace: PathBuf,
        /// Where kits are kept.
        kits: PathBuf,
    },
    /// Cargo or the compiler refused.
    #[error("could not build the prelude in {} ({status}):\n{}", workspace.display(), tail.join("\n"))]
    BuildFailed {
        /// The workspace that was built.
        workspace: PathBuf,
        /// How cargo ended.
        status: String,
        /// The last lines that it printed.
        tail: Vec<String>,
    },
    /// The disk is full.
    #[error("no space left on the disk that holds {}; free some and start again", path.display())]
    DiskFull {
        /// What could not be written.
        path: PathBuf,
    },
    /// The user has no folder for data.
    #[error("found no folder to keep the kit in: set HOME, or XDG_DATA_HOME to an absolute path")]
    NoDataFolder,
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
    /// A file of the sources that is not what it should be.
    #[error("{} is not what it should be: {message}", path.display())]
    Malformed {
        /// The file.
        path: PathBuf,
        /// What is wrong with it.
        message: String,
    },
    /// A defect of this program: cargo's answer lacks something that it always has.
    #[error(
        "cargo's report of the build lacks {what}; this is a defect of semiaxis, please report it"
    )]
    UnexpectedBuild {
        /// What is missing.
        what: String,
    },
}

impl SetupError {
    /// Says what was tried on which path, and recognises a full disk.
    pub fn files<'a>(action: &'static str, path: &'a Path) -> impl FnOnce(io::Error) -> Self + 'a {
        move |source| match source.kind() {
            io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded => {
                SetupError::DiskFull { path: path.to_owned() }
            }
            _ => SetupError::Files { action, path: path.to_owned(), source },
        }
    }
}
