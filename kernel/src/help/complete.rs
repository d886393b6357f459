//! What could stand at the cursor.

use std::collections::BTreeSet;

use super::index::Index;
use super::lexer::{FrontMatter, Token, TokenKind, byte_of, chars_before, front_matter, tokens};
use super::types::Known;
use super::words::{self, Word};
use crate::cells::types::Scope;

/// Suggestions and the stretch of text that they replace, in code points.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Completions {
    /// The suggestions, the nearest first: what the session defines before what is preloaded.
    pub matches: Vec<Completion>,
    /// The first code point to be replaced.
    pub start: usize,
    /// The code point after the last.
    pub end: usize,
}

/// One suggestion.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Completion {
    /// What to insert.
    pub text: String,
    /// What it is, in one word.
    pub kind: String,
    /// Its declaration, shown beside it.
    pub signature: String,
}

/// The settings that a cell's header knows, by section.
const HEADER: [(&str, &[(&str, &str)]); 2] = [
    ("dependencies", &[]),
    (
        "cell",
        &[
            ("optimise = ", "optimise = 0..3: how far the compiler optimises this cell"),
            ("seed = ", "seed = N: where this cell's random numbers start"),
        ],
    ),
];

/// Suggests what could stand at a cursor, given in code points.
pub fn complete(code: &str, cursor_chars: usize, scope: &Scope, index: &Index) -> Completions {
    let cursor = byte_of(code, cursor_chars);
    let rust = match front_matter(code) {
        FrontMatter::None => 0,
        FrontMatter::Open { inner } if cursor >= inner => return in_header(code, inner, cursor),
        FrontMatter::Closed { inner, fence, .. } if cursor >= inner && cursor < fence => {
            return in_header(code, inner, cursor);
        }
        FrontMatter::Closed { rest, .. } if cursor >= rest => rest,
        _ => return nothing(code, cursor),
    };
    let before = &code[rust..cursor];
    let mut pieces = tokens(before);
    if let Some(last) = pieces.last() {
        let inside = matches!(
            last.kind,
            TokenKind::Text { closed: false }
                | TokenKind::Comment { closed: false }
                | TokenKind::Number
                | TokenKind::Lifetime
        );
        if inside && last.end == before.len() {
            return nothing(code, cursor);
        }
    }
    pieces.retain(|token| !matches!(token.kind, TokenKind::Comment { .. }));
    let typed = pieces
        .last()
        .filter(|last| last.kind == TokenKind::Ident && last.end == before.len())
        .copied();
    if typed.is_some() {
        pieces.pop();
    }
    let prefix = typed.map_or("", |token| token.text(before));
    let words = candidates(before, &pieces, scope, index);
    Completions {
        matches: matching(words, prefix),
        start: chars_before(code, cursor - prefix.len()),
        end: chars_before(code, cursor),
    }
}

fn nothing(code: &str, cursor: usize) -> Completions {
    let at = chars_before(code, cursor);
    Completions { matches: Vec::new(), start: at, end: at }
}

/// Everything that could follow the pieces in front of what is being typed.
fn candidates(before: &str, pieces: &[Token], scope: &Scope, index: &Index) -> Vec<Word> {
    let known = Known { code: before, tokens: pieces, scope, index };
    let Some(last) = pieces.len().checked_sub(1) else { return anything(&known) };
    match pieces[last].kind {
        TokenKind::Sign(b'.') => {
            let owner = last.checked_sub(1).and_then(|before| known.owner_before(before));
            let mut members =
                owner.map_or(Vec::new(), |owner| words::members(&owner, scope, index));
            members.retain(|word| matches!(word.kind, "method" | "field"));
            members
        }
        TokenKind::PathSeparator => {
            let owner = last.checked_sub(1).map(|before_it| pieces[before_it].text(before));
            let mut members = owner.map_or(Vec::new(), |owner| words::members(owner, scope, index));
            members.retain(|word| word.kind != "field");
            members
        }
        // A name of its own is being given here.
        TokenKind::Ident
            if ["fn", "struct", "enum", "trait", "mod"].contains(&pieces[last].text(before)) =>
        {
            Vec::new()
        }
        _ => anything(&known),
    }
}

fn anything(known: &Known<'_>) -> Vec<Word> {
    let mut words: Vec<Word> = named_here(known);
    words.extend(words::variables(known.scope));
    words.extend(words::items(known.scope));
    words.extend(words::preloaded(known.index));
    words.extend(words::standard());
    words.extend(words::keywords());
    words
}

/// The names that the cell itself has given so far.
fn named_here(known: &Known<'_>) -> Vec<Word> {
    let text = |token: &Token| token.text(known.code);
    let mut names = Vec::new();
    for (at, token) in known.tokens.iter().enumerate() {
        let kind = match text(token) {
            "let" | "for" => "variable",
            "fn" => "function",
            "struct" => "struct",
            "enum" => "enum",
            "const" => "const",
            _ => continue,
        };
        let named = known.tokens[at + 1..]
            .iter()
            .find(|next| next.kind == TokenKind::Ident && text(next) != "mut");
        if let Some(named) = named {
            names.push(Word {
                name: text(named).to_owned(),
                kind,
                signature: String::new(),
                docs: String::new(),
                from: "in this cell".to_owned(),
            });
        }
    }
    names
}

/// Those that begin with what was typed, in their order; if there are none, those that do so in
/// another case.
fn matching(words: Vec<Word>, prefix: &str) -> Vec<Completion> {
    let lower = prefix.to_lowercase();
    let exact = words.iter().any(|word| word.name.starts_with(prefix));
    let mut seen = BTreeSet::new();
    words
        .into_iter()
        .filter(|word| match exact {
            true => word.name.starts_with(prefix),
            false => word.name.to_lowercase().starts_with(&lower),
        })
        .filter(|word| seen.insert(word.name.clone()))
        .map(|word| Completion {
            text: word.name,
            kind: word.kind.to_owned(),
            signature: word.signature,
        })
        .collect()
}

fn in_header(code: &str, inner: usize, cursor: usize) -> Completions {
    let before = &code[inner..cursor];
    let line = before.rsplit('\n').next().unwrap_or_default();
    let typed = line.trim_start();
    let start = cursor - typed.len();
    let section = before
        .lines()
        .rev()
        .skip(usize::from(!line.is_empty()))
        .find_map(|line| line.trim().strip_prefix('[')?.strip_suffix(']'));
    let sections = HEADER.iter().map(|(name, _)| (format!("[{name}]"), "section", String::new()));
    let keys = HEADER
        .iter()
        .filter(|(name, _)| section == Some(*name))
        .flat_map(|(_, keys)| keys.iter())
        .map(|(key, meaning)| ((*key).to_owned(), "setting", (*meaning).to_owned()));
    let matches = keys
        .chain(sections)
        .filter(|(text, ..)| text.starts_with(typed) && !code[inner..].contains(text.as_str()))
        .map(|(text, kind, signature)| Completion { text, kind: kind.to_owned(), signature })
        .collect();
    Completions { matches, start: chars_before(code, start), end: chars_before(code, cursor) }
}
