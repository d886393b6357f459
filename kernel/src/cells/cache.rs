//! Compiled cells on disk: a cell that was compiled once, in whatever session, is not compiled again.
//!
//! Each has a folder of its own, named by a hash of everything that went into it, with the text, the
//! library and an account of what the compiler said. A folder is filled under another name and then
//! renamed, so that whoever finds one finds it whole, and two kernels may compile the same cell at
//! once.

use std::collections::BTreeMap;
use std::io;
use std::path::{Path, PathBuf};
use std::time::{Duration, SystemTime};

use serde::{Deserialize, Serialize};

use super::generate::Without;
use super::rustc::Said;

/// A compiled cell untouched for this long is not likely to be asked for again.
const KEEP_FOR: Duration = Duration::from_secs(60 * 24 * 60 * 60);

/// What is known of a compiled cell beside its library.
#[derive(Debug, Clone, Serialize, Deserialize)]
pub struct Entry {
    /// What was left out to make it compile.
    pub without: Without,
    /// The types of declared variables as the compiler shows them.
    pub types: BTreeMap<String, String>,
    /// Warnings about the person's own text.
    pub warnings: Vec<Said>,
}

/// The folder of compiled cells for one build of the prelude.
#[derive(Debug, Clone)]
pub struct Cache {
    root: PathBuf,
}

const ACCOUNT: &str = "account.json";

/// How the names of folders begin in which a cell is being compiled.
const WORKPLACE: &str = "new-";

impl Cache {
    /// The cache of this user for this build of the prelude.
    pub fn new(stamp: &str) -> Self {
        Self { root: user_folder().join("semiaxis").join("cells").join(stamp) }
    }

    /// Where compiled cells are kept.
    pub fn cells_folder(&self) -> PathBuf {
        self.root.clone()
    }

    /// Where extra crates are kept, for the same build of the prelude.
    pub fn extras_folder(&self) -> PathBuf {
        let stamp = self.root.file_name().unwrap_or_default();
        user_folder().join("semiaxis").join("extras").join(stamp)
    }

    /// Where a cell's folder is, or would be.
    pub fn folder(&self, crate_name: &str) -> PathBuf {
        // Two levels, so that no folder grows to many thousands of entries.
        let hash = crate_name.trim_start_matches("cell_");
        self.root.join(&hash[..2]).join(crate_name)
    }

    /// The library of a compiled cell, or where it would be.
    pub fn library(&self, crate_name: &str) -> PathBuf {
        self.folder(crate_name).join(format!("lib{crate_name}.so"))
    }

    /// A compiled cell; anything unreadable counts as not there and is compiled again.
    pub fn find(&self, crate_name: &str) -> Option<Entry> {
        let account = std::fs::read(self.folder(crate_name).join(ACCOUNT)).ok()?;
        let entry = serde_json::from_slice(&account).ok()?;
        let library = std::fs::metadata(self.library(crate_name)).ok()?;
        (library.len() > 0).then_some(entry)
    }

    /// A folder to compile in, beside the cells' own so that it can be renamed into place.
    ///
    /// # Errors
    /// When the cache cannot be written; the message names the folder.
    pub fn workplace(&self) -> io::Result<tempfile::TempDir> {
        std::fs::create_dir_all(&self.root)
            .and_then(|()| tempfile::Builder::new().prefix(WORKPLACE).tempdir_in(&self.root))
            .map_err(|error| self.explain(error))
    }

    /// Puts a filled workplace in the place of its cell.
    ///
    /// # Errors
    /// When the account cannot be written or the folder not be renamed.
    pub fn keep(
        &self,
        crate_name: &str,
        workplace: tempfile::TempDir,
        entry: &Entry,
    ) -> io::Result<()> {
        let keep = || {
            std::fs::write(workplace.path().join(ACCOUNT), serde_json::to_vec(entry)?)?;
            let folder = self.folder(crate_name);
            if let Some(parent) = folder.parent() {
                std::fs::create_dir_all(parent)?;
            }
            match std::fs::rename(workplace.path(), &folder) {
                Ok(()) => Ok(()),
                // Another kernel was quicker; what it made is the same.
                Err(_) if self.find(crate_name).is_some() => Ok(()),
                Err(_) => {
                    // What is there is broken.
                    std::fs::remove_dir_all(&folder)?;
                    std::fs::rename(workplace.path(), &folder)
                }
            }
        };
        keep().map_err(|error: io::Error| self.explain(error))
    }

    /// Marks a cell as used, so that it is kept.
    pub fn touch(&self, crate_name: &str) {
        if let Ok(file) = std::fs::File::open(self.folder(crate_name).join(ACCOUNT)) {
            let _ = file.set_modified(SystemTime::now());
        }
    }

    /// Removes what nobody has used for a long time, also of other builds of the prelude.
    pub fn tidy(&self) {
        let Some(all) = self.root.parent() else { return };
        for stamp in folders(all) {
            for shelf in folders(&stamp) {
                // A workplace belongs to a kernel that is compiling, unless it was left by a crash.
                if shelf
                    .file_name()
                    .is_some_and(|name| name.to_string_lossy().starts_with(WORKPLACE))
                {
                    if is_old(&shelf) {
                        let _ = std::fs::remove_dir_all(&shelf);
                    }
                    continue;
                }
                for cell in folders(&shelf) {
                    if is_old(&cell.join(ACCOUNT)) {
                        let _ = std::fs::remove_dir_all(&cell);
                    }
                }
            }
        }
    }

    /// An error of the file system, with the folder it is about.
    pub fn explain(&self, error: io::Error) -> io::Error {
        let place = self.root.display();
        io::Error::new(error.kind(), format!("compiled cells cannot be kept in {place}: {error}"))
    }
}

fn folders(path: &Path) -> Vec<PathBuf> {
    let entries = std::fs::read_dir(path).into_iter().flatten().flatten();
    entries.map(|entry| entry.path()).filter(|path| path.is_dir()).collect()
}

fn is_old(path: &Path) -> bool {
    let modified = std::fs::metadata(path).and_then(|data| data.modified());
    modified.is_ok_and(|time| time.elapsed().is_ok_and(|age| age > KEEP_FOR))
}

/// `$XDG_CACHE_HOME`, or `.cache` in the home folder, or the system's folder for passing things.
fn user_folder() -> PathBuf {
    let named =
        |name: &str| std::env::var_os(name).map(PathBuf::from).filter(|path| path.is_absolute());
    named("XDG_CACHE_HOME")
        .or_else(|| named("HOME").map(|home| home.join(".cache")))
        .unwrap_or_else(std::env::temp_dir)
}

/// The name of a crate from everything that goes into it.
pub fn crate_name(ingredients: &[&[u8]]) -> String {
    let mut hasher = blake3::Hasher::new();
    for ingredient in ingredients {
        hasher.update(&(ingredient.len() as u64).to_le_bytes());
        hasher.update(ingredient);
    }
    format!("cell_{}", &hasher.finalize().to_hex()[..16])
}
