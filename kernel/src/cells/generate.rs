//! The text of the crate that a cell becomes.
//!
//! ```text
//! imports from earlier cells; the cell's items, public
//! pub fn entry(worker's cell) {
//!     let x: Type = take it off the shelf
//!     run(|| { the cell's statements; show the final expression; put new variables on the shelf })
//!     put x back
//! }
//! ```
//!
//! Variables come off the shelf outside the closure and go back outside it, so that a panic or an
//! error inside leaves them whole. What the closure moves cannot be put back: the compiler says so,
//! and the cell is generated again without that line (see `rustc`).

use std::collections::BTreeSet;
use std::fmt::Write as _;
use std::sync::Arc;

use super::account::{Home, Import, Variable};
use super::homes::{Absorbed, Absorption, Lent};
use super::parse::{Declared, Item, Parsed, Statement};
use super::source::{CellText, Generated, Origin};

/// Stands in generated text for the name of the crate, which follows from the text itself.
pub const NAME_HERE: &str = "cell_0000000000000000";

/// Everything that goes into the text.
pub struct Plan<'a> {
    /// The cell.
    pub cell: Arc<CellText>,
    /// Lines about extra crates.
    pub preamble: String,
    /// Taken apart.
    pub parsed: &'a Parsed,
    /// Those of its items that are to be compiled; the others are what they were.
    pub items: Vec<Item>,
    /// Variables to take off the shelf.
    pub takes: Vec<(String, Variable)>,
    /// Variables to put on the shelf.
    pub declares: Vec<Declared>,
    /// What earlier cells lend.
    pub imports: BTreeSet<Import>,
    /// Parts of earlier cells that are compiled again in this crate.
    pub absorption: Absorption,
}

/// Lines that the compiler would not have.
#[derive(Debug, Clone, Default, PartialEq, Eq, serde::Serialize, serde::Deserialize)]
pub struct Without {
    /// Taken variables that the cell moves.
    pub returns: BTreeSet<String>,
    /// Declared variables that cannot outlive the cell.
    pub keeps: BTreeSet<String>,
    /// Declared variables that the cell itself moves on, or never gives a value.
    pub spent: BTreeSet<String>,
    /// `use` lines of earlier cells that no longer hold, by place in the account.
    pub uses: BTreeSet<usize>,
}

impl Without {
    /// Whether nothing is left out.
    pub fn is_empty(&self) -> bool {
        *self == Self::default()
    }

    /// Adds what another leaves out.
    pub fn extend(&mut self, other: Self) {
        self.returns.extend(other.returns);
        self.keeps.extend(other.keeps);
        self.spent.extend(other.spent);
        self.uses.extend(other.uses);
    }
}

/// Warnings that speak of habits of whole programs, or of the generated text.
const QUIET: &str = "#![allow(unused_imports, unused_variables, unused_mut, unused_assignments, \
    unused_macros, unused_parens, unused_braces, unused_labels, dead_code, unreachable_code, \
    private_interfaces, private_bounds, non_local_definitions, macro_expanded_macro_exports_accessed_by_absolute_paths)]\n\
    #![warn(dropping_references)]\n";

/// Writes the text.
pub fn generate(plan: &Plan<'_>, without: &Without) -> Generated {
    let mut text = Generated::default();
    text.own(QUIET);
    text.own(&plan.preamble);
    for absorbed in &plan.absorption.parts {
        module(&mut text, absorbed, plan);
    }
    root(&mut text, plan, without);
    entry(&mut text, plan, without);
    text
}

/// The name of the function that the worker calls, with the crate's name still to be filled in.
pub fn entry_symbol(crate_name: &str) -> String {
    format!("semiaxis_{crate_name}")
}

fn module(text: &mut Generated, absorbed: &Absorbed, plan: &Plan<'_>) {
    let part = &absorbed.part;
    text.own(&format!("pub mod {} {{\nuse ::semiaxis::prelude::*;\n", part.module));
    for lent in &absorbed.lent {
        text.own(&match lent {
            Lent::Static(home, name) => format!("pub use {}::{};\n", home.path(), raw(name)),
            Lent::FromCell(name) => format!("use crate::{};\n", raw(name)),
        });
    }
    for import in &part.imports {
        import_line(text, import, plan, &BTreeSet::new());
    }
    items(text, &part.cell, &part.items);
    text.own("}\n");
}

fn root(text: &mut Generated, plan: &Plan<'_>, without: &Without) {
    text.own("use ::semiaxis::prelude::*;\n");
    for import in &plan.imports {
        import_line(text, import, plan, &without.uses);
    }
    items(text, &plan.cell, &plan.items);
}

fn items(text: &mut Generated, cell: &Arc<CellText>, items: &[Item]) {
    for item in items {
        text.edited(cell, item.range.clone(), &item.edits);
        text.own("\n");
    }
}

fn import_line(text: &mut Generated, import: &Import, plan: &Plan<'_>, left_out: &BTreeSet<usize>) {
    match import {
        Import::Item { home, name, is_macro } => {
            let path = match plan.absorbed_home(home) {
                _ if plan.supersedes(home, name) => "crate".to_owned(),
                Some(_) if *is_macro => "crate".to_owned(),
                Some(module) => format!("crate::{module}"),
                None if *is_macro => home.crate_name.clone(),
                None => home.path(),
            };
            text.own(&format!("use {path}::{};\n", raw(name)));
        }
        Import::Use { idx, .. } if left_out.contains(idx) => {}
        Import::Use { path, suffix, idx } => {
            text.own("use ");
            text.of(Origin::Import(*idx), &format!("{path}{suffix}"));
            text.own(";\n");
        }
    }
}

