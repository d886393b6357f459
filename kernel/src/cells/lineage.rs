//! Where the values of a session come from: which run made each variable and item, from which
//! versions of what, and whether running its cell as it is now would make it again.
//!
//! A version is a hash of everything that a run rests on: its text, its seed, the versions of what it
//! used and the digests of the tables it read. A cell that is run again as it was makes the same
//! versions, and nobody is told; one that was edited, or that read a changed file, makes others.

use std::collections::{BTreeMap, BTreeSet, HashMap};

use super::account::Import;
use super::prepare::Ready;
use super::types::{Facts, Origin};

type Version = [u8; 32];

/// The lineage of a session.
#[derive(Debug, Default)]
pub struct Lineage {
    names: BTreeMap<String, Known>,
    /// The newest run of each cell that has an identifier.
    newest: HashMap<String, Run>,
    deleted: BTreeSet<String>,
}

/// What is known of a name.
#[derive(Debug, Clone)]
struct Known {
    version: Version,
    /// The cell that made it, and its run.
    cell_id: Option<String>,
    run: Run,
    /// What it was made from, as it was then.
    made_from: BTreeMap<String, Version>,
    /// For an item, the names in its text: what they stand for is looked up when it is used.
    mentions: BTreeSet<String>,
}

/// One run of a cell.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
struct Run {
    count: u32,
    text: Version,
}

/// The text of an item.
#[derive(Debug, Clone, Default)]
pub struct ItemText {
    /// Without comments and layout.
    pub tokens: String,
    /// Every name in it.
    pub mentions: BTreeSet<String>,
}

/// What a run used and what it made.
#[derive(Debug, Default)]
pub struct Traffic {
    /// Names of earlier cells that it used.
    pub uses: BTreeSet<String>,
    /// Items that it defined.
    pub items: BTreeMap<String, ItemText>,
    /// Variables that it declared.
    pub declares: BTreeSet<String>,
    /// Variables that it took and changed.
    pub changes: BTreeSet<String>,
}

impl Traffic {
    /// The traffic of a cell that is ready to run.
    pub fn of(ready: &Ready) -> Self {
        let plan = &ready.plan;
        let mut traffic = Self::default();
        traffic.uses.extend(plan.takes.iter().cloned());
        for import in &plan.part.imports {
            if let Import::Item { name, .. } = import {
                traffic.uses.insert(name.clone());
            }
        }
        traffic.items.extend(plan.defines.iter().cloned());
        // An item that is as it was is lent by the crate of the earlier run, and is the cell's own.
        traffic.uses.retain(|name| !traffic.items.contains_key(name));
        traffic.declares.extend(plan.declares.iter().map(|declared| declared.name.clone()));
        traffic.changes.extend(plan.changes.iter().cloned());
        traffic
    }

    /// The names that the run defined or changed.
    pub fn makes(&self, done: bool) -> Vec<String> {
        let mut makes: BTreeSet<&String> = self.items.keys().chain(&self.changes).collect();
        if done {
            makes.extend(&self.declares);
        }
        makes.into_iter().cloned().collect()
    }
}

impl Lineage {
    /// Notes which cells the client says are gone.
    pub fn forget_cells(&mut self, origin: &Origin) {
        self.deleted.extend(origin.deleted.iter().cloned());
        if let Some(id) = &origin.cell_id {
            // A deletion that was undone.
            self.deleted.remove(id);
        }
    }

    /// What a cell that is about to run would use although its defining cell would not make it now;
    /// one sentence each.
    pub fn outdated(&self, uses: &BTreeSet<String>, origin: &Origin) -> Vec<String> {
        let mut notes = Vec::new();
        for name in uses {
            let Some(known) = self.names.get(name) else { continue };
            if let Some(words) = self.fault(name, known, origin) {
                notes.push(words);
            }
        }
        notes
    }

    fn fault(&self, name: &str, known: &Known, origin: &Origin) -> Option<String> {
        let count = known.run.count;
        if let Some(id) = &known.cell_id {
            if self.deleted.contains(id) {
                return Some(format!("uses `{name}` from cell [{count}], which has been deleted"));
            }
            if known.cell_id == origin.cell_id {
                return Some(format!(
                    "uses `{name}` as an earlier run of this cell, [{count}], left it"
                ));
            }
            if let Some(newest) = self.newest.get(id).filter(|newest| **newest != known.run) {
                return Some(format!(
                    "uses `{name}` from an earlier version of cell [{}], its run [{count}]",
                    newest.count
                ));
            }
        }
        let (old, now) = self.outdated_source(known, &mut BTreeSet::new())?;
        Some(match now {
            Some(now) => format!(
                "uses `{name}`, which cell [{count}] made from an earlier `{old}` than that of cell [{now}]"
            ),
            None => {
                format!("uses `{name}`, which cell [{count}] made from an `{old}` that is gone")
            }
        })
    }

