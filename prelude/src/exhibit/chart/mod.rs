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
mod settings;
mod source;

mod biplot;
mod loadings;
mod scores;
mod scree;

mod arrows;
mod groups;
mod references;
mod units;

mod card;
mod ellipse;
mod labels;
mod marks;
mod measure;
mod palette;
mod plane;
mod save;
mod svg;
mod ticks;

#[cfg(test)]
mod tests;

use std::path::Path;

pub use names::Names;
pub use settings::Reference;

use self::card::Card;
use self::settings::Settings;
use self::source::Source;
use super::text::visible;
use super::{Bundle, Content, Exhibit};
use crate::components::PrincipalComponents;
use crate::error::Result;

/// A chart of an analysis, with its settings.
///
/// Marks carry their unit's name and values as hover texts. A client that inlines the SVG, such
/// as a notebook converted to HTML, shows them; one that shows it as a picture does not.
///
/// Made by [`scree`], [`score_plot`], [`loading_plot`] and [`biplot`]. A setting that does not
/// fit (a component that does not exist, as many groups as there are not units) is reported by
/// [`check`](Chart::check) and [`save`](Chart::save), and shown in place of the drawing.
#[derive(Debug, Clone, PartialEq)]
pub struct Chart {
    kind: Kind,
    source: Source,
    settings: Settings,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Kind {
    Scree,
    Scores,
    Loadings,
    Biplot,
}

// Bytes of SVG from which on a PNG takes too long to be made unasked.
const LARGE: usize = 100_000;

/// A finished drawing and what it says in words.
struct Drawing {
    svg: String,
    words: String,
}

/// The variances of the components, largest first, with each one's share of the total.
///
/// A dashed line marks the mean variance unless [`reference`](Chart::reference) asks for others.
/// Below the variances, a strip divides the total variance among the components.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::{Reference, scree};
///
/// let svg = scree(&pca).reference(Reference::BrokenStick).svg();
/// // One mark with a hover text for each component.
/// assert_eq!(svg.matches("· variance ").count(), pca.n_components());
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn scree(pca: &PrincipalComponents) -> Chart {
    Chart::new(Kind::Scree, Source::without_units(pca))
}

/// The units in the plane of two components.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::score_plot;
///
/// let chart = score_plot(&pca).components(2, 1).groups(["a", "a", "a", "b", "b"]);
/// assert!(chart.check().is_ok());
/// assert!(chart.svg().contains("Scores on components 2 and 1"));
/// // As many groups as there are units are needed.
/// assert!(score_plot(&pca).groups(["a", "b"]).check().is_err());
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn score_plot(pca: &PrincipalComponents) -> Chart {
    Chart::new(Kind::Scores, Source::with_units(pca))
}

/// The variables in the plane of two components: each one's two loadings as an arrow.
///
/// Loadings are the unit-length coefficients, not correlations. Arrows shorter than √(2/p), the
/// length that each of p variables has when all share both components equally, are drawn thin and grey.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::loading_plot;
///
/// let svg = loading_plot(&pca).labels(["length", "width", "warp"]).svg();
/// assert!(svg.contains(">width</text>"));
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn loading_plot(pca: &PrincipalComponents) -> Chart {
    Chart::new(Kind::Loadings, Source::without_units(pca))
}

/// Units and variables together in the plane of two components.
///
/// Units are drawn at their scores, so that distances between them are kept, and the arrows of
/// the variables are their loadings, stretched by a factor that the chart states.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::biplot;
///
/// let svg = biplot(&pca).title("Five tiles, three measurements").svg();
/// assert!(svg.contains("arrows are loadings stretched"));
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn biplot(pca: &PrincipalComponents) -> Chart {
    Chart::new(Kind::Biplot, Source::with_units(pca))
}

impl Chart {
    fn new(kind: Kind, source: Source) -> Self {
        Chart { kind, source, settings: Settings::default() }
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
        self.settings.check(self.kind, &self.source)
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
        Ok(match self.kind {
            Kind::Scree => scree::draw(&self.source, &self.settings),
            Kind::Scores => scores::draw(&self.source, &self.settings),
            Kind::Loadings => loadings::draw(&self.source, &self.settings),
            Kind::Biplot => biplot::draw(&self.source, &self.settings),
        })
    }
}

/// An SVG, what it says in words for consoles, and a PNG.
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
                let bundle = Bundle::new().with_svg(drawing.svg).with_plain(words);
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
