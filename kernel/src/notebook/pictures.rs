//! The pictures of a run as files beside the executed notebook, for readers without a notebook
//! client and for documents that want one of them.

use std::collections::BTreeMap;
use std::fs;
use std::io::Write;
use std::path::{Path, PathBuf};

use base64::Engine as _;
use base64::engine::general_purpose::STANDARD;
use serde_json::Value;

use super::error::NotebookError;
use super::target::{new_file, place};
use crate::cells::types::MimeBundle;

/// The forms that are pictures, and the endings of their files.
const FORMS: [(&str, &str); 2] = [("image/svg+xml", "svg"), ("image/png", "png")];

/// Pictures by the name of their file.
#[derive(Debug, Default)]
pub struct Pictures {
    files: BTreeMap<String, Vec<u8>>,
}

impl Pictures {
    /// Takes the pictures among the exhibits of one cell; the first is `cell-07.svg`, the next
    /// `cell-07-2.svg`.
    pub fn add(&mut self, count: u32, bundles: &[MimeBundle]) {
        let mut shown = 0;
        for bundle in bundles {
            let forms: Vec<(&str, Vec<u8>)> = FORMS
                .iter()
                .filter_map(|(mime, ending)| Some((*ending, content(mime, bundle.get(*mime)?)?)))
                .collect();
            shown += usize::from(!forms.is_empty());
            for (ending, bytes) in forms {
                let number = if shown > 1 { format!("-{shown}") } else { String::new() };
                self.files.insert(format!("cell-{count:02}{number}.{ending}"), bytes);
            }
        }
    }

    /// How many files there are.
    pub fn n_files(&self) -> usize {
        self.files.len()
    }

    /// Writes them into a folder and removes pictures of an earlier run from it; other files there
    /// are left alone.
    ///
    /// # Errors
    /// The folder or a file cannot be written.
    pub fn write(&self, folder: &Path) -> Result<(), NotebookError> {
        for old in pictures_in(folder) {
            let name = old.file_name().unwrap_or_default().to_string_lossy().into_owned();
            if !self.files.contains_key(&name) {
                fs::remove_file(&old).map_err(NotebookError::files("remove", &old))?;
            }
        }
        if self.files.is_empty() {
            // Gone if it is empty now; a folder with something else in it stays.
            let _ = fs::remove_dir(folder);
            return Ok(());
        }
        fs::create_dir_all(folder).map_err(NotebookError::files("create", folder))?;
        for (name, bytes) in &self.files {
            let path = folder.join(name);
            let error = |source| NotebookError::files("write", &path)(source);
            let mut file = new_file(folder).map_err(error)?;
            file.write_all(bytes).map_err(error)?;
            place(file, &path)?;
        }
        Ok(())
    }
}

fn content(mime: &str, value: &Value) -> Option<Vec<u8>> {
    let text = value.as_str()?;
    match mime {
        "image/svg+xml" => Some(text.as_bytes().to_vec()),
        // What is not base64 is no picture; the notebook has it as it came.
        _ => STANDARD.decode(text.split_whitespace().collect::<String>()).ok(),
    }
}

fn pictures_in(folder: &Path) -> Vec<PathBuf> {
    let entries = fs::read_dir(folder).into_iter().flatten().flatten();
    entries.map(|entry| entry.path()).filter(|path| is_picture(path)).collect()
}

fn is_picture(path: &Path) -> bool {
    let stem = path.file_stem().and_then(|stem| stem.to_str()).unwrap_or_default();
    let ending = path.extension().and_then(|ending| ending.to_str()).unwrap_or_default();
    let numbered = stem.strip_prefix("cell-").is_some_and(|rest| {
        !rest.is_empty() && rest.split('-').all(|part| part.parse::<u32>().is_ok())
    });
    numbered && FORMS.iter().any(|(_, known)| *known == ending)
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    #[test]
    fn pictures_are_named_by_cell_and_old_ones_removed() {
        let folder = tempfile::tempdir().unwrap();
        let into = folder.path().join("p");
        fs::create_dir(&into).unwrap();
        for old in ["cell-09.svg", "notes.txt", "cell-x.svg"] {
            fs::write(into.join(old), "old").unwrap();
        }
        let bundle = |forms: Value| forms.as_object().unwrap().clone();
        let mut pictures = Pictures::default();
        let both = bundle(json!({"image/svg+xml": "<svg/>", "image/png": "AQID\n"}));
        pictures.add(2, &[both.clone(), bundle(json!({"text/plain": "x"})), both]);
        pictures.add(12, &[bundle(json!({"image/png": "not base64!"}))]);
        pictures.write(&into).unwrap();
        let mut names: Vec<String> = fs::read_dir(&into)
            .unwrap()
            .map(|entry| entry.unwrap().file_name().into_string().unwrap())
            .collect();
        names.sort();
        let expected = [
            "cell-02-2.png",
            "cell-02-2.svg",
            "cell-02.png",
            "cell-02.svg",
            "cell-x.svg",
            "notes.txt",
        ];
        assert_eq!(names, expected);
        assert_eq!(fs::read(into.join("cell-02.png")).unwrap(), [1, 2, 3]);
    }
}
