//! Where items are compiled, when it cannot simply be the crate of their own cell.
//!
//! Each cell is a crate, and Rust has rules about crates that a person at a notebook has no reason
//! to think of. Three situations are settled here.
//!
//! - **Unchanged.** A cell is run again and an item in it is what it was, and so is all that it
//!   refers to: the item stays where it is, and values of the type stay valid.
//! - **Homeless.** An impl block belongs to no type and no trait of its own cell. The orphan rule
//!   wants it in the crate of the type or of the trait, so those crates are compiled again, as
//!   modules of the crate of the new cell, together with the impl.
//! - **Superseded.** An item gets a new definition. What earlier cells wrote in terms of the old one
//!   is compiled again in the new crate, in terms of the new one, as it would be in one program.
//!
//! Compiling again gives a type another identity. If nothing that it is made of has changed, its
//! definition is the same text, compiled by the same compiler, hence laid out the same, and values
//! on the shelf go by the new name (*relabelled*); otherwise they are dropped, and that is said.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use super::account::{Account, Home, Import, Part, Variable};
use super::generate::module_of;
use super::parse::{Binding, ImplBlock, Item, ItemForm, Namespace};
use super::source::Edit;

/// Parts of earlier cells to compile again with a cell, and why.
#[derive(Debug, Default)]
pub struct Absorption {
    /// The parts as they will be compiled.
    pub parts: Vec<Absorbed>,
    /// Whether the parts are to be compiled in terms of the new definitions.
    pub replaces: bool,
    /// Definitions that the cell replaces.
    pub superseded: BTreeMap<(Namespace, String), Home>,
    /// Types made, directly or not, of superseded ones, by home.
    pub tainted: BTreeSet<(Home, String)>,
    /// Statics that start anew because they are made of absorbed types.
    pub restarted: Vec<String>,
}

/// A part to compile again.
#[derive(Debug)]
pub struct Absorbed {
    /// Where it lives so far.
    pub from: Home,
    /// The part, without what the new cell replaces.
    pub part: Arc<Part>,
    /// Names of the part that stay in their old home, or now come from the new cell.
    pub lent: Vec<Lent>,
}

/// A name that an absorbed part refers to instead of defining it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Lent {
    /// A static keeps its value only where it is.
    Static(Home, String),
    /// The new cell defines it.
    FromCell(String),
}

/// Which items of a cell are what they were: by index, where each lives.
pub fn unchanged(account: &Account, items: &[Item]) -> BTreeSet<usize> {
    let twins: Vec<Option<Twin<'_>>> = items.iter().map(|item| twin(account, item)).collect();
    let mut same: BTreeSet<usize> = (0..items.len()).filter(|idx| twins[*idx].is_some()).collect();
    loop {
        let changing: BTreeSet<&str> = items
            .iter()
            .enumerate()
            .filter(|(idx, _)| !same.contains(idx))
            .flat_map(|(_, item)| names_bound(item))
            .collect();
        let still = |idx: &usize| {
            let Some(twin) = &twins[*idx] else { return false };
            items[*idx].mentions.iter().all(|name| {
                !changing.contains(name.as_str()) && twin.resolves_as_before(account, name)
            })
        };
        let next: BTreeSet<usize> = same.iter().copied().filter(still).collect();
        if next == same {
            return same;
        }
        same = next;
    }
}

fn names_bound(item: &Item) -> Vec<&str> {
    match &item.form {
        ItemForm::Use(leaves) => leaves
            .iter()
            .filter_map(|leaf| match &leaf.binding {
                Binding::Name(name) => Some(name.as_str()),
                _ => None,
            })
            .collect(),
        _ => item.defines.iter().map(|(_, name)| name.as_str()).collect(),
    }
}

/// The same item in an earlier cell.
struct Twin<'a> {
    home: Home,
    part: &'a Part,
}

fn twin<'a>(account: &'a Account, item: &Item) -> Option<Twin<'a>> {
    match &item.form {
        ItemForm::Use(_) => None,
        ItemForm::Impl(_) => account.crates.iter().find_map(|(name, found)| {
            let live = |part: &&Arc<Part>| {
                let home = home_in(name, found, part);
                account
                    .items
                    .values()
                    .any(|defined| defined.home == home || defined.home.crate_name == *name)
            };
            let part = found
                .parts
                .iter()
                .filter(live)
                .find(|part| part.items.iter().any(|other| other.tokens == item.tokens))?;
            Some(Twin { home: home_in(name, found, part), part })
        }),
        _ => {
            let (space, name) = item.defines.first()?;
            let defined = account.items.get(&(*space, name.clone()))?;
            let same = defined.item().tokens == item.tokens
                && item.defines.iter().all(|key| {
                    account.items.get(key).is_some_and(|other| other.home == defined.home)
                });
            same.then(|| Twin { home: defined.home.clone(), part: &defined.part })
        }
    }
}

