//! Text from outside made harmless: escaped for markup, visible in consoles, cut when long.
//!
//! A label may hold anything that a file can hold. Control characters would move a console's
//! cursor and are not even allowed in XML, and the characters that override the direction of
//! writing could make a label read as something else than it says; both are shown as Rust writes
//! them in a string literal (`\n`, `\u{202e}`). Everything else is shown as it is.

use std::borrow::Cow;

use unicode_width::UnicodeWidthStr;

/// Replaces what cannot be shown by its Rust escape.
pub(crate) fn visible(text: &str) -> Cow<'_, str> {
    if !text.chars().any(is_invisible) {
        return Cow::Borrowed(text);
    }
    let mut out = String::with_capacity(text.len() + 16);
    for c in text.chars() {
        match c {
            '\n' => out.push_str("\\n"),
            '\r' => out.push_str("\\r"),
            '\t' => out.push_str("\\t"),
            c if is_invisible(c) => out.extend(c.escape_unicode()),
            c => out.push(c),
        }
    }
    Cow::Owned(out)
}

/// Appends text escaped for HTML and SVG, in elements and in quoted attributes alike.
pub(crate) fn push_markup(out: &mut String, text: &str) {
    for c in visible(text).chars() {
        match c {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            '\'' => out.push_str("&#39;"),
            c => out.push(c),
        }
    }
}

/// Cuts text to at most `most` characters, the last of them an ellipsis when something is lost.
pub(crate) fn shortened(text: &str, most: usize) -> Cow<'_, str> {
    match text.char_indices().nth(most) {
        None => Cow::Borrowed(text),
        Some(_) => {
            let kept: String = text.chars().take(most.saturating_sub(1)).collect();
            Cow::Owned(format!("{}…", kept.trim_end()))
        }
    }
}

/// The number of console cells that text takes.
pub(crate) fn console_width(text: &str) -> usize {
    UnicodeWidthStr::width(text)
}

fn is_invisible(c: char) -> bool {
    let overrides_direction = matches!(c, '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}');
    let breaks_line = matches!(c, '\u{2028}' | '\u{2029}');
    let not_in_xml = matches!(c, '\u{fffe}' | '\u{ffff}');
    c.is_control() || overrides_direction || breaks_line || not_in_xml
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn markup_cannot_be_smuggled_in() {
        let mut out = String::new();
        push_markup(&mut out, "<script>alert('x' & \"y\")</script>");
        assert_eq!(out, "&lt;script&gt;alert(&#39;x&#39; &amp; &quot;y&quot;)&lt;/script&gt;");
    }

    #[test]
    fn control_characters_become_visible() {
        assert_eq!(visible("a\nb\u{1b}[31m"), "a\\nb\\u{1b}[31m");
        assert_eq!(visible("abc\u{202e}def"), "abc\\u{202e}def");
        assert_eq!(visible("\u{0}"), "\\u{0}");
    }

    #[test]
    fn ordinary_text_of_any_script_is_untouched() {
        for text in ["Größe", "عرض", "高さ", "🧱", "it's", ""] {
            assert_eq!(visible(text), text);
        }
    }

    #[test]
    fn long_text_is_cut_at_characters() {
        assert_eq!(shortened("tile", 4), "tile");
        assert_eq!(shortened("tiles", 4), "til…");
        assert_eq!(shortened("高さ高さ高さ", 3), "高さ…");
    }

    #[test]
    fn console_cells_are_counted_not_bytes() {
        // East Asian wide characters take two cells: Unicode Standard Annex 11.
        assert_eq!(console_width("高さ"), 4);
        assert_eq!(console_width("Größe"), 5);
        assert_eq!(console_width("e\u{301}"), 1);
    }
}
