//! One session: it walks each cell from its text to its output and keeps the account.

use std::io;
use std::path::PathBuf;
use std::sync::Arc;
use std::time::Instant;

use tokio::sync::{mpsc, watch};

use super::account::Account;
use super::cache::Cache;
use super::diagnose;
use super::extras::Extras;
use super::generate;
use super::lineage::{Lineage, Traffic};
use super::prepare::Ready;
use super::source::CellText;
use super::types::{
    CellEvent, CellFailure, CellReply, CellRequest, EngineOptions, Facts, MimeBundle, Origin,
    Outcome, StreamName, Timings,
};
use crate::setup::Kit;
use crate::worker::message::{How, Run};
use crate::worker::process::{self, Ending, Launch, Worker, bundle};

/// What a session needs from its surroundings went wrong.
#[derive(Debug, thiserror::Error)]
pub enum EngineError {
    /// The worker could not be started.
    #[error("the process that runs cells could not be started: {0}")]
    Worker(#[source] io::Error),
}

/// One session.
pub struct Engine {
    pub(super) kit: Kit,
    pub(super) options: EngineOptions,
    pub(super) cache: Cache,
    launch: Launch,
    pub(super) worker: Option<Worker>,
    pub(super) account: Account,
    pub(super) lineage: Lineage,
    pub(super) extras: Extras,
    interrupts: watch::Sender<u64>,
}

/// Stops what an engine is doing; it can be kept where the engine is not.
#[derive(Debug, Clone)]
pub struct Interrupter(watch::Sender<u64>);

impl Interrupter {
    /// Stops the cell that is being compiled or run; does nothing between cells.
    pub fn interrupt(&self) {
        self.0.send_modify(|count| *count = count.wrapping_add(1));
    }
}

impl Engine {
    /// Starts a session.
    ///
    /// # Errors
    /// When the worker cannot be started.
    pub async fn start(kit: Kit, options: EngineOptions) -> Result<Self, EngineError> {
        let launch = process::launch(&kit.prelude, options.working_dir.as_deref())
            .map_err(EngineError::Worker)?;
        let worker = Worker::start(&launch).await.map_err(EngineError::Worker)?;
        let cache = Cache::new(&kit.stamp);
        let tidier = cache.clone();
        std::thread::spawn(move || tidier.tidy());
        Ok(Self {
            cache,
            launch,
            worker: Some(worker),
            account: Account::default(),
            lineage: Lineage::default(),
            extras: Extras::default(),
            interrupts: watch::Sender::new(0),
            kit,
            options,
        })
    }

    /// What its cells are compiled against.
    pub fn kit(&self) -> &Kit {
        &self.kit
    }

    /// Folders that hold nothing but what was compiled for cells.
    pub fn cache_folders(&self) -> [PathBuf; 2] {
        [self.cache.cells_folder(), self.cache.extras_folder()]
    }

    /// A handle that stops what the engine is doing.
    pub fn interrupter(&self) -> Interrupter {
        Interrupter(self.interrupts.clone())
    }

    /// Ends the session.
    pub async fn shutdown(mut self) {
        if let Some(mut worker) = self.worker.take() {
            worker.kill().await;
        }
    }

    /// Compiles and runs one cell.
    pub async fn execute(
        &mut self,
        request: CellRequest,
        events: mpsc::Sender<CellEvent>,
    ) -> CellReply {
        let started = Instant::now();
        self.lineage.forget_cells(&request.origin);
        let mut timings = Timings::default();
        let mut interrupts = self.interrupts.subscribe();
        let cell = Arc::new(CellText { number: request.count, text: request.code });
        let prepared = tokio::select! {
            biased;
            Ok(()) = interrupts.changed() => {
                let words = "interrupted before it ran; nothing has changed";
                let failure = diagnose::failure_at("Interrupted", words.to_owned(), None, words, &[]);
                timings.compile = started.elapsed();
                let facts = Facts::default();
                return CellReply { outcome: Outcome::Interrupted(failure), timings, facts };
            }
            prepared = self.prepare(&cell, &events) => prepared,
        };
        timings.compile = started.elapsed();
        let ready = match prepared {
            Ok(ready) => ready,
            Err(failure) => {
                self.lineage.attempted(request.count, &cell.text, &request.origin, false);
                let facts = Facts::default();
                return CellReply { outcome: Outcome::Failed(failure), timings, facts };
            }
        };
        timings.compiled = ready.compiled;
        let running = Instant::now();
        let traffic = Traffic::of(&ready);
        let mut facts = Facts {
            seed: Some(ready.seed),
            uses: traffic.uses.iter().cloned().collect(),
            // An expression that a client evaluates beside its cells is no cell of anybody.
            outdated: match request.count {
                0 => Vec::new(),
                _ => self.lineage.outdated(&traffic.uses, &request.origin),
            },
            ..Facts::default()
        };
        let outcome = self.run(ready, request.silent, &events, &mut interrupts, &mut facts).await;
        timings.run = running.elapsed();
        let done = matches!(outcome, Outcome::Done);
        facts.makes = traffic.makes(done);
        if request.count == 0 {
            // An expression that a client evaluates is no run of any cell.
        } else if done || !traffic.changes.is_empty() || !traffic.items.is_empty() {
            let (count, origin) = (request.count, &request.origin);
            self.lineage.enter(count, &cell.text, origin, &traffic, &facts, done);
        } else {
            self.lineage.attempted(request.count, &cell.text, &request.origin, false);
        }
        CellReply { outcome, timings, facts }
    }

