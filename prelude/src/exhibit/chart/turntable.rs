//! The turntable: three components that the reader turns.
//!
//! It is HTML with a plain script inside, so it works wherever a client runs the scripts of its
//! outputs, with no network. Where scripts do not run (a notebook that is not trusted, a printed
//! page made without them) it is three static score plots, one for each pair of components.

use base64::Engine as _;
use serde_json::{Value, json};

use super::groups::Groups;
use super::marks::{MOST_MARKS, mark_radius};
use super::measure::FONTS;
use super::palette::{CARD, CARD_EDGE, INK, INK_SOFT, ZERO};
use super::picture::numbers;
use super::settings::{Setting, Settings};
use super::source::Source;
use super::svg::fnv1a;
use super::{Chart, NUMBERS, Names, score_plot};
use crate::components::PrincipalComponents;
use crate::error::{Error, Result};
use crate::exhibit::numbers::{counted, percent, significant, typographic};
use crate::exhibit::text::{push_markup, shortened, visible};
use crate::exhibit::{Bundle, Content, Exhibit};

const SCRIPT: &str = include_str!("turntable.js");
/// Names of more units would make the output too large.
const MOST_NAMES: usize = 5_000;

/// The units in the space of three components, to be turned with mouse, touch or keys.
///
/// Made by [`turntable`]; a builder like [`Chart`].
#[derive(Debug, Clone)]
pub struct Turntable {
    source: Source,
    components: (usize, usize, usize),
    settings: Settings,
    /// Score plots of the three pairs, for clients that run no scripts.
    plots: Chart,
}

/// The units in the space of three components, which the reader turns.
///
/// Scales are equal and there is no perspective, so distances across the screen are those of the
/// scores. Without scripts three score plots stand in its place. Beyond 20 000 units evenly spaced
/// rows are drawn, which the note says.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::{Exhibit, turntable};
///
/// let table = turntable(&pca).groups(["a", "a", "a", "b", "b"]);
/// let html = table.exhibit().text("text/html").unwrap().to_owned();
/// // The three views for clients that run no scripts.
/// assert_eq!(html.matches("<img ").count(), 3);
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn turntable(pca: &PrincipalComponents) -> Turntable {
    Turntable {
        source: Source::with_units(pca),
        components: (1, 2, 3),
        settings: Settings::default(),
        plots: score_plot(pca).size(420, 400),
    }
}

impl Turntable {
    /// The three components, counted from 1: sideways, upwards and towards the reader.
    pub fn components(mut self, sideways: usize, upwards: usize, towards: usize) -> Self {
        self.components = (sideways, upwards, towards);
        self
    }

    /// The group of each unit, drawn by colour and shape.
    pub fn groups(mut self, groups: impl Names) -> Self {
        let groups = groups.into_names();
        self.settings.groups = Some(groups.clone());
        self.plots.settings.groups = Some(groups);
        self
    }

    /// Other names for the units.
    pub fn labels(mut self, labels: impl Names) -> Self {
        let labels = labels.into_names();
        self.settings.labels = Some(labels.clone());
        self.plots.settings.labels = Some(labels);
        self
    }

    /// Another title.
    pub fn title(mut self, title: impl Into<String>) -> Self {
        self.settings.title = Some(title.into());
        self
    }

    /// Whether the settings fit the analysis.
    ///
    /// # Errors
    ///
    /// [`Error::ComponentOutOfRange`] for a component that does not exist,
    /// [`Error::OptionOutOfRange`] for a component named twice or too many groups,
    /// [`Error::ShapeMismatch`] when there are not as many groups or labels as units.
    pub fn check(&self) -> Result<()> {
        let (a, b, c) = self.components;
        let available = self.source.n_components();
        for asked in [a, b, c] {
            if !(1..=available).contains(&asked) {
                return Err(Error::ComponentOutOfRange { asked, available });
            }
        }
        if a == b || a == c || b == c {
            return Err(Error::OptionOutOfRange {
                option: "components",
                value: c as f64,
                accepted: "three different components",
            });
        }
        let takes = [Setting::Groups, Setting::Labels];
        debug_assert!(self.settings.set().all(|setting| takes.contains(&setting)));
        self.settings.check_units(self.source.scores.nrows())
    }

    /// The turntable as HTML that needs nothing else.
    ///
    /// # Errors
    ///
    /// Those of [`check`](Turntable::check).
    pub fn html(&self) -> Result<String> {
        self.check()?;
        Ok(self.page(&self.scene()))
    }

