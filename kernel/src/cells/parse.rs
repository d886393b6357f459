//! A cell's text taken apart: items, statements, final expression.
//!
//! Items are what later cells can name; statements run once. Nothing is rewritten here, but the
//! small edits that the generated text needs are noted: `pub` on items, a check in each loop, the
//! value of an early `return`.

use std::collections::BTreeSet;
use std::ops::Range;

use proc_macro2::{TokenStream, TokenTree};
use quote::ToTokens;
use syn::visit::{self, Visit};

use super::changes::changed;
use super::edits::Edits;
use super::source::Edit;

/// A cell taken apart. All ranges are bytes of the whole cell.
#[derive(Debug, Default)]
pub struct Parsed {
    /// In the order of the text.
    pub items: Vec<Item>,
    /// In the order of the text, without the final expression.
    pub statements: Vec<Statement>,
    /// The final expression, if the cell ends with one.
    pub tail: Option<Statement>,
}

/// An item, which later cells can name.
#[derive(Debug, Clone)]
pub struct Item {
    /// Where it stands, attributes and documentation included.
    pub range: Range<usize>,
    /// In order.
    pub edits: Vec<Edit>,
    /// The names it defines.
    pub defines: Vec<(Namespace, String)>,
    /// Every identifier in it.
    pub mentions: BTreeSet<String>,
    /// What it is, as far as the kernel needs to know.
    pub form: ItemForm,
    /// Its declaration without a body, for help.
    pub signature: String,
    /// Its documentation.
    pub docs: String,
    /// Its text with comments and layout taken out.
    pub tokens: String,
}

/// Rust's three spaces of names.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Namespace {
    /// Types, traits and modules.
    Type,
    /// Functions, constants, statics and constructors.
    Value,
    /// Macros.
    Macro,
}

/// What an item is, as far as the kernel needs to know.
#[derive(Debug, Clone, PartialEq)]
pub enum ItemForm {
    /// A `use` line, flattened.
    Use(Vec<UseLeaf>),
    /// An impl block.
    Impl(ImplBlock),
    /// A trait and the names of its items.
    Trait(BTreeSet<String>),
    /// A static, or statics of a thread.
    Static,
    /// A macro.
    Macro,
    /// A struct, enum or union.
    Data,
    /// A function.
    Function,
    /// A constant.
    Constant,
    /// A module.
    Module,
    /// A type alias.
    Alias,
    /// Anything else.
    Other,
}

/// One name that a `use` line brings in.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct UseLeaf {
    /// The path, `std::fmt::Write`; without the `*` of a glob.
    pub path: String,
    /// How it is bound.
    pub binding: Binding,
}

/// How a `use` line binds a path.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Binding {
    /// Under this name.
    Name(String),
    /// As `_`.
    Nameless,
    /// All names of a module or enum.
    Glob,
}

/// What an impl block is for.
#[derive(Debug, Clone, PartialEq)]
pub struct ImplBlock {
    /// The first segment of the trait's path and the whole path, for a trait's impl.
    pub of_trait: Option<(String, String)>,
    /// The head of the type: the first segment of its path, if it has one.
    pub self_head: Option<String>,
    /// First segments of types that the orphan rule looks at beside the head: arguments of the
    /// trait, and of `Box`, `&`, `&mut`, `Pin` around the type.
    pub other_heads: BTreeSet<String>,
    /// The type and the generics as text.
    pub self_type: String,
    /// Names of its items and where they stand.
    pub members: Vec<(String, Range<usize>)>,
    /// Signatures and documentation of its functions.
    pub methods: Vec<(String, String, String)>,
}

/// A statement, or the final expression.
#[derive(Debug, Clone)]
pub struct Statement {
    /// Where it stands.
    pub range: Range<usize>,
    /// In order.
    pub edits: Vec<Edit>,
    /// The variables that it declares at the top level of the cell.
    pub declares: Vec<Declared>,
    /// Every identifier that it uses, those of its pattern apart.
    pub mentions: BTreeSet<String>,
    /// Names of places that its text changes, as far as a text shows it.
    pub changes: BTreeSet<String>,
}

/// A variable that a cell declares.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Declared {
    /// Its name.
    pub name: String,
    /// Whether it is `mut`.
    pub mutable: bool,
    /// Where the name stands in the cell.
    pub range: Range<usize>,
}

