//! The small edits that make a person's text run: a check in each loop, the value of an early
//! `return`, `pub` on items.

use std::ops::Range;

use quote::ToTokens;
use syn::visit::{self, Visit};

use super::parse::{attributes_of, first_byte, range_of};
use super::source::Edit;

/// Notes the edits that running text needs: a check in each loop, and the value of early returns.
pub struct Edits {
    base: usize,
    edits: Vec<Edit>,
    /// Whether a `return` here leaves the cell.
    returns: bool,
    /// Whether this is evaluated by the compiler, where no check can be called.
    constant: bool,
}

/// What the beginning of a loop's body becomes.
pub const CHECK: &str = " ::semiaxis::live::checkpoint();";

impl Edits {
    /// For text that begins at this byte of the cell; `returns` tells whether a `return` in it leaves
    /// the cell.
    pub fn new(base: usize, returns: bool) -> Self {
        Self { base, edits: Vec::new(), returns, constant: false }
    }

    /// Notes what makes an item and its parts visible to later cells.
    pub fn publish(&mut self, item: &syn::Item) {
        let mut publish = Publish { base: self.base, edits: Vec::new() };
        publish.item(item);
        self.edits.append(&mut publish.edits);
    }

    /// The edits in the order of the text.
    pub fn sorted(mut self) -> Vec<Edit> {
        self.edits.sort_by_key(|edit| edit.range.start);
        self.edits
    }

    fn check(&mut self, body: &syn::Block) {
        if !self.constant {
            let brace = body.brace_token.span.open().byte_range();
            self.edits.push(Edit::insert(self.base + brace.end, CHECK));
        }
    }

    fn within(&mut self, returns: bool, constant: bool, visit: impl FnOnce(&mut Self)) {
        let before = (self.returns, self.constant);
        (self.returns, self.constant) = (returns, constant);
        visit(self);
        (self.returns, self.constant) = before;
    }
}

impl Edits {
    /// `return Ok(…)` and `return Err(…)` leave their other type open, so they are settled here;
    /// what any other value means is found by its type.
    fn leave_with(&mut self, value: &syn::Expr) {
        let range = range_of(value, self.base);
        let mut insert = |at: usize, text: &str| self.edits.push(Edit::insert(at, text));
        match called(value) {
            Some(("Ok", parenthesis)) => {
                let name = range.start..self.base + parenthesis.start;
                insert(range.end, "; ::semiaxis::live::left() }");
                self.edits.push(Edit { range: name, text: " { let _ = ".to_owned() });
            }
            Some(("Err", parenthesis)) => {
                insert(self.base + parenthesis.end, "::semiaxis::live::Failure::from(");
                insert(range.end - 1, ")");
            }
            _ => {
                insert(range.start, "::semiaxis::leave!(__semiaxis, ");
                insert(range.end, ")");
            }
        }
    }
}

/// The name that a call calls, and the bytes of its opening parenthesis.
fn called(value: &syn::Expr) -> Option<(&'static str, Range<usize>)> {
    let syn::Expr::Call(call) = value else { return None };
    let syn::Expr::Path(path) = call.func.as_ref() else { return None };
    let name = ["Ok", "Err"].into_iter().find(|name| path.path.is_ident(name))?;
    Some((name, call.paren_token.span.open().byte_range()))
}

impl<'ast> Visit<'ast> for Edits {
    fn visit_expr_for_loop(&mut self, expr: &'ast syn::ExprForLoop) {
        self.check(&expr.body);
        visit::visit_expr_for_loop(self, expr);
    }

    fn visit_expr_while(&mut self, expr: &'ast syn::ExprWhile) {
        self.check(&expr.body);
        visit::visit_expr_while(self, expr);
    }

    fn visit_expr_loop(&mut self, expr: &'ast syn::ExprLoop) {
        self.check(&expr.body);
        visit::visit_expr_loop(self, expr);
    }

    fn visit_expr_return(&mut self, expr: &'ast syn::ExprReturn) {
        if self.returns {
            let after = self.base + expr.return_token.span.byte_range().end;
            match expr.expr.as_deref() {
                None => self.edits.push(Edit::insert(after, " ::semiaxis::live::left()")),
                Some(value) => self.leave_with(value),
            }
        }
        visit::visit_expr_return(self, expr);
    }

    fn visit_expr_closure(&mut self, expr: &'ast syn::ExprClosure) {
        self.within(false, self.constant, |edits| visit::visit_expr_closure(edits, expr));
    }

