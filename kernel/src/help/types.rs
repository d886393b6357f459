//! What type an expression has, as far as names and signatures tell.
//!
//! A variable's type is known from the session, a call's from the function's signature, a method's
//! from the type in front of it. `?` and the usual ways out of `Result` and `Option` are followed.
//! Everything else is unknown, and unknown stays unknown.

use syn::{Expr, Type};

use super::index::Index;
use super::lexer::{Token, TokenKind};
use super::words::{self, Word};
use crate::cells::types::Scope;

/// How far names are followed before it is given up: `let a = a;` refers to itself.
const DEPTH: usize = 12;

/// Methods that give what is inside a `Result` or `Option`.
const UNWRAPPING: [&str; 5] =
    ["unwrap", "expect", "unwrap_or_default", "unwrap_or", "unwrap_or_else"];

/// Methods that give the same type back.
const SAME: [&str; 5] = ["clone", "to_owned", "as_ref", "as_mut", "borrow"];

/// Everything that types are read from.
#[derive(Clone, Copy)]
pub struct Known<'a> {
    /// The text of the cell up to the place of interest, header left out.
    pub code: &'a str,
    /// Its pieces without comments.
    pub tokens: &'a [Token],
    /// What the session defines.
    pub scope: &'a Scope,
    /// What the prelude offers.
    pub index: &'a Index,
}

impl<'a> Known<'a> {
    /// The name of the type of the expression that ends with a token.
    pub fn owner_before(&self, last: usize) -> Option<String> {
        let first = self.expression_start(last)?;
        let text = &self.code[self.tokens[first].start..self.tokens[last].end];
        let expression = syn::parse_str::<Expr>(text).ok()?;
        owner_name(&self.type_of(&expression, DEPTH)?)
    }

    /// Where the chain of calls, fields and `?` that ends with a token begins.
    fn expression_start(&self, last: usize) -> Option<usize> {
        let mut at = last;
        loop {
            match self.tokens[at].kind {
                TokenKind::Sign(b'?') => {
                    at = at.checked_sub(1)?;
                    continue;
                }
                TokenKind::Close(_) => {
                    at = self.matching_open(at)?;
                    let callee = at.checked_sub(1).map(|before| self.tokens[before].kind);
                    if matches!(
                        callee,
                        Some(TokenKind::Ident | TokenKind::Close(_) | TokenKind::Sign(b'?' | b'!'))
                    ) {
                        at -= 1;
                        if callee == Some(TokenKind::Sign(b'!')) {
                            at = at.checked_sub(1)?;
                        } else {
                            continue;
                        }
                    }
                }
                TokenKind::Ident | TokenKind::Text { .. } | TokenKind::Number => {}
                _ => return None,
            }
            let before = at.checked_sub(1).map(|before| self.tokens[before].kind);
            match before {
                Some(TokenKind::Sign(b'.') | TokenKind::PathSeparator) => at = at.checked_sub(2)?,
                _ => return Some(at),
            }
        }
    }

    fn matching_open(&self, close: usize) -> Option<usize> {
        let mut depth = 0usize;
        for at in (0..=close).rev() {
            match self.tokens[at].kind {
                TokenKind::Close(_) => depth += 1,
                TokenKind::Open(_) => {
                    depth -= 1;
                    if depth == 0 {
                        return Some(at);
                    }
                }
                _ => {}
            }
        }
        None
    }

    fn type_of(&self, expression: &Expr, depth: usize) -> Option<Type> {
        let depth = depth.checked_sub(1)?;
        match expression {
            Expr::Paren(inner) => self.type_of(&inner.expr, depth),
            Expr::Group(inner) => self.type_of(&inner.expr, depth),
            Expr::Reference(inner) => self.type_of(&inner.expr, depth),
            Expr::Try(inner) => inside(&self.type_of(&inner.expr, depth)?),
            Expr::Path(path) => self.type_of_path(&path.path, depth),
            Expr::Call(call) => match &*call.func {
                Expr::Path(function) => self.type_of_call(&function.path),
                _ => None,
            },
            Expr::MethodCall(call) => {
                let receiver = self.type_of(&call.receiver, depth)?;
                let name = call.method.to_string();
                if let Some(found) = self.member(&receiver, &name) {
                    return returned(&found.signature, &owner_name(&receiver)?);
                }
                if UNWRAPPING.contains(&name.as_str()) {
                    return inside(&receiver);
                }
                SAME.contains(&name.as_str()).then_some(receiver)
            }
            Expr::Field(field) => {
                let receiver = self.type_of(&field.base, depth)?;
                let syn::Member::Named(name) = &field.member else { return None };
                let found = self.member(&receiver, &name.to_string())?;
                syn::parse_str(found.signature.split_once(':')?.1).ok()
            }
            Expr::Struct(made) => type_named(&made.path),
            Expr::Lit(literal) => match &literal.lit {
                syn::Lit::Str(_) => syn::parse_str("str").ok(),
                syn::Lit::Float(_) => syn::parse_str("f64").ok(),
                _ => None,
            },
            Expr::Macro(made) if made.mac.path.is_ident("vec") => syn::parse_str("Vec<_>").ok(),
            Expr::Macro(made) if made.mac.path.is_ident("format") => syn::parse_str("String").ok(),
            _ => None,
        }
    }

