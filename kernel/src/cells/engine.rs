//! One session: it walks each cell from its text to its output and keeps the account.

use std::collections::{BTreeMap, BTreeSet};
use std::ffi::OsString;
use std::io;
use std::path::PathBuf;
use std::sync::Arc;
use std::time::Instant;

use tokio::sync::{mpsc, watch};

use super::account::{Absent, Account, Crate, Home, Own, Part, Variable};
use super::cache::{self, Cache, Entry};
use super::diagnose;
use super::extras::Extras;
use super::generate::{self, NAME_HERE, Plan, Without, module_of};
use super::header;
use super::homes;
use super::naming::{self, Reach};
use super::parse::{self, Declared, ItemForm, Namespace, Parsed, Statement};
use super::rustc::{Answer, Call};
use super::source::{CellText, Generated};
use super::types::{
    CellEvent, CellFailure, CellReply, CellRequest, EngineOptions, ItemInfo, ItemKind, MimeBundle,
    Outcome, Scope, StreamName, Timings, VariableInfo,
};
use crate::setup::Kit;
use crate::worker::message::{Ended, How, Run, Trouble};
use crate::worker::process::{self, Ending, Launch, Worker, bundle};

/// Cells are compiled with this level unless their header says otherwise: what a cell instantiates
/// of generic code is compiled in the cell, and level 2 costs little more than 0.
const OPTIMISE: u8 = 2;

/// Attempts at a cell whose lines of the kernel's own have to go one after the other.
const MOST_ATTEMPTS: usize = 8;

/// What a session needs from its surroundings went wrong.
#[derive(Debug, thiserror::Error)]
pub enum EngineError {
    /// The worker could not be started.
    #[error("the process that runs cells could not be started: {0}")]
    Worker(#[source] io::Error),
}

/// One session.
pub struct Engine {
    kit: Kit,
    options: EngineOptions,
    cache: Cache,
    launch: Launch,
    worker: Option<Worker>,
    account: Account,
    extras: Extras,
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

/// A cell that has been compiled, and what is known of it.
struct Ready {
    cell: Arc<CellText>,
    crate_name: String,
    text: Arc<Generated>,
    plan: OwnedPlan,
    entry: Entry,
    compiled: bool,
    notes: Vec<String>,
    seed: u64,
}

/// What of a plan is needed after the text is made.
struct OwnedPlan {
    crates: BTreeSet<String>,
    part: Part,
    takes: Vec<String>,
    relabelled: Vec<String>,
    declares: Vec<Declared>,
    absorption: homes::Absorption,
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
            extras: Extras::default(),
            interrupts: watch::Sender::new(0),
            kit,
            options,
        })
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
        let mut timings = Timings::default();
        let mut interrupts = self.interrupts.subscribe();
        let cell = Arc::new(CellText { number: request.count, text: request.code });
        let prepared = tokio::select! {
            biased;
            Ok(()) = interrupts.changed() => {
                let words = "interrupted before it ran; nothing has changed";
                let failure = diagnose::failure_at("Interrupted", words.to_owned(), None, words, &[]);
                timings.compile = started.elapsed();
                return CellReply { outcome: Outcome::Interrupted(failure), timings };
            }
            prepared = self.prepare(&cell, &events) => prepared,
        };
        timings.compile = started.elapsed();
        let ready = match prepared {
            Ok(ready) => ready,
            Err(failure) => return CellReply { outcome: Outcome::Failed(failure), timings },
        };
        timings.compiled = ready.compiled;
        let running = Instant::now();
        let outcome = self.run(ready, request.silent, &events, &mut interrupts).await;
        timings.run = running.elapsed();
        CellReply { outcome, timings }
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
            cell_id: None,
            silent: false,
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