/// Takes a cell apart; `None` if it does not parse, and then rustc is to say why.
pub fn parse(cell: &str, body_start: usize) -> Option<Parsed> {
    // Positions pile up in a table of this thread; each cell starts it anew.
    proc_macro2::extra::invalidate_current_thread_spans();
    let statements =
        syn::parse::Parser::parse_str(syn::Block::parse_within, &cell[body_start..]).ok()?;
    let mut parsed = Parsed::default();
    let last = statements.len().saturating_sub(1);
    for (idx, statement) in statements.into_iter().enumerate() {
        match statement {
            syn::Stmt::Item(item) => parsed.items.push(read_item(&item, body_start)),
            syn::Stmt::Macro(call) if declares_statics(&call) => {
                parsed.items.push(read_statics(&call, body_start));
            }
            other => {
                let is_tail = idx == last
                    && match &other {
                        syn::Stmt::Expr(_, semi) => semi.is_none(),
                        syn::Stmt::Macro(call) => call.semi_token.is_none(),
                        _ => false,
                    };
                let statement = read_statement(&other, body_start);
                if is_tail {
                    parsed.tail = Some(statement);
                } else {
                    parsed.statements.push(statement);
                }
            }
        }
    }
    Some(parsed)
}

fn read_statement(statement: &syn::Stmt, base: usize) -> Statement {
    let mut declares = Vec::new();
    let mut mentions = BTreeSet::new();
    match statement {
        syn::Stmt::Local(local) => {
            let mut names = Names { base, found: Vec::new() };
            names.visit_pat(&local.pat);
            declares = names.found;
            // A pattern may hold paths and constants; its types and its value are uses.
            gather_pattern_mentions(&local.pat, &mut mentions);
            if let Some(init) = &local.init {
                gather(init.expr.to_token_stream(), &mut mentions);
                if let Some((_, diverge)) = &init.diverge {
                    gather(diverge.to_token_stream(), &mut mentions);
                }
            }
        }
        other => gather(other.to_token_stream(), &mut mentions),
    }
    let mut edits = Edits::new(base, true);
    edits.visit_stmt(statement);
    Statement {
        range: range_of(statement, base),
        edits: edits.sorted(),
        declares,
        mentions,
        changes: changed(statement),
    }
}

fn read_item(item: &syn::Item, base: usize) -> Item {
    let range = range_of(item, base);
    let mut edits = Edits::new(base, false);
    edits.visit_item(item);
    edits.publish(item);
    let mut mentions = BTreeSet::new();
    gather(item.to_token_stream(), &mut mentions);
    let (defines, form) = describe(item, base);
    Item {
        range,
        edits: edits.sorted(),
        defines,
        mentions,
        form,
        signature: signature_of(item),
        docs: docs_of(attributes_of(item)),
        tokens: item.to_token_stream().to_string(),
    }
}

/// `thread_local! { … }` stands among the statements for the parser, but declares statics.
fn declares_statics(call: &syn::StmtMacro) -> bool {
    call.mac.path.segments.last().is_some_and(|segment| segment.ident == "thread_local")
}

fn read_statics(call: &syn::StmtMacro, base: usize) -> Item {
    let range = range_of(call, base);
    let mut mentions = BTreeSet::new();
    gather(call.to_token_stream(), &mut mentions);
    let mut edits = Vec::new();
    let mut defines = Vec::new();
    let tokens: Vec<TokenTree> = call.mac.tokens.clone().into_iter().collect();
    for (idx, token) in tokens.iter().enumerate() {
        if !matches!(token, TokenTree::Ident(word) if word == "static") {
            continue;
        }
        if let Some(TokenTree::Ident(name)) = tokens.get(idx + 1) {
            defines.push((Namespace::Value, plain_name(name)));
            let public = idx > 0
                && match &tokens[idx - 1] {
                    TokenTree::Ident(word) => word == "pub",
                    TokenTree::Group(_) => true,
                    _ => false,
                };
            if !public {
                edits.push(Edit::insert(base + token.span().byte_range().start, "pub "));
            }
        }
    }
    Item {
        range,
        edits,
        defines,
        mentions,
        form: ItemForm::Static,
        signature: "thread_local!".to_owned(),
        docs: String::new(),
        tokens: call.to_token_stream().to_string(),
    }
}

