//! The score plot: where the units lie in the plane of two components.

use super::Chart;
use super::card::{Area, Card};
use super::labels::{LabelSpace, push_labels};
use super::picture::{Drawing, Picture};
use super::plane::{Extent, Plane};
use super::settings::{OF_UNITS_IN_A_PLANE, Setting, Settings};
use super::source::Source;
use super::svg::Svg;
use super::units::Units;
use crate::components::PrincipalComponents;
use crate::error::Result;
use crate::exhibit::numbers::{counted, percent};

pub(super) const LABEL_SIZE: f64 = 11.0;
pub(super) const LABEL_MOST: f64 = 150.0;
const MOST_NAMED_OF_MANY: usize = 10;

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
    Chart::new(Scores { source: Source::with_units(pca) })
}

/// A score plot of what was taken from an analysis.
#[cfg(test)]
pub(super) fn of(source: Source) -> Chart {
    Chart::new(Scores { source })
}

/// The units of an analysis.
#[derive(Debug)]
struct Scores {
    source: Source,
}

impl Picture for Scores {
    fn kind(&self) -> &'static str {
        "score plot"
    }

    fn takes(&self) -> &'static [Setting] {
        OF_UNITS_IN_A_PLANE
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        settings.check_plane_of_units(&self.source)
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        Ok(draw(&self.source, settings))
    }
}

fn draw(source: &Source, settings: &Settings) -> Drawing {
    let units = Units::new(source, settings);
    let components = settings.plane(source);
    let mut extent = Extent::origin();
    units.widen(&mut extent);
    let words = format!("{}{}", opening("Score plot", source, components), units.words());
    let card = |notes: Vec<String>| Card {
        width: settings.size_or(720.0, 560.0).0,
        height: settings.size_or(720.0, 560.0).1,
        least_drawing: 220.0,
        title: settings.title_or(plane_title("Scores", components)),
        subtitle: format!(
            "{}, {} {}",
            counted(units.count(), "unit"),
            counted(source.variables.len(), "variable"),
            source.scaling_words()
        ),
        description: words.clone(),
        legend: units.legend(),
        notes,
        ..Card::default()
    };
    let svg = draw_settled(card, |svg, area| {
        let plane = Plane::fit(area, extent);
        plane.draw(svg, &source.axis_title(components.0), &source.axis_title(components.1));
        let mut notes = units.draw(svg, &plane);
        let mut space = LabelSpace::new(plane.area);
        units.block(&mut space, &plane);
        let wishes = units.wishes(&plane, MOST_NAMED_OF_MANY);
        units.draw_named(svg, &wishes);
        let placed: Vec<_> =
            space.place(&wishes, LABEL_SIZE, LABEL_MOST).into_iter().flatten().collect();
        push_labels(svg, &placed, LABEL_SIZE);
        notes.extend(units.naming_note(placed.len()));
        notes.extend(units.ellipse_notes());
        notes
    });
    Drawing { svg, words, numbers: units.behind() }
}

/// Draws a card whose notes depend on what found room in it.
///
/// Notes take height from the drawing, and what finds room depends on that height. So the card is
/// drawn again with the notes of the last drawing until they agree. The room kept for notes only
/// ever grows, and an equal room gives equal notes, so this ends, mostly with the second drawing.
pub(super) fn draw_settled(
    card: impl Fn(Vec<String>) -> Card,
    drawing: impl Fn(&mut Svg, Area) -> Vec<String>,
) -> String {
    let mut card_now = card(Vec::new());
    loop {
        let mut found = Vec::new();
        let svg = card_now.draw(|svg, area| found = drawing(svg, area));
        if found == card_now.notes {
            return svg;
        }
        let least_note_lines = card_now.n_note_lines();
        card_now = Card { least_note_lines, ..card(found) };
    }
}

pub(super) fn plane_title(what: &str, components: (Option<usize>, Option<usize>)) -> String {
    match components {
        (Some(a), Some(b)) => format!("{what} on components {a} and {b}"),
        _ => format!("{what} on component 1"),
    }
}

/// The first sentence of a plot's description.
pub(super) fn opening(
    what: &str,
    source: &Source,
    components: (Option<usize>, Option<usize>),
) -> String {
    let of = match components {
        (Some(a), Some(b)) => format!(
            "components {a} ({} of the variance) and {b} ({})",
            percent(source.share(a)),
            percent(source.share(b))
        ),
        _ => "component 1, which holds all variance".to_owned(),
    };
    format!(
        "{what} of {} and {} {} on {of}.",
        counted(source.n_rows, "unit"),
        counted(source.variables.len(), "variable"),
        source.scaling_words()
    )
}
