//! A folder of one test's own, with a table and notebooks in it, for tests of the command line.

use std::fs;
use std::path::{Path, PathBuf};

use crate::command::notebook;

/// A temporary folder that holds `tiles.csv`; gone with everything in it when it is dropped.
#[derive(Debug)]
pub struct Folder(tempfile::TempDir);

impl Folder {
    /// A new folder with this table.
    ///
    /// # Panics
    /// When the system has no room for it.
    pub fn with_tiles(tiles: &str) -> Self {
        let folder = Self(tempfile::tempdir().expect("a temporary folder"));
        fs::write(folder.path("tiles.csv"), tiles).expect("a new folder can be written");
        folder
    }

    /// The path of something inside.
    pub fn path(&self, name: impl AsRef<Path>) -> PathBuf {
        self.0.path().join(name)
    }

    /// Writes a notebook of these cells and gives its path.
    ///
    /// # Panics
    /// When it cannot be written.
    pub fn put(&self, name: &str, cells: &[(&str, &str)]) -> PathBuf {
        let path = self.path(name);
        fs::write(&path, notebook(cells).to_string()).expect("the folder can be written");
        path
    }
}