    fn type_of_path(&self, path: &syn::Path, depth: usize) -> Option<Type> {
        if let Some(name) = path.get_ident() {
            let name = name.to_string();
            return self.bound_in_cell(&name, depth).or_else(|| {
                let variable = self.scope.variables.iter().find(|known| known.name == name)?;
                syn::parse_str(&variable.type_text).ok()
            });
        }
        // `Scaling::Correlation` is a `Scaling`.
        let owner = path.segments.iter().rev().nth(1)?;
        let name = path.segments.last()?.ident.to_string();
        let found = words::members(&owner.ident.to_string(), self.scope, self.index)
            .into_iter()
            .find(|word| word.name == name && word.kind == "variant")?;
        syn::parse_str(found.signature.split("::").next()?).ok()
    }

    /// The type of the last `let` of a name in this cell.
    fn bound_in_cell(&self, name: &str, depth: usize) -> Option<Type> {
        let text = |at: usize| self.tokens.get(at).map(|token| token.text(self.code));
        let start = (0..self.tokens.len()).rev().find(|at| {
            text(*at) == Some("let")
                && (text(at + 1) == Some(name)
                    || (text(at + 1) == Some("mut") && text(at + 2) == Some(name)))
        })?;
        let end = self.statement_end(start)?;
        let statement = &self.code[self.tokens[start].start..self.tokens[end].end];
        let Ok(syn::Stmt::Local(local)) = syn::parse_str::<syn::Stmt>(statement) else {
            return None;
        };
        if let syn::Pat::Type(typed) = &local.pat {
            return Some((*typed.ty).clone());
        }
        // The value was made before the name meant what it means now.
        let before = Known { tokens: &self.tokens[..start], ..*self };
        before.type_of(&local.init?.expr, depth)
    }

    fn statement_end(&self, start: usize) -> Option<usize> {
        let mut depth = 0i32;
        (start..self.tokens.len()).find(|at| {
            match self.tokens[*at].kind {
                TokenKind::Open(_) => depth += 1,
                TokenKind::Close(_) => depth -= 1,
                TokenKind::Sign(b';') => return depth == 0,
                _ => {}
            }
            false
        })
    }

    fn type_of_call(&self, path: &syn::Path) -> Option<Type> {
        let name = path.segments.last()?.ident.to_string();
        if path.segments.len() > 1 {
            let owner = path.segments.iter().rev().nth(1)?.ident.to_string();
            let found = words::members(&owner, self.scope, self.index)
                .into_iter()
                .find(|word| word.name == name);
            if let Some(found) = found {
                return match found.kind {
                    "variant" => syn::parse_str(&owner).ok(),
                    _ => returned(&found.signature, &owner),
                };
            }
        }
        let mut functions = words::items(self.scope).chain(words::preloaded(self.index));
        let found = functions.find(|word| word.name == name)?;
        match found.kind {
            "function" => returned(&found.signature, &name),
            "struct" => type_named(path),
            _ => None,
        }
    }

    fn member(&self, receiver: &Type, name: &str) -> Option<Word> {
        let owner = owner_name(receiver)?;
        words::members(&owner, self.scope, self.index).into_iter().find(|word| word.name == name)
    }
}

/// The name under which the members of a type are known; references and boxes are looked through.
pub fn owner_name(of: &Type) -> Option<String> {
    match of {
        Type::Reference(reference) => owner_name(&reference.elem),
        Type::Paren(inner) => owner_name(&inner.elem),
        Type::TraitObject(object) => object.bounds.iter().find_map(|bound| match bound {
            syn::TypeParamBound::Trait(bound) => {
                bound.path.segments.last().map(|last| last.ident.to_string())
            }
            _ => None,
        }),
        Type::Path(path) => {
            let last = path.path.segments.last()?;
            match last.ident.to_string().as_str() {
                "Box" | "Rc" | "Arc" => owner_name(&inside(of)?),
                name => Some(canonical(name).to_owned()),
            }
        }
        _ => None,
    }
}

/// The name under which a type's members are found; nalgebra has many names for its one matrix type.
pub fn canonical(name: &str) -> &str {
    match name {
        "DMatrix" | "DVector" | "RowDVector" | "OMatrix" | "DMatrixView" => "Matrix",
        other => other,
    }
}

/// The first type between the angle brackets: what is in a `Result`, an `Option`, a `Box`.
fn inside(of: &Type) -> Option<Type> {
    let Type::Path(path) = of else { return None };
    let syn::PathArguments::AngleBracketed(arguments) = &path.path.segments.last()?.arguments
    else {
        return None;
    };
    arguments.args.iter().find_map(|argument| match argument {
        syn::GenericArgument::Type(inner) => Some(inner.clone()),
        _ => None,
    })
}

fn type_named(path: &syn::Path) -> Option<Type> {
    Some(Type::Path(syn::TypePath { qself: None, path: path.clone() }))
}

/// The type that a function returns, with `Self` replaced by its owner.
fn returned(signature: &str, owner: &str) -> Option<Type> {
    let parsed = syn::parse_str::<syn::Signature>(signature).ok()?;
    let syn::ReturnType::Type(_, mut returned) = parsed.output else { return None };
    struct Replace(syn::Ident);
    impl syn::visit_mut::VisitMut for Replace {
        fn visit_ident_mut(&mut self, ident: &mut syn::Ident) {
            if ident == "Self" {
                *ident = self.0.clone();
            }
        }
    }
    let owner = syn::parse_str::<syn::Ident>(owner).ok()?;
    syn::visit_mut::VisitMut::visit_type_mut(&mut Replace(owner), &mut returned);
    Some(*returned)
}
