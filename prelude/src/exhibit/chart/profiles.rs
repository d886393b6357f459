//! Profiles: each unit as a line over the variables.

use serde_json::{Value, json};

use super::Chart;
use super::card::Card;
use super::frame::{Axis, Frame, places_room, range};
use super::groups::{Group, Groups};
use super::palette::CARD;
use super::picture::{Drawing, Picture, numbers};
use super::settings::{Setting, Settings};
use super::svg::{Svg, tenth};
use super::units::listed;
use crate::error::{Error, Result};
use crate::exhibit::numbers::{counted, grouped, significant, typographic};
use crate::exhibit::text::shortened;
use crate::quantile::{ascending, deviation, mean, quantile};
use crate::table::DataMatrix;

/// More lines than that are a solid band; the band is drawn instead.
const MOST_LINES: usize = 400;
const MOST_VARIABLES: usize = 400;
const MOST_MARKS: usize = 60;

/// Each unit as a line over the variables, which are brought to mean zero and unit variance.
///
/// A bold line is the mean of each group, or of all units. Beyond 400 units a band from the 10th to
/// the 90th percentile of each group stands for the lines, and the chart says so. Variables that do
/// not vary lie at zero. Standard deviations have divisor n − 1.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// use semiaxis::exhibit::profiles;
///
/// // A line for each of five units, and one for their mean.
/// assert_eq!(profiles(&x).svg().matches("class=\"line\"").count(), 5);
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn profiles(x: &DataMatrix) -> Chart {
    Chart::new(Profiles { x: x.clone() })
}

/// The units as they were measured.
#[derive(Debug)]
struct Profiles {
    x: DataMatrix,
}

impl Picture for Profiles {
    fn kind(&self) -> &'static str {
        "chart of profiles"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::Groups, Setting::Labels]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        if self.x.n_rows() < 2 {
            let method = "a chart of profiles";
            return Err(Error::TooFewRows { method, needed: 2, found: self.x.n_rows() });
        }
        if self.x.n_cols() > MOST_VARIABLES {
            return Err(Error::OptionOutOfRange {
                option: "number of variables",
                value: self.x.n_cols() as f64,
                accepted: "at most 400; choose some with `select`",
            });
        }
        settings.check_units(self.x.n_rows())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let standard = standardised(&self.x);
        let points = vec![(0.0, 0.0); self.x.n_rows()];
        let groups = Groups::new(settings.groups.as_deref(), &points, None);
        let lines = Lines { x: &self.x, standard: &standard, names: settings.labels.as_deref() };
        let as_lines = self.x.n_rows() <= MOST_LINES;
        let words = lines.words(&groups);
        let mut notes = vec![
            "Each variable about its mean, in its standard deviations (divisor n − 1).".to_owned(),
        ];
        if !as_lines {
            notes.push(format!(
                "More than {} units: bands reach from the 10th to the 90th percentile; lines are means.",
                grouped(MOST_LINES)
            ));
        }
        let card = Card {
            width: settings.size_or(720.0, 520.0).0,
            height: settings.size_or(720.0, 520.0).1,
            least_drawing: 260.0,
            title: settings.title_or("Profiles of the units".to_owned()),
            subtitle: format!(
                "{}, {}",
                counted(self.x.n_rows(), "unit"),
                counted(self.x.n_cols(), "variable")
            ),
            description: words.clone(),
            legend: groups.legend(),
            notes,
            ..Card::default()
        };
        let svg = card.draw(|svg, room| {
            let names = self.x.variables();
            let slot = (room.width() - 40.0) / names.len() as f64;
            let named = slot >= 12.0;
            let below = if named { places_room(names, slot) } else { 20.0 };
            let room = super::card::Area { bottom: room.bottom - below + 36.0, ..room };
            let (low, high) = match as_lines {
                true => range(standard.iter().flatten().copied()),
                false => lines.band_range(&groups),
            };
            let frame = Frame::fit(room, Axis::Places(names.len()), Axis::Numbers(low, high));
            frame.draw(
                svg,
                if named { "" } else { "Variable, in table order" },
                "Standard deviations",
            );
            if named {
                frame.name_places(svg, names);
            }
            for group in groups.list() {
                if as_lines {
                    lines.draw_lines(svg, &frame, group, &groups);
                } else {
                    lines.draw_band(svg, &frame, group);
                }
            }
            for group in groups.list() {
                lines.draw_mean(svg, &frame, group);
            }
        });
        Ok(Drawing { svg, words, numbers: lines.behind(&groups) })
    }
}

struct Lines<'a> {
    x: &'a DataMatrix,
    /// By variable.
    standard: &'a [Vec<f64>],
    names: Option<&'a [Option<String>]>,
}

