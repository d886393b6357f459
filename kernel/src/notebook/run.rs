//! Running a notebook from top to bottom without any client.

use std::fmt::Write as _;
use std::path::Path;
use std::time::{Duration, Instant};

use chrono::{DateTime, SecondsFormat, Utc};
use serde_json::{Value, json};
use tokio::signal::unix::{Signal, SignalKind, signal};
use tokio::sync::mpsc;

use super::document::Document;
use super::error::NotebookError;
use super::outputs::Outputs;
use super::parameters::{self, ParameterFault};
use super::pictures::Pictures;
use super::screen::Screen;
use super::target::Target;
use crate::cells::Engine;
use crate::cells::types::{
    CellEvent, CellFailure, CellReply, CellRequest, Facts, Origin, Outcome, Timings,
};
use crate::setup::progress::clock;
use crate::worker::headway;

/// How many events of a cell may wait to be taken.
const WAITING: usize = 256;
/// How often the line on the terminal is brought up to date.
const TICK: Duration = Duration::from_millis(200);

/// What a run needs of an engine; the tests have one that only pretends.
pub trait Runner {
    /// Runs one cell. Everything that it showed has been sent when this returns.
    async fn execute(&mut self, request: CellRequest, events: mpsc::Sender<CellEvent>)
    -> CellReply;

    /// A handle that stops the running cell.
    fn interrupter(&self) -> Box<dyn Fn()>;

    /// Ends the session.
    async fn shutdown(self);
}

impl Runner for Engine {
    async fn execute(
        &mut self,
        request: CellRequest,
        events: mpsc::Sender<CellEvent>,
    ) -> CellReply {
        Engine::execute(self, request, events).await
    }

    fn interrupter(&self) -> Box<dyn Fn()> {
        let interrupter = Engine::interrupter(self);
        Box::new(move || interrupter.interrupt())
    }

    async fn shutdown(self) {
        Engine::shutdown(self).await;
    }
}

/// What came of a run.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Summary {
    /// Cells that were run.
    pub n_run: usize,
    /// Cells that have something to run.
    pub n_code: usize,
    /// Cells for which the compiler was called.
    pub n_compiled: usize,
    /// Whether a cell failed that was not meant to.
    pub failed: bool,
}

/// One cell that was run.
#[derive(Debug)]
pub struct Ran<'a> {
    /// Its place among the cells, from 0.
    pub cell_idx: usize,
    /// Its number in the run.
    pub count: u32,
    /// Its outputs as the notebook format has them.
    pub outputs: &'a [Value],
    /// Why it failed, if it did.
    pub failure: Option<&'a CellFailure>,
    /// Whether it failed and was not meant to.
    pub failed: bool,
    /// Whether it was interrupted.
    pub interrupted: bool,
    /// How long it took.
    pub timings: Timings,
    /// What it stood on and what it left behind.
    pub facts: &'a Facts,
}

/// Follows a run.
pub trait Watcher {
    /// Whether a cell is to be run at all.
    fn wants(&mut self, cell_idx: usize) -> bool {
        let _ = cell_idx;
        true
    }

    /// A cell was run.
    fn ran(&mut self, ran: &Ran<'_>) {
        let _ = ran;
    }

    /// Whether the run goes on behind a cell that failed and was not meant to.
    fn goes_on(&self) -> bool {
        false
    }
}

/// Nobody follows the run.
impl Watcher for () {}

/// Runs the cells of a notebook in order and puts their results into it.
///
/// The first cell that fails ends the run, unless it is tagged as one that may or the watcher wants
/// to go on. Cells after it are left without results.
pub async fn run_cells(
    document: &mut Document,
    pictures: &mut Pictures,
    engine: &mut impl Runner,
    screen: &Screen,
    watcher: &mut impl Watcher,
) -> Summary {
    document.clear_results();
    let code: Vec<(usize, String)> = (0..document.n_cells())
        .filter_map(|cell_idx| Some((cell_idx, document.code(cell_idx)?)))
        .collect();
    // One listener for the whole run: an interrupt between two looks must not be lost. Where the
    // system gives none, an interrupt ends the program as it always does.
    let mut keyboard = signal(SignalKind::interrupt()).ok();
    let mut summary = Summary { n_run: 0, n_code: code.len(), n_compiled: 0, failed: false };
    for (count, (cell_idx, code)) in (1u32..).zip(code) {
        if !watcher.wants(cell_idx) {
            continue;
        }
        let place = cell_idx + 1;
        let n_cells = document.n_cells();
        screen.begin(place, n_cells, &code);
        let origin =
            Origin { cell_id: document.id(cell_idx).map(str::to_owned), deleted: Vec::new() };
        let request = CellRequest { code: code.clone(), count, silent: false, origin };
        let mut outputs = Outputs::default();
        let began = Utc::now();
        let reply = run_cell(engine, request, &mut outputs, screen, &mut keyboard).await;
        let ended = Utc::now();
        summary.n_run += 1;
        summary.n_compiled += usize::from(reply.timings.compiled);
        let (failure, interrupted) = match reply.outcome {
            Outcome::Done => (None, false),
            Outcome::Failed(failure) => (Some(failure), false),
            Outcome::Interrupted(failure) => (Some(failure), true),
        };
        if let Some(failure) = &failure {
            outputs.add_failure(failure);
        }
        let (done, bundles) = outputs.finish();
        pictures.add(count, &bundles);
        let times = execution_times(began, ended);
        watcher.ran(&Ran {
            cell_idx,
            count,
            outputs: &done,
            failure: failure.as_ref(),
            failed: failure.is_some() && (interrupted || !document.may_fail(cell_idx)),
            interrupted,
            timings: reply.timings,
            facts: &reply.facts,
        });
        document.set_result(cell_idx, count, done, times, timings(reply.timings));
        match failure {
            Some(failure) if interrupted || !document.may_fail(cell_idx) => {
                screen.failed(count, place, n_cells, &failure);
                summary.failed = true;
                if interrupted || !watcher.goes_on() {
                    break;
                }
            }
            Some(_) => screen.end(place, n_cells, &code, "failed, as it is allowed to"),
            None => screen.end(place, n_cells, &code, &took(reply.timings)),
        }
    }
    screen.finish();
    summary
}