    fn scene(&self) -> Scene {
        let (a, b, c) = self.components;
        let [x, y, z] = [a, b, c].map(|component| self.source.scores_along(Some(component)));
        let points = x.iter().copied().zip(y.iter().copied()).collect::<Vec<_>>();
        let groups = Groups::new(self.settings.groups.as_deref(), &points, None);
        let every = points.len().div_ceil(MOST_MARKS).max(1);
        let title = self.settings.title.clone();
        let title = title.unwrap_or_else(|| format!("Scores on components {a}, {b} and {c}"));
        let words = format!(
            "{} on components {a} ({}), {b} ({}) and {c} ({} of the variance).{}",
            counted(points.len(), "unit"),
            percent(self.source.share(a)),
            percent(self.source.share(b)),
            percent(self.source.share(c)),
            match groups.are_set() {
                true => {
                    let names: Vec<String> = groups
                        .list()
                        .iter()
                        .map(|g| format!("{} ({})", shortened(&g.name, 40), g.members.len()))
                        .collect();
                    format!(" Groups: {}.", super::units::listed(&names, 10))
                }
                false => String::new(),
            }
        );
        Scene { x, y, z, groups, every, title, words }
    }

    fn data(&self, scene: &Scene, id: &str) -> Value {
        let (a, b, c) = self.components;
        let n = scene.x.len();
        let reach = (0..n)
            .map(|unit| scene.x[unit].hypot(scene.y[unit]).hypot(scene.z[unit]))
            .filter(|reach| reach.is_finite())
            .fold(0.0, f64::max);
        let reach = if reach > 0.0 { reach } else { 1.0 };
        // Thousandths of the reach are finer than a pixel and take few bytes.
        let round = |value: f64| (value / reach * 1000.0).round() as i64;
        let mut group_of = vec![0; n];
        for (place, group) in scene.groups.list().iter().enumerate() {
            for &unit in &group.members {
                group_of[unit] = place;
            }
        }
        let shown = || (0..n).step_by(scene.every);
        let points: Vec<Value> = shown()
            .map(|unit| {
                json!([
                    round(scene.x[unit]),
                    round(scene.y[unit]),
                    round(scene.z[unit]),
                    group_of[unit]
                ])
            })
            .collect();
        let names: Vec<String> = match shown().count() > MOST_NAMES {
            true => Vec::new(),
            false => shown().map(|unit| self.name(scene, unit, group_of[unit])).collect(),
        };
        let groups: Vec<Value> = scene
            .groups
            .list()
            .iter()
            .map(|group| json!({ "color": group.cue.color, "shape": group.cue.shape.corners() }))
            .collect();
        let axis = |component: usize, tip: [i64; 3]| {
            let share = percent(self.source.share(component));
            json!({ "tip": tip, "name": format!("component {component} ({share})") })
        };
        json!({
            "id": id,
            "words": scene.words,
            "fonts": FONTS,
            "reach": 1000,
            "radius": mark_radius(n) * 0.85,
            "points": points,
            "names": names,
            "groups": groups,
            "axes": [axis(a, [1000, 0, 0]), axis(b, [0, 1000, 0]), axis(c, [0, 0, 1000])],
            "colors": { "ink": INK, "line": ZERO },
        })
    }

    fn name(&self, scene: &Scene, unit: usize, group: usize) -> String {
        let chosen = self.settings.labels.as_ref().and_then(|labels| labels[unit].as_deref());
        let mut text = shortened(chosen.unwrap_or(&self.source.labels[unit]), 60).into_owned();
        if scene.groups.are_set() {
            text.push_str(&format!(" · {}", shortened(&scene.groups.list()[group].name, 30)));
        }
        let (a, b, c) = self.components;
        for (component, value) in [(a, scene.x[unit]), (b, scene.y[unit]), (c, scene.z[unit])] {
            text.push_str(&format!(" · {component}: {}", typographic(&significant(value, 3))));
        }
        visible(&text).into_owned()
    }

    fn page(&self, scene: &Scene) -> String {
        let bare = self.data(scene, "");
        let id = format!("{:016x}", fnv1a(bare.to_string().as_bytes()));
        let data = script_text(&self.data(scene, &id));
        let mut html = format!(
            "<figure data-turntable=\"{id}\" style=\"margin:0;max-width:720px;background:{CARD};\
             border:1px solid {CARD_EDGE};border-radius:6px;padding:14px 18px;color:{INK};\
             font:12px {fonts}\"><figcaption><div style=\"font-size:16px;font-weight:bold\">",
            fonts = FONTS.replace('"', "'")
        );
        push_markup(&mut html, &scene.title);
        html.push_str("</div><div style=\"margin:3px 0 6px\">");
        push_markup(&mut html, &scene.words);
        html.push_str("</div>");
        self.push_legend(&mut html, scene);
        html.push_str(
            "</figcaption><div data-stage hidden style=\"position:relative;aspect-ratio:4/3\">\
             </div><div data-controls hidden style=\"margin-top:6px\">",
        );
        for (key, text) in [
            ("ArrowLeft", "Turn left"),
            ("ArrowRight", "Turn right"),
            ("ArrowUp", "Tip up"),
            ("ArrowDown", "Tip down"),
            ("+", "Larger"),
            ("-", "Smaller"),
            ("Home", "First view"),
        ] {
            html.push_str(&format!(
                "<button type=\"button\" data-does=\"{key}\" style=\"font:inherit;color:{INK};\
                 background:#fff;border:1px solid {CARD_EDGE};border-radius:4px;padding:2px 8px;\
                 margin:0 6px 4px 0\">{text}</button>"
            ));
        }
        html.push_str(&format!(
            "<div data-said aria-live=\"polite\" style=\"min-height:1.5em;color:{INK_SOFT}\"></div>\
             </div><div data-views style=\"display:flex;flex-wrap:wrap;gap:8px\">"
        ));
        self.push_views(&mut html);
        html.push_str("</div>");
        if scene.every > 1 {
            html.push_str(&format!(
                "<div style=\"color:{INK_SOFT}\">{} of {} are drawn, evenly spaced in row \
                 order.</div>",
                scene.x.len().div_ceil(scene.every),
                counted(scene.x.len(), "unit")
            ));
        }
        html.push_str("</figure><script>(() => {\nconst data = ");
        html.push_str(&data);
        html.push_str(";\n");
        html.push_str(SCRIPT);
        html.push_str("})();</script>");
        html
    }