/// The home of a part of a crate: the last part is the root.
pub fn home_in(crate_name: &str, found: &super::account::Crate, part: &Arc<Part>) -> Home {
    let is_root = found.parts.last().is_some_and(|root| Arc::ptr_eq(root, part));
    Home { crate_name: crate_name.to_owned(), module: (!is_root).then(|| part.module.clone()) }
}

impl Twin<'_> {
    /// Whether a name means now what it meant in the part.
    fn resolves_as_before(&self, account: &Account, name: &str) -> bool {
        let now: Vec<Home> =
            account.definitions(name).map(|(_, defined)| defined.home.clone()).collect();
        let in_part =
            self.part.items.iter().any(|item| item.defines.iter().any(|(_, n)| n == name));
        if in_part {
            return now.is_empty()
                || now
                    .iter()
                    .all(|home| *home == self.home || account.present(&self.home) == *home);
        }
        let mut then = Vec::new();
        let mut line_then = Vec::new();
        for import in &self.part.imports {
            match import {
                Import::Item { home, name: n, .. } if n == name => then.push(account.present(home)),
                Import::Use { path, suffix, .. } if binds(path, suffix) == Some(name) => {
                    line_then.push(path.as_str())
                }
                _ => {}
            }
        }
        let line_now: Vec<&str> = account
            .uses
            .iter()
            .filter(|line| line.leaf.binding == Binding::Name(name.to_owned()))
            .map(|line| line.leaf.path.as_str())
            .collect();
        let own_use = self.part.items.iter().any(|item| names_bound(item).contains(&name));
        if own_use {
            return true;
        }
        let mut now = now;
        now.sort();
        now.dedup();
        then.sort();
        then.dedup();
        now == then && line_now == line_then
    }
}

fn binds<'a>(path: &'a str, suffix: &'a str) -> Option<&'a str> {
    match suffix {
        "" => path.rsplit("::").next(),
        "::*" | " as _" => None,
        other => other.strip_prefix(" as "),
    }
}

/// What must be compiled again with these items of a new cell.
///
/// `with_dependents` asks for what is written in terms of superseded definitions too.
pub fn absorb(account: &Account, items: &[Item], with_dependents: bool) -> Absorption {
    let mut absorption = Absorption { replaces: with_dependents, ..Absorption::default() };
    for item in items {
        for key in &item.defines {
            if key.0 != Namespace::Macro
                && let Some(defined) = account.items.get(key)
            {
                absorption.superseded.insert(key.clone(), defined.home.clone());
            }
        }
    }
    let mut crates: BTreeSet<String> = BTreeSet::new();
    for item in items {
        if let ItemForm::Impl(block) = &item.form {
            crates.extend(homes_wanted(account, items, block));
        }
    }
    if with_dependents && !absorption.superseded.is_empty() {
        crates.extend(users_of(account, &absorption.superseded));
    }
    add_dependents(account, &mut crates);
    for name in &crates {
        let Some(found) = account.crates.get(name) else { continue };
        for part in &found.parts {
            let from = home_in(name, found, part);
            let absorbed = prepare(account, &from, part, items, &mut absorption, &crates);
            absorption.parts.push(absorbed);
        }
    }
    taint(account, &mut absorption);
    absorption
}

/// The crates in which the orphan rule would have an impl block; none if it may stay in its cell.
fn homes_wanted(account: &Account, items: &[Item], block: &ImplBlock) -> BTreeSet<String> {
    let own = |name: &str| {
        items.iter().any(|item| {
            item.defines.iter().any(|(space, n)| *space == Namespace::Type && n == name)
        })
    };
    let mut heads: Vec<&str> = block.self_head.iter().map(String::as_str).collect();
    if let Some((of_trait, _)) = &block.of_trait {
        heads.push(of_trait);
        heads.extend(block.other_heads.iter().map(String::as_str));
    }
    let heads: Vec<String> =
        heads.into_iter().map(|head| through_uses(account, items, head)).collect();
    if heads.iter().any(|head| own(head)) {
        return BTreeSet::new();
    }
    heads
        .iter()
        .filter_map(|head| account.defined_type(head))
        .map(|defined| defined.home.crate_name.clone())
        .collect()
}

