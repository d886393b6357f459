//! Running a notebook for a record: what is kept of each cell while it runs.

use std::collections::BTreeMap;

use serde_json::Value;

use super::data::Files;
use super::evidence::{Build, CellFacts, CellOutputs};
use super::markup::head;
use crate::cells::Engine;
use crate::notebook::document::Document;
use crate::notebook::run::{Ran, Watcher};
use crate::notebook::screen::without_colours;

/// Lines of standard error that the list of warnings repeats of one cell.
const MOST_WARNINGS: usize = 20;

/// What was kept of a run.
#[derive(Debug)]
pub struct Gathered {
    /// The code cells with something to run, in order.
    pub cells: Vec<CellFacts>,
    /// What each showed, for comparison, by its place from 1.
    pub evidence: BTreeMap<usize, CellOutputs>,
    /// What each showed, as the notebook format has it, by its place from 1.
    pub shown: BTreeMap<usize, Vec<Value>>,
    /// The files.
    pub files: Files,
    /// The place and words of the first failure that was not meant to be.
    pub failure: Option<(usize, String)>,
    /// Whether the run goes on behind a failure.
    goes_on: bool,
}

impl Gathered {
    /// Before the run of a notebook.
    pub fn new(document: &Document, files: Files, goes_on: bool) -> Self {
        let code = (0..document.n_cells()).filter(|cell_idx| document.code(*cell_idx).is_some());
        let cells = code.map(|cell_idx| CellFacts {
            place: cell_idx + 1,
            id: document.id(cell_idx).unwrap_or_default().to_owned(),
            outcome: "not run".to_owned(),
            ..CellFacts::default()
        });
        Self {
            cells: cells.collect(),
            evidence: BTreeMap::new(),
            shown: BTreeMap::new(),
            files,
            failure: None,
            goes_on,
        }
    }
}

impl Watcher for Gathered {
    fn ran(&mut self, ran: &Ran<'_>) {
        let place = ran.cell_idx + 1;
        if let (Some(failure), true, None) = (ran.failure, ran.failed, &self.failure) {
            self.failure = Some((place, failure.message.clone()));
        }
        self.files.enter(place, ran.facts);
        let evidence = CellOutputs::of(ran.outputs);
        if let Some(cell) = self.cells.iter_mut().find(|cell| cell.place == place) {
            cell.count = ran.count;
            cell.outcome = match ran.failure {
                None => "done",
                Some(_) if ran.interrupted => "interrupted",
                Some(_) => "failed",
            }
            .to_owned();
            cell.seed = ran.facts.seed;
            cell.compile_ms = ran.timings.compile.as_secs_f64() * 1e3;
            cell.run_ms = ran.timings.run.as_secs_f64() * 1e3;
            cell.uses.clone_from(&ran.facts.uses);
            cell.makes.clone_from(&ran.facts.makes);
            let said = without_colours(&evidence.stderr.text);
            let lines = said.lines().filter(|line| !line.trim().is_empty());
            cell.warnings = lines.take(MOST_WARNINGS).map(|l| head(l, 500).to_owned()).collect();
        }
        self.evidence.insert(place, evidence);
        self.shown.insert(place, ran.outputs.to_vec());
    }

    fn goes_on(&self) -> bool {
        self.goes_on
    }
}

/// With what an engine builds its cells.
pub fn build(engine: &Engine) -> Build {
    let kit = engine.kit();
    let mut crates: Vec<(String, String)> = kit
        .packages
        .iter()
        .chain(&kit.host)
        .map(|package| (package.name.clone(), package.version.clone()))
        .collect();
    crates.sort();
    crates.dedup();
    Build {
        semiaxis: env!("CARGO_PKG_VERSION").to_owned(),
        prelude: kit.stamp.clone(),
        sources: kit.sources.clone(),
        compiler: kit.rustc_version.trim().to_owned(),
        crates,
        extra: Vec::new(),
    }
}

/// What differs between two builds, one line each.
pub fn differences(then: &Build, now: &Build) -> Vec<String> {
    let mut told = Vec::new();
    for (what, then, now) in [
        ("version of semiaxis", &then.semiaxis, &now.semiaxis),
        ("build of the prelude", &then.prelude, &now.prelude),
        ("sources of the prelude", &then.sources, &now.sources),
    ] {
        if then != now {
            told.push(format!("{what}: {then} then, {now} now"));
        }
    }
    if then.compiler != now.compiler {
        let first = |text: &str| text.lines().next().unwrap_or_default().to_owned();
        told.push(format!(
            "compiler: {} then, {} now",
            first(&then.compiler),
            first(&now.compiler)
        ));
    }
    let (a, b): (BTreeMap<_, _>, BTreeMap<_, _>) =
        (then.crates.iter().cloned().collect(), now.crates.iter().cloned().collect());
    for name in a.keys().chain(b.keys()).collect::<std::collections::BTreeSet<_>>() {
        if a.get(name) != b.get(name) {
            let of = |side: &BTreeMap<String, String>| {
                side.get(name).cloned().unwrap_or("not there".to_owned())
            };
            told.push(format!("crate {name}: {} then, {} now", of(&a), of(&b)));
        }
    }
    told
}
