//! Groups of units: colour and shape, ellipse, centre, legend.

use std::collections::HashMap;

use super::card::{LegendEntry, LegendSign};
use super::ellipse::{Ellipse, mean};
use super::hull::hull;
use super::marks::push_mark;
use super::palette::{Cue, INK, NO_GROUP, Shape, cue};
use super::plane::{Extent, Plane};
use super::svg::{Svg, tenth};
use super::units::listed;
use crate::exhibit::numbers::{counted, grouped, significant, stored, typographic};
use crate::exhibit::text::shortened;

/// The groups of a chart; one without a name when no groups were set.
pub(super) struct Groups {
    list: Vec<Group>,
    are_set: bool,
    coverage: Option<f64>,
}

/// Units of one group.
pub(super) struct Group {
    pub name: String,
    pub cue: Cue,
    pub members: Vec<usize>,
    centre: (f64, f64),
    ellipse: Option<Ellipse>,
}

impl Groups {
    /// Groups by name, or all units in one; with ellipses where a coverage is given.
    pub fn new(
        names: Option<&[Option<String>]>,
        points: &[(f64, f64)],
        coverage: Option<f64>,
    ) -> Self {
        let mut list = match names {
            Some(names) => by_name(names),
            None => vec![Group::new("", cue(0), (0..points.len()).collect())],
        };
        for group in &mut list {
            let members: Vec<(f64, f64)> = group.members.iter().map(|&unit| points[unit]).collect();
            group.centre = mean(&members);
            // Units without a group have nothing in common that an ellipse could describe.
            if let Some(coverage) = coverage.filter(|_| group.cue.color != NO_GROUP) {
                group.ellipse = Ellipse::around(&members, coverage);
            }
        }
        Groups { list, are_set: names.is_some(), coverage }
    }

    pub fn list(&self) -> &[Group] {
        &self.list
    }

    /// The group of each unit.
    pub fn of_units(&self, n_units: usize) -> Vec<&Group> {
        let mut groups = vec![&self.list[0]; n_units];
        for group in &self.list {
            for &unit in &group.members {
                groups[unit] = group;
            }
        }
        groups
    }

    /// Whether groups were set, rather than all units taken as one.
    pub fn are_set(&self) -> bool {
        self.are_set
    }

    /// Grows an extent to hold every ellipse.
    pub fn widen(&self, extent: &mut Extent) {
        for ellipse in self.list.iter().filter_map(|group| group.ellipse) {
            let (half_x, half_y) = ellipse.half_box();
            extent.include(ellipse.centre.0 - half_x, ellipse.centre.1 - half_y);
            extent.include(ellipse.centre.0 + half_x, ellipse.centre.1 + half_y);
        }
    }

    pub fn legend(&self) -> Vec<LegendEntry> {
        if !self.are_set {
            return Vec::new();
        }
        let entry = |group: &Group| LegendEntry {
            sign: LegendSign::Mark(group.cue),
            text: format!("{} ({})", group.name, grouped(group.members.len())),
        };
        self.list.iter().map(entry).collect()
    }

    pub fn draw_ellipses(&self, svg: &mut Svg, plane: &Plane, fill_opacity: &str) {
        for group in &self.list {
            let Some(ellipse) = group.ellipse else { continue };
            let (x, y) = plane.place(ellipse.centre.0, ellipse.centre.1);
            let degrees = -ellipse.angle.to_degrees();
            let name = if self.are_set { &group.name } else { "all units" };
            let title =
                format!("{}: {} % of a normal distribution", shortened(name, 60), self.per_cent());
            svg.element("ellipse")
                .with("class", "ellipse")
                .at("cx", x)
                .at("cy", y)
                .at("rx", ellipse.semi_axes.0 * plane.scale)
                .at("ry", ellipse.semi_axes.1 * plane.scale)
                .with("transform", &format!("rotate({degrees:.2} {} {})", tenth(x), tenth(y)))
                .with("fill", group.cue.color)
                .with("fill-opacity", fill_opacity)
                .with("stroke", group.cue.color)
                .with("stroke-width", "1.5")
                .around(|svg| svg.element("title").text(&title));
        }
    }

