//! How a file of text departs from the usual.

/// What [`read_table_with`](super::read_table_with) should know about a file of text. Binary
/// kinds and JSON lines say it all themselves.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct TableOptions {
    pub(super) delimiter: Option<char>,
    pub(super) decimal_comma: bool,
    pub(super) missing: Vec<String>,
    pub(super) unnamed: Option<String>,
}

impl TableOptions {
    /// The usual choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// The character between fields, instead of the one that the extension implies: one character
    /// of ASCII that is neither a letter, a digit, a quote nor a line end.
    pub fn delimiter(mut self, delimiter: char) -> Self {
        self.delimiter = Some(delimiter);
        self
    }

    /// Numbers are written with a comma: `40,1`.
    pub fn decimal_comma(mut self) -> Self {
        self.decimal_comma = true;
        self
    }

    /// More words that mean a missing value, beside those of [`read_table`](super::read_table).
    pub fn missing<S: Into<String>>(mut self, words: impl IntoIterator<Item = S>) -> Self {
        self.missing.extend(words.into_iter().map(Into::into));
        self
    }

    /// A name for a column whose header is empty, as for row names written without one.
    pub fn unnamed(mut self, name: impl Into<String>) -> Self {
        self.unnamed = Some(name.into());
        self
    }
}
