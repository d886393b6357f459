//! Text where it enters HTML, and a few words that several parts of a page need.

/// Text as HTML, for content and for attributes in double quotes.
pub fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len() + 16);
    for c in text.chars() {
        match c {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            // Not allowed in HTML at all (HTML Living Standard, 13.1.4), so it is shown as what it is.
            c if c.is_control() && !matches!(c, '\n' | '\t') => out.push('\u{fffd}'),
            c => out.push(c),
        }
    }
    out
}

/// A size for a person.
pub fn size(bytes: u64) -> String {
    match bytes {
        0..1_000 => format!("{bytes} bytes"),
        1_000..1_000_000 => format!("{:.1} kB", bytes as f64 / 1e3),
        1_000_000..1_000_000_000 => format!("{:.1} MB", bytes as f64 / 1e6),
        _ => format!("{:.1} GB", bytes as f64 / 1e9),
    }
}

/// A duration in milliseconds for a person.
pub fn milliseconds(time: f64) -> String {
    match time {
        t if t < 1_000.0 => format!("{t:.0} ms"),
        t if t < 60_000.0 => format!("{:.1} s", t / 1e3),
        t => format!("{:.0} min {:.0} s", (t / 60_000.0).floor(), (t % 60_000.0) / 1e3),
    }
}

/// The first part of a text that is longer than `most` bytes, cut between characters.
pub fn head(text: &str, most: usize) -> &str {
    let mut end = text.len().min(most);
    while !text.is_char_boundary(end) {
        end -= 1;
    }
    &text[..end]
}
