//! The files that cells read and write: what is noted of them, and how they are found again.

use std::collections::{BTreeMap, BTreeSet};
use std::fs::{self, File};
use std::io::{self, Read};
use std::path::{Component, Path, PathBuf};

use sha2::{Digest, Sha256};

use super::evidence::{FileFacts, finished};
use crate::cells::types::Facts;

/// Folders of the system; what a program reads there is no data of the analyst.
const SYSTEM: [&str; 11] = [
    "/usr", "/lib", "/lib64", "/etc", "/proc", "/sys", "/dev", "/run", "/bin", "/sbin", "/var/lib",
];

/// Files of one run, in the order in which they were first met.
#[derive(Debug)]
pub struct Files {
    /// The folder of the notebook; paths are told from there.
    folder: PathBuf,
    /// Folders whose files are part of the program.
    own: Vec<PathBuf>,
    read: BTreeMap<PathBuf, FileFacts>,
    written: BTreeMap<PathBuf, BTreeSet<usize>>,
}

impl Files {
    /// For a notebook in a folder; `own` are folders of the program itself.
    pub fn new(folder: &Path, own: Vec<PathBuf>) -> Self {
        let folder = folder.canonicalize().unwrap_or_else(|_| folder.to_owned());
        let own = own.into_iter().map(|own| own.canonicalize().unwrap_or(own)).collect();
        Self { folder, own, read: BTreeMap::new(), written: BTreeMap::new() }
    }

    /// Enters what one cell did.
    pub fn enter(&mut self, place: usize, facts: &Facts) {
        for table in &facts.tables {
            let path = settled(Path::new(&table.path));
            let made_here = self.written.contains_key(&path);
            let shown = self.shown(&path);
            let entry = self.read.entry(path).or_insert_with(|| FileFacts {
                path: shown,
                made_here,
                ..FileFacts::default()
            });
            entry.bytes = table.bytes;
            entry.sha256.clone_from(&table.sha256);
            (entry.rows, entry.columns) = (Some(table.rows), Some(table.columns));
            if entry.cells.last() != Some(&place) {
                entry.cells.push(place);
            }
        }
        let tables: BTreeSet<PathBuf> =
            facts.tables.iter().map(|table| settled(Path::new(&table.path))).collect();
        for opened in &facts.opened {
            let path = settled(Path::new(&opened.path));
            if !self.is_data(&path) {
                continue;
            }
            if opened.written {
                self.written.entry(path).or_default().insert(place);
            } else if !tables.contains(&path) {
                let made_here = self.written.contains_key(&path);
                let shown = self.shown(&path);
                if let Ok((bytes, sha256)) = digest_of(&path) {
                    let entry = self.read.entry(path).or_default();
                    *entry = FileFacts {
                        path: shown,
                        bytes,
                        sha256,
                        made_here,
                        cells: [entry.cells.clone(), vec![place]].concat(),
                        ..FileFacts::default()
                    };
                }
            }
        }
    }

    /// What was read and what was written; those written as they are now.
    pub fn finish(self) -> (Vec<FileFacts>, Vec<FileFacts>) {
        let written = self.written.iter().filter_map(|(path, cells)| {
            // A file that is gone again was for the cell's own use.
            let (bytes, sha256) = digest_of(path).ok()?;
            let cells = cells.iter().copied().collect();
            Some(FileFacts { path: self.shown(path), bytes, sha256, cells, ..FileFacts::default() })
        });
        let written: Vec<FileFacts> = written.collect();
        (self.read.into_values().collect(), written)
    }

    fn is_data(&self, path: &Path) -> bool {
        let of_system = SYSTEM.iter().any(|system| path.starts_with(system));
        let of_program = self.own.iter().any(|own| path.starts_with(own));
        !of_program && (path.starts_with(&self.folder) || !of_system) && path.is_file()
    }

    fn shown(&self, path: &Path) -> String {
        relative(path, &self.folder).display().to_string()
    }
}

/// A path without links and detours, as far as the file is there.
fn settled(path: &Path) -> PathBuf {
    path.canonicalize().unwrap_or_else(|_| path.to_owned())
}

/// The way from a folder to a file, through folders above if need be.
fn relative(path: &Path, folder: &Path) -> PathBuf {
    let (mut to, mut from) = (path.components().peekable(), folder.components().peekable());
    while to.peek().is_some() && to.peek() == from.peek() {
        to.next();
        from.next();
    }
    let up = from.map(|_| Component::ParentDir);
    up.chain(to).collect()
}

/// Size and digest of a file.
pub fn digest_of(path: &Path) -> io::Result<(u64, String)> {
    let mut file = File::open(path)?;
    let mut hasher = Sha256::new();
    let mut buffer = vec![0; 1 << 18];
    let mut bytes = 0;
    loop {
        let read = file.read(&mut buffer)?;
        if read == 0 {
            break;
        }
        hasher.update(&buffer[..read]);
        bytes += read as u64;
    }
    Ok((bytes, finished(hasher)))
}

/// How deep folders are searched for data.
const DEEPEST: usize = 8;

/// What became of one file that a record names.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Found {
    /// It is here.
    At(PathBuf),
    /// A file of that name is here, and it is another.
    Changed(PathBuf),
    /// Nothing like it was found.
    Missing,
}

