//! One hash of everything that decides how a kit is built, by which it is found again.

use std::fs;
use std::path::{Path, PathBuf};

use super::compiler::Compiler;
use super::error::SetupError;
use super::kit::INTERFACE;

/// How many hexadecimal digits of a hash name a folder: 96 bits, far beyond chance.
pub const DIGITS: usize = 24;

/// The number of the way in which kits are built and laid out; another way makes another kit.
const RECIPE: u32 = 6;

/// What the sources say about the build.
pub struct Sources {
    /// The hash of the prelude and of what decides how cargo builds it.
    pub hash: String,
    /// The `rust-version` of the workspace.
    pub needed: String,
    /// The `[profile…]` sections of the workspace manifest.
    pub profile: String,
}

impl Sources {
    /// Reads the sources of a workspace; `None` if they are gone.
    ///
    /// # Errors
    /// A file cannot be read, or the workspace manifest is not TOML.
    pub fn read(workspace: &Path) -> Result<Option<Self>, SetupError> {
        let manifest = workspace.join("Cargo.toml");
        let prelude = workspace.join("prelude");
        if !manifest.is_file() || !prelude.join("src/lib.rs").is_file() {
            return Ok(None);
        }
        let mut files = vec![manifest.clone(), prelude.join("Cargo.toml")];
        for optional in ["Cargo.lock", ".cargo/config.toml", "prelude/build.rs"] {
            files.extend(Some(workspace.join(optional)).filter(|file| file.is_file()));
        }
        collect_files(&prelude.join("src"), &mut files)?;

        let mut hasher = blake3::Hasher::new();
        for file in &files {
            let text = fs::read(file).map_err(SetupError::files("read", file))?;
            let name = file.strip_prefix(workspace).unwrap_or(file).as_os_str().as_encoded_bytes();
            for part in [name, &text] {
                hasher.update(&(part.len() as u64).to_le_bytes());
                hasher.update(part);
            }
        }
        let (needed, profile) = read_manifest(&manifest)?;
        Ok(Some(Self { hash: hasher.finalize().to_hex()[..DIGITS].to_owned(), needed, profile }))
    }

    /// The name of the kit built from these sources by a compiler.
    pub fn stamp(&self, compiler: &Compiler) -> String {
        let mut hasher = blake3::Hasher::new();
        hasher.update(self.hash.as_bytes());
        hasher.update(&RECIPE.to_le_bytes());
        hasher.update(&INTERFACE.to_le_bytes());
        hasher.update(compiler.version.as_bytes());
        hasher.finalize().to_hex()[..DIGITS].to_owned()
    }
}

/// All files below a folder, in an order that does not depend on the file system.
fn collect_files(folder: &Path, files: &mut Vec<PathBuf>) -> Result<(), SetupError> {
    let mut entries = Vec::new();
    for entry in fs::read_dir(folder).map_err(SetupError::files("list", folder))? {
        entries.push(entry.map_err(SetupError::files("list", folder))?.path());
    }
    entries.sort();
    for entry in entries {
        if entry.is_dir() {
            collect_files(&entry, files)?;
        } else {
            files.push(entry);
        }
    }
    Ok(())
}

fn read_manifest(manifest: &Path) -> Result<(String, String), SetupError> {
    let malformed = |message: String| SetupError::Malformed { path: manifest.to_owned(), message };
    let text = fs::read_to_string(manifest).map_err(SetupError::files("read", manifest))?;
    let table: toml::Table =
        text.parse().map_err(|error: toml::de::Error| malformed(error.to_string()))?;
    let needed = table
        .get("workspace")
        .and_then(|workspace| workspace.get("package")?.get("rust-version")?.as_str())
        .ok_or_else(|| malformed("it has no workspace.package.rust-version".to_owned()))?
        .to_owned();
    let mut profiles = toml::Table::new();
    if let Some(profile) = table.get("profile") {
        profiles.insert("profile".to_owned(), profile.clone());
    }
    Ok((needed, profiles.to_string()))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn workspace() -> tempfile::TempDir {
        let folder = tempfile::tempdir().unwrap();
        fs::create_dir_all(folder.path().join("prelude/src/table")).unwrap();
        let manifest =
            "[workspace.package]\nrust-version = \"1.95\"\n[profile.release]\nopt-level = 3\n";
        fs::write(folder.path().join("Cargo.toml"), manifest).unwrap();
        fs::write(folder.path().join("prelude/Cargo.toml"), "[package]\n").unwrap();
        fs::write(folder.path().join("prelude/src/lib.rs"), "pub mod table;\n").unwrap();
        fs::write(folder.path().join("prelude/src/table/mod.rs"), "\n").unwrap();
        folder
    }

    #[test]
    fn a_change_anywhere_in_the_prelude_changes_the_hash() {
        let folder = workspace();
        let before = Sources::read(folder.path()).unwrap().unwrap();
        assert_eq!(before.hash, Sources::read(folder.path()).unwrap().unwrap().hash);
        assert_eq!(before.needed, "1.95");
        assert!(before.profile.contains("opt-level = 3"), "{}", before.profile);
        fs::write(folder.path().join("prelude/src/table/mod.rs"), "// more\n").unwrap();
        assert_ne!(before.hash, Sources::read(folder.path()).unwrap().unwrap().hash);
    }

    #[test]
    fn sources_that_are_gone_are_no_error_here() {
        let folder = tempfile::tempdir().unwrap();
        assert!(Sources::read(folder.path()).unwrap().is_none());
    }
}
