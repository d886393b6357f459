//! `semiaxis record`: from a notebook to one file.

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use chrono::{SecondsFormat, Utc};
use serde_json::Value;

use super::compare::{TOLERANCE, first_difference};
use super::data::Files;
use super::error::RecordError;
use super::evidence::{CellOutputs, FileFacts, Manifest, NUMBERS, Outputs, Set};
use super::gather::{self, Gathered};
use super::markup::size;
use super::narrative::titles;
use super::page;
use super::{host, seal};
use crate::cells::Engine;
use crate::cells::names::dependencies;
use crate::notebook::check::check;
use crate::notebook::document::Document;
use crate::notebook::error::NotebookError;
use crate::notebook::parameters;
use crate::notebook::pictures::Pictures;
use crate::notebook::run::run_cells;
use crate::notebook::screen::Screen;
use crate::notebook::target::Target;
use crate::setup::command_path;

/// What a record is made from and how.
#[derive(Debug, Clone)]
pub struct Request {
    /// The notebook.
    pub notebook: PathBuf,
    /// Where the record goes, if not beside the notebook.
    pub output: Option<PathBuf>,
    /// Whether a failed cell makes a record, too.
    pub with_errors: bool,
    /// Whether the record is printed as well.
    pub pdf: bool,
    /// Values for this run.
    pub set: Vec<String>,
    /// The seed of the session.
    pub seed: u64,
}

/// What came of it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Made {
    /// Whether a cell failed that was not meant to.
    pub failed: bool,
}

/// Folders whose files are part of the program and not of the analysis.
pub fn own_folders(engine: &Engine) -> Vec<PathBuf> {
    let kit = engine.kit();
    let mut own = vec![kit.dir.clone(), kit.sysroot.clone(), kit.target_dir.clone()];
    own.extend(engine.cache_folders());
    own
}

/// Makes a record of a notebook.
///
/// # Errors
/// The notebook cannot be read or run, a cell fails and no record with errors was asked for, or the
/// record cannot be written.
pub async fn record(
    request: &Request,
    start: impl AsyncFnOnce() -> Result<Engine, String>,
) -> Result<Made, RecordError> {
    let original = Document::read(&request.notebook)?;
    let mut document = original.clone();
    let set = parameters::apply(&mut document, &request.set)?;
    let target = Target::choose_as(&request.notebook, request.output.as_deref(), "record.html")?;
    let folder = folder_of(&request.notebook);
    let mut engine = start().await.map_err(RecordError::Engine)?;
    let build = gather::build(&engine);
    let files = Files::new(&folder, own_folders(&engine));
    let mut gathered = Gathered::new(&document, files, request.with_errors);
    let (made, began) = (Utc::now(), Instant::now());
    let screen = Screen::new();
    let mut pictures = Pictures::default();
    let summary =
        run_cells(&mut document, &mut pictures, &mut engine, &screen, &mut gathered).await;
    engine.shutdown().await;
    if let (Some((place, message)), false) = (&gathered.failure, request.with_errors) {
        return Err(RecordError::CellFailed { place: *place, message: message.clone() });
    }
    let title = title(&original, &request.notebook);
    let Gathered { cells, evidence, shown, files, .. } = gathered;
    let (files_read, files_written) = files.finish();
    let mut build = build;
    for cell_idx in 0..document.n_cells() {
        build.extra.extend(document.code(cell_idx).iter().flat_map(|code| dependencies(code)));
    }
    let date = original.metadata("date").and_then(Value::as_str);
    let mut manifest = Manifest {
        title,
        authors: authors(&original),
        date: date.map_or_else(|| made.format("%Y-%m-%d").to_string(), str::to_owned),
        made: made.to_rfc3339_opts(SecondsFormat::Secs, true),
        took_ms: began.elapsed().as_secs_f64() * 1e3,
        failed: summary.failed,
        notebook: request.notebook.file_name().unwrap_or_default().to_string_lossy().into_owned(),
        set: set
            .into_iter()
            .map(|set| Set { name: set.name, value: set.value, instead_of: set.instead_of })
            .collect(),
        seed: request.seed,
        cautions: cautions(&shown),
        as_saved: as_saved(&original, &evidence),
        cells,
        files_read,
        files_written,
        build,
        host: host::facts(),
        ..Manifest::default()
    };
    let body = page::body(&document, &shown, &manifest, &folder);
    for picture in &body.pictures {
        if manifest.files_read.iter().all(|file| file.path != picture.path) {
            manifest.files_read.push(FileFacts {
                path: picture.path.clone(),
                bytes: picture.bytes,
                sha256: picture.sha256.clone(),
                ..FileFacts::default()
            });
        }
    }
    let outputs = Outputs { cells: evidence };
    let outputs = serde_json::to_string(&outputs).expect("outputs are written without error");
    let mut bare = original.clone();
    bare.clear_results();
    let language = original.metadata("lang").and_then(Value::as_str).unwrap_or("en");
    let shown_manifest = manifest.clone();
    let text = seal::sealed(manifest, &bare.text(), &outputs, |line, digest| {
        page::page(&shown_manifest, &body, language, line, digest)
    });
    let path = target.notebook.clone();
    target.write(&text)?;
    println!("record: {} ({})", path.display(), size(text.len() as u64));
    for line in &shown_manifest.as_saved {
        println!("the notebook was saved with something else: {line}");
    }
    if request.pdf {
        let pdf = path.with_extension("pdf");
        print(&path, &pdf)?;
        println!("printed: {}", pdf.display());
    }
    Ok(Made { failed: summary.failed })
}