    /// What the session defines.
    pub fn scope(&self) -> Scope {
        let variables = self.account.variables.iter().map(|(name, variable)| VariableInfo {
            name: name.clone(),
            type_text: naming::readable(&variable.type_text),
            mutable: variable.mutable,
            cell: variable.cell,
        });
        let mut items: BTreeMap<(String, &'static str), ItemInfo> = BTreeMap::new();
        for ((space, name), defined) in &self.account.items {
            let item = defined.item();
            let Some(kind) = kind_of(*space, &item.form) else { continue };
            let info = ItemInfo {
                name: name.clone(),
                kind,
                signature: item.signature.clone(),
                docs: item.docs.clone(),
                cell: defined.part.cell.number,
                methods: self.methods_of(name, &item.form),
            };
            let space = if matches!(item.form, ItemForm::Data) { "data" } else { "other" };
            items.insert((name.clone(), space), info);
        }
        Scope { variables: variables.collect(), items: items.into_values().collect() }
    }

    fn methods_of(&self, name: &str, form: &ItemForm) -> Vec<(String, String, String)> {
        if !matches!(form, ItemForm::Data | ItemForm::Trait(_)) {
            return Vec::new();
        }
        let mut methods = BTreeMap::new();
        for found in self.account.crates.values() {
            for item in found.parts.iter().flat_map(|part| &part.items) {
                if let ItemForm::Impl(block) = &item.form
                    && block.self_head.as_deref() == Some(name)
                {
                    methods.extend(block.methods.iter().map(|method| (method.0.clone(), method.clone())));
                }
            }
        }
        methods.into_values().collect()
    }

    /// Brings a cell to the point where the worker can run it. Changes nothing in the account.
    async fn prepare(
        &mut self,
        cell: &Arc<CellText>,
        events: &mpsc::Sender<CellEvent>,
    ) -> Result<Ready, CellFailure> {
        let headed = header::read(&cell.text).map_err(|fault| diagnose::header_failure(cell, &fault))?;
        if !headed.header.dependencies.is_empty() {
            let wanted = &headed.header.dependencies;
            self.extras.ensure(&self.kit, &self.cache, wanted, events).await.map_err(|words| {
                let range = 0..headed.body_start;
                diagnose::dependencies_failure(cell, range, &words)
            })?;
        }
        let seed = headed.header.seed.unwrap_or_else(|| seed_of(self.options.seed, &cell.text));
        let optimise = headed.header.optimise.unwrap_or(OPTIMISE);
        let parsed = parse::parse(&cell.text, headed.body_start)
            .unwrap_or_else(|| unparsed(&cell.text, headed.body_start));
        let mut with_dependents = true;
        let mut notes = Vec::new();
        loop {
            let plan = self.plan(cell, &parsed, with_dependents);
            match self.build(&plan, optimise).await? {
                Built::Ready { crate_name, text, entry, compiled } => {
                    let file = format!("{crate_name}.rs");
                    for said in &entry.warnings {
                        let text = diagnose::warning(said, &text, &self.account, &file);
                        let _ = events.send(CellEvent::Stream { name: StreamName::Stderr, text }).await;
                    }
                    for name in &plan.absorption.restarted {
                        notes.push(format!("the static `{name}` starts anew, because it holds a type that was compiled again"));
                    }
                    let plan = owned(plan);
                    let cell = Arc::clone(cell);
                    return Ok(Ready { cell, crate_name, text, plan, entry, compiled, notes, seed });
                }
                Built::Failed { crate_name, answer, text } => {
                    let file = format!("{crate_name}.rs");
                    let elsewhere = errors_elsewhere(&answer, &text, &file, cell);
                    if with_dependents && plan.absorption.replaces && !plan.absorption.is_empty() && elsewhere > 0 {
                        with_dependents = false;
                        notes.push(keeps_old(&plan));
                        continue;
                    }
                    return Err(diagnose::compile_failure(&answer, &text, &self.account, &file));
                }
            }
        }
    }

    /// Decides what goes into the crate of a cell.
    fn plan<'a>(&self, cell: &Arc<CellText>, parsed: &'a Parsed, with_dependents: bool) -> Plan<'a> {
        let same = homes::unchanged(&self.account, &parsed.items);
        let items: Vec<parse::Item> = parsed
            .items
            .iter()
            .enumerate()
            .filter(|(idx, _)| !same.contains(idx))
            .map(|(_, item)| item.clone())
            .collect();
        let absorption = homes::absorb(&self.account, &items, with_dependents);
        let own = Own::of(&items);
        let mut mentions: BTreeSet<String> = BTreeSet::new();
        for item in &items {
            mentions.extend(item.mentions.iter().cloned());
        }
        let mut takes: BTreeMap<String, Variable> = BTreeMap::new();
        let mut declares: Vec<Declared> = Vec::new();
        for statement in parsed.statements.iter().chain(&parsed.tail) {
            mentions.extend(statement.mentions.iter().cloned());
            for name in &statement.mentions {
                let bound = declares.iter().any(|declared| declared.name == *name);
                if let Some(variable) = self.account.variables.get(name)
                    && !bound
                {
                    takes.insert(name.clone(), variable.clone());
                }
            }
            for declared in &statement.declares {
                declares.retain(|other| other.name != declared.name);
                declares.push(declared.clone());
            }
        }
        let imports = self.account.imports(&mentions, &own);
        let takes = takes.into_iter().map(|(name, variable)| {
            let variable = absorption.rename(variable);
            (name, variable)
        });
        let takes = takes.collect();
        let preamble = self.extras.preamble();
        Plan { cell: Arc::clone(cell), preamble, parsed, items, takes, declares, imports, absorption }
    }

    /// Finds the compiled cell, or compiles it.
    async fn build(&self, plan: &Plan<'_>, optimise: u8) -> Result<Built, CellFailure> {
        let first = generate::generate(plan, &Without::default());
        let crates = plan.crates();
        let flags = Call::flags(optimise).join(" ");
        let named = crates.iter().cloned().collect::<Vec<_>>().join(" ");
        let crate_name = cache::crate_name(&[
            self.kit.stamp.as_bytes(),
            first.text().as_bytes(),
            flags.as_bytes(),
            named.as_bytes(),
            self.extras.identity().as_bytes(),
        ]);
        let filled = |mut text: Generated| {
            text.fill(NAME_HERE, &crate_name);
            Arc::new(text)
        };
        if let Some(entry) = self.cache.find(&crate_name) {
            self.cache.touch(&crate_name);
            let text = match entry.without.is_empty() {
                true => first,
                false => generate::generate(plan, &entry.without),
            };
            return Ok(Built::Ready { text: filled(text), crate_name, entry, compiled: false });
        }
        let trouble = |error: io::Error| {
            let words = error.to_string();
            diagnose::failure_at("KernelError", words.clone(), None, &words, &[])
        };
        let workplace = self.cache.workplace().map_err(trouble)?;
        let call = Call {
            rustc: &self.kit.rustc,
            folder: workplace.path(),
            crate_name: &crate_name,
            optimise,
            crates: self.crate_arguments(&crates),
        };
        let mut without = Without::default();
        for _ in 0..MOST_ATTEMPTS {
            let text = filled(generate::generate(plan, &without));
            call.write(&text).map_err(|error| trouble(self.cache.explain(error)))?;
            let answer = call.compile().await.map_err(|error| {
                let words = match error.kind() {
                    io::ErrorKind::NotFound => format!(
                        "the compiler is no longer at {}; start the kernel again to find or ask for another",
                        self.kit.rustc.display()
                    ),
                    _ => format!("the compiler could not be run: {error}"),
                };
                diagnose::failure_at("KernelError", words.clone(), None, &words, &[])
            })?;
            if answer.success {
                let entry = Entry { without, types: answer.types(&text), warnings: answer.warnings(&text) };
                self.cache.keep(&crate_name, workplace, &entry).map_err(trouble)?;
                return Ok(Built::Ready { crate_name, text, entry, compiled: true });
            }
            match answer.can_do_without(&text) {
                Some(more) => {
                    let before = without.clone();
                    without.extend(more);
                    if without != before {
                        continue;
                    }
                }
                None => {}
            }
            return Ok(Built::Failed { crate_name, answer, text });
        }
        let words = "the cell moves and borrows in a way that the kernel could not untangle";
        Err(diagnose::failure_at("KernelError", words.to_owned(), None, words, &[]))
    }

    fn crate_arguments(&self, crates: &BTreeSet<String>) -> Vec<OsString> {
        let mut arguments: Vec<OsString> = Vec::new();
        let mut named = |name: &str, path: &std::path::Path| {
            let mut argument = OsString::from(format!("{name}="));
            argument.push(path);
            arguments.push("--extern".into());
            arguments.push(argument);
        };
        named("semiaxis", &self.kit.prelude);
        for (name, path) in &self.kit.externs {
            named(name, path);
        }
        for name in crates {
            if let Some(found) = self.account.crates.get(name) {
                named(name, &found.library);
            }
        }
        let mut folder = |path: &std::path::Path| {
            let mut argument = OsString::from("-Ldependency=");
            argument.push(path);
            arguments.push(argument);
        };
        folder(&self.kit.dependencies);
        // A crate that another crate needs is looked for in folders only, named or not.
        for name in self.account.closure(crates) {
            if let Some(parent) = self.account.crates[&name].library.parent() {
                folder(parent);
            }
        }
        arguments.extend(self.extras.arguments());
        arguments
    }

    /// Has the worker run a compiled cell, and brings the account up to date.
    async fn run(
        &mut self,
        ready: Ready,
        silent: bool,
        events: &mpsc::Sender<CellEvent>,
        interrupts: &mut watch::Receiver<u64>,
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
                return Outcome::Failed(diagnose::failure_at("KernelError", words.clone(), None, &words, &[]));
            }
        };
        let ended = match worker.run(run, events, interrupts).await {
            Ending::Reported(ended) => ended,
            Ending::Replaced => {
                self.enter_items(&ready);
                let words = "interrupted: the cell did not stop by itself, so its worker was replaced";
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
        let notes = self.apply(&ready, &ended).await;
        let mut notes = [ready.notes.clone(), notes].concat();
        if !silent && !ended.result.is_empty() {
            let _ = events.send(CellEvent::Result(bundle(ended.result))).await;
        }
        if matches!(ended.how, How::Left) && !ready.plan.declares.is_empty() {
            let names: Vec<_> = ready.plan.declares.iter().map(|d| format!("`{}`", d.name)).collect();
            notes.push(format!("the cell left early, so {} {} not kept", names.join(", "), if names.len() == 1 { "was" } else { "were" }));
        }
        for note in notes {
            let text = format!("\u{1b}[2mnote: {note}\u{1b}[0m\n");
            let _ = events.send(CellEvent::Stream { name: StreamName::Stderr, text }).await;
        }
        self.outcome(&ready, ended.how, &ended.gone)
    }

    fn outcome(&self, ready: &Ready, how: How, gone: &[String]) -> Outcome {
        let mut notes = Vec::new();
        if !gone.is_empty() && !matches!(how, How::Done | How::Left) {
            let names: Vec<_> = gone.iter().map(|name| format!("`{name}`")).collect();
            notes.push(format!("{} had been moved into the cell and {} gone", names.join(", "), if gone.len() == 1 { "is" } else { "are" }));
        }
        let failure = |name: &str, title: String, trouble: &Trouble| {
            let place = trouble.place.as_ref().and_then(|place| {
                let name = place.file.rsplit('/').next()?.strip_suffix(".rs")?;
                let text = if name == ready.crate_name {
                    Arc::clone(&ready.text)
                } else {
                    Arc::clone(&self.account.crates.get(name)?.generated)
                };
                Some((text, place.line, place.column))
            });
            let mut notes = notes.clone();
            if place.is_none() && let Some(place) = &trouble.place {
                notes.push(format!("it happened in {} at line {}", short(&place.file), place.line));
            }
            diagnose::run_failure(name, &trouble.message, &title, place, &notes)
        };
        match how {
            How::Done | How::Left => Outcome::Done,
            How::Failed(trouble) => {
                let kind = trouble.type_name.as_deref().map(naming::readable);
                let kind = kind.unwrap_or_else(|| "Error".to_owned());
                Outcome::Failed(failure(&kind, trouble.message.clone(), &trouble))
            }
            How::Panicked(trouble) => {
                Outcome::Failed(failure("Panic", format!("panicked: {}", trouble.message), &trouble))
            }
            How::Interrupted => {
                let words = "interrupted; the variables are as the cell left them";
                Outcome::Interrupted(diagnose::failure_at("Interrupted", words.to_owned(), None, words, &notes))
            }
            How::NotStarted(trouble) => Outcome::Failed(failure("KernelError", trouble.message.clone(), &trouble)),
        }
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

    /// Notes that the worker and all variables in it are gone, and says so.
    fn worker_lost(&mut self, name: &str, words: &str, notes: &[String]) -> CellFailure {
        self.worker = None;
        let lost = self.lose_variables();
        let mut notes = notes.to_vec();
        if lost.is_empty() {
            notes.push("no variables were lost; functions, types and imports are still there".to_owned());
        } else {
            let mut cells: Vec<u32> = lost.iter().map(|(_, cell)| *cell).collect();
            cells.sort_unstable();
            cells.dedup();
            let names: Vec<_> = lost.iter().map(|(name, _)| format!("`{name}`")).collect();
            let cells: Vec<_> = cells.iter().map(|cell| format!("[{cell}]")).collect();
            notes.push(format!("gone with it: {}; functions, types and imports are still there", names.join(", ")));
            notes.push(format!("to bring the variables back, run cells {}", cells.join(", ")));
        }
        diagnose::failure_at(name, words.to_owned(), None, words, &notes)
    }

    fn lose_variables(&mut self) -> Vec<(String, u32)> {
        let lost = std::mem::take(&mut self.account.variables);
        lost.into_iter()
            .map(|(name, variable)| {
                self.account.absent.insert(name.clone(), Absent::Lost { cell: variable.cell });
                (name, variable.cell)
            })
            .collect()
    }

    /// Enters the items of a cell that has run.
    fn enter_items(&mut self, ready: &Ready) -> Vec<(String, Absent)> {
        let account = &mut self.account;
        let plan = &ready.plan;
        let root = Home { crate_name: ready.crate_name.clone(), module: None };
        let mut dropped = Vec::new();
        // Variables of types that are no longer what they were.
        for (home, name) in &plan.absorption.tainted {
            for (variable, _) in account.variables.iter().filter(|(_, v)| homes::names_type(&v.type_text, home, name)) {
                dropped.push((variable.clone(), Absent::Redefined { cell: ready.cell.number, type_name: name.clone() }));
            }
        }
        for (name, _) in &dropped {
            account.variables.remove(name);
        }
        if plan.part.items.is_empty() && plan.absorption.is_empty() {
            return dropped;
        }
        let part = Arc::new(Part {
            module: module_of(&ready.crate_name),
            cell: Arc::clone(&plan.part.cell),
            items: plan.part.items.clone(),
            imports: plan.part.imports.clone(),
        });
        let mut parts: Vec<Arc<Part>> = plan.absorption.parts.iter().map(|a| Arc::clone(&a.part)).collect();
        parts.push(Arc::clone(&part));
        account.crates.insert(
            ready.crate_name.clone(),
            Arc::new(Crate {
                library: self.cache.library(&ready.crate_name),
                needs: plan.crates.clone(),
                parts,
                generated: Arc::clone(&ready.text),
            }),
        );
        for absorbed in &plan.absorption.parts {
            let to = Home { crate_name: ready.crate_name.clone(), module: Some(absorbed.part.module.clone()) };
            account.move_home(&absorbed.from, &to, &absorbed.part);
        }
        account.enter(&root, &part);
        dropped
    }

    /// Brings the account up to date after a run; gives what the person should be told.
    async fn apply(&mut self, ready: &Ready, ended: &Ended) -> Vec<String> {
        let mut notes = Vec::new();
        if matches!(ended.how, How::NotStarted(_)) {
            return notes;
        }
        let number = ready.cell.number;
        for name in &ready.plan.takes {
            if let Some(variable) = self.account.variables.get_mut(name) {
                variable.relabelled = false;
            }
        }
        let mut forget = Vec::new();
        for (name, why) in self.enter_items(ready) {
            if !ended.kept.contains(&name) {
                notes.push(diagnose::why_absent(&name, &why));
                self.account.absent.insert(name.clone(), why);
                forget.push(name);
            }
        }
        for name in &ended.gone {
            self.account.variables.remove(name);
            self.account.absent.insert(name.clone(), Absent::Moved { cell: number });
        }
        let done = matches!(ended.how, How::Done);
        for declared in ready.plan.declares.iter().filter(|_| done) {
            let name = &declared.name;
            if ready.entry.without.spent.contains(name) {
                // The name is bound to nothing now, whatever it was bound to before.
                if self.account.variables.remove(name).is_some() {
                    forget.push(name.clone());
                }
                self.account.absent.insert(name.clone(), Absent::Moved { cell: number });
                continue;
            }
            let shown = ready.entry.types.get(name).map(String::as_str).unwrap_or("a type that the compiler did not tell");
            let why = if ready.entry.without.keeps.contains(name) {
                Some(Absent::Borrowing { cell: number })
            } else {
                match self.name_type(shown, ready) {
                    Some(type_text) => {
                        let variable = Variable { type_text, mutable: declared.mutable, cell: number, relabelled: false };
                        self.account.variables.insert(name.clone(), variable);
                        self.account.absent.remove(name);
                        None
                    }
                    None => Some(Absent::Nameless { cell: number, type_text: shown.to_owned() }),
                }
            };
            if let Some(why) = why {
                notes.push(diagnose::why_absent(name, &why));
                forget.push(name.clone());
                self.account.variables.remove(name);
                self.account.absent.insert(name.clone(), why);
            }
        }
        if !forget.is_empty()
            && let Some(worker) = &mut self.worker
            && let Ok(Some(trouble)) = worker.forget(forget).await
        {
            notes.push(format!("a destructor panicked: {trouble}"));
        }
        notes
    }

    fn name_type(&self, shown: &str, ready: &Ready) -> Option<String> {
        let own = |name: &str| {
            let here = |part: &Part| {
                part.items.iter().any(|item| item.defines.iter().any(|(space, n)| *space == Namespace::Type && n == name))
            };
            here(&ready.plan.part) || ready.plan.absorption.parts.iter().any(|absorbed| absorbed.part.module == name)
        };
        let reach = |name: &str| {
            if own(name) {
                Reach::Here
            } else if matches!(name, "std" | "core" | "alloc" | "semiaxis")
                || self.kit.externs.contains_key(name)
                || self.extras.has(name)
                || self.account.crates.contains_key(name)
            {
                Reach::Crate
            } else {
                Reach::Nowhere
            }
        };
        naming::nameable(shown, &ready.crate_name, &reach)
    }
}

enum Built {
    Ready { crate_name: String, text: Arc<Generated>, entry: Entry, compiled: bool },
    Failed { crate_name: String, answer: Answer, text: Arc<Generated> },
}

fn owned(plan: Plan<'_>) -> OwnedPlan {
    let crates = plan.crates();
    let relabelled = plan.takes.iter().filter(|(_, v)| v.relabelled).map(|(name, _)| name.clone()).collect();
    OwnedPlan {
        crates,
        takes: plan.takes.into_iter().map(|(name, _)| name).collect(),
        relabelled,
        declares: plan.declares,
        absorption: plan.absorption,
        part: Part {
            // The crate has no name yet.
            module: String::new(),
            cell: plan.cell,
            items: plan.items,
            imports: plan.imports.into_iter().collect(),
        },
    }
}

/// A cell that does not parse goes to the compiler as it is, for the compiler's own words.
fn unparsed(cell: &str, body_start: usize) -> Parsed {
    let mentions = BTreeSet::new();
    let statement =
        Statement { range: body_start..cell.len(), edits: Vec::new(), declares: Vec::new(), mentions };
    Parsed { statements: vec![statement], ..Parsed::default() }
}

/// How many errors lie in the text of other cells than this one.
fn errors_elsewhere(answer: &Answer, text: &Generated, file: &str, cell: &Arc<CellText>) -> usize {
    let elsewhere = |said: &&super::rustc::Said| {
        said.spans.iter().filter(|span| span.is_primary).filter_map(|span| span.in_file(file)).any(|span| {
            text.place(&(span.byte_start..span.byte_end)).is_none_or(|place| !Arc::ptr_eq(&place.cell, cell))
        })
    };
    answer.errors().filter(elsewhere).count()
}

fn keeps_old(plan: &Plan<'_>) -> String {
    let names: Vec<String> = plan.absorption.superseded.keys().map(|(_, name)| format!("`{name}`")).collect();
    let mut cells: Vec<u32> = plan.absorption.parts.iter().map(|a| a.part.cell.number).collect();
    cells.sort_unstable();
    cells.dedup();
    let cells: Vec<String> = cells.iter().map(|cell| format!("[{cell}]")).collect();
    format!(
        "what cells {} wrote in terms of the old {} does not compile with the new definition and keeps the old one; run those cells again",
        cells.join(", "),
        names.join(", ")
    )
}

fn kind_of(space: Namespace, form: &ItemForm) -> Option<ItemKind> {
    Some(match form {
        ItemForm::Function => ItemKind::Function,
        ItemForm::Data if space == Namespace::Value => return None,
        ItemForm::Data => ItemKind::Struct,
        ItemForm::Trait(_) => ItemKind::Trait,
        ItemForm::Constant => ItemKind::Const,
        ItemForm::Static => ItemKind::Static,
        ItemForm::Module => ItemKind::Module,
        ItemForm::Alias => ItemKind::TypeAlias,
        ItemForm::Macro => ItemKind::Macro,
        _ => return None,
    })
}

/// The seed of a cell from the session's and the cell's text, so that it depends neither on the
/// order in which cells are run nor on how often.
fn seed_of(session: u64, text: &str) -> u64 {
    let mut hasher = blake3::Hasher::new();
    hasher.update(&session.to_le_bytes());
    hasher.update(text.as_bytes());
    let bytes = hasher.finalize();
    let mut first = [0; 8];
    first.copy_from_slice(&bytes.as_bytes()[..8]);
    u64::from_le_bytes(first)
}

/// A path without the folders that only this machine has.
fn short(path: &str) -> &str {
    let cut = path.find("/registry/src/").and_then(|at| path[at + 14..].find('/').map(|n| at + 15 + n));
    cut.or_else(|| path.find("/library/").map(|at| at + 1)).map_or(path, |at| &path[at..])
}
