//! The loading plot: what two components are made of.

use super::Drawing;
use super::arrows::{Arrows, push_ring};
use super::card::Card;
use super::labels::{LabelSpace, push_labels};
use super::palette::{FAINT, GROUPS};
use super::plane::{Extent, Plane};
use super::scores::{LABEL_MOST, LABEL_SIZE, draw_settled, opening, plane_title};
use super::settings::Settings;
use super::source::Source;
use crate::exhibit::numbers::{counted, fixed};

pub(super) fn draw(source: &Source, settings: &Settings) -> Drawing {
    let arrows = Arrows::new(source, settings, settings.labels.as_deref());
    let components = settings.plane(source);
    let mut extent = Extent::origin();
    for &(x, y) in arrows.tips() {
        extent.include(x, y);
    }
    let ring = arrows.threshold();
    for (x, y) in [(ring, ring), (-ring, -ring)] {
        extent.include(x, y);
    }
    let words = format!("{}{}", opening("Loading plot", source, components), arrows.words());
    let card = |notes: Vec<String>| Card {
        width: settings.size.map_or(720.0, |size| size.0 as f64),
        height: settings.size.map_or(560.0, |size| size.1 as f64),
        least_drawing: 220.0,
        title: settings.title_or(plane_title("Loadings", components)),
        subtitle: format!(
            "{} {}, {}",
            counted(source.variables.len(), "variable"),
            source.scaling_words(),
            counted(source.n_rows, "unit")
        ),
        description: words.clone(),
        notes,
        ..Card::default()
    };
    let svg = draw_settled(card, |svg, area| {
        let plane = Plane::fit(area, extent);
        plane.draw(svg, &source.axis_title(components.0), &source.axis_title(components.1));
        let title = format!("length {}: all variables share equally", fixed(ring, 3));
        push_ring(svg, &plane, ring, &title);
        arrows.draw(svg, &plane, 1.0, (GROUPS[0], FAINT));
        let mut space = LabelSpace::new(plane.area);
        arrows.block(&mut space, &plane, 1.0);
        let wishes = arrows.wishes(&plane, 1.0);
        let placed: Vec<_> =
            space.place(&wishes, LABEL_SIZE, LABEL_MOST).into_iter().flatten().collect();
        push_labels(svg, &placed, LABEL_SIZE);
        let mut notes = vec![
            "Loadings are coefficients of unit length for each component, not correlations."
                .to_owned(),
        ];
        notes.extend(arrows.notes(placed.len()));
        notes
    });
    Drawing { svg, words }
}
