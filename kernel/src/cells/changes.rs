//! Which variables a statement changes, as far as its text shows it.
//!
//! Only the compiler knows whether a method takes `&mut self`, so this is a reading of habits:
//! assignments, `&mut`, methods whose names say that they change something, and methods that are
//! called for nothing but their effect. It serves notes about outdated values, never the values.

use std::collections::BTreeSet;

use proc_macro2::TokenTree;
use syn::visit::{self, Visit};

/// Methods of the standard library that change what they are called on and also give something back.
const CHANGING: [&str; 22] = [
    "append",
    "clear",
    "dedup",
    "drain",
    "entry",
    "extend",
    "fill",
    "get_or_insert_with",
    "insert",
    "next",
    "pop",
    "pop_back",
    "pop_front",
    "push",
    "push_str",
    "remove",
    "replace",
    "resize",
    "retain",
    "sort",
    "take",
    "truncate",
];

/// The names of places that a statement changes.
pub fn changed(statement: &syn::Stmt) -> BTreeSet<String> {
    let mut changes = Changes::default();
    changes.visit_stmt(statement);
    changes.0
}

#[derive(Default)]
struct Changes(BTreeSet<String>);

impl Changes {
    fn place(&mut self, expression: &syn::Expr) {
        self.0.extend(root(expression));
    }
}

impl<'ast> Visit<'ast> for Changes {
    fn visit_stmt(&mut self, statement: &'ast syn::Stmt) {
        if let syn::Stmt::Expr(expression, Some(_)) = statement {
            let called = match expression {
                syn::Expr::Try(tried) => &*tried.expr,
                other => other,
            };
            if let syn::Expr::MethodCall(call) = called
                && is_place(&call.receiver)
            {
                self.place(&call.receiver);
            }
        }
        visit::visit_stmt(self, statement);
    }

    fn visit_expr_assign(&mut self, assignment: &'ast syn::ExprAssign) {
        self.place(&assignment.left);
        visit::visit_expr_assign(self, assignment);
    }

    fn visit_expr_binary(&mut self, binary: &'ast syn::ExprBinary) {
        use syn::BinOp::{
            AddAssign, BitAndAssign, BitOrAssign, BitXorAssign, DivAssign, MulAssign, RemAssign,
            ShlAssign, ShrAssign, SubAssign,
        };
        if matches!(
            binary.op,
            AddAssign(_)
                | SubAssign(_)
                | MulAssign(_)
                | DivAssign(_)
                | RemAssign(_)
                | BitXorAssign(_)
                | BitAndAssign(_)
                | BitOrAssign(_)
                | ShlAssign(_)
                | ShrAssign(_)
        ) {
            self.place(&binary.left);
        }
        visit::visit_expr_binary(self, binary);
    }

    fn visit_expr_reference(&mut self, reference: &'ast syn::ExprReference) {
        if reference.mutability.is_some() {
            self.place(&reference.expr);
        }
        visit::visit_expr_reference(self, reference);
    }

    fn visit_expr_method_call(&mut self, call: &'ast syn::ExprMethodCall) {
        let name = call.method.to_string();
        let changing = CHANGING.contains(&name.as_str())
            || name.ends_with("_mut")
            || name.starts_with("sort_")
            || name.starts_with("retain_");
        if changing {
            self.place(&call.receiver);
        }
        visit::visit_expr_method_call(self, call);
    }

    fn visit_macro(&mut self, call: &'ast syn::Macro) {
        let writes = call
            .path
            .segments
            .last()
            .is_some_and(|segment| segment.ident == "write" || segment.ident == "writeln");
        if writes {
            // The first word that is no `mut` is what is written to.
            let mut words = call.tokens.clone().into_iter().filter_map(|token| match token {
                TokenTree::Ident(word) if word != "mut" => Some(word.to_string()),
                _ => None,
            });
            self.0.extend(words.next());
        }
        visit::visit_macro(self, call);
    }
}

fn is_place(expression: &syn::Expr) -> bool {
    match expression {
        syn::Expr::Path(_) => true,
        syn::Expr::Field(field) => is_place(&field.base),
        syn::Expr::Index(index) => is_place(&index.expr),
        syn::Expr::Paren(paren) => is_place(&paren.expr),
        _ => false,
    }
}

/// The variable that an expression is a part of or reached through.
fn root(expression: &syn::Expr) -> Option<String> {
    match expression {
        syn::Expr::Path(path) => {
            path.path.get_ident().map(|name| name.to_string().trim_start_matches("r#").to_owned())
        }
        syn::Expr::Field(field) => root(&field.base),
        syn::Expr::Index(index) => root(&index.expr),
        syn::Expr::Paren(paren) => root(&paren.expr),
        syn::Expr::Unary(unary) => root(&unary.expr),
        syn::Expr::Reference(reference) => root(&reference.expr),
        syn::Expr::MethodCall(call) => root(&call.receiver),
        syn::Expr::Try(tried) => root(&tried.expr),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn of(text: &str) -> Vec<String> {
        let block = syn::parse::Parser::parse_str(syn::Block::parse_within, text).unwrap();
        let mut all = BTreeSet::new();
        for statement in &block {
            all.extend(changed(statement));
        }
        all.into_iter().collect()
    }

    #[test]
    fn assignments_borrows_and_changing_methods_are_seen() {
        assert_eq!(of("a = 1; b.c[0] += 2; *d = 3;"), ["a", "b", "d"]);
        assert_eq!(of("let x = f(&mut a, &b);"), ["a"]);
        assert_eq!(of("a.push(1); b[0].sort(); let n = c.pop();"), ["a", "b", "c"]);
        assert_eq!(of("for x in a.iter_mut() { *x += 1.0; }"), ["a", "x"]);
        assert_eq!(of("*m.entry(key).or_insert(0) += 1;"), ["m"]);
        assert_eq!(of("writeln!(&mut out, \"{a}\")?;"), ["out"]);
        assert_eq!(of("tree.grow();"), ["tree"]);
    }

    #[test]
    fn reading_changes_nothing() {
        assert!(of("let n = a.len() + b[0]; println!(\"{a}\"); a.iter().for_each(f);").is_empty());
        assert!(of("if a == 1 { f(&b) } else { g(c.mean()) }").is_empty());
    }
}
