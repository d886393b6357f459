//! Making the index of preloaded names from sources.
//!
//! The prelude's own sources are read whole; of the crates below it only the methods of the few
//! types that analysts hold in variables. Modules are followed from `lib.rs` as the compiler does,
//! so that what a feature leaves out is not offered. What macros generate is not seen.

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

use super::error::SetupError;
use super::syntax::{
    attributes, collect_uses, documentation, has_attribute, has_hidden_docs, is_public,
    path_attribute, source_text, source_text_without, type_name,
};
use crate::help::index::{Entry, EntryKind, Index};

/// The crate whose exported macros are in every cell.
const PRELUDE: &str = "semiaxis";

/// A crate to be read.
pub struct Source<'a> {
    /// The crate's name.
    pub name: &'a str,
    /// Its `lib.rs`.
    pub root: PathBuf,
    /// The features that it was compiled with.
    pub features: &'a [String],
    /// The types whose members are wanted, of a crate below the prelude.
    pub types: &'a [&'a str],
}

/// Reads sources into one index; the first is the prelude, whose module `prelude` says what a cell
/// can name without a `use`.
///
/// # Errors
/// A file cannot be read or is not Rust.
pub fn read_sources(sources: &[Source<'_>]) -> Result<Index, SetupError> {
    let mut entries = Vec::new();
    let mut preloaded = Vec::new();
    for (place, source) in sources.iter().enumerate() {
        let mut reader =
            Reader { source, entries: Vec::new(), uses: Vec::new(), implemented: Vec::new() };
        let folder = source.root.parent().unwrap_or(Path::new("")).to_owned();
        reader.file(&source.root, &folder, false)?;
        reader.add_implemented();
        if place == 0 {
            preloaded = std::mem::take(&mut reader.uses);
        } else {
            reader.keep_wanted(&preloaded);
        }
        entries.append(&mut reader.entries);
    }
    mark_preloaded(&mut entries, preloaded);
    Ok(Index { entries })
}

fn mark_preloaded(entries: &mut Vec<Entry>, uses: Vec<(String, String)>) {
    let mut known = BTreeSet::new();
    for entry in entries.iter_mut().filter(|entry| entry.owner.is_none()) {
        let exported_macro = entry.kind == EntryKind::Macro && entry.origin == PRELUDE;
        if exported_macro || uses.iter().any(|(name, _)| *name == entry.name) {
            entry.preloaded = true;
            known.insert(entry.name.clone());
        }
    }
    for (name, path) in uses {
        if name != "*" && name != "_" && known.insert(name.clone()) {
            let origin = path.split("::").next().unwrap_or_default().to_owned();
            entries.push(Entry {
                name,
                kind: EntryKind::Foreign,
                signature: format!("use {path}"),
                docs: String::new(),
                owner: None,
                origin,
                preloaded: true,
            });
        }
    }
}

struct Reader<'a> {
    source: &'a Source<'a>,
    entries: Vec<Entry>,
    /// Name and full path of everything that a module called `prelude` re-exports.
    uses: Vec<(String, String)>,
    /// Trait and type of every trait implementation.
    implemented: Vec<(String, String)>,
}

