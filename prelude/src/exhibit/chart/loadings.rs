//! The loading plot: what two components are made of.

use super::Chart;
use super::arrows::{Arrows, push_ring};
use super::card::Card;
use super::labels::{LabelSpace, push_labels};
use super::palette::{FAINT, GROUPS};
use super::picture::{Drawing, Picture};
use super::plane::{Extent, Plane};
use super::scores::{LABEL_MOST, LABEL_SIZE, draw_settled, opening, plane_title};
use super::settings::{OF_VARIABLES_IN_A_PLANE, Setting, Settings};
use super::source::Source;
use crate::components::PrincipalComponents;
use crate::error::Result;
use crate::exhibit::numbers::{counted, fixed};

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
    Chart::new(Loadings { source: Source::without_units(pca) })
}

/// The variables of an analysis.
#[derive(Debug)]
struct Loadings {
    source: Source,
}

impl Picture for Loadings {
    fn kind(&self) -> &'static str {
        "loading plot"
    }

    fn takes(&self) -> &'static [Setting] {
        OF_VARIABLES_IN_A_PLANE
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        settings.check_plane_of_variables(&self.source)
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        Ok(draw(&self.source, settings))
    }
}

fn draw(source: &Source, settings: &Settings) -> Drawing {
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
        width: settings.size_or(720.0, 560.0).0,
        height: settings.size_or(720.0, 560.0).1,
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
    Drawing { svg, words, numbers: arrows.behind() }
}
