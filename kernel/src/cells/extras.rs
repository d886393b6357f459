//! Crates that the header of a cell asks for.

use std::collections::BTreeMap;
use std::ffi::OsString;
use std::path::PathBuf;

use super::types::CellFailure;
use crate::setup::Kit;

/// The extra crates of a session.
#[derive(Debug, Default)]
pub struct Extras {
    libraries: Vec<PathBuf>,
}

impl Extras {
    /// Builds what is not there yet.
    pub async fn ensure(&mut self, _kit: &Kit, _wanted: &BTreeMap<String, String>) -> Result<(), CellFailure> {
        Ok(())
    }

    /// Arguments for the compiler.
    pub fn arguments(&self) -> Vec<OsString> {
        Vec::new()
    }

    /// What must be loaded before a cell.
    pub fn libraries(&self) -> &[PathBuf] {
        &self.libraries
    }

    /// Whether a cell can name this crate.
    pub fn has(&self, _name: &str) -> bool {
        false
    }

    /// What tells one set of extra crates from another.
    pub fn identity(&self) -> String {
        String::new()
    }
}
