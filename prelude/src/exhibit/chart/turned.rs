//! Before and after a rotation: the same variables against the old and the new components.

use serde_json::json;

use super::Chart;
use super::arrows::{Arrows, push_ring};
use super::card::{Area, Card};
use super::labels::{LabelSpace, push_labels};
use super::palette::{FAINT, GROUPS, INK};
use super::picture::{Drawing, Picture};
use super::plane::{Extent, Plane};
use super::scores::{LABEL_MOST, LABEL_SIZE, draw_settled};
use super::settings::{Setting, Settings};
use super::svg::Svg;
use crate::error::Result;
use crate::exhibit::numbers::{counted, fixed, typographic};
use crate::rotation::Rotated;
use crate::table::NamedMatrix;

const GAP: f64 = 24.0;

/// Variables against two components before and after a rotation, side by side.
///
/// Arrows are correlations of the variables with the components (the structure). A good rotation
/// brings them close to the axes. [`components`](Chart::components) picks another pair; the pair
/// before the rotation is the one of the same numbers, although a rotation of more than two
/// components mixes all of them.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::rotation_plot;
/// use semiaxis::rotation::Rotation;
///
/// let svg = rotation_plot(pca.rotated(2, Rotation::Varimax)?.rotated()).svg();
/// assert!(svg.contains(">before</text>") && svg.contains(">after</text>"));
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn rotation_plot(rotated: &Rotated) -> Chart {
    Chart::new(Turned { rotated: rotated.clone() })
}

/// A rotation with what it began from.
#[derive(Debug)]
struct Turned {
    rotated: Rotated,
}

impl Picture for Turned {
    fn kind(&self) -> &'static str {
        "rotation plot"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::Components, Setting::Labels]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        settings.check_components(self.rotated.loadings().n_cols())?;
        settings.check_variables(self.rotated.loadings().n_rows())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let r = &self.rotated;
        let pair = settings.components.unwrap_or((1, 2));
        let names = settings.names_or(r.loadings().row_names());
        let arrows = |matrix: &NamedMatrix| {
            let along = |component: usize| matrix.values().column(component - 1);
            let tips = along(pair.0).iter().copied().zip(along(pair.1).iter().copied()).collect();
            Arrows::of_correlations(pair, tips, names.clone())
        };
        let (before, after) = (arrows(r.original()), arrows(r.structure()));
        let oblique = r.factor_correlations()[(pair.0 - 1, pair.1 - 1)];
        let words = format!(
            "Rotation of {} by {}: before and after.{}",
            counted(r.loadings().n_cols(), "component"),
            r.rotation(),
            after.words()
        );
        let card = |notes: Vec<String>| Card {
            width: settings.size_or(860.0, 560.0).0,
            height: settings.size_or(860.0, 560.0).1,
            least_drawing: 240.0,
            title: settings.title_or(format!(
                "Components {} and {} before and after rotation",
                pair.0, pair.1
            )),
            subtitle: format!(
                "{}, {} turned by {}",
                counted(names.len(), "variable"),
                counted(r.loadings().n_cols(), "component"),
                r.rotation()
            ),
            description: words.clone(),
            notes,
            ..Card::default()
        };
        let svg = draw_settled(card, |svg, room| {
            let half = (room.width() - GAP) / 2.0;
            let left = Area { right: room.left + half, ..room };
            let right = Area { left: room.right - half, ..room };
            draw_side(svg, left, "before", &before, pair);
            let n_named = draw_side(svg, right, "after", &after, pair);
            let mut notes =
                vec!["Arrows are correlations of the variables with the components.".to_owned()];
            if oblique.abs() > 1e-9 {
                notes.push(format!(
                    "After the rotation the two components correlate by {}; the axes are drawn \
                     square all the same.",
                    typographic(&fixed(oblique, 2))
                ));
            }
            notes.extend(after.notes(n_named));
            notes
        });
        let numbers = json!({ "before": before.behind(), "after": after.behind() });
        Ok(Drawing { svg, words, numbers })
    }
}

/// One of the two planes; how many of its variables are named.
fn draw_side(
    svg: &mut Svg,
    room: Area,
    what: &str,
    arrows: &Arrows,
    pair: (usize, usize),
) -> usize {
    let mut extent = Extent::origin();
    for (x, y) in [(1.0, 1.0), (-1.0, -1.0)] {
        extent.include(x, y);
    }
    svg.element("text")
        .at("x", room.right)
        .at("y", room.top + 11.0)
        .at("font-size", 12.0)
        .with("font-weight", "bold")
        .with("text-anchor", "end")
        .with("fill", INK)
        .text(what);
    let plane = Plane::fit(room, extent);
    plane.draw(svg, &format!("Component {}", pair.0), &format!("Component {}", pair.1));
    push_ring(svg, &plane, 1.0, "radius 1: all of a variable's variance");
    arrows.draw(svg, &plane, 1.0, (GROUPS[0], FAINT));
    let mut space = LabelSpace::new(plane.area);
    arrows.block(&mut space, &plane, 1.0);
    let wishes = arrows.wishes(&plane, 1.0);
    let placed: Vec<_> =
        space.place(&wishes, LABEL_SIZE, LABEL_MOST).into_iter().flatten().collect();
    push_labels(svg, &placed, LABEL_SIZE);
    placed.len()
}
