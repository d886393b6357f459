//! Loadings as bars: what each of the first few components is made of, side by side.

use nalgebra::DMatrix;
use serde_json::{Value, json};

use super::Chart;
use super::card::{Area, Card};
use super::frame::{Axis, Frame, TICK_SIZE};
use super::measure::{Weight, fitted};
use super::palette::{CARD, INK, INK_SOFT, shade};
use super::picture::{Drawing, Picture, numbers};
use super::row_names::RowNames;
use super::settings::{Intervals, Setting, Settings};
use super::source::Source;
use super::svg::{Svg, tenth};
use crate::components::PrincipalComponents;
use crate::error::{Error, Result};
use crate::exhibit::numbers::{counted, fixed, percent, typographic};
use crate::exhibit::text::shortened;

const MOST_PANELS: usize = 6;
const USUAL_PANELS: usize = 3;
/// As many bars stand in one panel.
const MOST_BARS: usize = 48;
const GAP: f64 = 16.0;
/// Bars of smaller loadings are pale.
const PALE: f64 = 0.25;
const FULL: f64 = 0.9;

/// The loadings of the first components as bars, a panel for each component.
///
/// [`first`](Chart::first) says how many components (three unless stated, at most six), and
/// [`intervals`](Chart::intervals) adds a whisker to each bar. Bars shorter than 1/√p, the size
/// when all p variables share equally, are pale. Beyond 48 variables those with the largest
/// loadings on the drawn components are shown, and the chart says so.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::loading_bars;
///
/// // Two components of three variables are six bars.
/// assert_eq!(loading_bars(&pca).first(2).svg().matches("· loading ").count(), 6);
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn loading_bars(pca: &PrincipalComponents) -> Chart {
    Chart::new(Bars { source: Source::without_units(pca) })
}

/// The loadings of an analysis.
#[derive(Debug)]
struct Bars {
    source: Source,
}

impl Bars {
    fn n_panels(&self, settings: &Settings) -> usize {
        settings.first.unwrap_or(USUAL_PANELS.min(self.source.n_components()))
    }
}

impl Picture for Bars {
    fn kind(&self) -> &'static str {
        "chart of loading bars"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::First, Setting::Labels, Setting::Intervals]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        let available = self.source.n_components();
        let asked = self.n_panels(settings);
        if !(1..=available).contains(&asked) {
            return Err(Error::ComponentOutOfRange { asked, available });
        }
        if asked > MOST_PANELS {
            let (value, accepted) = (asked as f64, "1 to 6 components");
            return Err(Error::OptionOutOfRange { option: "first", value, accepted });
        }
        if let Some(intervals) = &settings.intervals {
            intervals.check(self.source.variables.len(), asked)?;
        }
        settings.check_variables(self.source.variables.len())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let source = &self.source;
        let n_panels = self.n_panels(settings);
        let names = settings.names_or(&source.variables);
        let shown = shown(&source.loadings, n_panels);
        let threshold = 1.0 / (source.variables.len() as f64).sqrt();
        let words = words(source, &names, n_panels);
        let mut notes = vec![format!(
            "Coefficients of unit length for each component, not correlations. Pale: below 1/√p = \
             {}, the size when all variables share equally.",
            fixed(threshold, 3)
        )];
        notes.extend(settings.intervals.as_ref().map(|intervals| intervals.words.clone()));
        if shown.len() < names.len() {
            notes.push(format!(
                "The {} of {} with the largest loadings on these components are drawn.",
                shown.len(),
                counted(names.len(), "variable")
            ));
        }
        let usual = 190.0 + 21.0 * shown.len() as f64;
        let card = Card {
            width: settings.size_or(720.0, usual).0,
            height: settings.size_or(720.0, usual).1,
            least_drawing: 60.0 + 11.0 * shown.len() as f64,
            title: settings.title_or(match n_panels {
                1 => "Loadings on component 1".to_owned(),
                _ => format!("Loadings on the first {n_panels} components"),
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
        let panels = Panels { source, names: &names, shown: &shown, threshold, settings };
        let svg = card.draw(|svg, room| panels.draw(svg, room, n_panels));
        let numbers = behind(source, &names, n_panels, settings.intervals.as_ref());
        Ok(Drawing { svg, words, numbers })
    }
}

/// What all panels share.
struct Panels<'a> {
    source: &'a Source,
    names: &'a [String],
    shown: &'a [usize],
    threshold: f64,
    settings: &'a Settings,
}

