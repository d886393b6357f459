//! A small SVG writer: elements, escaped text, rounded coordinates, names that do not collide.
//!
//! Two charts on one page must not share element names, and the same chart must give the same
//! bytes each time. So names inside a chart end in a digest of the chart's own content: the
//! writer puts a mark where the digest belongs and fills it in at the end. Equal charts get equal
//! names, which does no harm since they name equal things.

use std::fmt::Write;

use crate::exhibit::text::push_markup;

// Escaped text never holds this character, so it can stand for the digest until the end.
const DIGEST_MARK: char = '\u{0}';

/// An SVG document being written.
pub(super) struct Svg {
    out: String,
}

impl Svg {
    pub fn new() -> Self {
        Svg { out: String::with_capacity(16 * 1024) }
    }

    /// A name for use in `id` attributes and references, unique to this chart.
    pub fn name(stem: &str) -> String {
        format!("{stem}-{DIGEST_MARK}")
    }

    /// Starts an element; finish it with [`Element::done`] or [`Element::around`].
    pub fn element(&mut self, tag: &'static str) -> Element<'_> {
        self.out.push('<');
        self.out.push_str(tag);
        Element { svg: self, tag }
    }

    /// The document with its names filled in.
    pub fn finish(self) -> String {
        let digest = format!("{:016x}", fnv1a(self.out.as_bytes()));
        self.out.replace(DIGEST_MARK, &digest)
    }
}

/// An element whose start tag is still open for attributes.
pub(super) struct Element<'a> {
    svg: &'a mut Svg,
    tag: &'static str,
}

impl Element<'_> {
    /// An attribute with a coordinate or length, rounded to a tenth of a unit.
    pub fn at(self, name: &str, value: f64) -> Self {
        let _ = write!(self.svg.out, " {name}=\"{}\"", tenth(value));
        self
    }

    /// An attribute with text, escaped.
    pub fn with(self, name: &str, value: &str) -> Self {
        let _ = write!(self.svg.out, " {name}=\"");
        if value.contains(DIGEST_MARK) {
            // Only names made by this writer hold the mark, and those need no escaping.
            self.svg.out.push_str(value);
        } else {
            push_markup(&mut self.svg.out, value);
        }
        self.svg.out.push('"');
        self
    }

    /// Ends an element that holds nothing.
    pub fn done(self) {
        self.svg.out.push_str("/>");
    }

    /// Ends an element that holds text only.
    pub fn text(self, text: &str) {
        self.svg.out.push('>');
        push_markup(&mut self.svg.out, text);
        let _ = write!(self.svg.out, "</{}>", self.tag);
    }

    /// Ends an element after writing what it holds.
    pub fn around(self, children: impl FnOnce(&mut Svg)) {
        self.svg.out.push('>');
        children(self.svg);
        let _ = write!(self.svg.out, "</{}>", self.tag);
    }
}

/// A coordinate with at most one decimal, as short as it can be written.
pub(super) fn tenth(value: f64) -> String {
    // Coordinates are checked to be finite before anything is drawn; a zero keeps the document
    // well-formed should one slip through.
    let tenths = if value.is_finite() { (value * 10.0).round() as i64 } else { 0 };
    let sign = if tenths < 0 { "-" } else { "" };
    let (whole, part) = (tenths.unsigned_abs() / 10, tenths.unsigned_abs() % 10);
    match part {
        0 => format!("{sign}{whole}"),
        _ if whole == 0 => format!("{sign}.{part}"),
        _ => format!("{sign}{whole}.{part}"),
    }
}

// Fowler, Noll and Vo's hash, variant 1a, 64 bits. It need not resist attacks: a
// collision costs no more than a shared name.
pub(super) fn fnv1a(bytes: &[u8]) -> u64 {
    bytes.iter().fold(0xcbf2_9ce4_8422_2325, |hash, &byte| {
        (hash ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01b3)
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn coordinates_are_short() {
        assert_eq!(tenth(12.0), "12");
        assert_eq!(tenth(12.34), "12.3");
        assert_eq!(tenth(-0.04), "0");
        assert_eq!(tenth(-0.06), "-.1");
        assert_eq!(tenth(f64::NAN), "0");
    }

    #[test]
    fn the_digest_is_the_published_hash() {
        // Test vectors of the authors for the empty string and "a" (from memory).
        assert_eq!(fnv1a(b""), 0xcbf2_9ce4_8422_2325);
        assert_eq!(fnv1a(b"a"), 0xaf63_dc4c_8601_ec8c);
    }

    #[test]
    fn names_differ_between_charts_and_agree_within_one() {
        let draw = |label: &str| {
            let mut svg = Svg::new();
            svg.element("g").with("id", &Svg::name("marks")).around(|svg| {
                svg.element("text").text(label);
            });
            svg.finish()
        };
        assert_eq!(draw("a"), draw("a"));
        assert_ne!(draw("a")[..30], draw("b")[..30]);
        assert!(!draw("a\u{0}").contains('\u{0}'));
    }
}
