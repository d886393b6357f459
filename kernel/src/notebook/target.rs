//! Where the executed notebook and its pictures go.

use std::fs::{self, Permissions};
use std::io::Write;
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};

use tempfile::NamedTempFile;

use super::error::NotebookError;

/// What is put between the name of a notebook and its ending.
const MARK: &str = "executed";

/// A place that was found to be writable before anything is run.
#[derive(Debug)]
pub struct Target {
    /// The executed notebook.
    pub notebook: PathBuf,
    /// The folder for its pictures.
    pub pictures: PathBuf,
    file: NamedTempFile,
}

impl Target {
    /// The place asked for, or else `NAME.executed.ipynb` beside the notebook; where that folder
    /// cannot be written, in the current folder.
    ///
    /// # Errors
    /// None of them can be written.
    pub fn choose(notebook: &Path, asked: Option<&Path>) -> Result<Self, NotebookError> {
        Self::choose_as(notebook, asked, &format!("{MARK}.ipynb"))
    }

    /// As [`Target::choose`], for a file with another ending.
    ///
    /// # Errors
    /// As [`Target::choose`].
    pub fn choose_as(
        notebook: &Path,
        asked: Option<&Path>,
        ending: &str,
    ) -> Result<Self, NotebookError> {
        if let Some(path) = asked {
            if path.is_dir() {
                return Err(NotebookError::BadOutput {
                    path: path.to_owned(),
                    message: "it is a folder".to_owned(),
                });
            }
            return Self::at(path.to_owned());
        }
        let stem = notebook.file_stem().unwrap_or_default().to_string_lossy();
        let name = format!("{stem}.{ending}");
        let beside = Self::at(notebook.with_file_name(&name));
        match beside {
            Err(NotebookError::BadOutput { .. }) => Self::at(PathBuf::from(name)),
            chosen => chosen,
        }
    }

    fn at(notebook: PathBuf) -> Result<Self, NotebookError> {
        let folder = match notebook.parent() {
            Some(folder) if folder != Path::new("") => folder,
            _ => Path::new("."),
        };
        let file = new_file(folder).map_err(|source| match source.kind() {
            std::io::ErrorKind::StorageFull | std::io::ErrorKind::QuotaExceeded => {
                NotebookError::DiskFull { path: notebook.clone() }
            }
            std::io::ErrorKind::NotFound => NotebookError::BadOutput {
                path: notebook.clone(),
                message: format!("there is no folder {}", folder.display()),
            },
            _ => NotebookError::BadOutput { path: notebook.clone(), message: source.to_string() },
        })?;
        let pictures = notebook.with_extension("pictures");
        Ok(Self { notebook, pictures, file })
    }

    /// Writes the executed notebook; until it is whole, the old one stays.
    ///
    /// # Errors
    /// The file cannot be written.
    pub fn write(self, text: &str) -> Result<(), NotebookError> {
        self.write_bytes(text.as_bytes())
    }

    /// As [`Target::write`], for a file that is no text.
    ///
    /// # Errors
    /// As [`Target::write`].
    pub fn write_bytes(self, bytes: &[u8]) -> Result<(), NotebookError> {
        let mut file = self.file;
        file.write_all(bytes).map_err(NotebookError::files("write", &self.notebook))?;
        place(file, &self.notebook)
    }
}

/// A file with a name of its own that gets the rights of any new file, not those of a secret.
pub fn new_file(folder: &Path) -> std::io::Result<NamedTempFile> {
    tempfile::Builder::new()
        .prefix(".semiaxis-")
        .permissions(Permissions::from_mode(0o666))
        .tempfile_in(folder)
}

/// Puts a file that is whole into its place, with the rights of the one that it replaces.
pub fn place(file: NamedTempFile, path: &Path) -> Result<(), NotebookError> {
    let error = |source| NotebookError::files("write", path)(source);
    file.as_file().sync_all().map_err(error)?;
    if let Ok(old) = fs::metadata(path) {
        file.as_file().set_permissions(old.permissions()).map_err(error)?;
    }
    file.persist(path).map(drop).map_err(|failed| error(failed.error))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_place_is_beside_the_notebook_or_where_it_was_asked_for() {
        let folder = tempfile::tempdir().unwrap();
        let notebook = folder.path().join("kilns.ipynb");
        let target = Target::choose(&notebook, None).unwrap();
        assert_eq!(target.notebook, folder.path().join("kilns.executed.ipynb"));
        assert_eq!(target.pictures, folder.path().join("kilns.executed.pictures"));
        drop(target);
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 0, "nothing is left behind");

        let asked = folder.path().join("out.ipynb");
        fs::write(&asked, "old").unwrap();
        fs::set_permissions(&asked, Permissions::from_mode(0o640)).unwrap();
        let target = Target::choose(&notebook, Some(&asked)).unwrap();
        assert_eq!(fs::read_to_string(&asked).unwrap(), "old");
        target.write("new").unwrap();
        assert_eq!(fs::read_to_string(&asked).unwrap(), "new");
        assert_eq!(fs::metadata(&asked).unwrap().permissions().mode() & 0o777, 0o640);
    }

    #[test]
    fn places_that_cannot_be_are_refused_before_anything_runs() {
        let folder = tempfile::tempdir().unwrap();
        let notebook = folder.path().join("kilns.ipynb");
        let refused = Target::choose(&notebook, Some(folder.path())).unwrap_err().to_string();
        assert!(refused.contains("it is a folder"), "{refused}");
        let nowhere = folder.path().join("no/out.ipynb");
        let refused = Target::choose(&notebook, Some(&nowhere)).unwrap_err().to_string();
        assert!(refused.contains("there is no folder"), "{refused}");
    }
}
