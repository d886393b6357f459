//! The index of names that cells find preloaded: what completion offers and inspection explains.
//!
//! It is made from the sources when a kit is put together, and read back by the kernel. Inference
//! of types is not its business: a method is found under the name of the type that owns it.

use std::fs;
use std::io;
use std::path::Path;

use serde::{Deserialize, Serialize};

/// All names, in the order of their sources.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Index {
    /// The names.
    pub entries: Vec<Entry>,
}

/// One public name.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Entry {
    /// The name.
    pub name: String,
    /// What it is.
    pub kind: EntryKind,
    /// Its declaration without its body.
    pub signature: String,
    /// Its documentation comment as Markdown, empty if it has none.
    #[serde(default, skip_serializing_if = "String::is_empty")]
    pub docs: String,
    /// The type or trait that it belongs to.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub owner: Option<String>,
    /// The crate that it comes from.
    pub origin: String,
    /// Whether a cell can name it without a `use`.
    #[serde(default)]
    pub preloaded: bool,
}

/// What a name stands for.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum EntryKind {
    /// A free function.
    Function,
    /// A struct or union.
    Struct,
    /// A public field of a struct.
    Field,
    /// An enum.
    Enum,
    /// A variant of an enum.
    Variant,
    /// A trait.
    Trait,
    /// A function with a receiver.
    Method,
    /// A function of a type without a receiver.
    AssociatedFunction,
    /// A constant, free or of a type.
    Const,
    /// A type alias.
    TypeAlias,
    /// A macro by example.
    Macro,
    /// A module.
    Module,
    /// A name that another crate defines.
    Foreign,
}

impl EntryKind {
    /// The word for it, as a client shows it beside a completion.
    pub fn as_str(self) -> &'static str {
        match self {
            EntryKind::Function | EntryKind::AssociatedFunction => "function",
            EntryKind::Struct => "struct",
            EntryKind::Field => "field",
            EntryKind::Enum => "enum",
            EntryKind::Variant => "variant",
            EntryKind::Trait => "trait",
            EntryKind::Method => "method",
            EntryKind::Const => "const",
            EntryKind::TypeAlias => "type",
            EntryKind::Macro => "macro",
            EntryKind::Module => "module",
            EntryKind::Foreign => "name",
        }
    }
}

impl Index {
    /// Reads the index of a kit.
    ///
    /// # Errors
    /// The file cannot be read or is not such an index.
    pub fn load(path: &Path) -> io::Result<Self> {
        Ok(serde_json::from_slice(&fs::read(path)?)?)
    }

    /// What a cell can name without a `use`.
    pub fn preloaded(&self) -> impl Iterator<Item = &Entry> {
        self.entries.iter().filter(|entry| entry.preloaded)
    }

    /// What belongs to a type or trait.
    pub fn members<'a>(&'a self, owner: &'a str) -> impl Iterator<Item = &'a Entry> {
        self.entries.iter().filter(move |entry| entry.owner.as_deref() == Some(owner))
    }
}
