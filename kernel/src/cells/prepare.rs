//! From the text of a cell to a library that the worker can load. Nothing of the account changes here.

use std::collections::{BTreeMap, BTreeSet};
use std::ffi::OsString;
use std::io;
use std::sync::Arc;

use tokio::sync::mpsc;

use super::account::{Own, Part, Variable};
use super::cache::{self, Entry};
use super::diagnose;
use super::engine::Engine;
use super::generate::{self, NAME_HERE, Plan, Without};
use super::header;
use super::homes;
use super::lineage::ItemText;
use super::parse::{self, Declared, Parsed, Statement};
use super::rustc::{Answer, Call};
use super::source::{CellText, Generated};
use super::types::{CellEvent, CellFailure, StreamName};

/// Cells are compiled with this level unless their header says otherwise: what a cell instantiates
/// of generic code is compiled in the cell, and level 2 costs little more than 0.
const OPTIMISE: u8 = 2;

/// Attempts at a cell whose lines of the kernel's own have to go one after the other.
const MOST_ATTEMPTS: usize = 8;

/// A cell that has been compiled, and what is known of it.
pub struct Ready {
    /// The cell.
    pub cell: Arc<CellText>,
    /// The name of its crate.
    pub crate_name: String,
    /// The text of its crate, to find places in.
    pub text: Arc<Generated>,
    /// What went into the text.
    pub plan: OwnedPlan,
    /// What the compiler said.
    pub entry: Entry,
    /// Whether the compiler was called.
    pub compiled: bool,
    /// What the person should be told.
    pub notes: Vec<String>,
    /// The seed of its random numbers.
    pub seed: u64,
}

/// What of a plan is needed after the text is made.
pub struct OwnedPlan {
    /// Crates of cells that it names.
    pub crates: BTreeSet<String>,
    /// Its items.
    pub part: Part,
    /// Variables that it takes off the shelf.
    pub takes: Vec<String>,
    /// Those whose type goes by a new name.
    pub relabelled: Vec<String>,
    /// All items in its text, those that are as they were included.
    pub defines: Vec<(String, ItemText)>,
    /// Variables that it takes and changes, as far as its text shows it.
    pub changes: Vec<String>,
    /// Variables that it declares.
    pub declares: Vec<Declared>,
    /// Parts of earlier cells that were compiled again with it.
    pub absorption: homes::Absorption,
}

impl Engine {
    /// Brings a cell to the point where the worker can run it. Changes nothing in the account.
    pub(super) async fn prepare(
        &mut self,
        cell: &Arc<CellText>,
        events: &mpsc::Sender<CellEvent>,
    ) -> Result<Ready, CellFailure> {
        let headed =
            header::read(&cell.text).map_err(|fault| diagnose::header_failure(cell, &fault))?;
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
                        let _ =
                            events.send(CellEvent::Stream { name: StreamName::Stderr, text }).await;
                    }
                    for name in &plan.absorption.restarted {
                        notes.push(format!("the static `{name}` starts anew, because it holds a type that was compiled again"));
                    }
                    let plan = owned(plan);
                    let cell = Arc::clone(cell);
                    return Ok(Ready {
                        cell,
                        crate_name,
                        text,
                        plan,
                        entry,
                        compiled,
                        notes,
                        seed,
                    });
                }
                Built::Failed { crate_name, answer, text } => {
                    let file = format!("{crate_name}.rs");
                    let elsewhere = errors_elsewhere(&answer, &text, &file, cell);
                    if with_dependents
                        && plan.absorption.replaces
                        && !plan.absorption.is_empty()
                        && elsewhere > 0
                    {
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
    fn plan<'a>(
        &self,
        cell: &Arc<CellText>,
        parsed: &'a Parsed,
        with_dependents: bool,
    ) -> Plan<'a> {
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
        Plan {
            cell: Arc::clone(cell),
            preamble,
            parsed,
            items,
            takes,
            declares,
            imports,
            absorption,
        }
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
                let entry =
                    Entry { without, types: answer.types(&text), warnings: answer.warnings(&text) };
                self.cache.keep(&crate_name, workplace, &entry).map_err(trouble)?;
                return Ok(Built::Ready { crate_name, text, entry, compiled: true });
            }
            let before = without.clone();
            if let Some(more) = answer.can_do_without(&text) {
                without.extend(more);
            }
            if without != before {
                continue;
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
            // A header may have brought in the crate in another shape.
            if !self.extras.has(name) {
                named(name, path);
            }
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
        folder(&self.kit.dir);
        // A crate that another crate needs is looked for in folders only, named or not.
        for name in self.account.closure(crates) {
            if let Some(parent) = self.account.crates[&name].library.parent() {
                folder(parent);
            }
        }
        arguments.extend(self.extras.arguments());
        arguments
    }
}

enum Built {
    Ready { crate_name: String, text: Arc<Generated>, entry: Entry, compiled: bool },
    Failed { crate_name: String, answer: Answer, text: Arc<Generated> },
}

fn owned(plan: Plan<'_>) -> OwnedPlan {
    let crates = plan.crates();
    let relabelled =
        plan.takes.iter().filter(|(_, v)| v.relabelled).map(|(name, _)| name.clone()).collect();
    let changed: BTreeSet<&String> =
        plan.parsed.statements.iter().chain(&plan.parsed.tail).flat_map(|s| &s.changes).collect();
    let changes = plan.takes.iter().filter(|(name, v)| v.mutable && changed.contains(name));
    let items = plan.parsed.items.iter();
    let defines = items.flat_map(|item| {
        item.defines.iter().map(|(_, name)| {
            let text = ItemText { tokens: item.tokens.clone(), mentions: item.mentions.clone() };
            (name.clone(), text)
        })
    });
    OwnedPlan {
        crates,
        defines: defines.collect(),
        changes: changes.map(|(name, _)| name.clone()).collect(),
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
    let statement = Statement {
        range: body_start..cell.len(),
        edits: Vec::new(),
        declares: Vec::new(),
        mentions,
        changes: BTreeSet::new(),
    };
    Parsed { statements: vec![statement], ..Parsed::default() }
}

/// How many errors lie in the text of other cells than this one.
fn errors_elsewhere(answer: &Answer, text: &Generated, file: &str, cell: &Arc<CellText>) -> usize {
    let elsewhere = |said: &&super::rustc::Said| {
        said.spans.iter().filter(|span| span.is_primary).filter_map(|span| span.in_file(file)).any(
            |span| {
                text.place(&(span.byte_start..span.byte_end))
                    .is_none_or(|place| !Arc::ptr_eq(&place.cell, cell))
            },
        )
    };
    answer.errors().filter(elsewhere).count()
}

fn keeps_old(plan: &Plan<'_>) -> String {
    let names: Vec<String> =
        plan.absorption.superseded.keys().map(|(_, name)| format!("`{name}`")).collect();
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
