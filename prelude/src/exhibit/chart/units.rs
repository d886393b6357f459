//! Units in a plane: their groups, marks, ellipses and names, shared by score plot and biplot.

use super::card::{LegendEntry, LegendSign};
use super::ellipse::{Ellipse, mean};
use super::labels::{LabelSpace, Wish};
use super::marks::{
    MOST_MARKS, Spot, hover_fits, mark_radius, push_counts, push_dense, push_hovering, push_mark,
};
use super::palette::{Cue, INK, NO_GROUP, Shape, cue};
use super::plane::{Extent, Plane};
use super::settings::Settings;
use super::source::Source;
use super::svg::{Svg, tenth};
use crate::exhibit::numbers::{counted, grouped, significant, typographic};
use crate::exhibit::text::shortened;

const MOST_NAMED_OF_FEW: usize = 30;
const MOST_NAMED_ON_REQUEST: usize = 60;
const HOVER_CHARACTERS: usize = 60;

/// Units at their scores on two components.
pub(super) struct Units<'a> {
    source: &'a Source,
    components: (Option<usize>, Option<usize>),
    points: Vec<(f64, f64)>,
    names: Vec<Option<&'a str>>,
    names_are_chosen: bool,
    groups: Vec<Group>,
    has_groups: bool,
    coverage: Option<f64>,
}

struct Group {
    name: String,
    cue: Cue,
    members: Vec<usize>,
    ellipse: Option<Ellipse>,
}

impl<'a> Units<'a> {
    pub fn new(source: &'a Source, settings: &'a Settings) -> Self {
        let components = settings.plane(source);
        let (x, y) = (source.scores_along(components.0), source.scores_along(components.1));
        let points: Vec<(f64, f64)> = x.into_iter().zip(y).collect();
        let names = match &settings.labels {
            Some(labels) => labels.iter().map(Option::as_deref).collect(),
            None => source.labels.iter().map(|label| Some(label.as_str())).collect(),
        };
        let has_groups = settings.groups.is_some();
        let coverage = settings.coverage.or(has_groups.then_some(0.95));
        let mut groups = match &settings.groups {
            Some(names) => by_group(names),
            None => vec![Group {
                name: String::new(),
                cue: cue(0),
                members: (0..points.len()).collect(),
                ellipse: None,
            }],
        };
        if let Some(coverage) = coverage {
            for group in groups.iter_mut().filter(|group| group.cue.color != NO_GROUP) {
                let members: Vec<(f64, f64)> =
                    group.members.iter().map(|&unit| points[unit]).collect();
                group.ellipse = Ellipse::around(&members, coverage);
            }
        }
        let names_are_chosen = settings.labels.is_some();
        Units { source, components, points, names, names_are_chosen, groups, has_groups, coverage }
    }

    pub fn count(&self) -> usize {
        self.points.len()
    }

    pub fn points(&self) -> &[(f64, f64)] {
        &self.points
    }

    /// Grows an extent to hold every unit and every ellipse.
    pub fn widen(&self, extent: &mut Extent) {
        for &(x, y) in &self.points {
            extent.include(x, y);
        }
        for ellipse in self.groups.iter().filter_map(|group| group.ellipse) {
            let (half_x, half_y) = ellipse.half_box();
            extent.include(ellipse.centre.0 - half_x, ellipse.centre.1 - half_y);
            extent.include(ellipse.centre.0 + half_x, ellipse.centre.1 + half_y);
        }
    }

    pub fn legend(&self) -> Vec<LegendEntry> {
        if !self.has_groups {
            return Vec::new();
        }
        self.groups
            .iter()
            .map(|group| LegendEntry {
                sign: LegendSign::Mark(group.cue),
                text: format!("{} ({})", group.name, grouped(group.members.len())),
            })
            .collect()
    }

    /// Ellipses and marks; returns the lines to set under the chart.
    pub fn draw(&self, svg: &mut Svg, plane: &Plane) -> Vec<String> {
        let mut notes = Vec::new();
        if self.count() > MOST_MARKS {
            let all: Vec<usize> = (0..self.count()).collect();
            let classes = push_counts(svg, &self.spots(plane, &all));
            let shades: Vec<String> = classes
                .iter()
                .map(|(low, high, _)| {
                    if low == high {
                        grouped(*low)
                    } else {
                        format!("{}–{}", grouped(*low), grouped(*high))
                    }
                })
                .collect();
            notes.push(format!(
                "More than {} units: each hexagon counts the units inside it, from light to dark {}.",
                grouped(MOST_MARKS),
                shades.join(", ")
            ));
            self.draw_ellipses(svg, plane);
        } else {
            self.draw_ellipses(svg, plane);
            self.draw_marks(svg, plane, &mut notes);
        }
        self.draw_centres(svg, plane);
        notes
    }

