//! A cloud of units by group, for charts whose axes are not components.

use super::groups::{Group, Groups};
use super::marks::{Spot, hover_fits, mark_radius, push_dense, push_hovering};
use super::svg::Svg;

/// Marks at the places of the units, with hover texts where those fit; says so where they do not.
pub(super) fn draw_cloud(
    svg: &mut Svg,
    groups: &Groups,
    n_units: usize,
    place: impl Fn(usize) -> (f64, f64),
    hover: impl Fn(usize, &Group) -> String,
) -> Option<String> {
    let radius = mark_radius(n_units);
    let group_of = groups.of_units(n_units);
    let hovers = hover_fits((0..n_units).map(|unit| hover(unit, group_of[unit])));
    for (number, group) in groups.list().iter().enumerate() {
        let spot = |&unit: &usize| {
            let (x, y) = place(unit);
            Spot { x, y, unit }
        };
        let spots: Vec<Spot> = group
            .members
            .iter()
            .map(spot)
            .filter(|spot| spot.x.is_finite() && spot.y.is_finite())
            .collect();
        if spots.is_empty() {
            continue;
        }
        if hovers {
            push_hovering(svg, group.cue, &spots, (radius, ".8"), |unit| hover(unit, group));
        } else {
            push_dense(svg, group.cue, &spots, (radius, ".6"), &format!("mark{number}"));
        }
    }
    (!hovers).then(|| "Too many units for hover texts.".to_owned())
}
