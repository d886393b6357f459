//! `semiaxis verify`: a record taken apart, run again and compared.

use std::collections::{BTreeMap, BTreeSet};
use std::fmt;
use std::fs;
use std::path::{Path, PathBuf};

use super::command::own_folders;
use super::compare::first_difference;
use super::data::{Files, Found, find};
use super::error::RecordError;
use super::evidence::{CellOutputs, FileFacts, Manifest};
use super::gather::{self, Gathered};
use super::seal;
use crate::cells::Engine;
use crate::notebook::document::Document;
use crate::notebook::parameters;
use crate::notebook::pictures::Pictures;
use crate::notebook::run::{Ran, Watcher, run_cells};
use crate::notebook::screen::Screen;

/// How many folders stand above the one that cells run in, so that data beside the notebook's folder
/// have a place, too.
const DEPTH: usize = 8;

/// What became of one cell.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Verdict {
    /// It shows what the record has.
    Same,
    /// It shows something else.
    Different(String),
    /// It could not be compared, and why.
    CouldNotRun(String),
}

impl fmt::Display for Verdict {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Verdict::Same => f.write_str("same"),
            Verdict::Different(what) => write!(f, "different: {what}"),
            Verdict::CouldNotRun(why) => write!(f, "could not run: {why}"),
        }
    }
}

/// What came of a verification.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Verified {
    /// By the place of the cell, from 1.
    pub verdicts: BTreeMap<usize, Verdict>,
}

impl Verified {
    /// Whether some cell could not run.
    pub fn is_incomplete(&self) -> bool {
        self.verdicts.values().any(|verdict| matches!(verdict, Verdict::CouldNotRun(_)))
    }

    /// Whether some cell shows something else.
    pub fn differs(&self) -> bool {
        self.verdicts.values().any(|verdict| matches!(verdict, Verdict::Different(_)))
    }
}

/// Reads a record and checks its digests.
///
/// # Errors
/// There is none, it is something else, or it was altered.
pub fn read(path: &Path) -> Result<seal::Opened, RecordError> {
    let bytes = fs::read(path).map_err(|source| match source.kind() {
        std::io::ErrorKind::NotFound => RecordError::Missing { path: path.to_owned() },
        std::io::ErrorKind::IsADirectory => {
            RecordError::NotARecord { path: path.to_owned(), message: "it is a folder".to_owned() }
        }
        _ => RecordError::NotARecord { path: path.to_owned(), message: source.to_string() },
    })?;
    seal::open(&bytes, path)
}

/// Runs a record again and compares every output.
///
/// # Errors
/// The record cannot be used, or the engine does not start.
pub async fn verify(
    path: &Path,
    data: &[PathBuf],
    tolerance: f64,
    start: impl AsyncFnOnce(PathBuf, u64) -> Result<Engine, String>,
) -> Result<Verified, RecordError> {
    let opened = read(path)?;
    let manifest = &opened.manifest;
    println!("record of {} made on {}: not altered", manifest.notebook, manifest.made);
    println!("SHA-256 of the manifest: {}", opened.digest);
    let mut document = Document::parse(opened.notebook.as_bytes(), path)?;
    let given: Vec<String> =
        manifest.set.iter().map(|set| format!("{}={}", set.name, set.value)).collect();
    parameters::apply(&mut document, &given)?;
    let place = tempfile::tempdir().map_err(|error| RecordError::Engine(error.to_string()))?;
    let folder = (0..DEPTH).fold(place.path().to_owned(), |folder, _| folder.join("in"));
    let lacking = lay_out(manifest, path, data, &folder)?;
    for lack in &lacking {
        println!("{lack}");
    }
    let mut engine = start(folder.clone(), manifest.seed).await.map_err(RecordError::Engine)?;
    for line in gather::differences(&manifest.build, &gather::build(&engine)) {
        println!("another build: {line}");
    }
    let files = Files::new(&folder, own_folders(&engine));
    let mut verifier = Verifier {
        gathered: Gathered::new(&document, files, true),
        manifest,
        recorded: &opened.outputs.cells,
        lacking: &lacking,
        tolerance,
        lost: BTreeMap::new(),
        verdicts: BTreeMap::new(),
    };
    let (mut pictures, screen) = (Pictures::default(), Screen::quiet());
    run_cells(&mut document, &mut pictures, &mut engine, &screen, &mut verifier).await;
    engine.shutdown().await;
    let Verifier { gathered, mut verdicts, .. } = verifier;
    for cell in &gathered.cells {
        let reached = verdicts.contains_key(&cell.place);
        if !reached {
            let recorded = opened.outputs.cells.contains_key(&cell.place);
            let verdict = match recorded {
                true => Verdict::CouldNotRun("the run was ended before it".to_owned()),
                // The record has no outputs of it, and this run none either.
                false => Verdict::Same,
            };
            verdicts.insert(cell.place, verdict);
        }
    }
    for (place, verdict) in &verdicts {
        println!("cell {place}: {verdict}");
    }
    let (_, written) = gathered.files.finish();
    for file in &manifest.files_written {
        match written.iter().find(|now| now.path == file.path) {
            Some(now) if now.sha256 == file.sha256 => {}
            Some(_) => println!("the file {} is written with other bytes", file.path),
            None => println!("the file {} is not written any more", file.path),
        }
    }
    let n_same = verdicts.values().filter(|verdict| **verdict == Verdict::Same).count();
    println!("{n_same} of {} cells same, numbers within {tolerance:e}", verdicts.len());
    Ok(Verified { verdicts })
}