    fn push_legend(&self, html: &mut String, scene: &Scene) {
        if !scene.groups.are_set() {
            return;
        }
        html.push_str("<div style=\"margin-bottom:4px\">");
        for group in scene.groups.list() {
            html.push_str("<span style=\"display:inline-block;margin-right:16px\">");
            html.push_str(&mark(group.cue.color, group.cue.shape.corners()));
            push_markup(
                html,
                &format!(" {} ({})", shortened(&group.name, 40), group.members.len()),
            );
            html.push_str("</span>");
        }
        html.push_str("</div>");
    }

    /// Score plots of the three pairs, as pictures, which clients show even where they take
    /// scripts and drawings out.
    fn push_views(&self, html: &mut String) {
        let (a, b, c) = self.components;
        for (sideways, upwards) in [(a, b), (c, b), (a, c)] {
            let chart = self.plots.clone().components(sideways, upwards);
            let svg = base64::engine::general_purpose::STANDARD.encode(chart.svg());
            html.push_str(&format!(
                "<img style=\"width:320px;max-width:100%\" alt=\"Scores on components {sideways} \
                 and {upwards}\" src=\"data:image/svg+xml;base64,{svg}\">"
            ));
        }
    }
}

/// What is drawn.
struct Scene {
    x: Vec<f64>,
    y: Vec<f64>,
    z: Vec<f64>,
    groups: Groups,
    every: usize,
    title: String,
    words: String,
}

impl Exhibit for Turntable {
    fn exhibit(&self) -> Bundle {
        match self.check() {
            Ok(()) => {
                let scene = self.scene();
                let numbers = json!({
                    "components": self.components,
                    "units": self.source.labels,
                    "sideways": numbers(scene.x.iter().copied()),
                    "upwards": numbers(scene.y.iter().copied()),
                    "towards": numbers(scene.z.iter().copied()),
                });
                let (a, b, _) = self.components;
                // For records and clients that show pictures only: the first of the three views.
                let still = self.plots.clone().components(a, b).size(720, 560).svg();
                Bundle::new()
                    .with_html(self.page(&scene))
                    .with_svg(still)
                    .with_plain(visible(&scene.words))
                    .with(NUMBERS, Content::Json(numbers))
            }
            Err(error) => {
                let message = format!("this turntable cannot be drawn: {error}");
                Bundle::new().with_svg(super::error_card(&error.to_string())).with_plain(message)
            }
        }
    }
}

/// JSON as it may stand inside a script element: nothing in it can end the element.
fn script_text(data: &Value) -> String {
    data.to_string()
        .replace('<', "\\u003c")
        .replace('\u{2028}', "\\u2028")
        .replace('\u{2029}', "\\u2029")
}

/// A group's mark as a small drawing of its own.
fn mark(color: &str, corners: &[(f64, f64)]) -> String {
    let shape = if corners.is_empty() {
        format!("<circle r=\"1\" fill=\"{color}\"/>")
    } else {
        let points: Vec<String> = corners.iter().map(|(x, y)| format!("{x},{y}")).collect();
        format!("<polygon points=\"{}\" fill=\"{color}\"/>", points.join(" "))
    };
    format!(
        "<svg viewBox=\"-1.7 -1.7 3.4 3.4\" width=\"13\" height=\"13\" aria-hidden=\"true\" \
         style=\"vertical-align:-2px\">{shape}</svg>"
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn data_cannot_end_the_script() {
        let text = script_text(&json!({ "name": "</script><script>alert(1)</script>\u{2028}" }));
        assert!(!text.contains('<') && !text.contains('\u{2028}'));
        // It is the same JSON to whoever reads it.
        let read: Value = serde_json::from_str(&text).unwrap();
        assert_eq!(read["name"], "</script><script>alert(1)</script>\u{2028}");
    }
}
