//! From a type as the compiler shows it to a type that another cell can write.
//!
//! The compiler shows paths of the crate being compiled without the crate, `Vec<Tile>`; another cell
//! must say `Vec<cell_ab12::Tile>`. Closures, functions as values and `impl Trait` have no name at
//! all, and neither have types of crates that a cell cannot reach.

use quote::ToTokens;
use syn::visit_mut::{self, VisitMut};

/// Writes a type for use in other cells, or says that it has no name there.
///
/// `reach` tells where the first segment of a path leads.
pub fn nameable(shown: &str, crate_name: &str, reach: &dyn Fn(&str) -> Reach) -> Option<String> {
    let mut ty: syn::Type = syn::parse_str(shown).ok()?;
    let mut namer = Namer { crate_name, reach, nameless: false };
    namer.visit_type_mut(&mut ty);
    (!namer.nameless).then(|| spaced(ty.to_token_stream()))
}

/// Where the first segment of a path leads.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Reach {
    /// Into the crate being compiled.
    Here,
    /// Into a crate that cells can name.
    Crate,
    /// Nowhere that a cell can go.
    Nowhere,
}

struct Namer<'a> {
    crate_name: &'a str,
    reach: &'a dyn Fn(&str) -> Reach,
    nameless: bool,
}

const PRIMITIVE: [&str; 17] = [
    "bool", "char", "str", "u8", "u16", "u32", "u64", "u128", "usize", "i8", "i16", "i32", "i64",
    "i128", "isize", "f32", "f64",
];

impl VisitMut for Namer<'_> {
    fn visit_path_mut(&mut self, path: &mut syn::Path) {
        visit_mut::visit_path_mut(self, path);
        let Some(first) = path.segments.first() else { return };
        let name = first.ident.to_string();
        if path.segments.len() == 1 && PRIMITIVE.contains(&name.as_str()) {
            return;
        }
        match (self.reach)(&name) {
            Reach::Crate if path.segments.len() > 1 => return,
            Reach::Here => {}
            _ => {
                self.nameless = true;
                return;
            }
        }
        let home = syn::PathSegment {
            ident: syn::Ident::new(self.crate_name, first.ident.span()),
            arguments: syn::PathArguments::None,
        };
        path.segments.insert(0, home);
    }

    fn visit_type_mut(&mut self, ty: &mut syn::Type) {
        if matches!(
            ty,
            syn::Type::ImplTrait(_)
                | syn::Type::Infer(_)
                | syn::Type::Macro(_)
                | syn::Type::Verbatim(_)
        ) {
            self.nameless = true;
        }
        visit_mut::visit_type_mut(self, ty);
    }
}

fn spaced(tokens: proc_macro2::TokenStream) -> String {
    tokens
        .to_string()
        .replace(" :: ", "::")
        .replace(" < ", "<")
        .replace(" >", ">")
        .replace("& ", "&")
}

/// A type as a person would read it: without the paths that lead to well-known names.
pub fn readable(type_text: &str) -> String {
    let mut text = String::new();
    let mut word = String::new();
    let mut chars = type_text.chars().peekable();
    while let Some(c) = chars.next() {
        if c.is_alphanumeric() || c == '_' {
            word.push(c);
        } else if c == ':' && chars.peek() == Some(&':') && !word.is_empty() {
            chars.next();
            word.clear();
        } else {
            text.push_str(&std::mem::take(&mut word));
            text.push(c);
        }
    }
    text.push_str(&word);
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    fn named(shown: &str) -> Option<String> {
        let reach = |name: &str| match name {
            "std" | "semiaxis" | "polars" | "cell_1" => Reach::Crate,
            "Tile" | "shapes" | "Shape" => Reach::Here,
            _ => Reach::Nowhere,
        };
        nameable(shown, "cell_2", &reach).map(|text| text.replace(' ', ""))
    }

    #[test]
    fn types_of_the_cell_itself_get_its_crate() {
        assert_eq!(named("std::vec::Vec<Tile>").as_deref(), Some("std::vec::Vec<cell_2::Tile>"));
        assert_eq!(named("shapes::Circle<f64>").as_deref(), Some("cell_2::shapes::Circle<f64>"));
        assert_eq!(named("cell_1::Tile").as_deref(), Some("cell_1::Tile"));
        assert_eq!(
            named("std::boxed::Box<dyn Shape>").as_deref(),
            Some("std::boxed::Box<dyncell_2::Shape>")
        );
        assert_eq!(
            named("std::boxed::Box<dyn std::ops::Fn(f64) -> Tile>").as_deref(),
            Some("std::boxed::Box<dynstd::ops::Fn(f64)->cell_2::Tile>")
        );
        assert_eq!(
            named("(f64, [u8; 3], &'static str)").as_deref(),
            Some("(f64,[u8;3],&'staticstr)")
        );
        assert_eq!(named("()").as_deref(), Some("()"));
    }

    #[test]
    fn what_has_no_name_is_refused() {
        assert_eq!(named("{closure@cell.rs:1:2: 1:5}"), None);
        assert_eq!(named("fn(f64) -> f64 {square}"), None);
        assert_eq!(named("impl std::iter::Iterator<Item = u8>"), None);
        assert_eq!(named("std::vec::Vec<_>"), None);
        assert_eq!(named("far_away::Thing"), None);
    }

    #[test]
    fn people_read_types_without_paths() {
        assert_eq!(readable("std::vec::Vec<cell_2::Tile>"), "Vec<Tile>");
        assert_eq!(readable("&'static str"), "&'static str");
        assert_eq!(readable("(polars::prelude::DataFrame, f64)"), "(DataFrame, f64)");
    }
}