    /// What the ellipses mean, and that they are no safety limits.
    pub fn ellipse_notes(&self) -> Vec<String> {
        let Some(coverage) = self.coverage else { return Vec::new() };
        let per_cent = typographic(&crate::exhibit::numbers::stored(coverage * 100.0, 4));
        let of_what = if self.has_groups { "each group" } else { "all units" };
        let mut notes = Vec::new();
        if self.groups.iter().any(|group| group.ellipse.is_some()) {
            notes.push(format!(
                "Ellipses hold {per_cent} % of a normal distribution with the mean and covariance \
                 (divisor n − 1) of {of_what}. Statistical limits are not safety limits."
            ));
        }
        let without: Vec<String> = self
            .groups
            .iter()
            .filter(|group| group.ellipse.is_none() && group.cue.color != NO_GROUP)
            .map(|group| {
                if self.has_groups {
                    shortened(&group.name, 24).into_owned()
                } else {
                    "the units".to_owned()
                }
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

    /// Adds the marks to what labels must keep off.
    pub fn block(&self, space: &mut LabelSpace, plane: &Plane) {
        if self.count() > MOST_MARKS {
            return;
        }
        let radius = mark_radius(self.count());
        for &(x, y) in self.points.iter().filter(|point| is_finite(point)) {
            let (x, y) = plane.place(x, y);
            space.add_mark(x, y, radius);
        }
    }

    /// The names to be set beside units, the farthest first.
    pub fn wishes(&self, plane: &Plane, most_of_many: usize) -> Vec<Wish> {
        let few = self.count() <= MOST_NAMED_OF_FEW;
        let most = match (self.names_are_chosen, few) {
            (true, _) => MOST_NAMED_ON_REQUEST,
            (false, true) => MOST_NAMED_OF_FEW,
            (false, false) => most_of_many,
        };
        let clearance = if self.count() > MOST_MARKS { 2.0 } else { mark_radius(self.count()) };
        self.farthest()
            .filter_map(|unit| {
                Some((unit, self.names[unit].filter(|name| !name.trim().is_empty())?))
            })
            .take(most)
            .map(|(unit, name)| {
                let (x, y) = self.points[unit];
                let (px, py) = plane.place(x, y);
                let outward = y.atan2(x);
                Wish { x: px, y: py, text: name.to_owned(), clearance, outward }
            })
            .collect()
    }

    /// Dots for named units where hexagons stand in place of marks.
    pub fn draw_named(&self, svg: &mut Svg, wishes: &[Wish]) {
        if self.count() > MOST_MARKS {
            for wish in wishes {
                let cue = Cue { color: INK, shape: Shape::Disc };
                push_mark(svg, cue, (wish.x, wish.y), 1.8, None);
            }
        }
    }

    /// What a chart says of the units it names.
    pub fn naming_note(&self, n_placed: usize) -> Option<String> {
        let all_named = n_placed >= self.names.iter().flatten().count();
        match n_placed {
            _ if all_named => None,
            0 => Some("No unit is named: there is no room between the marks.".to_owned()),
            _ => Some(format!(
                "{} of {} named, those farthest from the centre first (in standard deviations of \
                 each component).",
                grouped(n_placed),
                counted(self.count(), "unit")
            )),
        }
    }

    /// The groups and the farthest units, in words.
    pub fn words(&self) -> String {
        let mut words = String::new();
        if self.has_groups {
            let groups: Vec<String> = self
                .groups
                .iter()
                .map(|group| {
                    let members: Vec<_> =
                        group.members.iter().map(|&unit| self.points[unit]).collect();
                    let centre = mean(&members);
                    format!(
                        "{} ({}, centre {}, {})",
                        shortened(&group.name, 40),
                        counted(members.len(), "unit"),
                        significant(centre.0, 3),
                        significant(centre.1, 3)
                    )
                })
                .collect();
            words.push_str(&format!(" Groups: {}.", listed(&groups, 10)));
        }
        let far: Vec<String> = self
            .farthest()
            .filter_map(|unit| Some((unit, self.names[unit]?)))
            .take(3)
            .map(|(unit, name)| {
                let (x, y) = self.points[unit];
                format!("{} ({}, {})", shortened(name, 40), significant(x, 3), significant(y, 3))
            })
            .collect();
        if self.count() > 3 && !far.is_empty() {
            words.push_str(&format!(" Farthest from the centre: {}.", listed(&far, 3)));
        }
        words
    }

    // Distance in standard deviations of each component: scores are uncorrelated and centred.
    fn farthest(&self) -> impl Iterator<Item = usize> {
        let variance =
            |component: Option<usize>| component.map_or(1.0, |c| self.source.variances[c - 1]);
        let (vx, vy) = (variance(self.components.0), variance(self.components.1));
        let distance = |unit: usize| {
            let (x, y) = self.points[unit];
            x * x / vx + y * y / vy
        };
        let mut order: Vec<(f64, usize)> = (0..self.count())
            .filter(|&unit| is_finite(&self.points[unit]))
            .map(|unit| (distance(unit), unit))
            .collect();
        order.sort_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)));
        order.into_iter().map(|(_, unit)| unit)
    }

    fn spots(&self, plane: &Plane, units: &[usize]) -> Vec<Spot> {
        units
            .iter()
            .filter(|&&unit| is_finite(&self.points[unit]))
            .map(|&unit| {
                let (x, y) = plane.place(self.points[unit].0, self.points[unit].1);
                Spot { x, y, unit }
            })
            .collect()
    }

