//! One view of every name that help knows, wherever it is defined.

use super::index::{Entry, EntryKind, Index};
use super::types::canonical;
use crate::cells::types::{ItemInfo, Scope};

/// A name with what is to be said about it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Word {
    /// The name.
    pub name: String,
    /// What it is, in one word.
    pub kind: &'static str,
    /// Its declaration, or its type if it is a variable.
    pub signature: String,
    /// Its documentation as Markdown.
    pub docs: String,
    /// Where it comes from, as a phrase.
    pub from: String,
}

/// The keywords of the 2024 edition that begin or join what a cell can hold (The Rust Reference,
/// "Keywords").
const KEYWORDS: [&str; 37] = [
    "as", "async", "await", "break", "const", "continue", "crate", "dyn", "else", "enum", "extern",
    "false", "fn", "for", "if", "impl", "in", "let", "loop", "match", "mod", "move", "mut", "pub",
    "ref", "return", "self", "Self", "static", "struct", "super", "trait", "true", "type",
    "unsafe", "use", "while",
];

/// What the standard library puts into every scope and cells use most, with its kind.
const STANDARD: [(&str, &str, &str); 33] = [
    ("Option", "enum", "enum Option<T> { None, Some(T) }"),
    ("Some", "variant", "Option::Some(T)"),
    ("None", "variant", "Option::None"),
    ("Ok", "variant", "Result::Ok(T)"),
    ("Err", "variant", "Result::Err(E)"),
    ("Vec", "struct", "struct Vec<T>"),
    ("String", "struct", "struct String"),
    ("Box", "struct", "struct Box<T>"),
    ("Iterator", "trait", "trait Iterator"),
    ("ToString", "trait", "trait ToString"),
    ("Default", "trait", "trait Default"),
    ("Clone", "trait", "trait Clone"),
    ("Copy", "trait", "trait Copy"),
    ("From", "trait", "trait From<T>"),
    ("Into", "trait", "trait Into<T>"),
    ("drop", "function", "fn drop<T>(value: T)"),
    ("f64", "type", "f64"),
    ("f32", "type", "f32"),
    ("i64", "type", "i64"),
    ("i32", "type", "i32"),
    ("u64", "type", "u64"),
    ("u32", "type", "u32"),
    ("usize", "type", "usize"),
    ("bool", "type", "bool"),
    ("char", "type", "char"),
    ("str", "type", "str"),
    ("println!", "macro", "println!(\"…\", …)"),
    ("eprintln!", "macro", "eprintln!(\"…\", …)"),
    ("format!", "macro", "format!(\"…\", …) -> String"),
    ("vec!", "macro", "vec![…] -> Vec<T>"),
    ("assert!", "macro", "assert!(condition)"),
    ("assert_eq!", "macro", "assert_eq!(left, right)"),
    ("dbg!", "macro", "dbg!(value)"),
];

/// The variables on the shelf.
pub fn variables(scope: &Scope) -> impl Iterator<Item = Word> + '_ {
    scope.variables.iter().map(|variable| Word {
        name: variable.name.clone(),
        kind: "variable",
        signature: format!(
            "let {}{}: {}",
            if variable.mutable { "mut " } else { "" },
            variable.name,
            variable.type_text
        ),
        docs: String::new(),
        from: format!("made in cell [{}]", variable.cell),
    })
}

/// The items that cells defined.
pub fn items(scope: &Scope) -> impl Iterator<Item = Word> + '_ {
    scope.items.iter().map(|item| Word {
        name: item.name.clone(),
        kind: item.kind.as_str(),
        signature: item.signature.clone(),
        docs: item.docs.clone(),
        from: defined_in(item),
    })
}

/// What the prelude puts into every cell.
pub fn preloaded(index: &Index) -> impl Iterator<Item = Word> + '_ {
    index.preloaded().map(of_entry)
}

/// What belongs to a type or trait, each name once.
pub fn members(owner: &str, scope: &Scope, index: &Index) -> Vec<Word> {
    let owner = canonical(owner);
    let defined = scope.items.iter().filter(|item| item.name == owner).flat_map(|item| {
        item.methods.iter().map(|(name, signature, docs)| Word {
            name: name.clone(),
            kind: if has_receiver(signature) { "method" } else { "function" },
            signature: signature.clone(),
            docs: docs.clone(),
            from: defined_in(item),
        })
    });
    let mut words: Vec<Word> = defined.chain(index.members(owner).map(of_entry)).collect();
    // A method of the type itself hides one of the same name from a trait, and comes first.
    let mut seen = std::collections::BTreeSet::new();
    words.retain(|word| seen.insert(word.name.clone()));
    words
}

/// The names that the language and its standard library put into every cell.
pub fn standard() -> impl Iterator<Item = Word> {
    STANDARD.iter().map(|(name, kind, signature)| Word {
        name: (*name).to_owned(),
        kind,
        signature: (*signature).to_owned(),
        docs: String::new(),
        from: "from the standard library".to_owned(),
    })
}

/// The keywords of the language.
pub fn keywords() -> impl Iterator<Item = Word> {
    KEYWORDS.iter().map(|name| Word {
        name: (*name).to_owned(),
        kind: "keyword",
        signature: (*name).to_owned(),
        docs: String::new(),
        from: "a keyword".to_owned(),
    })
}

/// Whether a function is called on a value.
pub fn has_receiver(signature: &str) -> bool {
    syn::parse_str::<syn::Signature>(signature).is_ok_and(|sig| sig.receiver().is_some())
}

fn defined_in(item: &ItemInfo) -> String {
    format!("defined in cell [{}]", item.cell)
}

fn of_entry(entry: &Entry) -> Word {
    let name = match entry.kind {
        EntryKind::Macro => format!("{}!", entry.name),
        _ => entry.name.clone(),
    };
    let from = match (&entry.owner, entry.origin.as_str()) {
        (Some(owner), origin) => format!("of `{owner}` in {origin}"),
        (None, origin) => format!("from {origin}"),
    };
    Word {
        name,
        kind: entry.kind.as_str(),
        signature: entry.signature.clone(),
        docs: entry.docs.clone(),
        from,
    }
}
