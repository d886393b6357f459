//! What a run leaves behind: the account brought up to date, and the words about how it ended.

use std::sync::Arc;

use super::account::{Absent, Crate, Home, Part, Variable};
use super::diagnose;
use super::engine::Engine;
use super::generate::module_of;
use super::homes;
use super::naming::{self, Reach};
use super::parse::Namespace;
use super::prepare::Ready;
use super::types::{CellFailure, Outcome};
use crate::worker::message::{Ended, How, Trouble};

impl Engine {
    /// How a run ended, in words and with its place.
    pub(super) fn outcome(&self, ready: &Ready, how: How, gone: &[String]) -> Outcome {
        let mut notes = Vec::new();
        if !gone.is_empty() && !matches!(how, How::Done | How::Left) {
            let names: Vec<_> = gone.iter().map(|name| format!("`{name}`")).collect();
            notes.push(format!(
                "{} had been moved into the cell and {} gone",
                names.join(", "),
                if gone.len() == 1 { "is" } else { "are" }
            ));
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
            if place.is_none()
                && let Some(place) = &trouble.place
            {
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
            How::Panicked(trouble) => Outcome::Failed(failure(
                "Panic",
                format!("panicked: {}", trouble.message),
                &trouble,
            )),
            How::Interrupted => {
                let words = "interrupted; the variables are as the cell left them";
                Outcome::Interrupted(diagnose::failure_at(
                    "Interrupted",
                    words.to_owned(),
                    None,
                    words,
                    &notes,
                ))
            }
            How::NotStarted(trouble) => {
                Outcome::Failed(failure("KernelError", trouble.message.clone(), &trouble))
            }
        }
    }

    /// Notes that the worker and all variables in it are gone, and says so.
    pub(super) fn worker_lost(&mut self, name: &str, words: &str, notes: &[String]) -> CellFailure {
        self.worker = None;
        let lost = self.lose_variables();
        let mut notes = notes.to_vec();
        if lost.is_empty() {
            notes.push(
                "no variables were lost; functions, types and imports are still there".to_owned(),
            );
        } else {
            let mut cells: Vec<u32> = lost.iter().map(|(_, cell)| *cell).collect();
            cells.sort_unstable();
            cells.dedup();
            let names: Vec<_> = lost.iter().map(|(name, _)| format!("`{name}`")).collect();
            let cells: Vec<_> = cells.iter().map(|cell| format!("[{cell}]")).collect();
            notes.push(format!(
                "gone with it: {}; functions, types and imports are still there",
                names.join(", ")
            ));
            notes.push(format!("to bring the variables back, run cells {}", cells.join(", ")));
        }
        diagnose::failure_at(name, words.to_owned(), None, words, &notes)
    }

    /// Notes that the variables are gone; gives each with the cell that had made it.
    pub(super) fn lose_variables(&mut self) -> Vec<(String, u32)> {
        let lost = std::mem::take(&mut self.account.variables);
        self.lineage.lose(lost.keys());
        lost.into_iter()
            .map(|(name, variable)| {
                self.account.absent.insert(name.clone(), Absent::Lost { cell: variable.cell });
                (name, variable.cell)
            })
            .collect()
    }

    /// Enters the items of a cell that has run.
    pub(super) fn enter_items(&mut self, ready: &Ready) -> Vec<(String, Absent)> {
        let account = &mut self.account;
        let plan = &ready.plan;
        let root = Home { crate_name: ready.crate_name.clone(), module: None };
        let mut dropped = Vec::new();
        // Variables of types that are no longer what they were.
        for (home, name) in &plan.absorption.tainted {
            for (variable, _) in account
                .variables
                .iter()
                .filter(|(_, v)| homes::names_type(&v.type_text, home, name))
            {
                dropped.push((
                    variable.clone(),
                    Absent::Redefined { cell: ready.cell.number, type_name: name.clone() },
                ));
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
        let mut parts: Vec<Arc<Part>> =
            plan.absorption.parts.iter().map(|a| Arc::clone(&a.part)).collect();
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
            let to = Home {
                crate_name: ready.crate_name.clone(),
                module: Some(absorbed.part.module.clone()),
            };
            account.move_home(&absorbed.from, &to, &absorbed.part);
        }
        account.enter(&root, &part);
        dropped
    }

    /// Brings the account up to date after a run; gives what the person should be told.
    pub(super) async fn apply(&mut self, ready: &Ready, ended: &Ended) -> Vec<String> {
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
            let shown = ready
                .entry
                .types
                .get(name)
                .map(String::as_str)
                .unwrap_or("a type that the compiler did not tell");
            let why = if ready.entry.without.keeps.contains(name) {
                Some(Absent::Borrowing { cell: number })
            } else {
                match self.name_type(shown, ready) {
                    Some(type_text) => {
                        let variable = Variable {
                            type_text,
                            mutable: declared.mutable,
                            cell: number,
                            relabelled: false,
                        };
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
                part.items.iter().any(|item| {
                    item.defines.iter().any(|(space, n)| *space == Namespace::Type && n == name)
                })
            };
            here(&ready.plan.part)
                || ready.plan.absorption.parts.iter().any(|absorbed| absorbed.part.module == name)
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

/// A path without the folders that only this machine has.
fn short(path: &str) -> &str {
    let cut =
        path.find("/registry/src/").and_then(|at| path[at + 14..].find('/').map(|n| at + 15 + n));
    cut.or_else(|| path.find("/library/").map(|at| at + 1)).map_or(path, |at| &path[at..])
}
