//! The score plot: where the units lie in the plane of two components.

use super::Drawing;
use super::card::{Area, Card};
use super::labels::{LabelSpace, push_labels};
use super::plane::{Extent, Plane};
use super::settings::Settings;
use super::source::Source;
use super::svg::Svg;
use super::units::Units;
use crate::exhibit::numbers::{counted, percent};

pub(super) const LABEL_SIZE: f64 = 11.0;
pub(super) const LABEL_MOST: f64 = 150.0;
const MOST_NAMED_OF_MANY: usize = 10;

pub(super) fn draw(source: &Source, settings: &Settings) -> Drawing {
    let units = Units::new(source, settings);
    let components = settings.plane(source);
    let mut extent = Extent::origin();
    units.widen(&mut extent);
    let words = format!("{}{}", opening("Score plot", source, components), units.words());
    let card = |notes: Vec<String>| Card {
        width: settings.size.map_or(720.0, |size| size.0 as f64),
        height: settings.size.map_or(560.0, |size| size.1 as f64),
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
    Drawing { svg, words }
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
