//! Files become tables: which reader takes a file, and what is said when none can.

mod columnar;
mod delimited;
mod json_lines;
mod options;
mod scan;

use std::fs;
use std::path::{Path, PathBuf};

use polars::prelude::DataFrame;

use super::nearest::nearest;
use crate::error::{Error, Result};
use crate::live::TableRead;

pub use options::TableOptions;

/// The extensions that are read, in the order that messages list them.
pub const READABLE: &[&str] =
    &["csv", "tsv", "tab", "parquet", "arrow", "ipc", "feather", "jsonl", "ndjson"];

/// How many names a message about a path offers.
const OFFERED: usize = 5;

/// Reads a table; the file's extension says how.
///
/// | extension | kind |
/// | --- | --- |
/// | `csv` | text, fields between commas, first line the header |
/// | `tsv`, `tab` | the same with tabs |
/// | `parquet` | Apache Parquet |
/// | `arrow`, `ipc`, `feather` | Apache Arrow's file format (Feather version 2) |
/// | `jsonl`, `ndjson` | one JSON object a line |
///
/// Text must be UTF-8, with or without a byte order mark, with any of the usual line ends. Fields
/// may be quoted with `"` and may then hold delimiters, line ends and doubled quotes. A cell is
/// missing when it is empty or says `NA`, `N/A`, `n/a`, `NaN`, `nan`, `NULL` or `null`. The type of
/// a column follows from all of its cells: whole numbers, numbers (spaces around them do not
/// count), `true`/`false`, dates as `2026-01-31`, else text. Blank lines at the end do not count.
///
/// ```
/// # let dir = tempfile::tempdir().unwrap();
/// # let path = dir.path().join("tiles.csv");
/// std::fs::write(&path, "tile,length,width\na,40.1,20.3\nb,NA,20.1\n").unwrap();
/// let table = semiaxis::table::read_table(&path)?;
/// assert_eq!(table.shape(), (2, 3));
/// assert_eq!(table.column("length")?.null_count(), 1);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::FileMissing`], [`Error::IsFolder`], [`Error::UnknownExtension`] and [`Error::Io`] for
/// the path; [`Error::EmptyFile`], [`Error::NotText`], [`Error::WrongDelimiter`],
/// [`Error::DuplicateColumns`], [`Error::UnnamedColumn`], [`Error::RaggedRows`],
/// [`Error::UnclosedQuote`], [`Error::StrayQuote`], [`Error::BadJsonLine`],
/// [`Error::MixedKinds`] and [`Error::Unreadable`] for what is in it.
pub fn read_table(path: impl AsRef<Path>) -> Result<DataFrame> {
    read_at(path.as_ref(), &TableOptions::new())
}

/// Reads a table whose text departs from the usual: another delimiter, a decimal comma, other
/// words for a missing value, a column without a name. See [`read_table`] for the rest.
///
/// ```
/// use semiaxis::table::{TableOptions, read_table_with};
///
/// # let dir = tempfile::tempdir().unwrap();
/// # let path = dir.path().join("tiles.csv");
/// std::fs::write(&path, "tile;length\na;40,1\nb;--\n").unwrap();
/// let options = TableOptions::new().delimiter(';').decimal_comma().missing(["--"]);
/// let table = read_table_with(&path, options)?;
/// assert_eq!(table.column("length")?.f64()?.get(0), Some(40.1));
/// assert_eq!(table.column("length")?.null_count(), 1);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// Those of [`read_table`], and [`Error::BadDelimiter`] for a delimiter that cannot be one.
pub fn read_table_with(path: impl AsRef<Path>, options: TableOptions) -> Result<DataFrame> {
    read_at(path.as_ref(), &options)
}

/// Apart from the generic function, so that it is compiled once and not in every cell.
fn read_at(path: &Path, options: &TableOptions) -> Result<DataFrame> {
    let extension = path
        .extension()
        .map(|extension| extension.to_string_lossy().to_lowercase())
        .filter(|extension| READABLE.contains(&extension.as_str()));
    let bytes = read_bytes(path, extension.is_some())?;
    let read = TableRead::of(&bytes);
    let table = match extension.as_deref() {
        Some("csv") => delimited::read(path, bytes, ',', options),
        Some("tsv" | "tab") => delimited::read(path, bytes, '\t', options),
        Some("parquet") => columnar::read_parquet(path, bytes),
        Some("arrow" | "ipc" | "feather") => columnar::read_arrow(path, bytes),
        Some("jsonl" | "ndjson") => json_lines::read(path, bytes),
        _ => Err(Error::UnknownExtension { path: path.to_owned(), accepted: READABLE }),
    }?;
    read.became(path, table.shape());
    Ok(table)
}

/// The whole file, or why there is none. A path that exists but cannot be read by its extension
/// is not read at all.
fn read_bytes(path: &Path, wanted: bool) -> Result<Vec<u8>> {
    let io = |source| Error::Io { action: "read", path: Some(path.to_owned()), source };
    match fs::metadata(path) {
        Ok(metadata) if metadata.is_dir() => {
            Err(Error::IsFolder { path: path.to_owned(), readable: readable_in(path) })
        }
        Ok(_) if !wanted => Ok(Vec::new()),
        Ok(_) => fs::read(path).map_err(io),
        Err(source) if source.kind() == std::io::ErrorKind::NotFound => Err(file_missing(path)),
        Err(source) => Err(io(source)),
    }
}

fn file_missing(path: &Path) -> Error {
    let folder = match path.parent() {
        Some(parent) if parent != Path::new("") => parent.to_owned(),
        _ => PathBuf::from("."),
    };
    let wanted = path.file_name().map(|name| name.to_string_lossy().into_owned());
    let mut known = names_in(&folder);
    let mut similar = Vec::new();
    if let Some(wanted) = wanted {
        while let Some(name) = nearest(&wanted, known.iter()) {
            known.retain(|other| *other != name);
            similar.push(name);
            if similar.len() == OFFERED {
                break;
            }
        }
    }
    let working_dir = std::env::current_dir().unwrap_or_default();
    Error::FileMissing { path: path.to_owned(), working_dir, similar }
}

fn readable_in(folder: &Path) -> Vec<String> {
    let mut names = names_in(folder);
    names.retain(|name| {
        let extension = Path::new(name).extension().map(|e| e.to_string_lossy().to_lowercase());
        extension.is_some_and(|extension| READABLE.contains(&extension.as_str()))
    });
    names.truncate(OFFERED);
    names
}

fn names_in(folder: &Path) -> Vec<String> {
    let Ok(entries) = fs::read_dir(folder) else { return Vec::new() };
    let mut names: Vec<String> =
        entries.flatten().map(|entry| entry.file_name().to_string_lossy().into_owned()).collect();
    names.sort();
    names
}
