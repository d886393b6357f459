//! One table as other programs write it, in every kind of file that is read.
//! `references/tables.py` made the files with pandas 3.1.1 and pyarrow 26.0.1.

use std::path::PathBuf;

use semiaxis::polars::prelude::{DataFrame, DataType};
use semiaxis::table::{FrameToMatrix, MatrixOptions, Missing, read_table};
use semiaxis::{Error, Result};

fn read(name: &str) -> Result<DataFrame> {
    read_table(PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("references").join(name))
}

const KINDS: [&str; 4] = ["csv", "parquet", "feather", "jsonl"];

#[test]
fn every_kind_of_file_gives_the_same_table_and_matrix() {
    for kind in KINDS {
        let table = read(&format!("tiles.{kind}")).unwrap();
        assert_eq!(table.shape(), (4, 6), "{kind}");
        let names = ["tile", "kiln", "length", "fired", "sound", "day"];
        assert_eq!(table.get_column_names(), names, "{kind}");
        let dtype = |name: &str| table.column(name).unwrap().dtype().clone();
        assert_eq!(dtype("length"), DataType::Float64, "{kind}");
        assert_eq!(dtype("sound"), DataType::Boolean, "{kind}");
        // JSON has no dates.
        let day = if kind == "jsonl" { DataType::String } else { DataType::Date };
        assert_eq!(dtype("day"), day, "{kind}");
        let options = MatrixOptions::new().missing(Missing::DropRows);
        let x = table.data_matrix_with(options).unwrap();
        assert_eq!(x.variables(), ["length", "fired"], "{kind}");
        assert_eq!(x.labels(), ["north, 1", "the \"odd\" one", "süd 4"], "{kind}");
        assert_eq!(x.variable("length").unwrap(), [401.25, 399.5, 400.125], "{kind}");
        assert_eq!(x.variable("fired").unwrap(), [3.0, 2.0, 4.0], "{kind}");
        assert_eq!(x.notes().dropped_rows[0].label, "north, 2", "{kind}");
    }
}

#[test]
fn a_file_cut_short_anywhere_is_an_error_and_no_panic() {
    for kind in ["parquet", "feather"] {
        let name = format!("tiles.{kind}");
        let path = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("references").join(&name);
        let bytes = std::fs::read(path).unwrap();
        let dir = tempfile::tempdir().unwrap();
        let cut = dir.path().join(&name);
        for length in (1..bytes.len()).step_by(97) {
            std::fs::write(&cut, &bytes[..length]).unwrap();
            match read_table(&cut) {
                Err(Error::Unreadable { .. }) => {}
                other => panic!("{name} cut to {length} bytes: {other:?}"),
            }
        }
    }
}

// Damage inside a page of a Parquet file can make its reader ask for more memory than there is,
// which no caller can catch; the worker process is what contains that.
#[test]
fn a_damaged_byte_of_an_arrow_file_is_an_error_or_a_table_and_no_panic() {
    let path = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("references").join("tiles.feather");
    let bytes = std::fs::read(path).unwrap();
    let dir = tempfile::tempdir().unwrap();
    let damaged = dir.path().join("tiles.feather");
    for place in (0..bytes.len()).step_by(23) {
        let mut bytes = bytes.clone();
        bytes[place] ^= 0x55;
        std::fs::write(&damaged, bytes).unwrap();
        // Damage inside a value gives another value, which no reader can see.
        if let Err(error) = read_table(&damaged) {
            assert!(matches!(error, Error::Unreadable { .. }), "byte {place}: {error}");
        }
    }
}
