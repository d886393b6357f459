//! How much room text takes.
//!
//! A reader's browser picks the font, so no width is exact. Text is measured in DejaVu Sans, a
//! font that runs wider than the usual interface fonts: what has room by this measure has room in
//! them. The same font files draw the text of PNG pictures.

use std::sync::OnceLock;

use ttf_parser::Face;

use crate::exhibit::text::visible;

/// The fonts that a browser may use; the last is the one that text is measured in.
pub(super) const FONTS: &str = "system-ui, -apple-system, 'Segoe UI', Roboto, 'Helvetica Neue', Arial, 'DejaVu Sans', sans-serif";

/// How heavy text is set.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Weight {
    Regular,
    Bold,
}

/// The width of text at a font size, as it will be written (control characters escaped).
pub(super) fn width(text: &str, size: f64, weight: Weight) -> f64 {
    visible(text).chars().map(|c| advance(c, weight)).sum::<f64>() * size
}

/// Cuts text so that it takes at most `most` at a font size.
pub(super) fn fitted(text: &str, size: f64, weight: Weight, most: f64) -> String {
    let text = visible(text);
    if width(&text, size, weight) <= most {
        return text.into_owned();
    }
    let mut left = most / size - advance('…', weight);
    let mut kept = String::new();
    for c in text.chars() {
        left -= advance(c, weight);
        if left < 0.0 {
            break;
        }
        kept.push(c);
    }
    format!("{}…", kept.trim_end())
}

/// Breaks text at spaces into lines of at most `most`; a word that is longer gets its own line.
pub(super) fn wrapped(text: &str, size: f64, most: f64) -> Vec<String> {
    let mut lines: Vec<String> = Vec::new();
    for word in text.split(' ') {
        match lines.last_mut() {
            Some(line) if width(&format!("{line} {word}"), size, Weight::Regular) <= most => {
                line.push(' ');
                line.push_str(word);
            }
            _ => lines.push(word.to_owned()),
        }
    }
    lines.into_iter().map(|line| fitted(&line, size, Weight::Regular, most)).collect()
}

// In units of the font size.
fn advance(c: char, weight: Weight) -> f64 {
    // Characters of other scripts and emoji come from fonts that are not known here; one em is
    // what full-width characters take.
    const UNKNOWN: f64 = 1.0;
    let Some(face) = face(weight) else { return UNKNOWN };
    match face.glyph_index(c).and_then(|glyph| face.glyph_hor_advance(glyph)) {
        Some(units) => f64::from(units) / f64::from(face.units_per_em()),
        None => UNKNOWN,
    }
}

fn face(weight: Weight) -> Option<&'static Face<'static>> {
    static REGULAR: OnceLock<Option<Face<'static>>> = OnceLock::new();
    static BOLD: OnceLock<Option<Face<'static>>> = OnceLock::new();
    let (cell, data): (_, fn() -> &'static [u8]) = match weight {
        Weight::Regular => (&REGULAR, dejavu::sans::regular),
        Weight::Bold => (&BOLD, dejavu::sans::bold),
    };
    cell.get_or_init(|| Face::parse(data(), 0).ok()).as_ref()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_fonts_are_there() {
        assert!(face(Weight::Regular).is_some());
        assert!(face(Weight::Bold).is_some());
    }

    #[test]
    fn widths_are_those_of_the_font() {
        // DejaVu Sans 2.37, table hmtx: i is 569 and M 1767 units of 2048 wide, as
        // fontTools 4.68.0 reads them from the file that the `dejavu` crate embeds.
        assert!((width("i", 2048.0, Weight::Regular) - 569.0).abs() < 1e-9);
        assert!((width("M", 2048.0, Weight::Regular) - 1767.0).abs() < 1e-9);
        assert!(width("kiln", 12.0, Weight::Bold) > width("kiln", 12.0, Weight::Regular));
    }

    #[test]
    fn cut_text_fits() {
        let long = "a very long name of a tile ".repeat(20);
        for most in [10.0, 40.0, 100.0, 333.0] {
            let cut = fitted(&long, 11.0, Weight::Regular, most);
            assert!(width(&cut, 11.0, Weight::Regular) <= most || cut == "…", "{cut}");
            assert!(cut.ends_with('…'));
        }
        assert_eq!(fitted("short", 11.0, Weight::Regular, 100.0), "short");
    }

    #[test]
    fn wrapped_text_keeps_every_word() {
        let text = "Ellipses hold 95 per cent of a normal distribution";
        let lines = wrapped(text, 11.0, 120.0);
        assert!(lines.len() > 1);
        assert_eq!(lines.join(" "), text);
    }
}