/// The first segment of the path that a name stands for.
fn through_uses(account: &Account, items: &[Item], name: &str) -> String {
    let own = items.iter().filter_map(|item| match &item.form {
        ItemForm::Use(leaves) => Some(leaves),
        _ => None,
    });
    let all = own.flatten().chain(account.uses.iter().map(|line| &line.leaf));
    for leaf in all {
        if leaf.binding == Binding::Name(name.to_owned()) {
            return leaf.path.split("::").next().unwrap_or(name).to_owned();
        }
    }
    name.to_owned()
}

/// Crates with parts that use a superseded definition and define something that is in force.
fn users_of(
    account: &Account,
    superseded: &BTreeMap<(Namespace, String), Home>,
) -> BTreeSet<String> {
    let mut users = BTreeSet::new();
    for (name, found) in &account.crates {
        for part in &found.parts {
            let home = home_in(name, found, part);
            let live_others = part.items.iter().any(|item| {
                let live = item.defines.iter().any(|key| {
                    !superseded.contains_key(key)
                        && account.items.get(key).is_some_and(|defined| defined.home == home)
                });
                let of_interest = live || matches!(item.form, ItemForm::Impl(_));
                of_interest && uses_superseded(account, part, &home, item, superseded)
            });
            if live_others {
                users.insert(name.clone());
            }
        }
    }
    users
}

fn uses_superseded(
    account: &Account,
    part: &Part,
    home: &Home,
    item: &Item,
    superseded: &BTreeMap<(Namespace, String), Home>,
) -> bool {
    // An impl of the superseded type itself belongs to the old definition and goes with it.
    if let ItemForm::Impl(block) = &item.form
        && block
            .self_head
            .as_ref()
            .is_some_and(|head| superseded.contains_key(&(Namespace::Type, head.clone())))
    {
        return false;
    }
    superseded.iter().any(|((_, name), old)| {
        item.mentions.contains(name)
            && (old == home
                || part.imports.iter().any(|import| {
                    matches!(import, Import::Item { home, name: n, .. } if n == name && account.present(home) == *old)
                }))
    })
}

/// Adds the crates with something in force that stand on the crates found so far.
fn add_dependents(account: &Account, crates: &mut BTreeSet<String>) {
    loop {
        let more: Vec<String> = account
            .crates
            .iter()
            .filter(|(name, found)| {
                !crates.contains(*name)
                    && !found.needs.is_disjoint(crates)
                    && account.items.values().any(|defined| defined.home.crate_name == **name)
            })
            .map(|(name, _)| name.clone())
            .collect();
        if more.is_empty() {
            return;
        }
        crates.extend(more);
    }
}

fn prepare(
    account: &Account,
    from: &Home,
    part: &Arc<Part>,
    items: &[Item],
    absorption: &mut Absorption,
    crates: &BTreeSet<String>,
) -> Absorbed {
    let with_dependents = absorption.replaces;
    let mut kept = Vec::new();
    let mut lent = Vec::new();
    for item in &part.items {
        let superseded = with_dependents
            && !item.defines.is_empty()
            && item.defines.iter().all(|key| absorption.superseded.get(key) == Some(from));
        if superseded {
            lent.extend(item.defines.iter().map(|(_, name)| Lent::FromCell(name.clone())));
            continue;
        }
        match &item.form {
            ItemForm::Static => {
                if made_of_absorbed(account, part, item, crates) {
                    absorption.restarted.extend(item.defines.iter().map(|(_, name)| name.clone()));
                } else {
                    lent.extend(
                        item.defines
                            .iter()
                            .map(|(_, name)| Lent::Static(from.clone(), name.clone())),
                    );
                    continue;
                }
            }
            ItemForm::Impl(block) => {
                let of_old = with_dependents
                    && block.self_head.as_ref().is_some_and(|head| {
                        absorption.superseded.get(&(Namespace::Type, head.clone())).is_some_and(|old| {
                            old == from || part.imports.iter().any(|import| matches!(import,
                                Import::Item { home, name, .. } if name == head && account.present(home) == *old))
                        })
                    });
                if of_old {
                    continue;
                }
                match without_replaced(item, block, items) {
                    Some(rest) => {
                        kept.push(rest);
                        continue;
                    }
                    None => continue,
                }
            }
            _ => {}
        }
        kept.push(item.clone());
    }
    lent.dedup();
    let module = from.module.clone().unwrap_or_else(|| module_of(&from.crate_name));
    let part =
        Part { module, cell: Arc::clone(&part.cell), items: kept, imports: part.imports.clone() };
    Absorbed { from: from.clone(), part: Arc::new(part), lent }
}

