//! What the name at the cursor means.

use serde_json::Value;

use super::index::Index;
use super::lexer::{FrontMatter, Token, TokenKind, byte_of, front_matter, tokens};
use super::types::Known;
use super::words::{self, Word};
use crate::cells::types::{MimeBundle, Scope};

/// Explains the name at a cursor (given in code points), or, if there is none, the function in whose
/// parentheses the cursor stands. With a detail of 1 or more, the members of a type are listed too.
pub fn inspect(
    code: &str,
    cursor_chars: usize,
    detail: u8,
    scope: &Scope,
    index: &Index,
) -> Option<MimeBundle> {
    let cursor = byte_of(code, cursor_chars);
    let rust = match front_matter(code) {
        FrontMatter::None => 0,
        FrontMatter::Closed { rest, .. } if cursor >= rest => rest,
        _ => return None,
    };
    let code = &code[rust..];
    let cursor = cursor - rust;
    let mut pieces = tokens(code);
    pieces.retain(|token| !matches!(token.kind, TokenKind::Comment { .. }));
    let at = name_at(&pieces, cursor).or_else(|| callee_around(&pieces, cursor))?;
    let known = Known { code, tokens: &pieces[..=at], scope, index };
    let word = meaning(&known, at)?;
    Some(bundle(&word, detail, scope, index))
}

fn name_at(pieces: &[Token], cursor: usize) -> Option<usize> {
    pieces.iter().position(|token| {
        token.kind == TokenKind::Ident && token.start <= cursor && cursor <= token.end
    })
}

/// The name in front of the innermost parenthesis that is open at the cursor.
fn callee_around(pieces: &[Token], cursor: usize) -> Option<usize> {
    let mut open = Vec::new();
    for (at, token) in pieces.iter().enumerate().take_while(|(_, token)| token.end <= cursor) {
        match token.kind {
            TokenKind::Open(_) => open.push(at),
            TokenKind::Close(_) => drop(open.pop()),
            _ => {}
        }
    }
    open.into_iter().rev().find_map(|at| {
        let mut before = at.checked_sub(1)?;
        if pieces[before].kind == TokenKind::Sign(b'!') {
            before = before.checked_sub(1)?;
        }
        (pieces[at].kind == TokenKind::Open(b'(') && pieces[before].kind == TokenKind::Ident)
            .then_some(before)
    })
}

fn meaning(known: &Known<'_>, at: usize) -> Option<Word> {
    let name = known.tokens[at].text(known.code);
    let before = at.checked_sub(1).map(|before| known.tokens[before].kind);
    let member = |owner: &str| {
        words::members(owner, known.scope, known.index).into_iter().find(|word| word.name == name)
    };
    match before {
        Some(TokenKind::Sign(b'.')) => member(&known.owner_before(at.checked_sub(2)?)?),
        Some(TokenKind::PathSeparator) => {
            let owner = known.tokens[at.checked_sub(2)?].text(known.code);
            member(owner).or_else(|| anywhere(known, name))
        }
        _ => anywhere(known, name),
    }
}

fn anywhere(known: &Known<'_>, name: &str) -> Option<Word> {
    words::variables(known.scope)
        .chain(words::items(known.scope))
        .chain(words::preloaded(known.index))
        .chain(words::standard())
        .find(|word| word.name.trim_end_matches('!') == name)
}

fn bundle(word: &Word, detail: u8, scope: &Scope, index: &Index) -> MimeBundle {
    let members = match detail {
        0 => Vec::new(),
        _ => words::members(&word.name, scope, index),
    };
    let mut plain = format!("{}\n{}, {}", word.signature, word.kind, word.from.replace('`', ""));
    let mut markdown =
        format!("```rust\n{}\n```\n\n*{}, {}*", word.signature, word.kind, word.from);
    let mut html = format!(
        "<pre><code>{}</code></pre><p><em>{}, {}</em></p>",
        escape(&word.signature),
        word.kind,
        escape(&word.from.replace('`', ""))
    );
    if !word.docs.is_empty() {
        plain.push_str(&format!("\n\n{}", word.docs));
        markdown.push_str(&format!("\n\n{}", word.docs));
        for paragraph in word.docs.split("\n\n") {
            html.push_str(&format!("<p style=\"white-space: pre-wrap\">{}</p>", escape(paragraph)));
        }
    }
    if !members.is_empty() {
        plain.push('\n');
        markdown.push('\n');
        html.push_str("<ul>");
        for member in &members {
            plain.push_str(&format!("\n    {}", member.signature));
            markdown.push_str(&format!("\n- `{}`", member.signature));
            html.push_str(&format!("<li><code>{}</code></li>", escape(&member.signature)));
        }
        html.push_str("</ul>");
    }
    let forms = [("text/plain", plain), ("text/markdown", markdown), ("text/html", html)];
    forms.into_iter().map(|(mime, text)| (mime.to_owned(), Value::String(text))).collect()
}

fn escape(text: &str) -> String {
    text.replace('&', "&amp;").replace('<', "&lt;").replace('>', "&gt;").replace('"', "&quot;")
}