    /// Evaluates an expression for its exhibit.
    ///
    /// # Errors
    /// As for a cell.
    pub async fn evaluate(&mut self, expression: &str) -> Result<MimeBundle, CellFailure> {
        let (sender, mut received) = mpsc::channel(64);
        let request = CellRequest {
            code: expression.to_owned(),
            count: 0,
            silent: false,
            origin: Origin::default(),
        };
        let gather = async {
            let mut result = MimeBundle::new();
            while let Some(event) = received.recv().await {
                if let CellEvent::Result(bundle) = event {
                    result = bundle;
                }
            }
            result
        };
        let (reply, result) = tokio::join!(self.execute(request, sender), gather);
        match reply.outcome {
            Outcome::Done => Ok(result),
            Outcome::Failed(failure) | Outcome::Interrupted(failure) => Err(failure),
        }
    }

    /// Has the worker run a compiled cell, and brings the account up to date.
    async fn run(
        &mut self,
        ready: Ready,
        silent: bool,
        events: &mpsc::Sender<CellEvent>,
        interrupts: &mut watch::Receiver<u64>,
        facts: &mut Facts,
    ) -> Outcome {
        let mut libraries: Vec<PathBuf> = self.extras.libraries().cloned().collect();
        for name in self.account.closure(&ready.plan.crates) {
            libraries.push(self.account.crates[&name].library.clone());
        }
        libraries.push(self.cache.library(&ready.crate_name));
        let run = Run {
            libraries,
            symbol: generate::entry_symbol(&ready.crate_name),
            cell: ready.cell.number,
            seed: ready.seed,
            relabelled: ready.plan.relabelled.clone(),
        };
        let worker = match self.worker_at_hand().await {
            Ok(worker) => worker,
            Err(error) => {
                let words = EngineError::Worker(error).to_string();
                return Outcome::Failed(diagnose::failure_at(
                    "KernelError",
                    words.clone(),
                    None,
                    &words,
                    &[],
                ));
            }
        };
        let ending = worker.run(run, events, interrupts).await;
        facts.tables = worker.take_tables();
        let ended = match ending {
            Ending::Reported(ended) => ended,
            Ending::Replaced => {
                self.enter_items(&ready);
                let words =
                    "interrupted: the cell did not stop by itself, so its worker was replaced";
                let failure = self.worker_lost("Interrupted", words, &[]);
                return Outcome::Interrupted(failure);
            }
            Ending::Died { how, last_words } => {
                self.enter_items(&ready);
                let words = if last_words.contains("has overflowed its stack") {
                    "the cell used up its stack, most likely by a function that calls itself without end".to_owned()
                } else {
                    format!("the process that ran the cell {how}")
                };
                return Outcome::Failed(self.worker_lost("WorkerLost", &words, &[]));
            }
        };
        facts.opened = ended.opened.clone();
        let notes = self.apply(&ready, &ended).await;
        let mut notes = [ready.notes.clone(), facts.outdated.clone(), notes].concat();
        if !silent && !ended.result.is_empty() {
            let _ = events.send(CellEvent::Result(bundle(ended.result))).await;
        }
        if matches!(ended.how, How::Left) && !ready.plan.declares.is_empty() {
            let names: Vec<_> =
                ready.plan.declares.iter().map(|d| format!("`{}`", d.name)).collect();
            notes.push(format!(
                "the cell left early, so {} {} not kept",
                names.join(", "),
                if names.len() == 1 { "was" } else { "were" }
            ));
        }
        for note in notes {
            let text = format!("\u{1b}[2mnote: {note}\u{1b}[0m\n");
            let _ = events.send(CellEvent::Stream { name: StreamName::Stderr, text }).await;
        }
        self.outcome(&ready, ended.how, &ended.gone)
    }

    async fn worker_at_hand(&mut self) -> io::Result<&mut Worker> {
        if let Some(worker) = &mut self.worker
            && !worker.is_alive()
        {
            self.worker = None;
            self.lose_variables();
        }
        if self.worker.is_none() {
            self.worker = Some(Worker::start(&self.launch).await?);
        }
        self.worker.as_mut().ok_or_else(|| io::Error::other("there is no worker"))
    }
}