/// A file that is not there as it was.
#[derive(Debug, Clone, PartialEq, Eq)]
struct Lack {
    file: FileFacts,
    /// Another file of its name.
    changed: Option<PathBuf>,
}

impl fmt::Display for Lack {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let FileFacts { path, bytes, sha256, .. } = &self.file;
        write!(f, "the file {path} ({bytes} bytes, SHA-256 {sha256}) was not found")?;
        match &self.changed {
            Some(other) => write!(f, "; {} has its name and other content", other.display()),
            None => Ok(()),
        }
    }
}

/// Puts the data where cells expect them, in a folder of their own; gives what was not found.
fn lay_out(
    manifest: &Manifest,
    record: &Path,
    data: &[PathBuf],
    folder: &Path,
) -> Result<Vec<Lack>, RecordError> {
    let failed = |error: std::io::Error| {
        RecordError::Engine(format!("the data could not be laid out: {error}"))
    };
    fs::create_dir_all(folder).map_err(failed)?;
    let wanted: Vec<FileFacts> = manifest
        .files_read
        .iter()
        .filter(|file| !file.made_here && !file.cells.is_empty())
        .cloned()
        .collect();
    let folders = match data.is_empty() {
        true => vec![super::command::folder_of(record)],
        false => data.to_vec(),
    };
    let mut lacking = Vec::new();
    for (file, found) in wanted.iter().zip(find(&wanted, &folders)) {
        let (file, changed) = (
            file.clone(),
            match found {
                Found::At(from) => {
                    let to = folder.join(&file.path);
                    // A path from a damaged record must not lead out of the folder that is made here.
                    let up = Path::new(&file.path)
                        .components()
                        .filter(|c| matches!(c, std::path::Component::ParentDir))
                        .count();
                    if up < DEPTH && Path::new(&file.path).is_relative() {
                        if let Some(parent) = to.parent() {
                            fs::create_dir_all(parent).map_err(failed)?;
                        }
                        let from = from.canonicalize().map_err(failed)?;
                        // A copy, since a cell may write to it.
                        fs::copy(from, &to).map_err(failed)?;
                        continue;
                    }
                    None
                }
                Found::Changed(other) => Some(other),
                Found::Missing => None,
            },
        );
        lacking.push(Lack { file, changed });
    }
    Ok(lacking)
}

/// Compares each cell as it ends.
struct Verifier<'a> {
    gathered: Gathered,
    manifest: &'a Manifest,
    recorded: &'a BTreeMap<usize, CellOutputs>,
    lacking: &'a [Lack],
    tolerance: f64,
    /// Names that cells would have made that did not come to run, and those cells.
    lost: BTreeMap<String, usize>,
    verdicts: BTreeMap<usize, Verdict>,
}

impl Verifier<'_> {
    fn lose(&mut self, place: usize, why: String) {
        if let Some(cell) = self.manifest.cells.iter().find(|cell| cell.place == place) {
            for name in &cell.makes {
                self.lost.insert(name.clone(), place);
            }
        }
        self.verdicts.insert(place, Verdict::CouldNotRun(why));
    }
}

impl Watcher for Verifier<'_> {
    fn wants(&mut self, cell_idx: usize) -> bool {
        let place = cell_idx + 1;
        let Some(cell) = self.manifest.cells.iter().find(|cell| cell.place == place) else {
            return true;
        };
        let lack = self.lacking.iter().find(|lack| lack.file.cells.contains(&place));
        if let Some(lack) = lack {
            let why = lack.to_string();
            self.lose(place, why);
            return false;
        }
        let uses: BTreeSet<&String> = cell.uses.iter().collect();
        let lost = uses.iter().find_map(|name| Some(((*name).clone(), *self.lost.get(*name)?)));
        if let Some((name, from)) = lost {
            self.lose(place, format!("it uses `{name}` of cell {from}, which could not run"));
            return false;
        }
        // A cell of the record that was not run has nothing to be compared with.
        cell.count > 0
    }

    fn ran(&mut self, ran: &Ran<'_>) {
        let place = ran.cell_idx + 1;
        self.gathered.ran(ran);
        let (Some(then), Some(now)) =
            (self.recorded.get(&place), self.gathered.evidence.get(&place))
        else {
            let why = "the record has no outputs of it".to_owned();
            self.verdicts.insert(place, Verdict::Different(why));
            return;
        };
        let failed_now = ran.failure.filter(|_| then.failure.is_none());
        if let Some(failure) = failed_now {
            let why = format!("it failed: {}: {}", failure.name, failure.message);
            self.lose(place, why);
            return;
        }
        let verdict = match first_difference(then, now, self.tolerance) {
            None => Verdict::Same,
            Some(difference) => Verdict::Different(difference.to_string()),
        };
        // A cell that is run again makes its names again.
        if let Some(cell) = self.manifest.cells.iter().find(|cell| cell.place == place) {
            for name in &cell.makes {
                self.lost.remove(name);
            }
        }
        self.verdicts.insert(place, verdict);
    }

    fn goes_on(&self) -> bool {
        true
    }
}