fn describe(item: &syn::Item, base: usize) -> (Vec<(Namespace, String)>, ItemForm) {
    use Namespace::{Macro, Type, Value};
    let one = |space, name: &syn::Ident| vec![(space, plain_name(name))];
    match item {
        syn::Item::Fn(item) => (one(Value, &item.sig.ident), ItemForm::Function),
        syn::Item::Const(item) if item.ident == "_" => (Vec::new(), ItemForm::Other),
        syn::Item::Const(item) => (one(Value, &item.ident), ItemForm::Constant),
        syn::Item::Static(item) => (one(Value, &item.ident), ItemForm::Static),
        syn::Item::Enum(item) => (one(Type, &item.ident), ItemForm::Data),
        syn::Item::Union(item) => (one(Type, &item.ident), ItemForm::Data),
        syn::Item::Struct(item) => {
            let mut defines = one(Type, &item.ident);
            if !matches!(item.fields, syn::Fields::Named(_)) {
                defines.push((Value, plain_name(&item.ident)));
            }
            (defines, ItemForm::Data)
        }
        syn::Item::Type(item) => (one(Type, &item.ident), ItemForm::Alias),
        syn::Item::Mod(item) => (one(Type, &item.ident), ItemForm::Module),
        syn::Item::TraitAlias(item) => (one(Type, &item.ident), ItemForm::Trait(BTreeSet::new())),
        syn::Item::Trait(item) => {
            let names = item.items.iter().filter_map(|member| match member {
                syn::TraitItem::Fn(function) => Some(plain_name(&function.sig.ident)),
                syn::TraitItem::Const(constant) => Some(plain_name(&constant.ident)),
                _ => None,
            });
            (one(Type, &item.ident), ItemForm::Trait(names.collect()))
        }
        syn::Item::Macro(item) => match &item.ident {
            Some(name) => (one(Macro, name), ItemForm::Macro),
            None => (Vec::new(), ItemForm::Other),
        },
        syn::Item::Use(item) => {
            let mut leaves = Vec::new();
            let start = if item.leading_colon.is_some() { "::" } else { "" };
            flatten(&item.tree, start, &mut leaves);
            (Vec::new(), ItemForm::Use(leaves))
        }
        syn::Item::Impl(item) => (Vec::new(), ItemForm::Impl(read_impl(item, base))),
        syn::Item::ForeignMod(item) => {
            let names = item.items.iter().filter_map(|member| match member {
                syn::ForeignItem::Fn(function) => Some((Value, plain_name(&function.sig.ident))),
                syn::ForeignItem::Static(item) => Some((Value, plain_name(&item.ident))),
                syn::ForeignItem::Type(item) => Some((Type, plain_name(&item.ident))),
                _ => None,
            });
            (names.collect(), ItemForm::Other)
        }
        _ => (Vec::new(), ItemForm::Other),
    }
}

fn flatten(tree: &syn::UseTree, path: &str, leaves: &mut Vec<UseLeaf>) {
    let leaf = |path: String, binding| UseLeaf { path, binding };
    match tree {
        syn::UseTree::Path(inner) => {
            flatten(&inner.tree, &format!("{path}{}::", inner.ident), leaves);
        }
        syn::UseTree::Name(name) if name.ident == "self" => {
            let path = path.trim_end_matches("::").to_owned();
            let bound =
                path.rsplit("::").next().unwrap_or(&path).trim_start_matches("r#").to_owned();
            leaves.push(leaf(path, Binding::Name(bound)));
        }
        syn::UseTree::Name(name) => {
            leaves.push(leaf(
                format!("{path}{}", name.ident),
                Binding::Name(plain_name(&name.ident)),
            ));
        }
        syn::UseTree::Rename(rename) => {
            let path = match rename.ident == "self" {
                true => path.trim_end_matches("::").to_owned(),
                false => format!("{path}{}", rename.ident),
            };
            let binding = match rename.rename == "_" {
                true => Binding::Nameless,
                false => Binding::Name(plain_name(&rename.rename)),
            };
            leaves.push(leaf(path, binding));
        }
        syn::UseTree::Glob(_) => {
            leaves.push(leaf(path.trim_end_matches("::").to_owned(), Binding::Glob));
        }
        syn::UseTree::Group(group) => {
            for tree in &group.items {
                flatten(tree, path, leaves);
            }
        }
    }
}