    /// The convex hull around each group, or around all units.
    pub fn draw_hulls(&self, svg: &mut Svg, plane: &Plane, points: &[(f64, f64)]) {
        for group in self.list.iter().filter(|group| group.cue.color != NO_GROUP) {
            let corners = hull(group.members.iter().map(|&unit| points[unit]));
            if corners.len() < 3 {
                continue;
            }
            let mut path = String::new();
            for (place, (x, y)) in corners.iter().enumerate() {
                let (x, y) = plane.place(*x, *y);
                path.push(if place == 0 { 'M' } else { 'L' });
                path.push_str(&format!("{} {}", tenth(x), tenth(y)));
            }
            path.push('z');
            let name = if self.are_set { &group.name } else { "all units" };
            svg.element("path")
                .with("class", "hull")
                .with("d", &path)
                .with("fill", group.cue.color)
                .with("fill-opacity", ".07")
                .with("stroke", group.cue.color)
                .with("stroke-width", "1.3")
                .with("stroke-linejoin", "round")
                .around(|svg| {
                    svg.element("title").text(&format!("hull of {}", shortened(name, 60)));
                });
        }
    }

    /// A larger mark at the mean of each group of three and more.
    pub fn draw_centres(&self, svg: &mut Svg, plane: &Plane) {
        if !self.are_set {
            return;
        }
        let centres = svg.element("g").with("class", "centres").with("stroke", INK);
        centres.with("stroke-width", "1.4").around(|svg| {
            for group in self
                .list
                .iter()
                .filter(|group| group.members.len() > 2 && group.cue.color != NO_GROUP)
            {
                let title = format!(
                    "centre of {} · {} · {}, {}",
                    shortened(&group.name, 60),
                    counted(group.members.len(), "unit"),
                    typographic(&significant(group.centre.0, 4)),
                    typographic(&significant(group.centre.1, 4))
                );
                let at = plane.place(group.centre.0, group.centre.1);
                push_mark(svg, group.cue, at, 6.5, Some(&title));
            }
        });
    }

    /// What the ellipses mean, and that they are no safety limits.
    pub fn notes(&self) -> Vec<String> {
        let mut notes = Vec::new();
        if self.coverage.is_none() {
            return notes;
        }
        let of_what = if self.are_set { "each group" } else { "all units" };
        if self.list.iter().any(|group| group.ellipse.is_some()) {
            notes.push(format!(
                "Ellipses hold {} % of a normal distribution with the mean and covariance \
                 (divisor n − 1) of {of_what}. Statistical limits are not safety limits.",
                self.per_cent()
            ));
        }
        let without: Vec<String> = self
            .list
            .iter()
            .filter(|group| group.ellipse.is_none() && group.cue.color != NO_GROUP)
            .map(|group| match self.are_set {
                true => shortened(&group.name, 24).into_owned(),
                false => "the units".to_owned(),
            })
            .collect();
        if !without.is_empty() {
            notes.push(format!(
                "No ellipse for {}: it takes three units that do not lie on one line.",
                listed(&without, 6)
            ));
        }
        notes
    }

    /// The groups in words.
    pub fn words(&self) -> String {
        if !self.are_set {
            return String::new();
        }
        let word = |group: &Group| {
            format!(
                "{} ({}, centre {}, {})",
                shortened(&group.name, 40),
                counted(group.members.len(), "unit"),
                significant(group.centre.0, 3),
                significant(group.centre.1, 3)
            )
        };
        let groups: Vec<String> = self.list.iter().map(word).collect();
        format!(" Groups: {}.", listed(&groups, 10))
    }

    fn per_cent(&self) -> String {
        stored(self.coverage.unwrap_or_default() * 100.0, 4)
    }
}

impl Group {
    fn new(name: &str, cue: Cue, members: Vec<usize>) -> Self {
        Group { name: name.to_owned(), cue, members, centre: (0.0, 0.0), ellipse: None }
    }
}

// In the order in which they first appear; units without a group come last.
fn by_name(names: &[Option<String>]) -> Vec<Group> {
    let mut groups: Vec<Group> = Vec::new();
    let mut place_of = HashMap::new();
    let mut without = Vec::new();
    for (unit, name) in names.iter().enumerate() {
        let Some(name) = name else {
            without.push(unit);
            continue;
        };
        let place = *place_of.entry(name).or_insert_with(|| {
            let shown = if name.trim().is_empty() { "(empty name)" } else { name };
            groups.push(Group::new(shown, cue(groups.len()), Vec::new()));
            groups.len() - 1
        });
        groups[place].members.push(unit);
    }
    if !without.is_empty() {
        let cue = Cue { color: NO_GROUP, shape: Shape::Disc };
        groups.push(Group::new("no group", cue, without));
    }
    groups
}