    fn draw_marks(&self, svg: &mut Svg, plane: &Plane, notes: &mut Vec<String>) {
        let radius = mark_radius(self.count());
        let text_bytes = (0..self.count()).map(|unit| self.hover_prefix(unit).len() + 48).sum();
        let hovers = hover_fits(self.count(), text_bytes);
        for group in &self.groups {
            let spots = self.spots(plane, &group.members);
            if spots.is_empty() {
                continue;
            }
            if hovers {
                push_hovering(svg, group.cue, &spots, radius, |unit| self.hover(unit, group));
            } else {
                push_dense(svg, group.cue, &spots, radius);
            }
        }
        if !hovers {
            notes.push("Too many units for hover texts.".to_owned());
        }
    }

    fn hover_prefix(&self, unit: usize) -> String {
        let name = self.names[unit].map(|name| shortened(name, HOVER_CHARACTERS).into_owned());
        name.unwrap_or_else(|| format!("unit {}", unit + 1))
    }

    fn hover(&self, unit: usize, group: &Group) -> String {
        let mut text = self.hover_prefix(unit);
        if self.has_groups {
            text.push_str(&format!(" · {}", shortened(&group.name, 30)));
        }
        let (x, y) = self.points[unit];
        for (component, value) in [(self.components.0, x), (self.components.1, y)] {
            if let Some(component) = component {
                let value = typographic(&significant(value, 4));
                text.push_str(&format!(" · component {component}: {value}"));
            }
        }
        text
    }

    fn draw_ellipses(&self, svg: &mut Svg, plane: &Plane) {
        for group in &self.groups {
            let Some(ellipse) = group.ellipse else { continue };
            let (x, y) = plane.place(ellipse.centre.0, ellipse.centre.1);
            let degrees = -ellipse.angle.to_degrees();
            let name = if group.name.is_empty() { "all units" } else { &group.name };
            let coverage = self.coverage.unwrap_or_default() * 100.0;
            let coverage = crate::exhibit::numbers::stored(coverage, 4);
            svg.element("ellipse")
                .with("class", "ellipse")
                .at("cx", x)
                .at("cy", y)
                .at("rx", ellipse.semi_axes.0 * plane.scale)
                .at("ry", ellipse.semi_axes.1 * plane.scale)
                .with("transform", &format!("rotate({degrees:.2} {} {})", tenth(x), tenth(y)))
                .with("fill", group.cue.color)
                .with("fill-opacity", ".07")
                .with("stroke", group.cue.color)
                .with("stroke-width", "1.5")
                .around(|svg| {
                    let text =
                        format!("{}: {coverage} % of a normal distribution", shortened(name, 60));
                    svg.element("title").text(&text);
                });
        }
    }

    fn draw_centres(&self, svg: &mut Svg, plane: &Plane) {
        if !self.has_groups {
            return;
        }
        svg.element("g")
            .with("class", "centres")
            .with("stroke", INK)
            .with("stroke-width", "1.4")
            .around(|svg| {
                for group in self.groups.iter().filter(|group| group.ellipse.is_some()) {
                    let members: Vec<_> =
                        group.members.iter().map(|&unit| self.points[unit]).collect();
                    let centre = mean(&members);
                    let text = format!(
                        "centre of {} · {} · {}, {}",
                        shortened(&group.name, 60),
                        counted(members.len(), "unit"),
                        typographic(&significant(centre.0, 4)),
                        typographic(&significant(centre.1, 4))
                    );
                    push_mark(svg, group.cue, plane.place(centre.0, centre.1), 6.5, Some(&text));
                }
            });
    }
}

// In the order in which they first appear; units without a group come last.
fn by_group(names: &[Option<String>]) -> Vec<Group> {
    let mut groups: Vec<Group> = Vec::new();
    let mut place_of = std::collections::HashMap::new();
    let mut without = Vec::new();
    for (unit, name) in names.iter().enumerate() {
        let Some(name) = name else {
            without.push(unit);
            continue;
        };
        let place = *place_of.entry(name).or_insert_with(|| {
            let shown = if name.trim().is_empty() { "(empty name)" } else { name };
            let cue = cue(groups.len());
            groups.push(Group { name: shown.to_owned(), cue, members: Vec::new(), ellipse: None });
            groups.len() - 1
        });
        groups[place].members.push(unit);
    }
    if !without.is_empty() {
        let cue = Cue { color: NO_GROUP, shape: Shape::Disc };
        groups.push(Group { name: "no group".to_owned(), cue, members: without, ellipse: None });
    }
    groups
}

fn is_finite(point: &(f64, f64)) -> bool {
    point.0.is_finite() && point.1.is_finite()
}

/// Joins texts with commas, the last with `and`; beyond `most` they are counted.
pub(super) fn listed(texts: &[String], most: usize) -> String {
    match texts {
        [] => String::new(),
        [one] => one.clone(),
        _ if texts.len() > most => {
            format!("{} and {} more", texts[..most].join(", "), texts.len() - most)
        }
        [first @ .., last] => format!("{} and {last}", first.join(", ")),
    }
}
