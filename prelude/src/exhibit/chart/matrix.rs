//! The matrix of score plots: every pair of the first few components.

use serde_json::json;

use super::Chart;
use super::card::{Area, Card};
use super::frame::{Axis, Frame, OVERHANG, range};
use super::groups::Groups;
use super::marks::{MOST_MARKS, Spot, mark_radius, push_dense};
use super::measure::{Weight, fitted};
use super::palette::{CARD_EDGE, INK, INK_SOFT};
use super::picture::{Drawing, Picture, numbers};
use super::settings::{Setting, Settings};
use super::source::Source;
use super::svg::Svg;
use crate::components::PrincipalComponents;
use crate::error::{Error, Result};
use crate::exhibit::numbers::{counted, percent, significant, typographic};

const USUAL: usize = 4;
const MOST: usize = 7;
/// Bytes of one mark in a path, generously; all panels together stay under 400 kB.
const MARK_BYTES: usize = 11;
const MOST_BYTES: usize = 320_000;
const GAP: f64 = 6.0;

/// The units in the planes of all pairs of the first components.
///
/// [`first`](Chart::first) says how many components (four unless stated, two to seven). All panels
/// have one scale, so that a component of little variance looks small. [`groups`](Chart::groups)
/// gives each group a colour and a shape. Where marks of all panels together would be too many,
/// evenly spaced rows are drawn, and the chart says so.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::score_matrix;
///
/// // Three components have three pairs.
/// assert_eq!(score_matrix(&pca).first(3).svg().matches("class=\"panel\"").count(), 3);
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn score_matrix(pca: &PrincipalComponents) -> Chart {
    Chart::new(Matrix { source: Source::with_units(pca) })
}

/// The units of an analysis.
#[derive(Debug)]
struct Matrix {
    source: Source,
}

impl Matrix {
    fn first(&self, settings: &Settings) -> usize {
        settings.first.unwrap_or(USUAL.min(self.source.n_components()))
    }
}

impl Picture for Matrix {
    fn kind(&self) -> &'static str {
        "matrix of score plots"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::First, Setting::Groups]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        let (asked, available) = (self.first(settings), self.source.n_components());
        if asked > available {
            return Err(Error::ComponentOutOfRange { asked, available });
        }
        if !(2..=MOST).contains(&asked) {
            let (value, accepted) = (asked as f64, "2 to 7 components");
            return Err(Error::OptionOutOfRange { option: "first", value, accepted });
        }
        settings.check_units(self.source.scores.nrows())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let source = &self.source;
        let n = self.first(settings);
        let columns: Vec<Vec<f64>> = (1..=n).map(|k| source.scores_along(Some(k))).collect();
        let points: Vec<(f64, f64)> =
            columns[0].iter().copied().zip(columns[1].iter().copied()).collect();
        let groups = Groups::new(settings.groups.as_deref(), &points, None);
        let n_panels = n * (n - 1) / 2;
        let most = (MOST_BYTES / MARK_BYTES / n_panels).min(MOST_MARKS);
        let every = source.scores.nrows().div_ceil(most).max(1);
        let spans: Vec<(f64, f64)> =
            columns.iter().map(|column| range(column.iter().copied())).collect();
        let half = spans.iter().map(|(low, high)| (high - low) / 2.0).fold(0.0, f64::max);
        let words = format!(
            "Matrix of score plots of {} on the first {n} components, which hold {} of the \
             variance.{}",
            counted(source.n_rows, "unit"),
            percent((1..=n).map(|k| source.share(k)).sum()),
            groups.words()
        );
        let mut notes =
            vec!["All panels have one scale; the component of a column runs sideways.".to_owned()];
        if every > 1 {
            let drawn = source.scores.nrows().div_ceil(every);
            notes.push(format!(
                "{} of {} drawn, evenly spaced in row order.",
                drawn,
                counted(source.scores.nrows(), "unit")
            ));
        }
        let card = Card {
            width: settings.size_or(720.0, 720.0).0,
            height: settings.size_or(720.0, 720.0).1,
            least_drawing: 60.0 * n as f64,
            title: settings.title_or(format!("Scores on the first {n} components")),
            subtitle: format!(
                "{}, {} {}",
                counted(source.n_rows, "unit"),
                counted(source.variables.len(), "variable"),
                source.scaling_words()
            ),
            description: words.clone(),
            legend: groups.legend(),
            notes,
            ..Card::default()
        };
        let panels =
            Panels { source, columns: &columns, groups: &groups, every, spans: &spans, half };
        let svg = card.draw(|svg, room| panels.draw(svg, room));
        let group_names = groups.are_set().then(|| {
            groups.of_units(points.len()).iter().map(|group| group.name.clone()).collect::<Vec<_>>()
        });
        let numbers = json!({
            "units": source.labels,
            "groups": group_names,
            "scores by component":
                columns.iter().map(|column| numbers(column.iter().copied())).collect::<Vec<_>>(),
        });
        Ok(Drawing { svg, words, numbers })
    }
}

