//! Exhibits: what a value shows in the notebook.
//!
//! A value that implements [`Exhibit`] yields a [`Bundle`]: the same content in several forms, of
//! which a client shows the richest one it knows. Tables come as HTML and as plain text, charts
//! as SVG and as a description in words, and both are escaped: no name, label or value from a
//! user's file can act as markup or move a console's cursor.
//!
//! Conventions: numbers are rounded to a stated count of significant digits; what is left out of
//! a long table or a crowded chart is counted there; nothing depends on a clock, so equal values
//! have equal exhibits.

mod chart;
mod tables;

mod frames;
mod matrices;
mod values;

mod numbers;
mod text;

#[cfg(test)]
mod tests;

pub use chart::{
    Chart, Intervals, Names, Reference, Turntable, VarianceBand, biplot, contribution_plot,
    correlation_map, distance_plot, loading_bars, loading_plot, pairs, profiles, rotation_plot,
    score_matrix, score_plot, scree, sequence_plot, structure_circle, turntable, variance_shares,
};
pub use numbers::{fixed, significant, stored};
pub use tables::{NumberFormat, Table, TableColumn};

pub(crate) use numbers::{counted, grouped};
pub(crate) use tables::{Abridged, stacked};

/// The MIME type of the numbers behind a chart or a table, as JSON: for whoever checks or reuses them.
pub const NUMBERS: &str = "application/vnd.semiaxis.numbers+json";

/// The same content in several forms; a client shows the richest one it knows.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Bundle {
    entries: Vec<(String, Content)>,
}

/// One form of an exhibit.
#[derive(Debug, Clone, PartialEq)]
pub enum Content {
    /// Text of any MIME type that is text: plain, HTML, SVG, Markdown, LaTeX.
    Text(String),
    /// Bytes of a binary MIME type such as `image/png`; sent as base64.
    Bytes(Vec<u8>),
    /// A JSON document, for MIME types whose content is JSON itself.
    Json(serde_json::Value),
}

impl Bundle {
    /// An empty bundle shows nothing.
    pub fn new() -> Self {
        Self::default()
    }

    /// Adds one form, replacing an earlier one of the same MIME type.
    pub fn with(mut self, mime: &str, content: Content) -> Self {
        self.entries.retain(|(known, _)| known != mime);
        self.entries.push((mime.to_owned(), content));
        self
    }

    /// Adds the form for consoles and for clients that know nothing richer.
    pub fn with_plain(self, text: impl Into<String>) -> Self {
        self.with("text/plain", Content::Text(text.into()))
    }

    /// Adds the HTML form.
    pub fn with_html(self, html: impl Into<String>) -> Self {
        self.with("text/html", Content::Text(html.into()))
    }

    /// Adds the SVG form.
    pub fn with_svg(self, svg: impl Into<String>) -> Self {
        self.with("image/svg+xml", Content::Text(svg.into()))
    }

    /// The forms, in the order they were added.
    pub fn entries(&self) -> &[(String, Content)] {
        &self.entries
    }

    /// The text of one form, if it is there and is text.
    pub fn text(&self, mime: &str) -> Option<&str> {
        self.entries.iter().find(|(known, _)| known == mime).and_then(
            |(_, content)| match content {
                Content::Text(text) => Some(text.as_str()),
                _ => None,
            },
        )
    }

    /// Whether the bundle shows nothing.
    pub fn is_empty(&self) -> bool {
        self.entries.is_empty()
    }
}

/// A value that says how it wants to be shown.
///
/// Values without it are shown by `Display`, then `Debug`, then the name of their type.
pub trait Exhibit {
    /// The forms of this value; an empty bundle shows nothing.
    fn exhibit(&self) -> Bundle;
}
