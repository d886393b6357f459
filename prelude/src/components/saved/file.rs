//! Files that are whole or not there.

use std::fs::{self, File};
use std::io::{ErrorKind, Write};
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicU64, Ordering};

use crate::error::{Error, Result};

/// How many files of the folder an error names.
const OFFERED: usize = 5;

/// Writes a file beside its place and moves it there when it is whole.
pub(super) fn write(path: &Path, text: &str) -> Result<()> {
    let io =
        |source| Error::Io { action: "write the analysis to", path: Some(path.to_owned()), source };
    let Some(name) = path.file_name() else {
        return Err(io(ErrorKind::IsADirectory.into()));
    };
    // A name of its own for every attempt, so that two at once do not write into one file.
    static ATTEMPTS: AtomicU64 = AtomicU64::new(0);
    let attempt = ATTEMPTS.fetch_add(1, Ordering::Relaxed);
    let mut beside = std::ffi::OsString::from(".");
    beside.push(name);
    beside.push(format!(".{}-{attempt}.part", std::process::id()));
    let beside = path.with_file_name(beside);
    let written = write_whole(&beside, text).and_then(|()| fs::rename(&beside, path));
    written.map_err(|source| {
        // Whatever went wrong first is what the caller should hear of.
        let _ = fs::remove_file(&beside);
        io(source)
    })
}

fn write_whole(path: &Path, text: &str) -> std::io::Result<()> {
    let mut file = File::create_new(path)?;
    file.write_all(text.as_bytes())?;
    file.write_all(b"\n")?;
    file.sync_all()
}

/// The text of a file.
pub(super) fn read(path: &Path) -> Result<String> {
    let bytes = fs::read(path).map_err(|source| match source.kind() {
        ErrorKind::NotFound => Error::FileMissing {
            path: path.to_owned(),
            working_dir: std::env::current_dir().unwrap_or_default(),
            similar: neighbours(path),
        },
        _ => Error::Io { action: "read the analysis from", path: Some(path.to_owned()), source },
    })?;
    String::from_utf8(bytes).map_err(|error| {
        let place = error.utf8_error().valid_up_to();
        let bytes = error.as_bytes();
        let line = bytes[..place].iter().filter(|byte| **byte == b'\n').count() + 1;
        Error::NotText { path: path.to_owned(), line, byte: bytes[place] }
    })
}

/// Files of the same folder that could be analyses.
fn neighbours(path: &Path) -> Vec<String> {
    let folder = match path.parent() {
        Some(parent) if parent != Path::new("") => parent.to_owned(),
        _ => PathBuf::from("."),
    };
    let Ok(entries) = fs::read_dir(folder) else { return Vec::new() };
    let mut names: Vec<String> = entries
        .flatten()
        .map(|entry| entry.file_name().to_string_lossy().into_owned())
        .filter(|name| name.ends_with(".json"))
        .collect();
    names.sort();
    names.truncate(OFFERED);
    names
}
