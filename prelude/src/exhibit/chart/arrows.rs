//! Variables as arrows from the origin, shared by loading plot and biplot.

use serde_json::{Value, json};

use super::labels::{LabelSpace, Wish};
use super::palette::FAINT;
use super::picture::numbers;
use super::plane::Plane;
use super::settings::Settings;
use super::source::Source;
use super::svg::{Svg, tenth};
use crate::exhibit::numbers::{counted, fixed, typographic};
use crate::exhibit::text::shortened;

const MOST_NAMED: usize = 80;
// Beyond so many, arrows are a solid fan; the longest say what there is to say.
const MOST_DRAWN: usize = 400;
const HEAD: f64 = 8.0;

/// The variables' loadings on two components.
pub(super) struct Arrows {
    components: (Option<usize>, Option<usize>),
    tips: Vec<(f64, f64)>,
    names: Vec<String>,
    threshold: f64,
    measure: Measure,
}

/// What the lengths of arrows along the axes are.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Measure {
    Loading,
    Correlation,
}

impl Arrows {
    /// Labels, where given, name the variables in place of their own names.
    pub fn new(source: &Source, settings: &Settings, labels: Option<&[Option<String>]>) -> Self {
        let components = settings.plane(source);
        let (x, y) = (source.loadings_along(components.0), source.loadings_along(components.1));
        let names = match labels {
            Some(labels) => labels.iter().map(|label| label.clone().unwrap_or_default()).collect(),
            None => source.variables.clone(),
        };
        // With all p loadings of a component equal, each is 1/√p, and the arrow in the plane of
        // two such components is √(2/p) long.
        let n_drawn = 1.0 + f64::from(u8::from(components.1.is_some()));
        let threshold = (n_drawn / source.variables.len() as f64).sqrt();
        let tips = x.into_iter().zip(y).collect();
        Arrows { components, tips, names, threshold, measure: Measure::Loading }
    }

    /// Correlations of variables with two components, counted from 1.
    pub fn of_correlations(
        components: (usize, usize),
        tips: Vec<(f64, f64)>,
        names: Vec<String>,
    ) -> Self {
        let components = (Some(components.0), Some(components.1));
        Arrows { components, tips, names, threshold: 0.0, measure: Measure::Loading }
            .taken_as_correlations()
    }

    /// Takes the lengths as correlations; those that describe less than half of their variable's
    /// variance are small.
    pub fn taken_as_correlations(self) -> Self {
        let threshold = std::f64::consts::FRAC_1_SQRT_2;
        Arrows { threshold, measure: Measure::Correlation, ..self }
    }

    pub fn tips(&self) -> &[(f64, f64)] {
        &self.tips
    }

    /// The length below which arrows are drawn thin and grey.
    pub fn threshold(&self) -> f64 {
        self.threshold
    }

    pub fn longest(&self) -> f64 {
        self.tips.iter().map(|tip| tip.0.hypot(tip.1)).fold(0.0, f64::max)
    }

    /// The numbers behind the arrows.
    pub fn behind(&self) -> Value {
        json!({
            "components": self.components,
            "variables": self.names,
            "sideways": numbers(self.tips.iter().map(|tip| tip.0)),
            "upwards": numbers(self.tips.iter().map(|tip| tip.1)),
        })
    }

    /// Draws the arrows, stretched by a factor.
    pub fn draw(
        &self,
        svg: &mut Svg,
        plane: &Plane,
        stretch: f64,
        (full, small): (&'static str, &'static str),
    ) {
        let from = plane.place(0.0, 0.0);
        svg.element("g")
            .with("class", "arrows")
            .with("stroke-linecap", "round")
            .with("stroke-linejoin", "round")
            .with("fill", "none")
            .around(|svg| {
                for variable in self.drawn() {
                    let (x, y) = self.tips[variable];
                    let to = plane.place(x * stretch, y * stretch);
                    let path = arrow(from, to);
                    let (color, thickness) =
                        if self.is_small(variable) { (small, "1.2") } else { (full, "1.8") };
                    let element = svg.element("path").with("d", &path).with("stroke", color);
                    element
                        .with("stroke-width", thickness)
                        .around(|svg| svg.element("title").text(&self.hover(variable)));
                }
            });
    }

    /// Adds arrows to what labels should keep off.
    pub fn block(&self, space: &mut LabelSpace, plane: &Plane, stretch: f64) {
        let from = plane.place(0.0, 0.0);
        for (x, y) in self.drawn().into_iter().map(|variable| self.tips[variable]) {
            let to = plane.place(x * stretch, y * stretch);
            space.add_line(from, to);
            space.add_mark(to.0, to.1, 2.0);
        }
    }

    /// The names to be set at the tips, the longest arrows first.
    pub fn wishes(&self, plane: &Plane, stretch: f64) -> Vec<Wish> {
        let mut order = self.drawn();
        order.reverse();
        order
            .into_iter()
            .filter(|&variable| !self.names[variable].trim().is_empty())
            .take(MOST_NAMED)
            .map(|variable| {
                let (x, y) = self.tips[variable];
                let (px, py) = plane.place(x * stretch, y * stretch);
                let text = self.names[variable].clone();
                Wish { x: px, y: py, text, clearance: 2.0, outward: y.atan2(x) }
            })
            .collect()
    }

