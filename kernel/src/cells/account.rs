//! The account of a session: which variables are on the shelf, which items have which newest
//! definition, and where all of it came from.
//!
//! The account is the kernel's; the worker holds the values. It changes only when a cell has
//! compiled and run, so that a cell that fails leaves it as it was.

use std::collections::{BTreeMap, BTreeSet, HashMap};
use std::path::PathBuf;
use std::sync::Arc;

use super::parse::{Binding, Item, ItemForm, Namespace, UseLeaf};
use super::source::{CellText, Generated};

/// What a session has defined so far.
#[derive(Debug, Default)]
pub struct Account {
    /// The variables on the shelf.
    pub variables: BTreeMap<String, Variable>,
    /// Names that stand for nothing any more, and why.
    pub absent: HashMap<String, Absent>,
    /// The newest definition of each name.
    pub items: BTreeMap<(Namespace, String), Defined>,
    /// `use` lines in force.
    pub uses: Vec<Use>,
    /// Compiled cells by the name of their crate.
    pub crates: HashMap<String, Arc<Crate>>,
    /// Where parts of crates live now that were compiled again in another crate.
    pub moved_homes: HashMap<Home, Home>,
}

/// A variable on the shelf.
#[derive(Debug, Clone, PartialEq)]
pub struct Variable {
    /// Its type, as a later cell can name it.
    pub type_text: String,
    /// Whether it was declared `mut`.
    pub mutable: bool,
    /// The cell that declared it.
    pub cell: u32,
    /// Whether the type's name has changed since the value was stored.
    pub relabelled: bool,
}

/// Why a name stands for nothing any more.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Absent {
    /// A cell moved the value out.
    Moved {
        /// That cell.
        cell: u32,
    },
    /// It borrowed from something, and ended with its cell.
    Borrowing {
        /// That cell.
        cell: u32,
    },
    /// Its type has no name that another cell could write.
    Nameless {
        /// The cell that declared it.
        cell: u32,
        /// The type, as the compiler shows it.
        type_text: String,
    },
    /// Its type was redefined.
    Redefined {
        /// The cell with the new definition.
        cell: u32,
        /// The name of the type.
        type_name: String,
    },
    /// The worker that held it has ended.
    Lost {
        /// The cell that had made it.
        cell: u32,
    },
}

/// A module of a crate of a cell, or its root.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Home {
    /// The crate.
    pub crate_name: String,
    /// The module in it; `None` for the root.
    pub module: Option<String>,
}

impl Home {
    /// The path to the home from another crate.
    pub fn path(&self) -> String {
        match &self.module {
            None => self.crate_name.clone(),
            Some(module) => format!("{}::{module}", self.crate_name),
        }
    }
}

/// The newest definition of a name.
#[derive(Debug, Clone)]
pub struct Defined {
    /// Where it lives.
    pub home: Home,
    /// The text it stands in.
    pub part: Arc<Part>,
    /// Which of the part's items it is.
    pub item_idx: usize,
}

impl Defined {
    /// The item.
    pub fn item(&self) -> &Item {
        &self.part.items[self.item_idx]
    }
}

/// The items of one cell, and the imports they were written under.
#[derive(Debug)]
pub struct Part {
    /// The name that the part has as a module.
    pub module: String,
    /// The cell.
    pub cell: Arc<CellText>,
    /// Its items.
    pub items: Vec<Item>,
    /// What its text refers to.
    pub imports: Vec<Import>,
}

/// One line that brings a name into a crate or module.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord)]
pub enum Import {
    /// An item of an earlier cell.
    Item {
        /// Where it lives.
        home: Home,
        /// Its name.
        name: String,
        /// Macros live at the root of their crate, wherever they were written.
        is_macro: bool,
    },
    /// A `use` line of an earlier cell.
    Use {
        /// The path.
        path: String,
        /// What follows the path: ` as name`, `::*` or nothing.
        suffix: String,
        /// Its place in the account.
        idx: usize,
    },
}

/// A `use` line in force.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Use {
    /// What it brings in.
    pub leaf: UseLeaf,
    /// Of which cell.
    pub cell: u32,
}

impl Use {
    /// The first segment of its path.
    pub fn head(&self) -> &str {
        self.leaf.path.trim_start_matches("::").split("::").next().unwrap_or_default()
    }

    /// As an import.
    pub fn import(&self, idx: usize) -> Import {
        let suffix = match &self.leaf.binding {
            Binding::Glob => "::*".to_owned(),
            Binding::Nameless => " as _".to_owned(),
            Binding::Name(name) if self.leaf.path.rsplit("::").next() == Some(name) => {
                String::new()
            }
            Binding::Name(name) => format!(" as {name}"),
        };
        Import::Use { path: self.leaf.path.clone(), suffix, idx }
    }
}

/// A compiled cell.
#[derive(Debug)]
pub struct Crate {
    /// The library.
    pub library: PathBuf,
    /// Crates of cells that it was compiled against.
    pub needs: BTreeSet<String>,
    /// The texts of items in it; the last is its root, the others are modules.
    pub parts: Vec<Arc<Part>>,
    /// The text that was compiled, to find places in.
    pub generated: Arc<Generated>,
}