    fn visit_expr_async(&mut self, expr: &'ast syn::ExprAsync) {
        self.within(false, self.constant, |edits| visit::visit_expr_async(edits, expr));
    }

    fn visit_item(&mut self, item: &'ast syn::Item) {
        let constant = match item {
            syn::Item::Const(_) | syn::Item::Static(_) => true,
            syn::Item::Fn(function) => function.sig.constness.is_some(),
            _ => false,
        };
        self.within(false, constant, |edits| visit::visit_item(edits, item));
    }

    fn visit_impl_item_fn(&mut self, function: &'ast syn::ImplItemFn) {
        let constant = function.sig.constness.is_some();
        self.within(false, constant, |edits| visit::visit_impl_item_fn(edits, function));
    }

    fn visit_expr_const(&mut self, expr: &'ast syn::ExprConst) {
        self.within(false, true, |edits| visit::visit_expr_const(edits, expr));
    }

    fn visit_type(&mut self, _: &'ast syn::Type) {}
}

/// Notes the edits that make an item and its parts visible to later cells.
struct Publish {
    base: usize,
    edits: Vec<Edit>,
}

impl Publish {
    fn item(&mut self, item: &syn::Item) {
        let visibility = match item {
            syn::Item::Const(item) => &item.vis,
            syn::Item::Enum(item) => &item.vis,
            syn::Item::ExternCrate(item) => &item.vis,
            syn::Item::Fn(item) => &item.vis,
            syn::Item::Mod(item) => &item.vis,
            syn::Item::Static(item) => &item.vis,
            syn::Item::Struct(item) => &item.vis,
            syn::Item::Trait(item) => &item.vis,
            syn::Item::TraitAlias(item) => &item.vis,
            syn::Item::Type(item) => &item.vis,
            syn::Item::Union(item) => &item.vis,
            syn::Item::Use(_) => return,
            syn::Item::Impl(item) => {
                if item.trait_.is_none() {
                    for member in &item.items {
                        self.member(member);
                    }
                }
                return;
            }
            syn::Item::ForeignMod(item) => {
                for member in &item.items {
                    match member {
                        syn::ForeignItem::Fn(f) => self.publish(&f.vis, &f.attrs, member),
                        syn::ForeignItem::Static(s) => self.publish(&s.vis, &s.attrs, member),
                        syn::ForeignItem::Type(t) => self.publish(&t.vis, &t.attrs, member),
                        _ => {}
                    }
                }
                return;
            }
            syn::Item::Macro(rules) => {
                let exported = rules.attrs.iter().any(|attr| attr.path().is_ident("macro_export"));
                if rules.ident.is_some() && !exported {
                    let start = range_of(item, self.base).start;
                    self.edits.push(Edit::insert(start, "#[macro_export] "));
                }
                return;
            }
            _ => return,
        };
        self.publish(visibility, attributes_of(item), item);
        match item {
            syn::Item::Struct(item) => self.fields(&item.fields),
            syn::Item::Union(item) => {
                for field in &item.fields.named {
                    self.publish(&field.vis, &field.attrs, field);
                }
            }
            _ => {}
        }
    }

    fn fields(&mut self, fields: &syn::Fields) {
        for field in fields {
            self.publish(&field.vis, &field.attrs, field);
        }
    }

    fn member(&mut self, member: &syn::ImplItem) {
        match member {
            syn::ImplItem::Fn(item) => self.publish(&item.vis, &item.attrs, member),
            syn::ImplItem::Const(item) => self.publish(&item.vis, &item.attrs, member),
            syn::ImplItem::Type(item) => self.publish(&item.vis, &item.attrs, member),
            _ => {}
        }
    }

    fn publish(
        &mut self,
        visibility: &syn::Visibility,
        attributes: &[syn::Attribute],
        node: &impl ToTokens,
    ) {
        match visibility {
            syn::Visibility::Public(_) => {}
            syn::Visibility::Restricted(restricted) => {
                let range = range_of(restricted, self.base);
                self.edits.push(Edit { range, text: "pub".to_owned() });
            }
            syn::Visibility::Inherited => {
                let skip: usize =
                    attributes.iter().map(|a| a.to_token_stream().into_iter().count()).sum();
                if let Some(first) = node.to_token_stream().into_iter().nth(skip) {
                    let at = self.base + first_byte(&first);
                    self.edits.push(Edit::insert(at, "pub "));
                }
            }
        }
    }
}