    /// What the chart says of arrows that are thin or have no name.
    pub fn notes(&self, n_named: usize) -> Vec<String> {
        let mut notes = Vec::new();
        let drawn = self.drawn();
        if drawn.len() < self.tips.len() {
            notes.push(format!(
                "The {} longest of {} are drawn.",
                drawn.len(),
                counted(self.tips.len(), "arrow")
            ));
        }
        let n_small = drawn.iter().copied().filter(|&variable| self.is_small(variable)).count();
        if n_small > 0 {
            let what = match (self.measure, self.components.1) {
                (Measure::Correlation, _) => "√½ = 0.707, the length at which half of the \
                                              variable's variance is described"
                    .to_owned(),
                (Measure::Loading, second) => format!(
                    "√({}/p) = {}, the length when all variables share equally",
                    if second.is_some() { 2 } else { 1 },
                    fixed(self.threshold, 3)
                ),
            };
            notes
                .push(format!("Thin and grey: {} shorter than {what}.", counted(n_small, "arrow")));
        }
        let n_names = drawn.iter().filter(|&&v| !self.names[v].trim().is_empty()).count();
        let n_unnamed = n_names - n_named;
        if n_unnamed > 0 {
            notes.push(format!(
                "{} without a name: there is no room.",
                counted(n_unnamed, "variable")
            ));
        }
        notes
    }

    /// The variables that weigh most, in words.
    pub fn words(&self) -> String {
        let mut words = String::new();
        for (component, of) in [
            (self.components.0, (|tip: &(f64, f64)| tip.0) as fn(&(f64, f64)) -> f64),
            (self.components.1, |tip| tip.1),
        ] {
            let Some(component) = component else { continue };
            let mut order: Vec<usize> = (0..self.tips.len()).collect();
            order.sort_by(|&a, &b| {
                of(&self.tips[b]).abs().total_cmp(&of(&self.tips[a]).abs()).then(a.cmp(&b))
            });
            let top: Vec<String> = order
                .into_iter()
                .take(3)
                .map(|v| {
                    format!("{} ({})", shortened(&self.names[v], 40), fixed(of(&self.tips[v]), 3))
                })
                .collect();
            let what = match self.measure {
                Measure::Loading => "Largest loadings on",
                Measure::Correlation => "Largest correlations with",
            };
            words.push_str(&format!(" {what} component {component}: {}.", top.join(", ")));
        }
        words
    }

    fn is_small(&self, variable: usize) -> bool {
        let (x, y) = self.tips[variable];
        // Equal loadings are exactly as long as the threshold but for rounding.
        x.hypot(y) < self.threshold * (1.0 - 1e-9)
    }

    // The longest arrows, the shortest of them first.
    fn drawn(&self) -> Vec<usize> {
        let mut order = self.by_length();
        order.drain(..order.len().saturating_sub(MOST_DRAWN));
        order
    }

    // The shortest first, so that long arrows are drawn over short ones.
    fn by_length(&self) -> Vec<usize> {
        let length = |variable: usize| self.tips[variable].0.hypot(self.tips[variable].1);
        let drawable = |variable: &usize| length(*variable).is_finite();
        let mut order: Vec<usize> = (0..self.tips.len()).filter(drawable).collect();
        order.sort_by(|&a, &b| length(a).total_cmp(&length(b)).then(b.cmp(&a)));
        order
    }

    fn hover(&self, variable: usize) -> String {
        let mut text = shortened(&self.names[variable], 60).into_owned();
        let (x, y) = self.tips[variable];
        for (component, value) in [(self.components.0, x), (self.components.1, y)] {
            if let Some(component) = component {
                let value = typographic(&fixed(value, 3));
                let what = match self.measure {
                    Measure::Loading => "loading on",
                    Measure::Correlation => "correlation with",
                };
                text.push_str(&format!(" · {what} component {component}: {value}"));
            }
        }
        text
    }
}

fn arrow(from: (f64, f64), to: (f64, f64)) -> String {
    let mut path = format!("M{} {}L{} {}", tenth(from.0), tenth(from.1), tenth(to.0), tenth(to.1));
    let length = (to.0 - from.0).hypot(to.1 - from.1);
    if length > 2.0 {
        let head = HEAD.min(length * 0.6);
        let angle = (to.1 - from.1).atan2(to.0 - from.0);
        let barb = |side: f64| {
            let turn = angle + std::f64::consts::PI - side * 0.42;
            (to.0 + head * turn.cos(), to.1 + head * turn.sin())
        };
        let (a, b) = (barb(1.0), barb(-1.0));
        path.push_str(&format!(
            "M{} {}L{} {}L{} {}",
            tenth(a.0),
            tenth(a.1),
            tenth(to.0),
            tenth(to.1),
            tenth(b.0),
            tenth(b.1)
        ));
    }
    path
}

/// A ring in the plane around the origin.
pub(super) fn push_ring(svg: &mut Svg, plane: &Plane, radius: f64, title: &str) {
    let (x, y) = plane.place(0.0, 0.0);
    svg.element("circle")
        .with("class", "ring")
        .at("cx", x)
        .at("cy", y)
        .at("r", radius * plane.scale)
        .with("fill", "none")
        .with("stroke", FAINT)
        .with("stroke-dasharray", "1.5 4")
        .with("stroke-linecap", "round")
        .around(|svg| svg.element("title").text(title));
}