fn read_impl(item: &syn::ItemImpl, base: usize) -> ImplBlock {
    let mut other_heads = BTreeSet::new();
    let of_trait = item.trait_.as_ref().map(|(_, path, _)| {
        for segment in &path.segments {
            argument_heads(&segment.arguments, &mut other_heads);
        }
        (first_segment(path), path.to_token_stream().to_string())
    });
    let self_head = head_of(&item.self_ty, &mut other_heads);
    let members = item.items.iter().filter_map(|member| {
        let name = match member {
            syn::ImplItem::Fn(function) => plain_name(&function.sig.ident),
            syn::ImplItem::Const(constant) => plain_name(&constant.ident),
            syn::ImplItem::Type(item) => plain_name(&item.ident),
            _ => return None,
        };
        Some((name, range_of(member, base)))
    });
    let methods = item.items.iter().filter_map(|member| match member {
        syn::ImplItem::Fn(function) => Some((
            plain_name(&function.sig.ident),
            tidy(&function.sig.to_token_stream().to_string()),
            docs_of(&function.attrs),
        )),
        _ => None,
    });
    ImplBlock {
        of_trait,
        self_head,
        other_heads,
        self_type: format!(
            "{} {} {}",
            item.generics.params.to_token_stream(),
            item.self_ty.to_token_stream(),
            item.generics.where_clause.to_token_stream()
        ),
        members: members.collect(),
        methods: methods.collect(),
    }
}

/// The head of a type as the orphan rule sees it: references and `Box` and `Pin` are looked through.
fn head_of(ty: &syn::Type, others: &mut BTreeSet<String>) -> Option<String> {
    match ty {
        syn::Type::Reference(inner) => head_of(&inner.elem, others),
        syn::Type::Paren(inner) => head_of(&inner.elem, others),
        syn::Type::Group(inner) => head_of(&inner.elem, others),
        syn::Type::TraitObject(object) => object.bounds.iter().find_map(|bound| match bound {
            syn::TypeParamBound::Trait(bound) => Some(first_segment(&bound.path)),
            _ => None,
        }),
        syn::Type::Path(path) => {
            let last = path.path.segments.last()?;
            if last.ident == "Box" || last.ident == "Pin" {
                argument_heads(&last.arguments, others);
            }
            Some(first_segment(&path.path))
        }
        _ => None,
    }
}

fn argument_heads(arguments: &syn::PathArguments, heads: &mut BTreeSet<String>) {
    if let syn::PathArguments::AngleBracketed(arguments) = arguments {
        for argument in &arguments.args {
            if let syn::GenericArgument::Type(ty) = argument {
                let mut inner = BTreeSet::new();
                heads.extend(head_of(ty, &mut inner));
                heads.append(&mut inner);
            }
        }
    }
}

fn first_segment(path: &syn::Path) -> String {
    path.segments.first().map(|segment| plain_name(&segment.ident)).unwrap_or_default()
}

/// The variables that a pattern binds. A capitalised single name in a pattern is a constant or a
/// variant, by the convention that the compiler also warns about.
struct Names {
    base: usize,
    found: Vec<Declared>,
}

impl<'ast> Visit<'ast> for Names {
    fn visit_pat_ident(&mut self, pattern: &'ast syn::PatIdent) {
        let name = plain_name(&pattern.ident);
        let variable = !name.starts_with(|c: char| c.is_uppercase());
        if variable || pattern.mutability.is_some() || pattern.subpat.is_some() {
            let range = pattern.ident.span().byte_range();
            self.found.push(Declared {
                name,
                mutable: pattern.mutability.is_some(),
                range: self.base + range.start..self.base + range.end,
            });
        }
        visit::visit_pat_ident(self, pattern);
    }