impl Account {
    /// The definitions of a name in all spaces.
    pub fn definitions<'a>(
        &'a self,
        name: &'a str,
    ) -> impl Iterator<Item = (Namespace, &'a Defined)> + 'a {
        [Namespace::Type, Namespace::Value, Namespace::Macro].into_iter().filter_map(move |space| {
            self.items.get(&(space, name.to_owned())).map(|defined| (space, defined))
        })
    }

    /// Whether an earlier cell defines a type, trait or module of this name.
    pub fn defined_type(&self, name: &str) -> Option<&Defined> {
        self.items.get(&(Namespace::Type, name.to_owned()))
    }

    /// Crates of cells that a crate stands on, those that others stand on first, itself last.
    pub fn closure<'a>(&self, roots: impl IntoIterator<Item = &'a String>) -> Vec<String> {
        fn visit(
            account: &Account,
            name: &str,
            seen: &mut BTreeSet<String>,
            order: &mut Vec<String>,
        ) {
            if !seen.insert(name.to_owned()) {
                return;
            }
            if let Some(found) = account.crates.get(name) {
                for need in &found.needs {
                    visit(account, need, seen, order);
                }
                order.push(name.to_owned());
            }
        }
        let (mut seen, mut order) = (BTreeSet::new(), Vec::new());
        for root in roots {
            visit(self, root, &mut seen, &mut order);
        }
        order
    }

    /// The present home of what was compiled in this home.
    pub fn present(&self, home: &Home) -> Home {
        let mut home = home;
        while let Some(next) = self.moved_homes.get(home) {
            home = next;
        }
        home.clone()
    }

    /// What a cell's mentions bring in from earlier cells, the names it defines itself left out.
    pub fn imports(&self, mentions: &BTreeSet<String>, own: &Own) -> BTreeSet<Import> {
        let mut imports = BTreeSet::new();
        let mut wanted: Vec<&str> = mentions.iter().map(String::as_str).collect();
        // Methods come with their trait although nobody names the trait.
        for ((_, name), defined) in &self.items {
            if let ItemForm::Trait(members) = &defined.item().form
                && members.iter().any(|member| mentions.contains(member))
            {
                wanted.push(name);
            }
        }
        for (idx, line) in self.uses.iter().enumerate() {
            let shadowed = match &line.leaf.binding {
                Binding::Name(name) => own.binds_anything(name),
                _ => false,
            };
            if !shadowed {
                imports.insert(line.import(idx));
                wanted.push(line.head());
            }
        }
        let mut seen = BTreeSet::new();
        while let Some(name) = wanted.pop() {
            if !seen.insert(name) {
                continue;
            }
            for (space, defined) in self.definitions(name) {
                if own.binds(space, name) {
                    continue;
                }
                imports.insert(Import::Item {
                    home: defined.home.clone(),
                    name: name.to_owned(),
                    is_macro: space == Namespace::Macro,
                });
                // What a macro writes is looked up where it is used.
                if space == Namespace::Macro {
                    wanted.extend(defined.item().mentions.iter().map(String::as_str));
                }
            }
        }
        imports
    }

    /// Enters the items and `use` lines of a part that now lives in this home.
    pub fn enter(&mut self, home: &Home, part: &Arc<Part>) {
        for (item_idx, item) in part.items.iter().enumerate() {
            for (space, name) in &item.defines {
                self.uses
                    .retain(|line| !matches!(&line.leaf.binding, Binding::Name(n) if n == name));
                let defined = Defined { home: home.clone(), part: Arc::clone(part), item_idx };
                self.items.insert((*space, name.clone()), defined);
            }
            if let ItemForm::Use(leaves) = &item.form {
                for leaf in leaves {
                    self.enter_use(leaf, part.cell.number);
                }
            }
        }
    }

    /// Notes that what lived in one home has been compiled again in another.
    pub fn move_home(&mut self, from: &Home, to: &Home, part: &Arc<Part>) {
        for (item_idx, item) in part.items.iter().enumerate() {
            for key in &item.defines {
                if let Some(defined) = self.items.get_mut(key)
                    && defined.home == *from
                {
                    *defined = Defined { home: to.clone(), part: Arc::clone(part), item_idx };
                }
            }
        }
        let (old, new) = (format!("{}::", from.path()), format!("{}::", to.path()));
        for variable in self.variables.values_mut() {
            if variable.type_text.contains(&old) {
                variable.type_text = variable.type_text.replace(&old, &new);
                variable.relabelled = true;
            }
        }
        self.moved_homes.insert(from.clone(), to.clone());
    }

    fn enter_use(&mut self, leaf: &UseLeaf, cell: u32) {
        match &leaf.binding {
            Binding::Name(name) => {
                self.uses.retain(|line| line.leaf.binding != leaf.binding);
                self.items.retain(|(_, defined), _| defined != name);
            }
            _ => self.uses.retain(|line| line.leaf != *leaf),
        }
        self.uses.push(Use { leaf: leaf.clone(), cell });
    }
}

/// The names that a cell binds itself, which earlier cells therefore need not lend it.
#[derive(Debug, Default)]
pub struct Own {
    names: BTreeSet<(Namespace, String)>,
    uses: BTreeSet<String>,
}

impl Own {
    /// The names that these items bind.
    pub fn of(items: &[Item]) -> Self {
        let mut own = Self::default();
        for item in items {
            own.names.extend(item.defines.iter().cloned());
            if let ItemForm::Use(leaves) = &item.form {
                own.uses.extend(leaves.iter().filter_map(|leaf| match &leaf.binding {
                    Binding::Name(name) => Some(name.clone()),
                    _ => None,
                }));
            }
        }
        own
    }

    fn binds(&self, space: Namespace, name: &str) -> bool {
        self.uses.contains(name) || self.names.contains(&(space, name.to_owned()))
    }

    fn binds_anything(&self, name: &str) -> bool {
        use Namespace::{Macro, Type, Value};
        [Type, Value, Macro].into_iter().any(|space| self.binds(space, name))
    }
}
