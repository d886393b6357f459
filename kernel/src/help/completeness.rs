//! Whether a cell can be run as it stands or somebody is still typing it.

use syn::parse::Parser;

use super::lexer::{FrontMatter, TokenKind, front_matter, tokens};

/// One step of indentation.
const INDENT: usize = 4;

/// What a cell needs before it can be run.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Completeness {
    /// Nothing.
    Complete,
    /// More lines.
    Incomplete {
        /// What the next line should begin with.
        indent: String,
    },
    /// A correction; more lines cannot make it Rust.
    Invalid,
}

/// Judges a cell.
///
/// A cell is incomplete while its front matter, a string, a comment or a delimiter is open, and while
/// the parser stops at the very end of the text. A closer without its opener, and a mistake before
/// the end, are invalid.
pub fn completeness(code: &str) -> Completeness {
    let code = match front_matter(code) {
        FrontMatter::None => code,
        FrontMatter::Open { .. } => return incomplete(0),
        FrontMatter::Closed { rest, .. } => &code[rest..],
    };
    let mut open = Vec::new();
    for token in tokens(code) {
        match token.kind {
            TokenKind::Open(byte) => open.push(closer(byte)),
            TokenKind::Close(byte) if open.pop() != Some(byte) => return Completeness::Invalid,
            TokenKind::Text { closed: false } => return incomplete(0),
            TokenKind::Comment { closed: false } if !token.text(code).starts_with("//") => {
                return incomplete(0);
            }
            _ => {}
        }
    }
    if !open.is_empty() {
        return incomplete(open.len());
    }
    match syn::Block::parse_within.parse_str(code) {
        Ok(_) => Completeness::Complete,
        Err(_) if ends_with_attributes(code) => incomplete(0),
        // The parser's words for a mistake that is only the end of the text.
        Err(error) if error.to_string().starts_with("unexpected end of input") => {
            incomplete(if ends_in_a_statement(code) { 1 } else { 0 })
        }
        Err(_) if lacks_semicolon(code) => incomplete(0),
        Err(_) => Completeness::Invalid,
    }
}

/// `let x = 1` may go on in the next line.
fn lacks_semicolon(code: &str) -> bool {
    syn::Block::parse_within.parse_str(&format!("{code}\n;")).is_ok()
}

fn incomplete(depth: usize) -> Completeness {
    Completeness::Incomplete { indent: " ".repeat(depth * INDENT) }
}

fn closer(open: u8) -> u8 {
    match open {
        b'(' => b')',
        b'[' => b']',
        _ => b'}',
    }
}

/// Documentation or attributes wait for their item.
fn ends_with_attributes(code: &str) -> bool {
    syn::Block::parse_within.parse_str(&format!("{code}\nfn waiting() {{}}")).is_ok()
        && code.lines().rev().map(str::trim).find(|line| !line.is_empty()).is_some_and(|line| {
            line.starts_with("///") || line.starts_with("/**") || line.ends_with(']')
        })
}

/// `let x =` goes on indented, `fn f()` goes on with a brace.
fn ends_in_a_statement(code: &str) -> bool {
    matches!(tokens(code).last().map(|token| token.kind), Some(TokenKind::Sign(_)))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn whole_cells_are_complete() {
        for code in [
            "",
            "  \n// only a comment",
            "let x = 1;",
            "let x = 1;\nx + 1",
            "use std::fmt;\nfn f() {}\nstruct S;\nf()",
            "read_table(\"a.csv\")?",
            "---\n[cell]\nseed = 1\n---\nlet y = r#\"(\"#;",
            "---\n[dependencies]\n---\n",
            "#[derive(Debug)]\nstruct Tile { w: f64 }",
            "println!(\"{}\", 'a')",
            "macro_rules! m { () => { 1 } }",
        ] {
            assert_eq!(completeness(code), Completeness::Complete, "{code:?}");
        }
    }

    #[test]
    fn cells_that_lack_their_end_ask_for_more() {
        let cases = [
            ("fn f() {", "    "),
            ("let v = vec![\n    f(", "        "),
            ("let x =", "    "),
            ("x.", "    "),
            ("let x = 1", ""),
            ("fn f()", ""),
            ("let s = \"abc", ""),
            ("/* still", ""),
            ("---\n[cell]\n", ""),
            ("---\n[cell]\n--", ""),
            ("if a {} else", ""),
            ("#[derive(Debug)]", ""),
            ("/// A tile.", ""),
        ];
        for (code, indent) in cases {
            let expected = Completeness::Incomplete { indent: indent.to_owned() };
            assert_eq!(completeness(code), expected, "{code:?}");
        }
    }

    #[test]
    fn what_no_line_can_mend_is_invalid() {
        for code in ["f())", "(]", "let = 2;", "fn fn", "a b", "x = = y;"] {
            assert_eq!(completeness(code), Completeness::Invalid, "{code:?}");
        }
    }
}