    // A pattern can hold expressions (constants, const blocks); they bind nothing here.
    fn visit_expr(&mut self, _: &'ast syn::Expr) {}
}

fn gather_pattern_mentions(pattern: &syn::Pat, mentions: &mut BTreeSet<String>) {
    struct Paths<'a>(&'a mut BTreeSet<String>);
    impl<'ast> Visit<'ast> for Paths<'_> {
        fn visit_path(&mut self, path: &'ast syn::Path) {
            gather(path.to_token_stream(), self.0);
        }
        fn visit_type(&mut self, ty: &'ast syn::Type) {
            gather(ty.to_token_stream(), self.0);
        }
        fn visit_pat_ident(&mut self, pattern: &'ast syn::PatIdent) {
            if plain_name(&pattern.ident).starts_with(|c: char| c.is_uppercase()) {
                self.0.insert(plain_name(&pattern.ident));
            }
            visit::visit_pat_ident(self, pattern);
        }
    }
    Paths(mentions).visit_pat(pattern);
}

/// Every identifier in these tokens, also those that format strings name in braces.
pub fn gather(tokens: TokenStream, mentions: &mut BTreeSet<String>) {
    for token in tokens {
        match token {
            TokenTree::Ident(name) => {
                mentions.insert(plain_name(&name));
            }
            TokenTree::Group(group) => gather(group.stream(), mentions),
            TokenTree::Literal(literal) => gather_captures(&literal.to_string(), mentions),
            TokenTree::Punct(_) => {}
        }
    }
}

/// Names in braces in a string literal, as `println!("{total:.2} of {n:>width$}")` uses them.
fn gather_captures(literal: &str, mentions: &mut BTreeSet<String>) {
    if !literal.ends_with(['"', '#']) {
        return;
    }
    let mut rest = literal;
    while let Some(at) = rest.find('{') {
        rest = &rest[at + 1..];
        let inside = &rest[..rest.find(['}', '{']).unwrap_or(rest.len())];
        for word in inside.split(|c: char| !(c.is_alphanumeric() || c == '_')) {
            if word.starts_with(|c: char| c.is_alphabetic() || c == '_') {
                mentions.insert(word.to_owned());
            }
        }
    }
}

pub(super) fn first_byte(token: &TokenTree) -> usize {
    match token {
        TokenTree::Group(group) => group.span_open().byte_range().start,
        other => other.span().byte_range().start,
    }
}

/// The bytes of the cell that a node stands on.
pub(super) fn range_of(node: &impl ToTokens, base: usize) -> Range<usize> {
    let mut tokens = node.to_token_stream().into_iter();
    let Some(first) = tokens.next() else { return base..base };
    let start = first_byte(&first);
    let last = tokens.last().unwrap_or(first);
    let end = match &last {
        TokenTree::Group(group) => group.span_close().byte_range().end,
        other => other.span().byte_range().end,
    };
    // A group without delimiters has no span of its own.
    let end = end.max(start);
    base + start..base + end
}

fn plain_name(name: &syn::Ident) -> String {
    let name = name.to_string();
    name.strip_prefix("r#").map(str::to_owned).unwrap_or(name)
}

pub(super) fn attributes_of(item: &syn::Item) -> &[syn::Attribute] {
    match item {
        syn::Item::Const(item) => &item.attrs,
        syn::Item::Enum(item) => &item.attrs,
        syn::Item::ExternCrate(item) => &item.attrs,
        syn::Item::Fn(item) => &item.attrs,
        syn::Item::ForeignMod(item) => &item.attrs,
        syn::Item::Impl(item) => &item.attrs,
        syn::Item::Macro(item) => &item.attrs,
        syn::Item::Mod(item) => &item.attrs,
        syn::Item::Static(item) => &item.attrs,
        syn::Item::Struct(item) => &item.attrs,
        syn::Item::Trait(item) => &item.attrs,
        syn::Item::TraitAlias(item) => &item.attrs,
        syn::Item::Type(item) => &item.attrs,
        syn::Item::Union(item) => &item.attrs,
        syn::Item::Use(item) => &item.attrs,
        _ => &[],
    }
}

fn docs_of(attributes: &[syn::Attribute]) -> String {
    let lines = attributes.iter().filter_map(|attribute| match &attribute.meta {
        syn::Meta::NameValue(pair) if pair.path.is_ident("doc") => match &pair.value {
            syn::Expr::Lit(syn::ExprLit { lit: syn::Lit::Str(text), .. }) => {
                Some(text.value().trim_start_matches(' ').to_owned())
            }
            _ => None,
        },
        _ => None,
    });
    lines.collect::<Vec<_>>().join("\n")
}