impl Reader<'_> {
    fn file(&mut self, file: &Path, folder: &Path, is_prelude: bool) -> Result<(), SetupError> {
        let text = fs::read_to_string(file).map_err(SetupError::files("read", file))?;
        let parsed = syn::parse_file(&text).map_err(|error| SetupError::Malformed {
            path: file.to_owned(),
            message: error.to_string(),
        })?;
        self.items(&parsed.items, folder, is_prelude)
    }

    fn items(
        &mut self,
        items: &[syn::Item],
        folder: &Path,
        is_prelude: bool,
    ) -> Result<(), SetupError> {
        for item in items {
            if !self.is_compiled(attributes(item)) {
                continue;
            }
            match item {
                syn::Item::Mod(module) => self.module(module, folder)?,
                syn::Item::Use(item) if is_prelude && is_public(&item.vis) => {
                    collect_uses(&item.tree, String::new(), &mut self.uses);
                }
                syn::Item::Impl(block) => self.implementation(block),
                _ => self.item(item),
            }
        }
        Ok(())
    }

    fn module(&mut self, module: &syn::ItemMod, folder: &Path) -> Result<(), SetupError> {
        let name = module.ident.to_string();
        if is_public(&module.vis) {
            self.add(&name, EntryKind::Module, format!("mod {name}"), &module.attrs, None);
        }
        let is_prelude = name == "prelude";
        let below = folder.join(&name);
        if let Some((_, items)) = &module.content {
            return self.items(items, &below, is_prelude);
        }
        let named = path_attribute(&module.attrs).map(|path| folder.join(path));
        let candidates =
            [named, Some(folder.join(format!("{name}.rs"))), Some(below.join("mod.rs"))];
        match candidates.into_iter().flatten().find(|file| file.is_file()) {
            Some(file) => self.file(&file, &below, is_prelude),
            // The compiler built it, so a macro or an unusual path is at work; nothing is lost but
            // suggestions.
            None => Ok(()),
        }
    }

    fn item(&mut self, item: &syn::Item) {
        match item {
            syn::Item::Fn(item) if is_public(&item.vis) => {
                let text = source_text(&item.sig);
                self.add(&item.sig.ident.to_string(), EntryKind::Function, text, &item.attrs, None);
            }
            syn::Item::Struct(item) if is_public(&item.vis) => self.structure(item),
            syn::Item::Enum(item) if is_public(&item.vis) => self.enumeration(item),
            syn::Item::Trait(item) if is_public(&item.vis) => self.trait_(item),
            syn::Item::Type(item) if is_public(&item.vis) => {
                let text = source_text_without(item, &item.attrs);
                self.add(&item.ident.to_string(), EntryKind::TypeAlias, text, &item.attrs, None);
            }
            syn::Item::Const(item) if is_public(&item.vis) => {
                let text = format!("const {}: {}", item.ident, source_text(&item.ty));
                self.add(&item.ident.to_string(), EntryKind::Const, text, &item.attrs, None);
            }
            syn::Item::Macro(item) if has_attribute(&item.attrs, "macro_export") => {
                if let Some(name) = &item.ident {
                    let text = format!("macro {name}!");
                    self.add(&name.to_string(), EntryKind::Macro, text, &item.attrs, None);
                }
            }
            _ => {}
        }
    }

    fn structure(&mut self, item: &syn::ItemStruct) {
        let name = item.ident.to_string();
        let text = format!("struct {name}{}", source_text(&item.generics));
        self.add(&name, EntryKind::Struct, text, &item.attrs, None);
        for field in item.fields.iter().filter(|field| is_public(&field.vis)) {
            if let Some(ident) = &field.ident {
                let text = format!("{ident}: {}", source_text(&field.ty));
                self.add(&ident.to_string(), EntryKind::Field, text, &field.attrs, Some(&name));
            }
        }
    }

    fn enumeration(&mut self, item: &syn::ItemEnum) {
        let name = item.ident.to_string();
        let variants: Vec<String> = item.variants.iter().map(|v| v.ident.to_string()).collect();
        let text =
            format!("enum {name}{} {{ {} }}", source_text(&item.generics), variants.join(", "));
        self.add(&name, EntryKind::Enum, text, &item.attrs, None);
        for variant in &item.variants {
            let text = format!("{name}::{}", source_text_without(variant, &variant.attrs));
            let ident = variant.ident.to_string();
            self.add(&ident, EntryKind::Variant, text, &variant.attrs, Some(&name));
        }
    }

    fn trait_(&mut self, item: &syn::ItemTrait) {
        let name = item.ident.to_string();
        let text = format!("trait {name}{}", source_text(&item.generics));
        self.add(&name, EntryKind::Trait, text, &item.attrs, None);
        for member in &item.items {
            if let syn::TraitItem::Fn(function) = member {
                self.function(&function.sig, &function.attrs, &name);
            }
        }
    }

    fn implementation(&mut self, block: &syn::ItemImpl) {
        let Some(owner) = type_name(&block.self_ty) else { return };
        if let Some((_, path, _)) = &block.trait_ {
            let name = path.segments.last().map(|segment| segment.ident.to_string());
            // What a type dereferences to lends it its members, as a trait does.
            let target = block.items.iter().find_map(|member| match member {
                syn::ImplItem::Type(item) if item.ident == "Target" => type_name(&item.ty),
                _ => None,
            });
            let name = if name.as_deref() == Some("Deref") { target } else { name };
            self.implemented.extend(name.map(|name| (name, owner)));
            return;
        }
        for member in &block.items {
            match member {
                syn::ImplItem::Fn(function)
                    if is_public(&function.vis) && self.is_compiled(&function.attrs) =>
                {
                    self.function(&function.sig, &function.attrs, &owner);
                }
                syn::ImplItem::Const(item) if is_public(&item.vis) => {
                    let text = format!("const {}: {}", item.ident, source_text(&item.ty));
                    let name = item.ident.to_string();
                    self.add(&name, EntryKind::Const, text, &item.attrs, Some(&owner));
                }
                _ => {}
            }
        }
    }

    fn function(&mut self, sig: &syn::Signature, attrs: &[syn::Attribute], owner: &str) {
        let kind = match sig.receiver() {
            Some(_) => EntryKind::Method,
            None => EntryKind::AssociatedFunction,
        };
        self.add(&sig.ident.to_string(), kind, source_text(sig), attrs, Some(owner));
    }

    /// A trait's functions are also members of the types that implement it.
    fn add_implemented(&mut self) {
        let mut more = Vec::new();
        for (name, owner) in &self.implemented {
            let of_trait = self.entries.iter().filter(|entry| entry.owner.as_ref() == Some(name));
            more.extend(
                of_trait.map(|entry| Entry { owner: Some(owner.clone()), ..entry.clone() }),
            );
        }
        self.entries.extend(more);
    }

    /// Of another crate, members of the wanted types stay, and free names that the prelude hands on.
    fn keep_wanted(&mut self, preloaded: &[(String, String)]) {
        let types = self.source.types;
        self.entries.retain(|entry| match &entry.owner {
            Some(owner) => types.contains(&owner.as_str()),
            None => {
                entry.kind != EntryKind::Module
                    && preloaded
                        .iter()
                        .any(|(name, path)| *name == entry.name && !path.starts_with("crate::"))
            }
        });
    }

    fn add(
        &mut self,
        name: &str,
        kind: EntryKind,
        signature: String,
        attrs: &[syn::Attribute],
        owner: Option<&str>,
    ) {
        // A leading underscore is how a crate says that a public name is not for its users.
        let hidden = name.starts_with('_') || has_hidden_docs(attrs);
        if hidden || has_attribute(attrs, "deprecated") {
            return;
        }
        let mut docs = documentation(attrs);
        if !self.source.types.is_empty() {
            // Of other crates only the first paragraph is kept: the index is read at every start.
            docs = docs.split("\n\n").next().unwrap_or_default().to_owned();
        }
        self.entries.push(Entry {
            name: name.to_owned(),
            kind,
            signature,
            docs,
            owner: owner.map(str::to_owned),
            origin: self.source.name.to_owned(),
            preloaded: false,
        });
    }

    /// Whether the features (and not being a test) let the compiler see what carries the attributes.
    fn is_compiled(&self, attrs: &[syn::Attribute]) -> bool {
        attrs
            .iter()
            .filter(|attr| attr.path().is_ident("cfg"))
            .all(|attr| attr.parse_args::<syn::Meta>().map_or(true, |meta| self.holds(&meta)))
    }

    fn holds(&self, condition: &syn::Meta) -> bool {
        use syn::punctuated::Punctuated;
        let parts = |list: &syn::MetaList| {
            list.parse_args_with(Punctuated::<syn::Meta, syn::Token![,]>::parse_terminated)
                .map(|parts| parts.into_iter().collect::<Vec<_>>())
                .unwrap_or_default()
        };
        match condition {
            syn::Meta::Path(path) => !path.is_ident("test") && !path.is_ident("doc"),
            syn::Meta::NameValue(pair) if pair.path.is_ident("feature") => match &pair.value {
                syn::Expr::Lit(syn::ExprLit { lit: syn::Lit::Str(name), .. }) => {
                    self.source.features.contains(&name.value())
                }
                _ => true,
            },
            syn::Meta::NameValue(_) => true,
            syn::Meta::List(list) if list.path.is_ident("all") => {
                parts(list).iter().all(|part| self.holds(part))
            }
            syn::Meta::List(list) if list.path.is_ident("any") => {
                parts(list).iter().any(|part| self.holds(part))
            }
            syn::Meta::List(list) if list.path.is_ident("not") => {
                parts(list).iter().all(|part| !self.holds(part))
            }
            syn::Meta::List(_) => true,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn written(files: &[(&str, &str)]) -> tempfile::TempDir {
        let folder = tempfile::tempdir().unwrap();
        for (name, text) in files {
            let file = folder.path().join(name);
            fs::create_dir_all(file.parent().unwrap()).unwrap();
            fs::write(file, text).unwrap();
        }
        folder
    }

    fn index(files: &[(&str, &str)], features: &[String], types: &[&str]) -> Index {
        let folder = written(files);
        let root = folder.path().join("lib.rs");
        read_sources(&[Source { name: "semiaxis", root, features, types }]).unwrap()
    }

    fn find<'a>(index: &'a Index, name: &str, owner: Option<&str>) -> Option<&'a Entry> {
        index.entries.iter().find(|entry| entry.name == name && entry.owner.as_deref() == owner)
    }

    #[test]
    fn names_carry_signature_documentation_and_owner() {
        let kiln = "/// A kiln.\n///\n/// It burns.\npub struct Kiln<T> { /// Degrees.\n pub heat: T, hidden: u8 }\n\
            impl<T> Kiln<T> {\n /// Fires it.\n pub fn fire(\n  &mut self,\n  hours: f64,\n ) -> Result<T> { self.burn(hours) }\n\
            fn private(&self) {}\n pub fn new() -> Self { loop {} } }\n\
            pub enum Colour { Red, Grey(u8) }\n\
            pub trait Weigh { /// In grams.\n fn weigh(&self) -> f64; }\n\
            impl Weigh for Vec<Tile> {}\n";
        let files = [
            ("lib.rs", "mod kiln;\npub mod prelude;\n#[cfg(test)] mod tests;"),
            ("kiln/mod.rs", kiln),
            (
                "prelude.rs",
                "pub use crate::kiln::{Kiln, Colour as Tint};\npub use polars::prelude::DataFrame;",
            ),
        ];
        let index = index(&files, &[], &[]);
        let fire = find(&index, "fire", Some("Kiln")).unwrap();
        assert_eq!(fire.signature, "fn fire(&mut self, hours: f64) -> Result<T>");
        assert_eq!((fire.kind, fire.docs.as_str()), (EntryKind::Method, "Fires it."));
        assert_eq!(find(&index, "heat", Some("Kiln")).unwrap().signature, "heat: T");
        assert!(find(&index, "hidden", Some("Kiln")).is_none());
        assert!(find(&index, "private", Some("Kiln")).is_none());
        assert_eq!(find(&index, "new", Some("Kiln")).unwrap().kind, EntryKind::AssociatedFunction);
        let kiln = find(&index, "Kiln", None).unwrap();
        assert!(kiln.preloaded);
        assert_eq!(kiln.docs, "A kiln.\n\nIt burns.");
        assert_eq!(find(&index, "Grey", Some("Colour")).unwrap().signature, "Colour::Grey(u8)");
        assert!(!find(&index, "Colour", None).unwrap().preloaded);
        assert_eq!(find(&index, "weigh", Some("Vec")).unwrap().docs, "In grams.");
        let frame = find(&index, "DataFrame", None).unwrap();
        assert_eq!((frame.kind, frame.origin.as_str()), (EntryKind::Foreign, "polars"));
    }

    #[test]
    fn a_type_has_the_members_of_what_it_dereferences_to() {
        let text = "pub struct Outer; pub struct Inner;\n\
            impl Inner { pub fn weigh(&self) -> f64 { 0.0 } }\n\
            impl std::ops::Deref for Outer { type Target = Inner; fn deref(&self) -> &Inner { loop {} } }";
        let index = index(&[("lib.rs", text)], &[], &[]);
        assert!(find(&index, "weigh", Some("Outer")).is_some());
    }

    #[test]
    fn features_and_wanted_types_bound_what_is_read() {
        let text = "#[cfg(feature = \"lazy\")] mod lazy;\n#[cfg(not(feature = \"lazy\"))] mod never;\n\
            impl Frame { pub fn height(&self) -> usize { 0 }\n #[cfg(feature = \"other\")] pub fn gone(&self) {} }\n\
            impl Other { pub fn skipped(&self) {} }\npub fn free() {}";
        let files =
            [("lib.rs", text), ("lazy.rs", "impl Frame { pub fn lazy(self) -> Lazy { loop {} } }")];
        let folder = written(&files);
        let prelude =
            written(&[("lib.rs", "pub mod prelude { pub use frames::{self, free, Frame}; }")]);
        let features = ["lazy".to_owned()];
        let source = |name, folder: &tempfile::TempDir, types| Source {
            name,
            root: folder.path().join("lib.rs"),
            features: &features,
            types,
        };
        let index = read_sources(&[
            source("semiaxis", &prelude, &[]),
            source("frames", &folder, &["Frame"]),
        ])
        .unwrap();
        let names: Vec<(&str, bool)> =
            index.entries.iter().map(|entry| (entry.name.as_str(), entry.preloaded)).collect();
        let expected = [
            ("prelude", false),
            ("lazy", false),
            ("height", false),
            ("free", true),
            ("frames", true),
            ("Frame", true),
        ];
        assert_eq!(names, expected);
    }
}