/// The folder that cells run in.
pub fn folder_of(notebook: &Path) -> PathBuf {
    let folder = notebook.parent().filter(|folder| !folder.as_os_str().is_empty());
    let folder = folder.unwrap_or(Path::new("."));
    folder.canonicalize().unwrap_or_else(|_| folder.to_owned())
}

/// The title that the metadata give, or the first heading, or the name of the file.
fn title(document: &Document, path: &Path) -> String {
    let given = document.metadata("title").and_then(Value::as_str);
    let given = given.map(str::trim).filter(|title| !title.is_empty()).map(str::to_owned);
    let heading = || {
        (0..document.n_cells())
            .filter(|cell_idx| document.kind(*cell_idx) == "markdown")
            .flat_map(|cell_idx| titles(&document.source(cell_idx)))
            .next()
    };
    let name = || path.file_stem().unwrap_or_default().to_string_lossy().into_owned();
    given.or_else(heading).unwrap_or_else(name)
}

/// The authors: a list of objects with a `name`, as the notebook format has it, or of plain names.
fn authors(document: &Document) -> Vec<String> {
    let name = |author: &Value| {
        author.get("name").or(Some(author)).and_then(Value::as_str).map(str::to_owned)
    };
    match document.metadata("authors").or_else(|| document.metadata("author")) {
        Some(Value::Array(authors)) => authors.iter().filter_map(name).collect(),
        Some(other) => name(other).into_iter().collect(),
        None => Vec::new(),
    }
}

/// Words in a note of an exhibit by which it is repeated among the cautions.
const CAUTIOUS: [&str; 8] = [
    "safety",
    "caution",
    "did not converge",
    "not converged",
    "dropped",
    "excluded",
    "left out",
    "licensed",
];

fn cautions(shown: &std::collections::BTreeMap<usize, Vec<Value>>) -> Vec<String> {
    let mut found = Vec::new();
    for (place, outputs) in shown {
        for output in outputs {
            gather_notes(&output["data"][NUMBERS], &mut |note| {
                let lower = note.to_lowercase();
                if CAUTIOUS.iter().any(|word| lower.contains(word)) {
                    let line = format!("cell {place}: {note}");
                    if !found.contains(&line) {
                        found.push(line);
                    }
                }
            });
        }
    }
    found
}

fn gather_notes(numbers: &Value, take: &mut impl FnMut(&str)) {
    for note in numbers["notes"].as_array().into_iter().flatten().filter_map(Value::as_str) {
        take(note);
    }
    for table in numbers["tables"].as_array().into_iter().flatten() {
        gather_notes(table, take);
    }
}

/// What speaks against the notebook's saved outputs, and where this run showed something else.
fn as_saved(
    original: &Document,
    evidence: &std::collections::BTreeMap<usize, CellOutputs>,
) -> Vec<String> {
    let mut lines: Vec<String> = check(original).findings.iter().map(ToString::to_string).collect();
    for (place, now) in evidence {
        let outputs = original.part(place - 1, "outputs").and_then(Value::as_array);
        let Some(outputs) = outputs.filter(|outputs| !outputs.is_empty()) else { continue };
        let saved = CellOutputs::of(outputs);
        if let Some(difference) = first_difference(&saved, now, TOLERANCE) {
            lines.push(format!("cell {place} showed something else, {difference}"));
        }
    }
    lines
}

/// How long the browser may take to print.
const PRINTING: Duration = Duration::from_secs(120);

/// Prints a record through Chromium.
fn print(record: &Path, pdf: &Path) -> Result<(), RecordError> {
    let fail = |message: String| RecordError::NotPrinted { record: record.to_owned(), message };
    let browser =
        ["chromium", "chromium-browser", "google-chrome"].iter().find_map(|n| command_path(n));
    let browser = browser.ok_or_else(|| {
        fail(
            "there is no Chromium here; open the record in any browser and print it there"
                .to_owned(),
        )
    })?;
    let absolute = |path: &Path| std::path::absolute(path).unwrap_or_else(|_| path.to_owned());
    let scratch = tempfile::tempdir().map_err(|error| fail(error.to_string()))?;
    // Names with any characters are kept out of the browser's arguments.
    let (page, printed) = (scratch.path().join("record.html"), scratch.path().join("record.pdf"));
    std::fs::copy(absolute(record), &page).map_err(|error| fail(error.to_string()))?;
    let mut command = Command::new(browser);
    command.args(["--headless=new", "--disable-gpu", "--no-first-run", "--no-pdf-header-footer"]);
    // SAFETY: the call takes nothing and cannot fail.
    if unsafe { libc::geteuid() } == 0 {
        command.arg("--no-sandbox");
    }
    command.arg(format!("--user-data-dir={}", scratch.path().join("profile").display()));
    command.arg(format!("--print-to-pdf={}", printed.display()));
    command.arg(format!("file://{}", page.display()));
    command.stdin(Stdio::null()).stdout(Stdio::null()).stderr(Stdio::null());
    let mut child = command.spawn().map_err(|error| fail(error.to_string()))?;
    let began = Instant::now();
    loop {
        match child.try_wait() {
            Ok(Some(_)) => break,
            Ok(None) if began.elapsed() < PRINTING => std::thread::sleep(Duration::from_millis(50)),
            _ => {
                let _ = child.kill();
                let _ = child.wait();
                return Err(fail("the browser did not end in time".to_owned()));
            }
        }
    }
    let bytes = std::fs::read(&printed)
        .map_err(|_| fail("the browser ended without printing anything".to_owned()))?;
    let target = Target::choose(pdf, Some(pdf)).map_err(|error| fail(error.to_string()))?;
    target.write_bytes(&bytes).map_err(|error: NotebookError| fail(error.to_string()))
}