fn signature_of(item: &syn::Item) -> String {
    let tokens = match item {
        syn::Item::Fn(item) => item.sig.to_token_stream().to_string(),
        syn::Item::Struct(item) => {
            format!("struct {} {}", item.ident, item.generics.to_token_stream())
        }
        syn::Item::Enum(item) => format!("enum {} {}", item.ident, item.generics.to_token_stream()),
        syn::Item::Union(item) => {
            format!("union {} {}", item.ident, item.generics.to_token_stream())
        }
        syn::Item::Trait(item) => {
            format!("trait {} {}", item.ident, item.generics.to_token_stream())
        }
        syn::Item::Const(item) => format!("const {}: {}", item.ident, item.ty.to_token_stream()),
        syn::Item::Static(item) => format!("static {}: {}", item.ident, item.ty.to_token_stream()),
        syn::Item::Type(item) => item.to_token_stream().to_string(),
        syn::Item::Mod(item) => format!("mod {}", item.ident),
        syn::Item::Macro(item) => {
            item.ident.as_ref().map(|n| format!("macro {n}!")).unwrap_or_default()
        }
        _ => String::new(),
    };
    tidy(&tokens)
}

/// Tokens as text, with the spaces taken out that nobody would type.
fn tidy(tokens: &str) -> String {
    let mut text = tokens.to_owned();
    for (from, to) in [
        (" :: ", "::"),
        (" < ", "<"),
        (" >", ">"),
        (" ,", ","),
        (" ;", ";"),
        ("& ", "&"),
        (" (", "("),
        ("( ", "("),
        (" )", ")"),
        (" :", ":"),
        ("' ", "'"),
        ("[ ", "["),
        (" ]", "]"),
        (" !", "!"),
    ] {
        text = text.replace(from, to);
    }
    text.trim().to_owned()
}

#[cfg(test)]
mod tests {
    use super::super::edits::CHECK;
    use super::super::source::{CellText, Generated};
    use super::*;
    use std::sync::Arc;

    fn edited(text: &str, range: Range<usize>, edits: &[Edit]) -> String {
        let cell = Arc::new(CellText { number: 1, text: text.to_owned() });
        let mut generated = Generated::default();
        generated.edited(&cell, range, edits);
        generated.text().to_owned()
    }

    fn item(text: &str) -> (Item, String) {
        let item = parse(text, 0).expect("it parses").items.remove(0);
        let text = edited(text, item.range.clone(), &item.edits);
        (item, text)
    }

    #[test]
    fn statements_items_and_the_final_expression_are_told_apart() {
        let text = "use std::fmt;\nlet x = 1;\nfn f() {}\nprintln!(\"{x}\");\nx + 1";
        let parsed = parse(text, 0).unwrap();
        assert_eq!(parsed.items.len(), 2);
        assert_eq!(parsed.statements.len(), 2);
        assert_eq!(&text[parsed.tail.unwrap().range], "x + 1");
        assert!(parse("let x = 1; x;", 0).unwrap().tail.is_none());
        let vector = "vec![1]";
        assert_eq!(&vector[parse(vector, 0).unwrap().tail.unwrap().range], "vec![1]");
        assert!(parse("let x = ;", 0).is_none());
    }

    #[test]
    fn patterns_declare_variables_and_no_constants() {
        let parsed =
            parse("let (mut a, Point { x, y: [b, ..] }, None) = f(c) else { d };", 0).unwrap();
        let names: Vec<_> =
            parsed.statements[0].declares.iter().map(|d| (d.name.as_str(), d.mutable)).collect();
        assert_eq!(names, [("a", true), ("x", false), ("b", false)]);
        let mentions: Vec<_> = parsed.statements[0].mentions.iter().map(String::as_str).collect();
        assert_eq!(mentions, ["None", "Point", "c", "d", "f"]);
    }

    #[test]
    fn names_in_format_strings_are_mentioned() {
        let parsed = parse("println!(\"{total:>width$.2} {{no}} {0}\", a);", 0).unwrap();
        let mentions = &parsed.statements[0].mentions;
        assert!(mentions.contains("total") && mentions.contains("width") && mentions.contains("a"));
    }