impl Panels<'_> {
    fn draw(&self, svg: &mut Svg, room: Area, n_panels: usize) {
        let shown = || self.shown.iter().map(|&variable| self.names[variable].as_str());
        let row_names = RowNames::fit(room, shown(), 0.0);
        let names_room = row_names.room;
        let top = room.top + 22.0;
        let bottom = room.bottom - 22.0;
        let row = (bottom - top) / self.shown.len() as f64;
        let y_of = |place: usize| top + (place as f64 + 0.5) * row;
        row_names.draw(svg, shown().enumerate().map(|(place, name)| (name, y_of(place))));
        let reach = self.reach(n_panels);
        let all = room.right - room.left - names_room - GAP * (n_panels as f64 - 1.0);
        let panel = all / n_panels as f64;
        for component in 0..n_panels {
            let left = room.left + names_room + component as f64 * (panel + GAP);
            let area = Area { left, right: left + panel, top, bottom };
            let across = Axis::Numbers(-reach, reach);
            let frame = Frame::within(area, left, across, Axis::Places(self.shown.len()));
            frame.draw_grid(svg);
            let share = percent(self.source.share(component + 1));
            let title = format!("component {} ({share})", component + 1);
            svg.element("text")
                .at("x", (area.left + area.right) / 2.0)
                .at("y", top - 8.0)
                .at("font-size", TICK_SIZE)
                .with("fill", INK_SOFT)
                .with("text-anchor", "middle")
                .text(&fitted(&title, TICK_SIZE, Weight::Regular, panel + GAP));
            self.draw_bars(svg, &frame, component, (row * 0.62).min(15.0), &y_of);
        }
    }

    /// How far the axes reach to both sides: all panels share one scale.
    fn reach(&self, n_panels: usize) -> f64 {
        let loadings = self.source.loadings.columns(0, n_panels).amax();
        let whiskers = self.settings.intervals.iter().flat_map(|intervals| {
            let whisker = |matrix: &DMatrix<f64>| matrix.columns(0, n_panels).amax();
            [whisker(&intervals.low), whisker(&intervals.high)]
        });
        whiskers.fold(loadings, f64::max).max(1e-12) * 1.06
    }

    fn draw_bars(
        &self,
        svg: &mut Svg,
        frame: &Frame,
        component: usize,
        thickness: f64,
        y_of: &impl Fn(usize) -> f64,
    ) {
        let zero = frame.across(0.0);
        svg.element("g").with("class", "bars").with("stroke", CARD).around(|svg| {
            for (place, &variable) in self.shown.iter().enumerate() {
                let value = self.source.loadings[(variable, component)];
                let end = frame.across(value);
                let small = value.abs() < self.threshold * (1.0 - 1e-9);
                let weight = if small { PALE } else { FULL };
                svg.element("rect")
                    .at("x", zero.min(end))
                    .at("y", y_of(place) - thickness / 2.0)
                    .at("width", (end - zero).abs())
                    .at("height", thickness)
                    .with("fill", &shade(weight * value.signum()).0)
                    .around(|svg| {
                        svg.element("title").text(&self.hover(variable, component));
                    });
            }
        });
        let Some(intervals) = &self.settings.intervals else { return };
        let mut path = String::new();
        for (place, &variable) in self.shown.iter().enumerate() {
            let low = frame.across(intervals.low[(variable, component)]);
            let high = frame.across(intervals.high[(variable, component)]);
            let y = y_of(place);
            path.push_str(&format!(
                "M{} {}V{}M{} {}H{}M{} {}V{}",
                tenth(low),
                tenth(y - 3.0),
                tenth(y + 3.0),
                tenth(low),
                tenth(y),
                tenth(high),
                tenth(high),
                tenth(y - 3.0),
                tenth(y + 3.0)
            ));
        }
        // A light edge keeps a whisker apart from the bar under it.
        for (class, color, thickness) in [("edges", CARD, "3.4"), ("whiskers", INK, "1.3")] {
            let whiskers = svg.element("path").with("class", class).with("d", &path);
            whiskers
                .with("stroke", color)
                .with("stroke-width", thickness)
                .with("fill", "none")
                .with("pointer-events", "none")
                .done();
        }
    }

    fn hover(&self, variable: usize, component: usize) -> String {
        let value = typographic(&fixed(self.source.loadings[(variable, component)], 3));
        let name = shortened(&self.names[variable], 60);
        let mut text = format!("{name} · component {} · loading {value}", component + 1);
        if let Some(intervals) = &self.settings.intervals {
            let end = |matrix: &DMatrix<f64>| typographic(&fixed(matrix[(variable, component)], 3));
            text.push_str(&format!(" · {} to {}", end(&intervals.low), end(&intervals.high)));
        }
        text
    }
}

/// The variables that are drawn, in their order.
fn shown(loadings: &DMatrix<f64>, n_panels: usize) -> Vec<usize> {
    let mut order: Vec<usize> = (0..loadings.nrows()).collect();
    if order.len() > MOST_BARS {
        let size = |variable: usize| loadings.row(variable).columns(0, n_panels).amax();
        order.sort_by(|&a, &b| size(b).total_cmp(&size(a)).then(a.cmp(&b)));
        order.truncate(MOST_BARS);
        order.sort_unstable();
    }
    order
}

fn words(source: &Source, names: &[String], n_panels: usize) -> String {
    let mut words = format!(
        "Loadings of {} on {}.",
        counted(source.variables.len(), "variable"),
        counted(n_panels, "component")
    );
    for component in 0..n_panels {
        let column = source.loadings.column(component);
        let mut order: Vec<usize> = (0..names.len()).collect();
        order.sort_by(|&a, &b| column[b].abs().total_cmp(&column[a].abs()).then(a.cmp(&b)));
        let top: Vec<String> = order
            .into_iter()
            .take(3)
            .map(|v| format!("{} ({})", shortened(&names[v], 40), fixed(column[v], 3)))
            .collect();
        let component = component + 1;
        words.push_str(&format!(" Largest on component {component}: {}.", top.join(", ")));
    }
    words
}

fn behind(
    source: &Source,
    names: &[String],
    n_panels: usize,
    intervals: Option<&Intervals>,
) -> Value {
    let columns = |matrix: &DMatrix<f64>| -> Vec<Value> {
        (0..n_panels).map(|k| numbers(matrix.column(k).iter().copied())).collect()
    };
    json!({
        "variables": names,
        "loadings by component": columns(&source.loadings),
        "low": intervals.map(|intervals| columns(&intervals.low)),
        "high": intervals.map(|intervals| columns(&intervals.high)),
    })
}
