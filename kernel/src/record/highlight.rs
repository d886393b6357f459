//! The text of a cell with its parts told apart by colour, from the lexer that help uses too.

use super::markup::escaped;
use crate::help::lexer::{FrontMatter, Token, TokenKind, front_matter, tokens};

/// The keywords of Rust (The Rust Reference, "Keywords", strict ones and `union`, of edition 2024).
const KEYWORDS: [&str; 40] = [
    "as", "async", "await", "break", "const", "continue", "crate", "dyn", "else", "enum", "extern",
    "false", "fn", "for", "gen", "if", "impl", "in", "let", "loop", "match", "mod", "move", "mut",
    "pub", "ref", "return", "self", "Self", "static", "struct", "super", "trait", "true", "type",
    "unsafe", "use", "where", "while", "union",
];

/// A cell as HTML, its header in front.
pub fn highlighted(code: &str) -> String {
    let mut out = String::with_capacity(code.len() * 2);
    let mut at = 0;
    if let FrontMatter::Closed { rest, .. } = front_matter(code) {
        mark(&mut out, "h", &code[..rest]);
        at = rest;
    }
    let all = tokens(code);
    let rust: Vec<&Token> = all.iter().filter(|token| token.start >= at).collect();
    for (idx, token) in rust.iter().enumerate() {
        out.push_str(&escaped(&code[at..token.start]));
        let text = token.text(code);
        match class(token, text, rust.get(idx + 1).map(|next| next.kind)) {
            Some(class) => mark(&mut out, class, text),
            None => out.push_str(&escaped(text)),
        }
        at = token.end;
    }
    out.push_str(&escaped(&code[at..]));
    out
}

fn class(token: &Token, text: &str, next: Option<TokenKind>) -> Option<&'static str> {
    match token.kind {
        TokenKind::Comment { .. } => Some("c"),
        TokenKind::Text { .. } => Some("s"),
        TokenKind::Number => Some("n"),
        TokenKind::Lifetime => Some("l"),
        TokenKind::Ident if KEYWORDS.contains(&text) => Some("k"),
        TokenKind::Ident if next == Some(TokenKind::Sign(b'!')) => Some("m"),
        TokenKind::Ident if text.starts_with(char::is_uppercase) => Some("t"),
        TokenKind::Ident if next == Some(TokenKind::Open(b'(')) => Some("f"),
        _ => None,
    }
}

fn mark(out: &mut String, class: &str, text: &str) {
    out.push_str(&format!("<span class=\"{class}\">{}</span>", escaped(text)));
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn parts_are_told_apart_and_nothing_is_lost() {
        let html = highlighted("let x: Vec<f64> = mean(&y, 1.5); // \"<b>\"\nprintln!(\"{x}\");");
        for expected in [
            "<span class=\"k\">let</span>",
            "<span class=\"t\">Vec</span>&lt;",
            "<span class=\"f\">mean</span>(&amp;y",
            "<span class=\"n\">1.5</span>",
            "<span class=\"c\">// &quot;&lt;b&gt;&quot;</span>",
            "<span class=\"m\">println</span>!",
            "<span class=\"s\">&quot;{x}&quot;</span>",
        ] {
            assert!(html.contains(expected), "{expected} in {html}");
        }
    }

    proptest::proptest! {
        #[test]
        fn any_text_comes_out_as_it_went_in(code in "\\PC*|(---\n[a-z \n]*---\n)?[\"'rb#\\\\/*\n({é0-9.e:<&-]*") {
            let html = highlighted(&code);
            let mut plain = String::new();
            let mut rest = html.as_str();
            while let Some(at) = rest.find('<') {
                plain.push_str(&rest[..at]);
                rest = &rest[at + rest[at..].find('>').unwrap() + 1..];
            }
            plain.push_str(rest);
            let plain = plain.replace("&lt;", "<").replace("&gt;", ">").replace("&quot;", "\"").replace("&amp;", "&");
            proptest::prop_assert_eq!(plain, code);
        }
    }
}