/// Looks for files by digest below folders; a file's name does not matter.
pub fn find(wanted: &[FileFacts], folders: &[PathBuf]) -> Vec<Found> {
    let sizes: BTreeSet<u64> = wanted.iter().map(|file| file.bytes).collect();
    let mut by_digest: BTreeMap<String, PathBuf> = BTreeMap::new();
    let mut by_name: BTreeMap<std::ffi::OsString, PathBuf> = BTreeMap::new();
    let names: BTreeSet<&std::ffi::OsStr> =
        wanted.iter().filter_map(|file| Path::new(&file.path).file_name()).collect();
    for folder in folders {
        walk(folder, 0, &mut |path, bytes| {
            if let Some(name) = path.file_name().filter(|name| names.contains(name)) {
                by_name.entry(name.to_owned()).or_insert_with(|| path.to_owned());
            }
            if sizes.contains(&bytes)
                && let Ok((_, digest)) = digest_of(path)
            {
                by_digest.entry(digest).or_insert_with(|| path.to_owned());
            }
        });
    }
    wanted
        .iter()
        .map(|file| {
            let name = Path::new(&file.path).file_name().unwrap_or_default();
            match (by_digest.get(&file.sha256), by_name.get(name)) {
                (Some(path), _) => Found::At(path.clone()),
                (None, Some(path)) => Found::Changed(path.clone()),
                (None, None) => Found::Missing,
            }
        })
        .collect()
}

fn walk(folder: &Path, depth: usize, visit: &mut impl FnMut(&Path, u64)) {
    let Ok(entries) = fs::read_dir(folder) else { return };
    let mut entries: Vec<_> = entries.flatten().collect();
    entries.sort_by_key(fs::DirEntry::file_name);
    for entry in entries {
        let path = entry.path();
        // Links to folders could lead in circles; links to files are files.
        let Ok(kind) = entry.file_type() else { continue };
        if kind.is_dir() {
            if depth < DEEPEST {
                walk(&path, depth + 1, visit);
            }
        } else if let Ok(found) = fs::metadata(&path)
            && found.is_file()
        {
            visit(&path, found.len());
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::worker::message::{OpenedFile, TableFile};

    #[test]
    fn ways_lead_up_and_down() {
        let way =
            |to: &str, from: &str| relative(Path::new(to), Path::new(from)).display().to_string();
        assert_eq!(way("/a/b/c.csv", "/a/b"), "c.csv");
        assert_eq!(way("/a/x/c.csv", "/a/b"), "../x/c.csv");
        assert_eq!(way("/c.csv", "/a/b"), "../../c.csv");
    }

    #[test]
    fn reads_and_writes_are_told_apart_and_the_system_left_out() {
        let folder = tempfile::tempdir().unwrap();
        let path = |name: &str| folder.path().join(name).display().to_string();
        for name in ["a \"b\" é.csv", "notes.txt", "out.svg"] {
            fs::write(path(name), name).unwrap();
        }
        let mut files = Files::new(folder.path(), Vec::new());
        let opened = |path: String, written| OpenedFile { path, written };
        let table = TableFile {
            path: path("a \"b\" é.csv"),
            bytes: 4,
            sha256: "12".to_owned(),
            rows: 3,
            columns: 2,
        };
        files.enter(
            1,
            &Facts {
                tables: vec![table],
                opened: vec![
                    opened(path("a \"b\" é.csv"), false),
                    opened(path("notes.txt"), false),
                    opened("/etc/passwd".to_owned(), false),
                    opened(path("gone.tmp"), true),
                    opened(path("out.svg"), true),
                ],
                ..Facts::default()
            },
        );
        files.enter(2, &Facts { opened: vec![opened(path("out.svg"), false)], ..Facts::default() });
        let (read, written) = files.finish();
        let told: Vec<_> = read.iter().map(|f| (f.path.as_str(), f.rows, f.made_here)).collect();
        assert_eq!(
            told,
            [
                ("a \"b\" é.csv", Some(3), false),
                ("notes.txt", None, false),
                ("out.svg", None, true)
            ]
        );
        assert_eq!(read[1].sha256, crate::record::evidence::digest(b"notes.txt"));
        assert_eq!(written.iter().map(|f| f.path.as_str()).collect::<Vec<_>>(), ["out.svg"]);
    }

    #[test]
    fn data_are_found_by_digest_whatever_their_name() {
        let folder = tempfile::tempdir().unwrap();
        fs::create_dir(folder.path().join("deep")).unwrap();
        fs::write(folder.path().join("deep/renamed.txt"), "x,y\n1,2\n").unwrap();
        fs::write(folder.path().join("changed.csv"), "other").unwrap();
        let wanted = |path: &str, text: &str| FileFacts {
            path: path.to_owned(),
            bytes: text.len() as u64,
            sha256: crate::record::evidence::digest(text.as_bytes()),
            ..FileFacts::default()
        };
        let wanted =
            [wanted("t.csv", "x,y\n1,2\n"), wanted("changed.csv", "first"), wanted("no.csv", "z")];
        let found = find(&wanted, &[folder.path().to_owned()]);
        assert_eq!(found[0], Found::At(folder.path().join("deep/renamed.txt")));
        assert_eq!(found[1], Found::Changed(folder.path().join("changed.csv")));
        assert_eq!(found[2], Found::Missing);
    }
}
