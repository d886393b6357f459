//! Small questions about parsed Rust: attributes, names, documentation, the text it came from.

use syn::spanned::Spanned;

/// The attributes of an item.
pub fn attributes(item: &syn::Item) -> &[syn::Attribute] {
    match item {
        syn::Item::Const(item) => &item.attrs,
        syn::Item::Enum(item) => &item.attrs,
        syn::Item::Fn(item) => &item.attrs,
        syn::Item::Impl(item) => &item.attrs,
        syn::Item::Macro(item) => &item.attrs,
        syn::Item::Mod(item) => &item.attrs,
        syn::Item::Struct(item) => &item.attrs,
        syn::Item::Trait(item) => &item.attrs,
        syn::Item::Type(item) => &item.attrs,
        syn::Item::Use(item) => &item.attrs,
        _ => &[],
    }
}

/// Name and path of everything that a `use` brings.
pub fn collect_uses(tree: &syn::UseTree, before: String, uses: &mut Vec<(String, String)>) {
    match tree {
        syn::UseTree::Path(path) => {
            collect_uses(&path.tree, format!("{before}{}::", path.ident), uses);
        }
        // `use nalgebra::{self}` names the module itself.
        syn::UseTree::Name(name) if name.ident == "self" => {
            let path = before.trim_end_matches("::").to_owned();
            uses.push((path.rsplit("::").next().unwrap_or_default().to_owned(), path));
        }
        syn::UseTree::Name(name) => {
            uses.push((name.ident.to_string(), format!("{before}{}", name.ident)));
        }
        syn::UseTree::Rename(rename) => {
            uses.push((rename.rename.to_string(), format!("{before}{}", rename.ident)));
        }
        syn::UseTree::Glob(_) => uses.push(("*".to_owned(), format!("{before}*"))),
        syn::UseTree::Group(group) => {
            for tree in &group.items {
                collect_uses(tree, before.clone(), uses);
            }
        }
    }
}

/// Whether everybody can see it.
pub fn is_public(visibility: &syn::Visibility) -> bool {
    matches!(visibility, syn::Visibility::Public(_))
}

/// Whether an attribute of this name is there.
pub fn has_attribute(attrs: &[syn::Attribute], name: &str) -> bool {
    attrs.iter().any(|attr| attr.path().is_ident(name))
}

/// Whether the documentation leaves it out.
pub fn has_hidden_docs(attrs: &[syn::Attribute]) -> bool {
    attrs.iter().any(|attr| match &attr.meta {
        syn::Meta::List(list) => {
            list.path.is_ident("doc") && list.tokens.to_string().contains("hidden")
        }
        _ => false,
    })
}

/// The file that a module names.
pub fn path_attribute(attrs: &[syn::Attribute]) -> Option<String> {
    attrs.iter().filter(|attr| attr.path().is_ident("path")).find_map(string_value)
}

fn string_value(attr: &syn::Attribute) -> Option<String> {
    match &attr.meta {
        syn::Meta::NameValue(pair) => match &pair.value {
            syn::Expr::Lit(syn::ExprLit { lit: syn::Lit::Str(text), .. }) => Some(text.value()),
            _ => None,
        },
        _ => None,
    }
}

/// The documentation comment as written, without the space that follows the slashes.
pub fn documentation(attrs: &[syn::Attribute]) -> String {
    let lines = attrs.iter().filter(|attr| attr.path().is_ident("doc")).filter_map(string_value);
    let lines: Vec<String> =
        lines.map(|line| line.strip_prefix(' ').unwrap_or(&line).to_owned()).collect();
    lines.join("\n").trim_end().to_owned()
}

/// The name of a type without its path and arguments.
pub fn type_name(of: &syn::Type) -> Option<String> {
    match of {
        syn::Type::Path(path) => path.path.segments.last().map(|last| last.ident.to_string()),
        syn::Type::Reference(reference) => type_name(&reference.elem),
        _ => None,
    }
}

/// The text that something was parsed from, on one line.
pub fn source_text(of: &impl Spanned) -> String {
    one_line(&of.span().source_text().unwrap_or_default())
}

/// The text without the attributes and comments in front, the visibility and the final semicolon.
pub fn source_text_without(of: &impl Spanned, attrs: &[syn::Attribute]) -> String {
    let mut text = of.span().source_text().unwrap_or_default();
    for attr in attrs {
        let skipped = attr.span().source_text().unwrap_or_default();
        text = text.trim_start().strip_prefix(&skipped).map(str::to_owned).unwrap_or(text);
    }
    let text = one_line(&text);
    text.trim_start_matches("pub ").trim_end_matches(';').to_owned()
}

fn one_line(text: &str) -> String {
    let code: Vec<&str> = text
        .lines()
        .map(|line| line.trim())
        .filter(|line| !line.starts_with("//"))
        .flat_map(str::split_whitespace)
        .collect();
    code.join(" ").replace("( ", "(").replace(", )", ")").replace(" )", ")")
}