impl Lines<'_> {
    fn mean_of(&self, group: &Group) -> Vec<f64> {
        let of = |column: &Vec<f64>| {
            mean(&group.members.iter().map(|&unit| column[unit]).collect::<Vec<f64>>())
        };
        self.standard.iter().map(of).collect()
    }

    /// The 10th and the 90th percentile of a group in each variable.
    fn band_of(&self, group: &Group) -> Vec<(f64, f64)> {
        let of = |column: &Vec<f64>| {
            let sorted = ascending(group.members.iter().map(|&unit| column[unit]).collect());
            (quantile(&sorted, 0.1), quantile(&sorted, 0.9))
        };
        self.standard.iter().map(of).collect()
    }

    fn band_range(&self, groups: &Groups) -> (f64, f64) {
        let bands = groups.list().iter().flat_map(|group| self.band_of(group));
        range(bands.flat_map(|(low, high)| [low, high]))
    }

    fn draw_lines(&self, svg: &mut Svg, frame: &Frame, group: &Group, groups: &Groups) {
        let opacity = match group.members.len() {
            0..=20 => ".55",
            21..=120 => ".3",
            _ => ".16",
        };
        svg.element("g")
            .with("class", "lines")
            .with("fill", "none")
            .with("stroke", group.cue.color)
            .with("stroke-opacity", opacity)
            .around(|svg| {
                for &unit in &group.members {
                    let line: Vec<f64> = self.standard.iter().map(|column| column[unit]).collect();
                    let mut title = self.name(unit);
                    if groups.are_set() {
                        title.push_str(&format!(" · {}", shortened(&group.name, 30)));
                    }
                    let path = path(frame, &line);
                    let element = svg.element("path").with("class", "line").with("d", &path);
                    element.around(|svg| svg.element("title").text(&title));
                }
            });
    }

    fn draw_band(&self, svg: &mut Svg, frame: &Frame, group: &Group) {
        let band = self.band_of(group);
        let mut outline = path(frame, &band.iter().map(|ends| ends.0).collect::<Vec<f64>>());
        for (place, ends) in band.iter().enumerate().rev() {
            let (x, y) = frame.place(place as f64, ends.1);
            outline.push_str(&format!("L{} {}", tenth(x), tenth(y)));
        }
        outline.push('z');
        svg.element("path")
            .with("class", "band")
            .with("d", &outline)
            .with("fill", group.cue.color)
            .with("fill-opacity", ".2")
            .done();
    }

    fn draw_mean(&self, svg: &mut Svg, frame: &Frame, group: &Group) {
        let means = self.mean_of(group);
        let path = path(frame, &means);
        for (color, thickness) in [(CARD, "4.6"), (group.cue.color, "2.4")] {
            svg.element("path")
                .with("class", "mean")
                .with("d", &path)
                .with("fill", "none")
                .with("stroke", color)
                .with("stroke-width", thickness)
                .with("stroke-linejoin", "round")
                .done();
        }
        if means.len() > MOST_MARKS {
            return;
        }
        svg.element("g").with("class", "means").with("stroke", CARD).around(|svg| {
            for (place, value) in means.iter().enumerate() {
                let who = if group.name.is_empty() { "all units" } else { &group.name };
                let title = format!(
                    "{} · mean of {}: {}",
                    shortened(&self.x.variables()[place], 40),
                    shortened(who, 40),
                    typographic(&significant(*value, 3))
                );
                let at = frame.place(place as f64, *value);
                super::marks::push_mark(svg, group.cue, at, 4.2, Some(&title));
            }
        });
    }

    fn name(&self, unit: usize) -> String {
        let chosen = self.names.and_then(|names| names[unit].as_deref());
        shortened(chosen.unwrap_or(&self.x.labels()[unit]), 60).into_owned()
    }

    fn words(&self, groups: &Groups) -> String {
        let mut words = format!(
            "Profiles of {} over {}.",
            counted(self.x.n_rows(), "unit"),
            counted(self.x.n_cols(), "variable")
        );
        if !groups.are_set() {
            return words;
        }
        for group in groups.list().iter().take(10) {
            let means = self.mean_of(group);
            let mut order: Vec<usize> = (0..means.len()).collect();
            order.sort_by(|&a, &b| means[b].abs().total_cmp(&means[a].abs()).then(a.cmp(&b)));
            let top: Vec<String> = order
                .into_iter()
                .take(3)
                .map(|v| {
                    let name = shortened(&self.x.variables()[v], 40);
                    format!("{name} ({})", significant(means[v], 2))
                })
                .collect();
            words.push_str(&format!(
                " {} lies farthest from the mean in {}.",
                shortened(&group.name, 40),
                listed(&top, 3)
            ));
        }
        words
    }

    fn behind(&self, groups: &Groups) -> Value {
        let by_group = |group: &Group| {
            json!({
                "group": group.name,
                "units": group.members.len(),
                "means": numbers(self.mean_of(group)),
            })
        };
        json!({
            "variables": self.x.variables(),
            "groups": groups.list().iter().map(by_group).collect::<Vec<Value>>(),
        })
    }
}

/// The columns about their means, in standard deviations; zeros for one that does not vary.
fn standardised(x: &DataMatrix) -> Vec<Vec<f64>> {
    x.values()
        .column_iter()
        .map(|column| {
            let values: Vec<f64> = column.iter().copied().collect();
            let (centre, spread) = (mean(&values), deviation(&values));
            let varies = spread > 1e-12 * centre.abs();
            values.iter().map(|v| if varies { (v - centre) / spread } else { 0.0 }).collect()
        })
        .collect()
}

fn path(frame: &Frame, values: &[f64]) -> String {
    let mut path = String::with_capacity(values.len() * 12);
    for (place, value) in values.iter().enumerate() {
        let (x, y) = frame.place(place as f64, *value);
        path.push(if place == 0 { 'M' } else { 'L' });
        path.push_str(&format!("{} {}", tenth(x), tenth(y)));
    }
    path
}
