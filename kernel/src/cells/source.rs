//! Generated text that remembers which of its bytes a person wrote.
//!
//! A cell is compiled inside text that nobody sees. What the compiler says is about places in that
//! text; people are told places in their cells.

use std::ops::Range;
use std::sync::Arc;

/// The text of one cell as the person wrote it.
#[derive(Debug, PartialEq, Eq)]
pub struct CellText {
    /// The number by which the person knows it.
    pub number: u32,
    /// The whole text, header included.
    pub text: String,
}

/// What a stretch of generated text stands for.
#[derive(Debug, Clone, PartialEq)]
pub enum Origin {
    /// A stretch of a cell, from this byte on.
    Cell(Arc<CellText>, usize),
    /// Text that takes the named variable off the shelf.
    Take(String),
    /// Text that puts the named new variable on the shelf.
    Keep(String),
    /// Text that puts the named taken variable back.
    Return(String),
    /// Text that makes the compiler tell the type of the named variable.
    Type(String),
    /// An import of an earlier cell's `use` line, by its place in the account.
    Import(usize),
}

#[derive(Debug, Clone)]
struct Stretch {
    range: Range<usize>,
    origin: Origin,
}

/// Generated text under construction, and the account of its stretches.
#[derive(Debug, Clone, Default)]
pub struct Generated {
    text: String,
    stretches: Vec<Stretch>,
}

/// A place in a cell.
#[derive(Debug, Clone, PartialEq)]
pub struct Place {
    /// The cell.
    pub cell: Arc<CellText>,
    /// Its bytes.
    pub range: Range<usize>,
}

impl Place {
    /// The line in the cell, from 1.
    pub fn line(&self) -> u32 {
        line_of(&self.cell.text, self.range.start)
    }
}

/// The line, from 1, that holds this byte.
pub fn line_of(text: &str, at: usize) -> u32 {
    let before = &text.as_bytes()[..at.min(text.len())];
    1 + before.iter().filter(|byte| **byte == b'\n').count() as u32
}

impl Generated {
    /// The text so far.
    pub fn text(&self) -> &str {
        &self.text
    }

    /// Adds text of the kernel's own.
    pub fn own(&mut self, text: &str) {
        self.text.push_str(text);
    }

    /// Adds text that stands for something.
    pub fn of(&mut self, origin: Origin, text: &str) {
        let start = self.text.len();
        self.text.push_str(text);
        self.stretches.push(Stretch { range: start..self.text.len(), origin });
    }

    /// Adds a stretch of a cell.
    pub fn cell(&mut self, cell: &Arc<CellText>, range: Range<usize>) {
        if !range.is_empty() {
            self.of(Origin::Cell(Arc::clone(cell), range.start), &cell.text[range]);
        }
    }

    /// Adds a stretch of a cell with insertions and deletions, which must be in order.
    pub fn edited(&mut self, cell: &Arc<CellText>, range: Range<usize>, edits: &[Edit]) {
        let mut at = range.start;
        for edit in
            edits.iter().filter(|e| e.range.start >= range.start && e.range.end <= range.end)
        {
            self.cell(cell, at..edit.range.start);
            self.own(&edit.text);
            at = edit.range.end;
        }
        self.cell(cell, at..range.end);
    }

    /// Replaces a placeholder of the kernel's own by text of the same length.
    pub fn fill(&mut self, placeholder: &str, text: &str) {
        assert_eq!(placeholder.len(), text.len(), "the account of stretches must stay true");
        self.text = self.text.replace(placeholder, text);
    }

    /// What the stretch at these bytes stands for; a range at a seam belongs to the stretch that it
    /// begins in, or else to the one that it ends in.
    pub fn origin(&self, range: &Range<usize>) -> Option<&Origin> {
        self.stretch(range.start)
            .or_else(|| self.stretch(range.end.saturating_sub(1)))
            .map(|stretch| &stretch.origin)
    }