    /// The first source of a value, however far back, that is another now, and the run it is from.
    fn outdated_source<'a>(
        &'a self,
        known: &'a Known,
        seen: &mut BTreeSet<&'a str>,
    ) -> Option<(&'a str, Option<u32>)> {
        for (source, version) in &known.made_from {
            if !seen.insert(source) {
                continue;
            }
            let Some(present) = self.names.get(source) else { return Some((source, None)) };
            if present.version != *version {
                return Some((source, Some(present.run.count)));
            }
            if let Some(found) = self.outdated_source(present, seen) {
                return Some(found);
            }
        }
        None
    }

    /// Enters a run that changed the session. A failed run keeps what it declared to itself.
    pub fn enter(
        &mut self,
        count: u32,
        text: &str,
        origin: &Origin,
        traffic: &Traffic,
        facts: &Facts,
        done: bool,
    ) {
        let run = Run { count, text: *blake3::hash(text.as_bytes()).as_bytes() };
        let made_from = self.sources(traffic);
        let mut hasher = blake3::Hasher::new();
        hasher.update(&run.text);
        hasher.update(&facts.seed.unwrap_or_default().to_le_bytes());
        for (name, version) in &made_from {
            hasher.update(name.as_bytes());
            hasher.update(version);
        }
        for table in &facts.tables {
            hasher.update(table.sha256.as_bytes());
        }
        let rests_on = *hasher.finalize().as_bytes();
        let mut known = |name: &String, version: Version, made_from: BTreeMap<String, Version>| {
            let cell_id = origin.cell_id.clone();
            let mentions = traffic.items.get(name).map(|item| item.mentions.clone());
            let mentions = mentions.unwrap_or_default();
            self.names.insert(name.clone(), Known { version, cell_id, run, made_from, mentions });
        };
        for (name, item) in &traffic.items {
            // What an item calls is what that is now, so it is made from nothing that could be outdated.
            known(name, *blake3::hash(item.tokens.as_bytes()).as_bytes(), BTreeMap::new());
        }
        let declared = traffic.declares.iter().filter(|_| done);
        for name in declared.chain(&traffic.changes) {
            let mut hasher = blake3::Hasher::new();
            hasher.update(&rests_on);
            hasher.update(name.as_bytes());
            // What a run itself replaced is not a source that could be another later.
            let mut made_from = made_from.clone();
            made_from.retain(|source, _| {
                !traffic.changes.contains(source) && !traffic.declares.contains(source)
            });
            known(name, *hasher.finalize().as_bytes(), made_from);
        }
        self.attempted(count, text, origin, true);
    }

    /// Enters that a cell was run with this text; a failed run of the same text changes nothing.
    pub fn attempted(&mut self, count: u32, text: &str, origin: &Origin, done: bool) {
        let Some(id) = &origin.cell_id else { return };
        let run = Run { count, text: *blake3::hash(text.as_bytes()).as_bytes() };
        if !done && self.newest.get(id).is_some_and(|newest| newest.text == run.text) {
            return;
        }
        self.newest.insert(id.clone(), run);
    }

    /// The versions of what a run used, of what the items among them call, and so on.
    fn sources(&self, traffic: &Traffic) -> BTreeMap<String, Version> {
        let own = traffic.items.values().flat_map(|item| &item.mentions);
        let mut wanted: Vec<&String> = traffic.uses.iter().chain(own).collect();
        let mut sources = BTreeMap::new();
        while let Some(name) = wanted.pop() {
            if traffic.items.contains_key(name) || sources.contains_key(name) {
                continue;
            }
            if let Some(known) = self.names.get(name) {
                sources.insert(name.clone(), known.version);
                wanted.extend(&known.mentions);
            }
        }
        sources
    }

    /// Forgets variables that are gone with their worker.
    pub fn lose<'a>(&mut self, names: impl IntoIterator<Item = &'a String>) {
        for name in names {
            self.names.remove(name);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    struct Session {
        lineage: Lineage,
        count: u32,
    }

    fn set(words: &str) -> BTreeSet<String> {
        words.split_whitespace().map(str::to_owned).collect()
    }

    impl Session {
        fn new() -> Self {
            Self { lineage: Lineage::default(), count: 0 }
        }

        /// Runs a cell and gives the notes about it.
        fn run(
            &mut self,
            id: &str,
            text: &str,
            uses: &str,
            declares: &str,
            changes: &str,
        ) -> String {
            self.count += 1;
            let origin = Origin { cell_id: Some(id.to_owned()), deleted: Vec::new() };
            let traffic = Traffic {
                uses: set(uses),
                declares: set(declares),
                changes: set(changes),
                items: BTreeMap::new(),
            };
            self.lineage.forget_cells(&origin);
            let notes = self.lineage.outdated(&traffic.uses, &origin);
            self.lineage.enter(self.count, text, &origin, &traffic, &Facts::default(), true);
            notes.join("; ")
        }
    }

    #[test]
    fn a_value_made_from_what_is_another_now_is_told_however_far_back() {
        let mut session = Session::new();
        assert_eq!(session.run("a", "let x = 1;", "", "x", ""), "");
        assert_eq!(session.run("b", "let y = x;", "x", "y", ""), "");
        assert_eq!(session.run("c", "let z = y;", "y", "z", ""), "");
        // The same again makes the same.
        assert_eq!(session.run("a", "let x = 1;", "", "x", ""), "");
        assert_eq!(session.run("d", "z", "z", "", ""), "");
        session.run("a", "let x = 2;", "", "x", "");
        let note = "uses `z`, which cell [3] made from an earlier `x` than that of cell [6]";
        assert_eq!(session.run("d", "z", "z", "", ""), note);
        session.run("b", "let y = x;", "x", "y", "");
        session.run("c", "let z = y;", "y", "z", "");
        assert_eq!(session.run("d", "z", "z", "", ""), "");
    }

    #[test]
    fn edited_and_deleted_cells_are_told() {
        let mut session = Session::new();
        session.run("a", "let x = 1; let w = 2;", "", "x w", "");
        session.run("a", "let w = 2;", "", "w", "");
        let note = "uses `x` from an earlier version of cell [2], its run [1]";
        assert_eq!(session.run("b", "x", "x", "", ""), note);
        session.lineage.deleted.insert("a".to_owned());
        let note = "uses `w` from cell [2], which has been deleted";
        assert_eq!(session.run("c", "w", "w", "", ""), note);
    }

    #[test]
    fn a_cell_that_builds_on_its_own_earlier_run_is_told() {
        let mut session = Session::new();
        session.run("a", "let mut v = vec![];", "", "v", "");
        assert_eq!(session.run("b", "v.push(1);", "v", "", "v"), "");
        let note = "uses `v` as an earlier run of this cell, [2], left it";
        assert_eq!(session.run("b", "v.push(1);", "v", "", "v"), note);
        session.run("a", "let mut v = vec![];", "", "v", "");
        assert_eq!(session.run("b", "v.push(1);", "v", "", "v"), "");
    }

    #[test]
    fn a_value_is_outdated_by_whatever_its_functions_call() {
        let mut lineage = Lineage::default();
        let origin = |id: &str| Origin { cell_id: Some(id.to_owned()), deleted: Vec::new() };
        let item = |name: &str, tokens: &str, mentions: &str| Traffic {
            items: BTreeMap::from([(
                name.to_owned(),
                ItemText { tokens: tokens.to_owned(), mentions: set(mentions) },
            )]),
            ..Traffic::default()
        };
        let facts = Facts::default();
        lineage.enter(1, "g", &origin("g"), &item("g", "fn g 1", "g"), &facts, true);
        lineage.enter(2, "f", &origin("f"), &item("f", "fn f g", "f g"), &facts, true);
        let makes_y = Traffic { uses: set("f"), declares: set("y"), ..Traffic::default() };
        lineage.enter(3, "y", &origin("y"), &makes_y, &facts, true);
        // Only its layout was edited.
        lineage.enter(4, "g ", &origin("g"), &item("g", "fn g 1", "g"), &facts, true);
        assert!(lineage.outdated(&set("f y"), &origin("z")).is_empty());
        lineage.enter(5, "g2", &origin("g"), &item("g", "fn g 2", "g"), &facts, true);
        assert!(lineage.outdated(&set("f"), &origin("z")).is_empty(), "it calls the new one");
        let notes = lineage.outdated(&set("y"), &origin("z"));
        assert_eq!(
            notes,
            ["uses `y`, which cell [3] made from an earlier `g` than that of cell [5]"]
        );
    }

    #[test]
    fn another_table_makes_another_version() {
        use crate::worker::message::TableFile;
        let mut lineage = Lineage::default();
        let origin = |id: &str| Origin { cell_id: Some(id.to_owned()), deleted: Vec::new() };
        let read = |sha256: &str| Facts {
            tables: vec![TableFile {
                path: "t.csv".to_owned(),
                bytes: 1,
                sha256: sha256.to_owned(),
                rows: 1,
                columns: 1,
            }],
            ..Facts::default()
        };
        let makes_t = Traffic { declares: set("t"), ..Traffic::default() };
        let makes_m = Traffic { uses: set("t"), declares: set("m"), ..Traffic::default() };
        lineage.enter(1, "read", &origin("a"), &makes_t, &read("00"), true);
        lineage.enter(2, "mean", &origin("b"), &makes_m, &Facts::default(), true);
        lineage.enter(3, "read", &origin("a"), &makes_t, &read("00"), true);
        assert!(lineage.outdated(&set("m"), &origin("c")).is_empty());
        lineage.enter(4, "read", &origin("a"), &makes_t, &read("01"), true);
        assert_eq!(lineage.outdated(&set("m"), &origin("c")).len(), 1);
    }
}