    #[test]
    fn ranges_count_bytes_from_the_start_of_the_cell() {
        let text = "---\n---\nlet é = \"ü\"; let z = é;";
        let parsed = parse(text, 8).unwrap();
        assert_eq!(&text[parsed.statements[1].range.clone()], "let z = é;");
        assert_eq!(&text[parsed.statements[0].declares[0].range.clone()], "é");
    }

    #[test]
    fn items_are_made_visible() {
        assert_eq!(
            item("/// doc\n#[derive(Debug)] struct P { /// f\n x: f64, pub y: f64 }").1,
            "/// doc\n#[derive(Debug)] pub struct P { /// f\n pub x: f64, pub y: f64 }"
        );
        assert_eq!(item("struct T(f64, pub(crate) u8);").1, "pub struct T(pub f64, pub u8);");
        assert_eq!(
            item("impl P { const N: u8 = 1; fn f(&self) {} }").1,
            "impl P { pub const N: u8 = 1; pub fn f(&self) {} }"
        );
        assert_eq!(
            item("impl Clone for P { fn clone(&self) -> P { P } }").1,
            "impl Clone for P { fn clone(&self) -> P { P } }"
        );
        assert_eq!(
            item("macro_rules! m { () => {} }").1,
            "#[macro_export] macro_rules! m { () => {} }"
        );
        assert_eq!(item("async unsafe fn f() {}").1, "pub async unsafe fn f() {}");
        assert_eq!(
            item("thread_local! { static A: u8 = 1; }").1,
            "thread_local! { pub static A: u8 = 1; }"
        );
    }

    #[test]
    fn loops_get_a_check_but_not_where_the_compiler_runs_them() {
        assert_eq!(
            item("fn f() { for i in 0..3 { g(i) } }").1,
            format!("pub fn f() {{ for i in 0..3 {{{CHECK} g(i) }} }}")
        );
        assert_eq!(
            item("const fn f() { loop { break } }").1,
            "pub const fn f() { loop { break } }"
        );
    }

    #[test]
    fn early_returns_get_a_value_outside_closures() {
        let text = "if a { return; } let f = || { return 1 }; if b { return Err(\"x\"); } \
                    if c { return Ok(()); } if d { return e; }";
        let parsed = parse(text, 0).unwrap();
        let mut all = parsed.statements.clone();
        all.extend(parsed.tail);
        let out: Vec<_> = all.iter().map(|s| edited(text, s.range.clone(), &s.edits)).collect();
        assert_eq!(out[0], "if a { return ::semiaxis::live::left(); }");
        assert_eq!(out[1], "let f = || { return 1 };");
        assert_eq!(out[2], "if b { return Err(::semiaxis::live::Failure::from(\"x\")); }");
        assert_eq!(out[3], "if c { return  { let _ = (()); ::semiaxis::live::left() }; }");
        assert_eq!(out[4], "if d { return ::semiaxis::leave!(__semiaxis, e); }");
    }

    #[test]
    fn use_lines_are_flattened() {
        let (item, _) = item("use a::{self, b::*, c as d, e as _};");
        let ItemForm::Use(leaves) = item.form else { panic!() };
        let told: Vec<_> =
            leaves.iter().map(|leaf| format!("{} {:?}", leaf.path, leaf.binding)).collect();
        assert_eq!(told, ["a Name(\"a\")", "a::b Glob", "a::c Name(\"d\")", "a::e Nameless"]);
    }

    #[test]
    fn impl_blocks_tell_what_the_orphan_rule_looks_at() {
        let (item, _) = item(
            "impl<T> From<Vec<Tile>> for &Box<Kiln<T>> { fn from(x: Vec<Tile>) -> Self { x } }",
        );
        let ItemForm::Impl(block) = item.form else { panic!() };
        assert_eq!(block.of_trait.as_ref().unwrap().0, "From");
        assert_eq!(block.self_head.as_deref(), Some("Box"));
        assert_eq!(block.other_heads.iter().collect::<Vec<_>>(), ["Kiln", "Vec"]);
        assert_eq!(block.members[0].0, "from");
    }
}
