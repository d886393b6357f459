//! Charts that can go into a report: which components matter, where the units lie, what the
//! components are made of.
//!
//! A chart is a builder with few settings; it is drawn when it is shown, asked for its
//! [`svg`](Chart::svg) or [`save`](Chart::save)d. Conventions: components are counted from 1;
//! planes of two components have equal scales; coordinates are rounded and nothing depends on a
//! clock, so the same chart gives the same bytes; up to 20 000 units are drawn one by one, and
//! beyond that they are counted in hexagons, which the chart says.
//!
//! Charts are written by the small SVG writer of this module, because they need what general
//! plotting crates do not write: a title and a description for screen readers, a hover text for
//! each mark, names that do not collide on a page, and text that was measured.

mod names;
mod picture;
mod settings;
mod source;

mod bars;
mod biplot;
mod circle;
mod contributions;
mod correlations;
mod distances;
mod loadings;
mod matrix;
mod pairs;
mod profiles;
mod scores;
mod scree;
mod sequence;
mod shares;
mod turned;
mod turntable;

mod arrows;
mod groups;
mod references;
mod units;

mod card;
mod cloud;
mod ellipse;
mod frame;
mod hull;
mod labels;
mod marks;
mod measure;
mod palette;
mod plane;
mod row_names;
mod save;
mod svg;
mod ticks;

#[cfg(test)]
mod tests;

use std::path::Path;
use std::sync::Arc;

pub use bars::loading_bars;
pub use biplot::biplot;
pub use circle::structure_circle;
pub use contributions::contribution_plot;
pub use correlations::correlation_map;
pub use distances::distance_plot;
pub use loadings::loading_plot;
pub use matrix::score_matrix;
pub use names::Names;
pub use pairs::pairs;
pub use profiles::profiles;
pub use scores::score_plot;
pub use scree::scree;
pub use sequence::sequence_plot;
pub use settings::{Intervals, Reference, VarianceBand};
pub use shares::variance_shares;
pub use turned::rotation_plot;
pub use turntable::{Turntable, turntable};

use self::card::Card;
use self::picture::{Drawing, Picture};
use self::settings::Settings;
use super::text::visible;
use super::{Bundle, Content, Exhibit, NUMBERS};
use crate::error::Result;

/// A chart of an analysis, with its settings.
///
/// Marks carry their unit's name and values as hover texts. A client that inlines the SVG, such
/// as a notebook converted to HTML, shows them; one that shows it as a picture does not.
///
/// A setting that does not fit (a component that does not exist, as many groups as there are not
/// units) is reported by [`check`](Chart::check) and [`save`](Chart::save), and shown in place of
/// the drawing.
#[derive(Debug, Clone)]
pub struct Chart {
    picture: Arc<dyn Picture>,
    settings: Settings,
}

// Bytes of SVG from which on a PNG takes too long to be made unasked.
const LARGE: usize = 100_000;

impl Chart {
    fn new(picture: impl Picture + 'static) -> Self {
        Chart { picture: Arc::new(picture), settings: Settings::default() }
    }

    /// The two components to draw, counted from 1: first the one that runs sideways.
    pub fn components(mut self, sideways: usize, upwards: usize) -> Self {
        self.settings.components = Some((sideways, upwards));
        self
    }

    /// The group of each unit, drawn by colour and shape; a legend tells which is which.
    ///
    /// Groups get an ellipse each, see [`coverage`](Chart::coverage).
    pub fn groups(mut self, groups: impl Names) -> Self {
        self.settings.groups = Some(groups.into_names());
        self
    }

    /// Other names for the units, or in a loading plot for the variables.
    pub fn labels(mut self, labels: impl Names) -> Self {
        self.settings.labels = Some(labels.into_names());
        self
    }

    /// Another title.
    pub fn title(mut self, title: impl Into<String>) -> Self {
        self.settings.title = Some(title.into());
        self
    }

    /// Another size, in pixels at full scale: from 240 to 4000 each. Without it, 720 by 560, a
    /// scree 720 by 480. A chart grows in height when its notes would crush the drawing.
    pub fn size(mut self, width: usize, height: usize) -> Self {
        self.settings.size = Some((width, height));
        self
    }

