//! The binary kinds: Parquet and Arrow.

use std::io::Cursor;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::Path;

use polars::prelude::{DataFrame, PolarsResult};
use polars_io::SerReader;
use polars_io::prelude::{IpcReader, ParquetReader};

use crate::error::{Error, Result};

pub(super) fn read_parquet(path: &Path, bytes: Vec<u8>) -> Result<DataFrame> {
    read(path, bytes, "Parquet", |bytes| ParquetReader::new(Cursor::new(bytes)).finish())
}

pub(super) fn read_arrow(path: &Path, bytes: Vec<u8>) -> Result<DataFrame> {
    read(path, bytes, "an Arrow file", |bytes| IpcReader::new(Cursor::new(bytes)).finish())
}

fn read(
    path: &Path,
    bytes: Vec<u8>,
    format: &'static str,
    reader: impl FnOnce(Vec<u8>) -> PolarsResult<DataFrame>,
) -> Result<DataFrame> {
    if bytes.is_empty() {
        return Err(Error::EmptyFile { path: path.to_owned() });
    }
    let unreadable = |reason: String| Error::Unreadable { path: path.to_owned(), format, reason };
    // These readers index into the file by offsets that the file itself holds. Damage that their
    // own checks overlook ends in a panic there, which here is one more way of being unreadable.
    match catch_unwind(AssertUnwindSafe(|| reader(bytes))) {
        Ok(Ok(mut table)) => {
            table.rechunk_mut();
            Ok(table)
        }
        Ok(Err(error)) => Err(unreadable(error.to_string())),
        Err(_) => Err(unreadable("an offset in it leads outside".to_owned())),
    }
}