/// What all panels share.
struct Panels<'a> {
    source: &'a Source,
    columns: &'a [Vec<f64>],
    groups: &'a Groups,
    every: usize,
    /// The range of each component's scores, and half of the widest: the scale of every panel.
    spans: &'a [(f64, f64)],
    half: f64,
}

impl Panels<'_> {
    /// Names on the diagonal, plots below it.
    fn draw(&self, svg: &mut Svg, room: Area) {
        let n = self.columns.len();
        let left = room.left + 34.0;
        let bottom = room.bottom - 22.0;
        let across = (room.right - left - GAP * (n as f64 - 1.0)) / n as f64;
        let down = (bottom - room.top - GAP * (n as f64 - 1.0)) / n as f64;
        let side = across.min(down);
        let cell = |row: usize, column: usize| {
            let (x, y) =
                (left + column as f64 * (side + GAP), room.top + row as f64 * (side + GAP));
            Area { left: x, top: y, right: x + side, bottom: y + side }
        };
        for row in 0..n {
            self.draw_name(svg, cell(row, row), row);
            for column in 0..row {
                let (first, last) = (column == 0, row + 1 == n);
                self.draw_panel(svg, cell(row, column), (row, column), (first, last));
            }
        }
    }

    fn draw_name(&self, svg: &mut Svg, area: Area, component: usize) {
        let (x, y) = (area.left + 4.0, (area.top + area.bottom) / 2.0);
        let column = &self.columns[component];
        let (low, high) = column
            .iter()
            .fold((0.0f64, 0.0f64), |(low, high), score| (low.min(*score), high.max(*score)));
        let lines = [
            (13.0, INK, format!("Component {}", component + 1)),
            (11.0, INK_SOFT, format!("{} of variance", percent(self.source.share(component + 1)))),
            (
                11.0,
                INK_SOFT,
                typographic(&format!("{} to {}", significant(low, 2), significant(high, 2))),
            ),
        ];
        for (line, (size, color, text)) in lines.into_iter().enumerate() {
            svg.element("text")
                .at("x", x)
                .at("y", y - 10.0 + line as f64 * 16.0)
                .at("font-size", size)
                .with("fill", color)
                .text(&fitted(&text, size, Weight::Regular, area.width() - 6.0));
        }
    }

    fn draw_panel(
        &self,
        svg: &mut Svg,
        area: Area,
        (row, column): (usize, usize),
        (first, last): (bool, bool),
    ) {
        let axis = |component: usize| {
            let (low, high) = self.spans[component];
            let middle = (low + high) / 2.0;
            Axis::Numbers(middle - self.half, middle + self.half)
        };
        let frame = Frame::within(area, area.left, axis(column), axis(row));
        svg.element("rect")
            .with("class", "panel")
            .at("x", area.left)
            .at("y", area.top)
            .at("width", area.width())
            .at("height", area.height())
            .with("fill", "none")
            .with("stroke", CARD_EDGE)
            .done();
        frame.draw_rules(svg);
        let (x, y) = (&self.columns[column], &self.columns[row]);
        let n = x.len();
        let radius = mark_radius(n) * 0.62;
        for (place, group) in self.groups.list().iter().enumerate() {
            let spots: Vec<Spot> = group
                .members
                .iter()
                .copied()
                .filter(|unit| unit % self.every == 0)
                .map(|unit| {
                    let (x, y) = frame.place(x[unit], y[unit]);
                    Spot { x, y, unit }
                })
                .collect();
            if !spots.is_empty() {
                let stem = format!("mark{place}of{row}x{column}");
                push_dense(svg, group.cue, &spots, (radius, ".75"), &stem);
            }
        }
        let texts = svg.element("g").at("font-size", 11.0).with("fill", INK_SOFT);
        texts.around(|svg| {
            if first {
                frame.text_ticks_left(svg);
            }
            if last {
                frame.text_ticks_below(svg, OVERHANG);
            }
        });
    }
}