impl Plan<'_> {
    /// The module that a home becomes when its part is compiled again in this crate.
    pub fn absorbed_home(&self, home: &Home) -> Option<&str> {
        // The module of a part follows from the crate that it was first the root of.
        let module = home.module.clone().unwrap_or_else(|| module_of(&home.crate_name));
        let mut modules =
            self.absorption.parts.iter().map(|absorbed| absorbed.part.module.as_str());
        modules.find(|name| *name == module)
    }

    /// Whether a name that an absorbed part imports is one that this cell defines anew.
    fn supersedes(&self, home: &Home, name: &str) -> bool {
        let module =
            |home: &Home| home.module.clone().unwrap_or_else(|| module_of(&home.crate_name));
        self.absorption.replaces
            && !self.absorption.is_empty()
            && self
                .absorption
                .superseded
                .iter()
                .any(|((_, n), old)| n == name && module(old) == module(home))
    }

    /// The crates of cells that the text names.
    pub fn crates(&self) -> BTreeSet<String> {
        let mut crates = BTreeSet::new();
        let parts = self.absorption.parts.iter();
        let lent = parts.clone().flat_map(|absorbed| absorbed.lent.iter());
        crates.extend(lent.filter_map(|lent| match lent {
            Lent::Static(home, _) => Some(home.crate_name.clone()),
            Lent::FromCell(_) => None,
        }));
        let imports =
            self.imports.iter().chain(parts.flat_map(|absorbed| absorbed.part.imports.iter()));
        for import in imports {
            if let Import::Item { home, name, .. } = import
                && self.absorbed_home(home).is_none()
                && !self.supersedes(home, name)
            {
                crates.insert(home.crate_name.clone());
            }
        }
        for (_, variable) in &self.takes {
            crates.extend(crates_in(&variable.type_text));
        }
        crates
    }
}

/// The crates of cells that a type names.
pub fn crates_in(type_text: &str) -> impl Iterator<Item = String> + '_ {
    type_text.match_indices("cell_").filter_map(|(at, _)| {
        let name = type_text.get(at..at + NAME_HERE.len())?;
        name[5..].bytes().all(|byte| byte.is_ascii_hexdigit()).then(|| name.to_owned())
    })
}

/// The module that the root of a crate becomes when it is compiled again in another crate.
pub fn module_of(crate_name: &str) -> String {
    crate_name.replacen("cell_", "of_", 1)
}

fn entry(text: &mut Generated, plan: &Plan<'_>, without: &Without) {
    text.own(&format!(
        "#[unsafe(no_mangle)]\npub fn {}(__semiaxis: &mut ::semiaxis::live::Cell<'_>) {{\n",
        entry_symbol(NAME_HERE)
    ));
    for (name, variable) in &plan.takes {
        let line =
            format!("if !__semiaxis.ready::<{}>({name:?}) {{ return; }}\n", variable.type_text);
        text.of(Origin::Take(name.clone()), &line);
    }
    for (name, variable) in &plan.takes {
        let mutable = if variable.mutable { "mut " } else { "" };
        let line = format!(
            "let {mutable}{}: {} = __semiaxis.take({name:?});\n",
            raw(name),
            variable.type_text
        );
        text.of(Origin::Take(name.clone()), &line);
    }
    text.own(
        "__semiaxis.run(|__semiaxis: &mut ::semiaxis::live::Cell<'_>| \
         -> ::core::result::Result<(), ::semiaxis::live::Failure> {\n",
    );
    for statement in &plan.parsed.statements {
        text.edited(&plan.cell, statement.range.clone(), &statement.edits);
        text.own("\n");
    }
    if let Some(tail) = &plan.parsed.tail {
        final_expression(text, plan, tail);
    }
    let left = || plan.declares.iter().filter(|declared| !without.spent.contains(&declared.name));
    for declared in left() {
        let line = format!("::core::mem::drop(&{});\n", raw(&declared.name));
        text.of(Origin::Type(declared.name.clone()), &line);
    }
    for declared in left().filter(|declared| !without.keeps.contains(&declared.name)) {
        let line = format!("__semiaxis.put({0:?}, {1});\n", declared.name, raw(&declared.name));
        text.of(Origin::Keep(declared.name.clone()), &line);
    }
    text.own("::core::result::Result::Ok(())\n});\n");
    for (name, _) in plan.takes.iter().filter(|(name, _)| !without.returns.contains(name)) {
        let line = format!("__semiaxis.put_back({name:?}, {});\n", raw(name));
        text.of(Origin::Return(name.clone()), &line);
    }
    text.own("}\n");
}

fn final_expression(text: &mut Generated, plan: &Plan<'_>, tail: &Statement) {
    text.own("match &(");
    text.edited(&plan.cell, tail.range.clone(), &tail.edits);
    text.own("\n) { __value => __semiaxis.result(::semiaxis::bundle_of!(__value)) }\n");
}

/// A name as it must be written where it is also a word of Rust.
fn raw(name: &str) -> String {
    match syn::parse_str::<syn::Ident>(name) {
        Ok(_) => name.to_owned(),
        Err(_) => {
            let mut raw = String::from("r#");
            let _ = raw.write_str(name);
            raw
        }
    }
}