fn made_of_absorbed(
    account: &Account,
    part: &Part,
    item: &Item,
    crates: &BTreeSet<String>,
) -> bool {
    item.mentions.iter().any(|name| {
        let here = part.items.iter().any(|other| {
            matches!(
                other.form,
                ItemForm::Data | ItemForm::Trait(_) | ItemForm::Alias | ItemForm::Module
            ) && other.defines.iter().any(|(_, n)| n == name)
        });
        here || part.imports.iter().any(|import| {
            matches!(import,
            Import::Item { home, name: n, .. } if n == name
                && crates.contains(&account.present(home).crate_name)
                && account.defined_type(name).is_some())
        })
    })
}

/// An earlier impl block without what impl blocks of the new cell replace; `None` if nothing is left.
fn without_replaced(item: &Item, block: &ImplBlock, items: &[Item]) -> Option<Item> {
    let mut gone: BTreeSet<&str> = BTreeSet::new();
    for other in items {
        let ItemForm::Impl(new) = &other.form else { continue };
        if new.self_type != block.self_type {
            continue;
        }
        match (&new.of_trait, &block.of_trait) {
            (Some((_, a)), Some((_, b))) if a == b => return None,
            (None, None) => gone.extend(new.members.iter().map(|(name, _)| name.as_str())),
            _ => {}
        }
    }
    if block.members.iter().all(|(name, _)| gone.contains(name.as_str())) && !gone.is_empty() {
        return None;
    }
    let mut item = item.clone();
    for (name, range) in &block.members {
        if gone.contains(name.as_str()) {
            item.edits.retain(|edit| edit.range.start < range.start || edit.range.end > range.end);
            item.edits.push(Edit { range: range.clone(), text: String::new() });
        }
    }
    item.edits.sort_by_key(|edit| edit.range.start);
    Some(item)
}

/// Finds the types of absorbed parts that are made of superseded ones.
fn taint(account: &Account, absorption: &mut Absorption) {
    for ((space, name), home) in &absorption.superseded {
        if *space == Namespace::Type {
            absorption.tainted.insert((home.clone(), name.clone()));
        }
    }
    loop {
        let before = absorption.tainted.len();
        let mut found = Vec::new();
        for absorbed in &absorption.parts {
            for item in &absorbed.part.items {
                if !matches!(
                    item.form,
                    ItemForm::Data | ItemForm::Trait(_) | ItemForm::Alias | ItemForm::Module
                ) {
                    continue;
                }
                let made_of = |(home, name): &(Home, String)| {
                    item.mentions.contains(name)
                        && (*home == absorbed.from
                            || absorbed.part.imports.iter().any(|import| matches!(import,
                                Import::Item { home: h, name: n, .. } if n == name && account.present(h) == *home)))
                };
                if absorption.tainted.iter().any(made_of) {
                    found.extend(
                        item.defines.iter().map(|(_, name)| (absorbed.from.clone(), name.clone())),
                    );
                }
            }
        }
        absorption.tainted.extend(found);
        if absorption.tainted.len() == before {
            return;
        }
    }
}

impl Absorption {
    /// A variable whose type is compiled again, as the new crate itself must write the type. One
    /// whose type changes keeps its old name; the cell may use it a last time.
    pub fn rename(&self, mut variable: Variable) -> Variable {
        if self.tainted.iter().any(|(home, name)| names_type(&variable.type_text, home, name)) {
            return variable;
        }
        for absorbed in &self.parts {
            let old = format!("{}::", absorbed.from.path());
            if variable.type_text.contains(&old) {
                let new = format!("crate::{}::", absorbed.part.module);
                variable.type_text = variable.type_text.replace(&old, &new);
                variable.relabelled = true;
            }
        }
        variable
    }

    /// Whether nothing is compiled again.
    pub fn is_empty(&self) -> bool {
        self.parts.is_empty()
    }
}

/// Whether a type is made of this type.
pub fn names_type(type_text: &str, home: &Home, name: &str) -> bool {
    let path = format!("{}::{name}", home.path());
    type_text.match_indices(&path).any(|(at, _)| {
        let after = type_text[at + path.len()..].chars().next();
        !after.is_some_and(|c| c.is_alphanumeric() || c == '_')
    })
}