    /// The share of a normal distribution that ellipses hold, above 0 and below 1.
    ///
    /// Drawn around each group, or around all units when there are no groups; 0.95 unless stated
    /// for groups, none without groups. Mean and covariance (divisor n − 1) of the group are taken
    /// as known. An ellipse describes where units of the group tend to lie: it is a statistical
    /// limit, not a safety limit.
    pub fn coverage(mut self, coverage: f64) -> Self {
        self.settings.coverage = Some(coverage);
        self
    }

    /// Adds a line to a scree: variances to compare the components with.
    pub fn reference(mut self, reference: impl Into<Reference>) -> Self {
        self.settings.references.push(reference.into());
        self
    }

    /// How many leading components to draw, in charts that draw several side by side.
    pub fn first(mut self, n_components: usize) -> Self {
        self.settings.first = Some(n_components);
        self
    }

    /// Adds a whisker to each loading.
    pub fn intervals(mut self, intervals: impl Into<Intervals>) -> Self {
        self.settings.intervals = Some(intervals.into());
        self
    }

    /// Draws the convex hull around the units of each group, or around all units.
    pub fn hulls(mut self) -> Self {
        self.settings.hulls = true;
        self
    }

    /// Whether the settings fit the analysis.
    ///
    /// # Errors
    ///
    /// [`ComponentOutOfRange`](crate::Error::ComponentOutOfRange) for a component that does not
    /// exist, [`ShapeMismatch`](crate::Error::ShapeMismatch) when there are not as many groups,
    /// labels or reference values as needed, [`OptionOutOfRange`](crate::Error::OptionOutOfRange)
    /// for a coverage, size or number of groups that cannot be drawn, and
    /// [`SettingNotForChart`](crate::Error::SettingNotForChart) for a setting that this kind of
    /// chart does not have.
    pub fn check(&self) -> Result<()> {
        self.settings.check(&*self.picture)?;
        self.picture.check(&self.settings)
    }

    /// The chart as an SVG document; an error in the settings is drawn in its place.
    pub fn svg(&self) -> String {
        match self.draw() {
            Ok(drawing) => drawing.svg,
            Err(error) => error_card(&error.to_string()),
        }
    }

    /// Writes the chart to a file: `.svg`, or `.png` at twice its size.
    ///
    /// # Errors
    ///
    /// Those of [`check`](Chart::check), [`UnknownExtension`](crate::Error::UnknownExtension), and
    /// [`Io`](crate::Error::Io) when the file cannot be written.
    pub fn save(&self, path: impl AsRef<Path>) -> Result<()> {
        save::save(&self.draw()?.svg, path.as_ref())
    }

    fn draw(&self) -> Result<Drawing> {
        self.check()?;
        self.picture.draw(&self.settings)
    }
}

/// An SVG, what it says in words for consoles, the numbers behind it, and a PNG.
///
/// The PNG is for clients that show no SVG, among them notebook clients that open a notebook they
/// do not trust. It takes some hundredths of a second, so charts of many units go without.
impl Exhibit for Chart {
    fn exhibit(&self) -> Bundle {
        match self.draw() {
            Ok(drawing) => {
                let picture = match drawing.svg.len() < LARGE {
                    true => save::picture(&drawing.svg).ok(),
                    false => None,
                };
                let words = visible(&drawing.words);
                let bundle = Bundle::new()
                    .with_svg(drawing.svg)
                    .with_plain(words)
                    .with(NUMBERS, Content::Json(drawing.numbers));
                match picture {
                    Some(bytes) => bundle.with("image/png", Content::Bytes(bytes)),
                    None => bundle,
                }
            }
            Err(error) => {
                let message = format!("this chart cannot be drawn: {error}");
                Bundle::new().with_svg(error_card(&error.to_string())).with_plain(message)
            }
        }
    }
}

fn error_card(message: &str) -> String {
    let card = Card {
        width: 560.0,
        height: 130.0,
        title: "This chart cannot be drawn".to_owned(),
        subtitle: message.to_owned(),
        description: message.to_owned(),
        ..Card::default()
    };
    card.draw(|_, _| {})
}
