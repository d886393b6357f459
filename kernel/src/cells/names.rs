//! Which names a cell defines and which it takes from elsewhere, from its text alone.
//!
//! Only the compiler resolves names, so this leans to silence: a name that is bound anywhere inside a
//! statement counts as the statement's own, fields and methods are no names, and whoever asks is
//! expected to care only for names that some other cell defines.

use std::collections::BTreeSet;

use proc_macro2::{TokenStream, TokenTree};
use quote::ToTokens;
use syn::visit::{self, Visit};

use super::header;
use super::parse;

/// The names of one cell.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Names {
    /// Variables that it declares at its top level.
    pub variables: BTreeSet<String>,
    /// Items that it defines.
    pub items: BTreeSet<String>,
    /// Names that its statements take from elsewhere.
    pub uses: BTreeSet<String>,
    /// Names that its items take from elsewhere; variables are not among what they can see.
    pub item_uses: BTreeSet<String>,
}

/// The bytes of a cell's header; 0 where there is none, or none that can be read.
pub fn header_length(cell: &str) -> usize {
    header::read(cell).map_or(0, |headed| headed.body_start)
}

/// The crates that a cell's header asks for, as it writes them.
pub fn dependencies(cell: &str) -> Vec<String> {
    let headed = header::read(cell).map(|headed| headed.header.dependencies).unwrap_or_default();
    headed.into_iter().map(|(name, requirement)| format!("{name} = {requirement}")).collect()
}

/// The names of a cell; `None` if it does not parse.
pub fn names(cell: &str) -> Option<Names> {
    let start = header_length(cell);
    let parsed = parse::parse(cell, start)?;
    let statements =
        syn::parse::Parser::parse_str(syn::Block::parse_within, &cell[start..]).ok()?;
    let mut names = Names::default();
    for item in &parsed.items {
        names.items.extend(item.defines.iter().map(|(_, name)| name.clone()));
    }
    for statement in &statements {
        let mut bound = Bound::default();
        let mut used = BTreeSet::new();
        match statement {
            syn::Stmt::Item(item) => {
                bound.visit_item(item);
                gather(item.to_token_stream(), false, &mut used);
                names.item_uses.extend(used.difference(&bound.0).cloned());
                continue;
            }
            syn::Stmt::Local(local) => {
                // What the pattern binds is bound from the next statement on.
                if let Some(init) = &local.init {
                    bound.visit_expr(&init.expr);
                    gather(init.expr.to_token_stream(), false, &mut used);
                }
                let mut declared = Bound::default();
                declared.visit_pat(&local.pat);
                note(&mut names, used, &bound.0);
                names.variables.extend(declared.0);
                continue;
            }
            other => {
                bound.visit_stmt(other);
                gather(other.to_token_stream(), false, &mut used);
            }
        }
        note(&mut names, used, &bound.0);
    }
    let own = names.items.clone();
    names.uses.retain(|name| !own.contains(name));
    names.item_uses.retain(|name| !own.contains(name));
    Some(names)
}

fn note(names: &mut Names, used: BTreeSet<String>, bound: &BTreeSet<String>) {
    for name in used {
        if !bound.contains(&name) && !names.variables.contains(&name) {
            names.uses.insert(name);
        }
    }
}

/// Every name that a pattern binds inside a node.
#[derive(Default)]
struct Bound(BTreeSet<String>);

impl<'ast> Visit<'ast> for Bound {
    fn visit_pat_ident(&mut self, pattern: &'ast syn::PatIdent) {
        // A capital letter begins the name of a constant or variant, which binds nothing.
        let name = plain(&pattern.ident);
        if !name.starts_with(char::is_uppercase) {
            self.0.insert(name);
        }
        visit::visit_pat_ident(self, pattern);
    }

    fn visit_item_fn(&mut self, item: &'ast syn::ItemFn) {
        self.0.insert(plain(&item.sig.ident));
        visit::visit_item_fn(self, item);
    }
}

fn plain(name: &syn::Ident) -> String {
    name.to_string().trim_start_matches("r#").to_owned()
}

