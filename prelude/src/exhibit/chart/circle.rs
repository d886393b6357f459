//! The structure circle: correlations of the variables with two components.

use super::Chart;
use super::arrows::{Arrows, push_ring};
use super::card::Card;
use super::labels::{LabelSpace, push_labels};
use super::palette::{FAINT, GROUPS};
use super::picture::{Drawing, Picture};
use super::plane::{Extent, Plane};
use super::scores::{LABEL_MOST, LABEL_SIZE, draw_settled, opening};
use super::settings::{OF_VARIABLES_IN_A_PLANE, Setting, Settings};
use super::source::Source;
use crate::components::PrincipalComponents;
use crate::error::Result;
use crate::exhibit::numbers::{counted, fixed};

/// The correlations of the variables with two components, inside the unit circle.
///
/// The squared length of an arrow is the share of its variable's variance that the two components
/// hold, so an arrow that reaches the circle is described by them whole, and one inside the dashed
/// ring of radius √½ by less than half. Between arrows that come close to the circle the cosine
/// of the angle is near the variables' correlation. A variable that does not vary has no arrow.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::structure_circle;
///
/// assert!(structure_circle(&pca).svg().contains("Correlations with components 1 and 2"));
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn structure_circle(pca: &PrincipalComponents) -> Chart {
    let source = Source::without_units(pca);
    Chart::new(Circle { source: Source { loadings: pca.structure().into_values(), ..source } })
}

/// The structure of an analysis, in place of its loadings.
#[derive(Debug)]
struct Circle {
    source: Source,
}

impl Picture for Circle {
    fn kind(&self) -> &'static str {
        "structure circle"
    }

    fn takes(&self) -> &'static [Setting] {
        OF_VARIABLES_IN_A_PLANE
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        settings.check_plane_of_variables(&self.source)
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let source = &self.source;
        let arrows =
            Arrows::new(source, settings, settings.labels.as_deref()).taken_as_correlations();
        let components = settings.plane(source);
        let mut extent = Extent::origin();
        for (x, y) in [(1.0, 1.0), (-1.0, -1.0)] {
            extent.include(x, y);
        }
        let words =
            format!("{}{}", opening("Structure circle", source, components), arrows.words());
        let card = |notes: Vec<String>| Card {
            width: settings.size_or(620.0, 640.0).0,
            height: settings.size_or(620.0, 640.0).1,
            least_drawing: 220.0,
            title: settings.title_or(match components {
                (Some(a), Some(b)) => format!("Correlations with components {a} and {b}"),
                _ => "Correlations with component 1".to_owned(),
            }),
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
            push_ring(svg, &plane, 1.0, "radius 1: all of a variable's variance");
            let half = arrows.threshold();
            push_ring(svg, &plane, half, &format!("radius {}: half of it", fixed(half, 3)));
            arrows.draw(svg, &plane, 1.0, (GROUPS[0], FAINT));
            let mut space = LabelSpace::new(plane.area);
            arrows.block(&mut space, &plane, 1.0);
            let wishes = arrows.wishes(&plane, 1.0);
            let placed: Vec<_> =
                space.place(&wishes, LABEL_SIZE, LABEL_MOST).into_iter().flatten().collect();
            push_labels(svg, &placed, LABEL_SIZE);
            let mut notes = vec![
                "Arrows are correlations of variables with components; the squared length is the \
                 share of the variable's variance that both hold."
                    .to_owned(),
            ];
            notes.extend(arrows.notes(placed.len()));
            notes
        });
        Ok(Drawing { svg, words, numbers: arrows.behind() })
    }
}
