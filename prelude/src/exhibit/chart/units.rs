//! Units in a plane: marks, hover texts and names, shared by score plot and biplot.

use serde_json::{Value, json};

use super::card::LegendEntry;
use super::groups::{Group, Groups};
use super::labels::{LabelSpace, Wish};
use super::marks::{
    MOST_MARKS, Spot, hover_fits, mark_radius, push_counts, push_dense, push_hovering, push_mark,
};
use super::palette::{Cue, INK, Shape};
use super::picture::numbers;
use super::plane::{Extent, Plane};
use super::settings::Settings;
use super::source::Source;
use super::svg::Svg;
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
    groups: Groups,
    hulls: bool,
    recede: bool,
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
        let usual = (settings.groups.is_some() && !settings.hulls).then_some(0.95);
        let coverage = settings.coverage.or(usual);
        let groups = Groups::new(settings.groups.as_deref(), &points, coverage);
        let names_are_chosen = settings.labels.is_some();
        let hulls = settings.hulls;
        Units { source, components, points, names, names_are_chosen, groups, hulls, recede: false }
    }

    /// Draws units lightly, as ground for something else.
    pub fn receding(mut self) -> Self {
        self.recede = true;
        self
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
        self.groups.widen(extent);
    }

    pub fn legend(&self) -> Vec<LegendEntry> {
        self.groups.legend()
    }

    /// Ellipses and marks; returns the lines to set under the chart.
    pub fn draw(&self, svg: &mut Svg, plane: &Plane) -> Vec<String> {
        let fill_opacity = if self.recede { "0" } else { ".07" };
        let mut notes = Vec::new();
        if self.hulls {
            self.groups.draw_hulls(svg, plane, &self.points);
        }
        if self.count() > MOST_MARKS {
            notes.push(self.draw_counts(svg, plane));
            self.groups.draw_ellipses(svg, plane, "0");
        } else {
            self.groups.draw_ellipses(svg, plane, fill_opacity);
            notes.extend(self.draw_marks(svg, plane));
        }
        self.groups.draw_centres(svg, plane);
        notes
    }

    /// What the ellipses mean, and that they are no safety limits.
    pub fn ellipse_notes(&self) -> Vec<String> {
        self.groups.notes()
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
            .filter_map(|unit| Some((unit, self.names[unit].filter(|name| !is_blank(name))?)))
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
        let n_names = self.names.iter().flatten().filter(|name| !is_blank(name)).count();
        match n_placed {
            _ if n_placed >= n_names => None,
            0 => Some("No unit is named: there is no room between the marks.".to_owned()),
            _ => Some(format!(
                "{} of {} named, those farthest from the centre first (in standard deviations of \
                 each component).",
                grouped(n_placed),
                counted(self.count(), "unit")
            )),
        }
    }

    /// The numbers behind the marks.
    pub fn behind(&self) -> Value {
        let groups = self.groups.are_set().then(|| self.groups.of_units(self.count()));
        json!({
            "components": self.components,
            "units": self.names,
            "groups": groups.map(|groups| groups.iter().map(|g| g.name.clone()).collect::<Vec<_>>()),
            "sideways": numbers(self.points.iter().map(|point| point.0)),
            "upwards": numbers(self.points.iter().map(|point| point.1)),
        })
    }

    /// The groups and the farthest units, in words.
    pub fn words(&self) -> String {
        let mut words = self.groups.words();
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

    fn spots(&self, plane: &Plane, units: impl Iterator<Item = usize>) -> Vec<Spot> {
        units
            .filter(|&unit| is_finite(&self.points[unit]))
            .map(|unit| {
                let (x, y) = plane.place(self.points[unit].0, self.points[unit].1);
                Spot { x, y, unit }
            })
            .collect()
    }

    fn draw_marks(&self, svg: &mut Svg, plane: &Plane) -> Option<String> {
        let radius = mark_radius(self.count());
        let group_of = self.groups.of_units(self.count());
        let hovers = hover_fits((0..self.count()).map(|unit| self.hover(unit, group_of[unit])));
        let opacity = match (hovers, self.recede) {
            (_, true) => ".45",
            (true, false) => ".88",
            (false, false) => ".62",
        };
        for (place, group) in self.groups.list().iter().enumerate() {
            let spots = self.spots(plane, group.members.iter().copied());
            if spots.is_empty() {
                continue;
            }
            let look = (radius, opacity);
            if hovers {
                push_hovering(svg, group.cue, &spots, look, |unit| self.hover(unit, group));
            } else {
                push_dense(svg, group.cue, &spots, look, &format!("mark{place}"));
            }
        }
        (!hovers).then(|| "Too many units for hover texts.".to_owned())
    }

    fn draw_counts(&self, svg: &mut Svg, plane: &Plane) -> String {
        let classes = push_counts(svg, &self.spots(plane, 0..self.count()));
        let shades: Vec<String> = classes
            .iter()
            .map(|&(low, high, _)| match low == high {
                true => grouped(low),
                false => format!("{}–{}", grouped(low), grouped(high)),
            })
            .collect();
        format!(
            "More than {} units: each hexagon counts the units inside it, from light to dark {}.",
            grouped(MOST_MARKS),
            shades.join(", ")
        )
    }

    fn hover_name(&self, unit: usize) -> String {
        let name = self.names[unit].map(|name| shortened(name, HOVER_CHARACTERS).into_owned());
        name.unwrap_or_else(|| format!("unit {}", unit + 1))
    }

    fn hover(&self, unit: usize, group: &Group) -> String {
        let mut text = self.hover_name(unit);
        if self.groups.are_set() {
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
}

fn is_finite(point: &(f64, f64)) -> bool {
    point.0.is_finite() && point.1.is_finite()
}

fn is_blank(name: &str) -> bool {
    name.trim().is_empty()
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