    fn stretch(&self, at: usize) -> Option<&Stretch> {
        let after = self.stretches.partition_point(|stretch| stretch.range.start <= at);
        self.stretches[..after].last().filter(|stretch| at < stretch.range.end)
    }

    /// The place in a cell that these bytes of the generated text came from.
    pub fn place(&self, range: &Range<usize>) -> Option<Place> {
        let (start_cell, start) = self.cell_byte(range.start).or_else(|| {
            // An empty range at the end of a stretch, as for "expected something here".
            let before = range.start.checked_sub(1).filter(|_| range.is_empty())?;
            self.cell_byte(before).map(|(cell, at)| (cell, at + 1))
        })?;
        let end = match range.end.checked_sub(1).and_then(|last| self.cell_byte(last)) {
            Some((cell, last)) if Arc::ptr_eq(&cell, &start_cell) && last + 1 >= start => last + 1,
            _ => start,
        };
        let end = ceil_boundary(&start_cell.text, end);
        Some(Place { cell: start_cell, range: start..end })
    }

    fn cell_byte(&self, at: usize) -> Option<(Arc<CellText>, usize)> {
        let stretch = self.stretch(at)?;
        match &stretch.origin {
            Origin::Cell(cell, start) => Some((Arc::clone(cell), start + at - stretch.range.start)),
            _ => None,
        }
    }

    /// The byte at this line and column (both from 1; columns are characters).
    pub fn byte_at(&self, line: u32, column: u32) -> Option<usize> {
        let start = match line {
            0 | 1 => 0,
            _ => self.text.match_indices('\n').nth(line as usize - 2)?.0 + 1,
        };
        let rest = &self.text[start..];
        let (offset, _) = rest.char_indices().nth(column.saturating_sub(1) as usize)?;
        Some(start + offset)
    }
}

fn ceil_boundary(text: &str, mut at: usize) -> usize {
    while !text.is_char_boundary(at) {
        at += 1;
    }
    at
}

/// A change to a cell's text on its way into generated text.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Edit {
    /// Which bytes of the cell go; empty for an insertion.
    pub range: Range<usize>,
    /// What comes in their place.
    pub text: String,
}

impl Edit {
    /// An insertion.
    pub fn insert(at: usize, text: impl Into<String>) -> Self {
        Self { range: at..at, text: text.into() }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cell(text: &str) -> Arc<CellText> {
        Arc::new(CellText { number: 1, text: text.to_owned() })
    }

    #[test]
    fn places_lead_back_through_insertions() {
        let cell = cell("for x in y { z }");
        let mut generated = Generated::default();
        generated.own("fn f() {\n");
        generated.edited(&cell, 0..16, &[Edit::insert(12, "check();")]);
        let at = generated.text().find("z }").unwrap();
        let place = generated.place(&(at..at + 1)).unwrap();
        assert_eq!(&cell.text[place.range], "z");
        let inserted = generated.text().find("check").unwrap();
        assert_eq!(generated.place(&(inserted..inserted + 5)), None);
        let whole = generated.text().find("for").unwrap();
        let place = generated.place(&(whole..generated.text().len())).unwrap();
        assert_eq!(place.range, 0..16);
    }

    #[test]
    fn deletions_leave_the_rest_in_place() {
        let cell = cell("pub(crate) fn f() {}");
        let mut generated = Generated::default();
        generated.edited(&cell, 0..20, &[Edit { range: 0..10, text: "pub".into() }]);
        assert_eq!(generated.text(), "pub fn f() {}");
        let at = generated.text().find('f').unwrap();
        assert_eq!(generated.place(&(at..at + 2)).unwrap().range, 11..13);
    }

    #[test]
    fn lines_and_columns_count_characters() {
        let mut generated = Generated::default();
        generated.own("a\nä = b\n");
        let at = generated.byte_at(2, 5).unwrap();
        assert_eq!(&generated.text()[at..=at], "b");
        assert_eq!(generated.byte_at(9, 1), None);
    }
}