/// Identifiers that stand where a variable, function or type can stand.
fn gather(tokens: TokenStream, in_macro: bool, used: &mut BTreeSet<String>) {
    let tokens: Vec<TokenTree> = tokens.into_iter().collect();
    let sign = |idx: Option<usize>| match idx.and_then(|idx| tokens.get(idx)) {
        Some(TokenTree::Punct(sign)) => Some(sign.as_char()),
        _ => None,
    };
    for (idx, token) in tokens.iter().enumerate() {
        match token {
            TokenTree::Ident(name) => {
                let (before, earlier) = (sign(idx.checked_sub(1)), sign(idx.checked_sub(2)));
                let (after, later) = (sign(Some(idx + 1)), sign(Some(idx + 2)));
                let is_part = (before == Some('.') && earlier != Some('.'))
                    || (before == Some(':') && earlier == Some(':'));
                let is_field = after == Some(':') && later != Some(':');
                if !is_part && !is_field {
                    used.insert(plain(name));
                }
            }
            TokenTree::Group(group) => {
                let called = sign(idx.checked_sub(1)) == Some('!');
                gather(group.stream(), in_macro || called, used);
            }
            TokenTree::Literal(literal) if in_macro => captures(&literal.to_string(), used),
            _ => {}
        }
    }
}

/// Names that a format string takes from around it: `{name}`, `{name:.3}`, `{:width$}`.
fn captures(literal: &str, used: &mut BTreeSet<String>) {
    let mut rest = literal;
    while let Some(at) = rest.find('{') {
        rest = &rest[at + 1..];
        if let Some(escaped) = rest.strip_prefix('{') {
            rest = escaped;
            continue;
        }
        let inside = &rest[..rest.find('}').unwrap_or(rest.len())];
        let (name, spec) = inside.split_once(':').unwrap_or((inside, ""));
        let is_name = |word: &str| {
            word.starts_with(|c: char| c.is_alphabetic() || c == '_')
                && word.chars().all(|c| c.is_alphanumeric() || c == '_')
        };
        if is_name(name) {
            used.insert(name.to_owned());
        }
        for part in spec.split_inclusive('$').filter_map(|part| part.strip_suffix('$')) {
            let from = part.rfind(|c: char| !(c.is_alphanumeric() || c == '_'));
            let word = &part[from.map_or(0, |at| at + 1)..];
            if is_name(word) {
                used.insert(word.to_owned());
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn uses(cell: &str) -> Vec<String> {
        let uses = names(cell).unwrap().uses;
        // Words of the language are in it, too; no cell defines one.
        uses.into_iter().filter(|name| syn::parse_str::<syn::Ident>(name).is_ok()).collect()
    }

    #[test]
    fn names_from_elsewhere_are_found_and_own_ones_left_out() {
        assert_eq!(uses("let y = x + 1; y"), ["x"]);
        assert_eq!(uses("let x = x + 1;"), ["x"]);
        assert_eq!(
            uses("rows.iter().map(|row| row.len() + n).sum::<usize>()"),
            ["n", "rows", "usize"]
        );
        assert_eq!(
            uses("println!(\"{a} {b:.2} {:>w$} {{c}}\", d.e);"),
            ["a", "b", "d", "println", "w"]
        );
        assert_eq!(uses("Tile { size: s, kiln }"), ["Tile", "kiln", "s"]);
        assert_eq!(uses("for (k, v) in pairs { f(k, v) }"), ["f", "pairs"].map(str::to_owned));
        assert_eq!(
            uses("match x { Some(y) => y, None => 0..z }"),
            ["None", "Some", "x", "z"].map(str::to_owned)
        );
        assert_eq!(uses("\"{no}\""), Vec::<String>::new());
        let found = names(
            "struct Tile { size: f64 }\nfn area(t: &Tile) -> f64 { scale(t.size) }\nlet t = 1;",
        )
        .unwrap();
        assert_eq!(found.items.into_iter().collect::<Vec<_>>(), ["Tile", "area"]);
        assert!(found.item_uses.contains("scale") && !found.item_uses.contains("Tile"));
        assert_eq!(found.variables.into_iter().collect::<Vec<_>>(), ["t"]);
        assert_eq!(names("let = ;"), None);
        assert_eq!(uses("---\n[cell]\nseed = 1\n---\nx"), ["x"]);
    }
}