/// Runs one cell while taking what it shows; an interrupt from the keyboard stops the cell, not the
/// program, so that what was done before is still written.
async fn run_cell(
    engine: &mut impl Runner,
    request: CellRequest,
    outputs: &mut Outputs,
    screen: &Screen,
    keyboard: &mut Option<Signal>,
) -> CellReply {
    let count = request.count;
    let interrupt = engine.interrupter();
    let (sender, mut events) = mpsc::channel(WAITING);
    let mut ticks = tokio::time::interval(TICK);
    let execution = engine.execute(request, sender);
    tokio::pin!(execution);
    let reply = loop {
        tokio::select! {
            biased;
            Some(event) = events.recv() => {
                if let CellEvent::Progress(line) = &event {
                    screen.headway(line.as_ref().map(headway::words).as_deref());
                }
                outputs.add(event, count);
            }
            reply = &mut execution => break reply,
            () = pressed(keyboard) => interrupt(),
            _ = ticks.tick() => screen.tick(),
        }
    };
    // Everything that the cell showed was sent before the reply, and some of it may still wait.
    while let Ok(event) = events.try_recv() {
        outputs.add(event, count);
    }
    reply
}

/// Waits for an interrupt from the keyboard.
async fn pressed(keyboard: &mut Option<Signal>) {
    let heard = match keyboard {
        Some(signal) => signal.recv().await,
        None => None,
    };
    if heard.is_none() {
        std::future::pending::<()>().await;
    }
}

/// The times that clients keep, under the names of the messages that they stand for.
fn execution_times(began: DateTime<Utc>, ended: DateTime<Utc>) -> Value {
    let text = |time: DateTime<Utc>| time.to_rfc3339_opts(SecondsFormat::Micros, true);
    json!({
        "iopub.status.busy": text(began),
        "iopub.execute_input": text(began),
        "shell.execute_reply": text(ended),
        "iopub.status.idle": text(ended),
    })
}

/// How long a cell took, for a person.
fn took(timings: Timings) -> String {
    let how = if timings.compiled { "" } else { ", compiled before" };
    format!("{}{how}", clock(timings.compile + timings.run))
}

fn timings(timings: Timings) -> Value {
    let milliseconds = |time: Duration| (time.as_secs_f64() * 1e4).round() / 10.0;
    json!({
        "compile_ms": milliseconds(timings.compile),
        "run_ms": milliseconds(timings.run),
        "cached": !timings.compiled,
    })
}

/// Runs a notebook file with an engine that is started when the notebook is known to be good, and
/// writes the executed notebook and its pictures.
///
/// # Errors
/// The notebook cannot be read, the engine does not start, or the results cannot be written.
pub async fn run_file<R: Runner>(
    notebook: &Path,
    output: Option<&Path>,
    set: &[String],
    rust_release: &str,
    start: impl AsyncFnOnce() -> Result<R, String>,
) -> Result<Summary, RunError> {
    let mut document = Document::read(notebook)?;
    parameters::apply(&mut document, set)?;
    let target = Target::choose(notebook, output)?;
    let mut engine = start().await.map_err(RunError::Engine)?;
    let began = Instant::now();
    let screen = Screen::new();
    let mut pictures = Pictures::default();
    let summary = run_cells(&mut document, &mut pictures, &mut engine, &screen, &mut ()).await;
    engine.shutdown().await;
    document.set_kernel(rust_release);
    let (path, folder) = (target.notebook.clone(), target.pictures.clone());
    target.write(&document.text())?;
    pictures.write(&folder)?;
    report(&summary, began.elapsed(), &path, &folder, pictures.n_files());
    Ok(summary)
}

fn report(summary: &Summary, elapsed: Duration, notebook: &Path, folder: &Path, n_pictures: usize) {
    let Summary { n_run, n_code, n_compiled, .. } = summary;
    let took = clock(elapsed);
    let mut text =
        format!("ran {n_run} of {n_code} cells in {took}, {n_compiled} newly compiled\n");
    let _ = writeln!(text, "executed notebook: {}", notebook.display());
    if n_pictures > 0 {
        let _ = writeln!(text, "pictures ({n_pictures}): {}", folder.display());
    }
    // A reader that closed its end has seen enough; the files are there.
    let _ = std::io::Write::write_all(&mut std::io::stdout(), text.as_bytes());
}

/// Why a run gave no result.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum RunError {
    /// The notebook or the place for the results.
    #[error(transparent)]
    Notebook(#[from] NotebookError),
    /// A value given for this run.
    #[error(transparent)]
    Parameter(#[from] ParameterFault),
    /// The kit, the compiler or the worker.
    #[error("{0}")]
    Engine(String),
}

#[cfg(test)]
#[path = "run_tests.rs"]
mod tests;
