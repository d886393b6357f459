//! The biplot: units and variables in one plane.
//!
//! Units stand at their scores and variables at their loadings, so that a unit's projection on an
//! arrow, times the arrow's length, approximates its value in that variable (in the scale of the
//! analysis, about the mean). Distances between units are those of the scores; angles between
//! arrows do not show correlations in this scaling. Source: K. R. Gabriel (1971), "The biplot
//! graphic display of matrices with application to principal component analysis", Biometrika 58
//! (from memory). Arrows are stretched by one factor to be readable beside the units.

use serde_json::json;

use super::Chart;
use super::arrows::Arrows;
use super::card::Card;
use super::labels::{LabelSpace, push_labels};
use super::palette::{INK, INK_SOFT};
use super::picture::{Drawing, Picture};
use super::plane::{Extent, Plane};
use super::scores::{LABEL_MOST, LABEL_SIZE, draw_settled, opening, plane_title};
use super::settings::{OF_UNITS_IN_A_PLANE, Setting, Settings};
use super::source::Source;
use super::units::Units;
use crate::components::PrincipalComponents;
use crate::error::Result;
use crate::exhibit::numbers::{counted, stored};

const MOST_NAMED_OF_MANY: usize = 5;

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
    Chart::new(Biplot { source: Source::with_units(pca) })
}

/// Units and variables of an analysis.
#[derive(Debug)]
struct Biplot {
    source: Source,
}

impl Picture for Biplot {
    fn kind(&self) -> &'static str {
        "biplot"
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
    let units = Units::new(source, settings).receding();
    let arrows = Arrows::new(source, settings, None);
    let components = settings.plane(source);
    let stretch = stretch(units.points(), arrows.longest());
    let mut extent = Extent::origin();
    units.widen(&mut extent);
    for &(x, y) in arrows.tips() {
        extent.include(x * stretch, y * stretch);
    }
    let factor = stored(stretch, 3);
    let scaling = format!(
        "Scaling: units at their scores, so distances between units are kept; arrows are loadings \
         stretched {factor} times, and their angles are not correlations."
    );
    let words = format!(
        "{} {scaling}{}{}",
        opening("Biplot", source, components),
        units.words(),
        arrows.words()
    );
    let card = |notes: Vec<String>| Card {
        width: settings.size_or(720.0, 560.0).0,
        height: settings.size_or(720.0, 560.0).1,
        least_drawing: 220.0,
        title: settings.title_or(plane_title("Units and variables", components)),
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
        let mut notes = vec![scaling.clone()];
        notes.extend(units.draw(svg, &plane));
        arrows.draw(svg, &plane, stretch, (INK, INK_SOFT));
        let mut space = LabelSpace::new(plane.area);
        // Names of variables matter more than the marks they may cover in a crowd, so marks
        // block labels only after the arrows' names are placed.
        arrows.block(&mut space, &plane, stretch);
        let names = arrows.wishes(&plane, stretch);
        let mut placed: Vec<_> =
            space.place(&names, LABEL_SIZE, LABEL_MOST).into_iter().flatten().collect();
        let n_variables = placed.len();
        units.block(&mut space, &plane);
        let names = units.wishes(&plane, MOST_NAMED_OF_MANY);
        units.draw_named(svg, &names);
        placed.extend(space.place(&names, LABEL_SIZE, LABEL_MOST).into_iter().flatten());
        push_labels(svg, &placed, LABEL_SIZE);
        notes.extend(arrows.notes(n_variables));
        notes.extend(units.naming_note(placed.len() - n_variables));
        notes.extend(units.ellipse_notes());
        notes
    });
    Drawing {
        svg,
        words,
        numbers: json!({ "units": units.behind(), "variables": arrows.behind(), "stretch": stretch }),
    }
}

// The longest arrow reaches about as far as the units do; the factor is a round number.
fn stretch(points: &[(f64, f64)], longest: f64) -> f64 {
    let reach = points
        .iter()
        .map(|point| point.0.hypot(point.1))
        .filter(|reach| reach.is_finite())
        .fold(0.0, f64::max);
    let wished = 0.85 * reach / longest;
    if !(wished.is_finite() && wished > 0.0) {
        return 1.0;
    }
    let power = 10f64.powf(wished.log10().floor());
    let lead = [1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0]
        .into_iter()
        .rfind(|lead| *lead <= wished / power * (1.0 + 1e-9))
        .unwrap_or(1.0);
    lead * power
}

#[cfg(test)]
mod tests {
    use super::stretch;

    #[test]
    fn the_stretch_is_round_and_keeps_arrows_among_the_units() {
        for (reach, longest) in [(5.0, 0.6), (1e-3, 0.9), (4.2e6, 0.31)] {
            let factor = stretch(&[(reach, 0.0), (0.0, 0.1 * reach)], longest);
            assert!(factor * longest <= 0.85 * reach * (1.0 + 1e-6));
            assert!(factor * longest >= 0.4 * reach, "{factor}");
        }
        assert_eq!(stretch(&[(0.0, 0.0)], 0.5), 1.0);
        assert_eq!(stretch(&[], 0.5), 1.0);
    }
}
