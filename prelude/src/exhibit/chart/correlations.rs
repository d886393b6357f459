//! The correlation map: every pair of variables, in an order that puts like beside like.
//!
//! Variables are ordered by the direction in which they point in the plane of the first two
//! components, beginning behind the widest gap, so that variables that go together stand together.
//! Source of the order: M. Friendly (2002), "Corrgrams: exploratory displays for correlation
//! matrices", The American Statistician 56, 316–324, section on ordering (from memory). Names
//! stand on the diagonal and run into the half that would only repeat the other.

use std::sync::OnceLock;

use nalgebra::DMatrix;
use serde_json::json;

use super::Chart;
use super::card::{Area, Card};
use super::frame::push_text;
use super::measure::{Weight, fitted, width};
use super::palette::{CARD, INK, INK_SOFT, shade};
use super::picture::{Drawing, Picture, numbers};
use super::settings::{Setting, Settings};
use super::svg::{Svg, tenth};
use super::units::listed;
use crate::components::{Scaling, principal_components};
use crate::error::{Error, Result};
use crate::exhibit::numbers::{counted, fixed, typographic};
use crate::exhibit::text::shortened;
use crate::table::DataMatrix;

/// As many variables have cells that can be told apart.
const MOST_VARIABLES: usize = 60;
/// The smallest cell in which a number with two decimals can be read.
const LEAST_NUMBERED: f64 = 25.0;
const KEY_HEIGHT: f64 = 34.0;

/// The correlation of every pair of variables of a matrix.
///
/// Shades grow with the size of the correlation; ochre cells with a stroke are negative. Variables
/// stand in an order that puts those beside one another that go together. Beyond 60 variables the
/// 60 that the first two components describe best are drawn, and the chart says so.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// use semiaxis::exhibit::correlation_map;
///
/// // Three variables have three pairs.
/// assert_eq!(correlation_map(&x).svg().matches("<title>V").count(), 3);
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn correlation_map(x: &DataMatrix) -> Chart {
    Chart::new(Map { x: x.clone(), pairs: OnceLock::new() })
}

/// A matrix, and its correlations once they were wanted.
#[derive(Debug)]
struct Map {
    x: DataMatrix,
    pairs: OnceLock<Pairs>,
}

impl Map {
    fn pairs(&self) -> Result<&Pairs> {
        match self.pairs.get() {
            Some(pairs) => Ok(pairs),
            None => {
                let pairs = Pairs::of(&self.x)?;
                Ok(self.pairs.get_or_init(|| pairs))
            }
        }
    }
}

/// Correlations in the order in which they are drawn.
#[derive(Debug)]
struct Pairs {
    names: Vec<String>,
    correlations: DMatrix<f64>,
    n_rows: usize,
    n_variables: usize,
}

impl Pairs {
    fn of(x: &DataMatrix) -> Result<Self> {
        if x.n_cols() < 2 {
            let method = "a correlation map";
            return Err(Error::TooFewColumns { method, needed: 2, found: x.n_cols() });
        }
        let pca = principal_components(x, Scaling::Correlation)?;
        let structure = pca.structure();
        let second = (pca.n_components() > 1).then_some(1);
        let tip = |variable: usize| {
            (structure[(variable, 0)], second.map_or(0.0, |second| structure[(variable, second)]))
        };
        let mut order: Vec<usize> = (0..x.n_cols()).collect();
        if order.len() > MOST_VARIABLES {
            let described = |variable: usize| tip(variable).0.hypot(tip(variable).1);
            order.sort_by(|&a, &b| described(b).total_cmp(&described(a)).then(a.cmp(&b)));
            order.truncate(MOST_VARIABLES);
        }
        let angle = |variable: &usize| tip(*variable).1.atan2(tip(*variable).0);
        order.sort_by(|a, b| angle(a).total_cmp(&angle(b)).then(a.cmp(b)));
        let angles: Vec<f64> = order.iter().map(angle).collect();
        order.rotate_left(behind_widest_gap(&angles));
        // Standardised columns, so that products of any two are their correlation.
        let n = x.n_rows() as f64;
        let mut unit = x.values().select_columns(&order);
        for (mut column, &variable) in unit.column_iter_mut().zip(&order) {
            column.add_scalar_mut(-pca.mean()[variable]);
            column /= pca.scale()[variable] * (n - 1.0).sqrt();
        }
        Ok(Pairs {
            names: order.iter().map(|&variable| x.variables()[variable].clone()).collect(),
            correlations: unit.tr_mul(&unit).map(|r| r.clamp(-1.0, 1.0)),
            n_rows: x.n_rows(),
            n_variables: x.n_cols(),
        })
    }

    /// The pairs, the strongest first.
    fn strongest(&self) -> Vec<(usize, usize)> {
        let size = |pair: &(usize, usize)| self.correlations[*pair].abs();
        let mut pairs: Vec<(usize, usize)> = (1..self.names.len())
            .flat_map(|row| (0..row).map(move |column| (row, column)))
            .collect();
        pairs.sort_by(|a, b| size(b).total_cmp(&size(a)).then(a.cmp(b)));
        pairs
    }

    fn words(&self) -> String {
        let strongest: Vec<String> = self
            .strongest()
            .into_iter()
            .take(3)
            .map(|(row, column)| {
                format!(
                    "{} with {} ({})",
                    shortened(&self.names[row], 40),
                    shortened(&self.names[column], 40),
                    fixed(self.correlations[(row, column)], 2)
                )
            })
            .collect();
        format!(
            "Correlations of {} over {}. Strongest: {}. Order from one end: {}.",
            counted(self.n_variables, "variable"),
            counted(self.n_rows, "unit"),
            listed(&strongest, 3),
            listed(
                &self.names.iter().map(|name| shortened(name, 40).into_owned()).collect::<Vec<_>>(),
                20
            )
        )
    }
}

/// How many places to turn a circle of ascending angles so that its widest gap comes last.
fn behind_widest_gap(angles: &[f64]) -> usize {
    let n = angles.len();
    let gap = |place: usize| match place {
        0 => angles[0] - angles[n - 1] + std::f64::consts::TAU,
        _ => angles[place] - angles[place - 1],
    };
    (0..n).fold(0, |widest, place| if gap(place) > gap(widest) + 1e-9 { place } else { widest })
}

impl Picture for Map {
    fn kind(&self) -> &'static str {
        "correlation map"
    }

    fn takes(&self) -> &'static [Setting] {
        &[]
    }

    fn check(&self, _: &Settings) -> Result<()> {
        self.pairs().map(|_| ())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let pairs = self.pairs()?;
        let words = pairs.words();
        let mut notes = vec![
            "Variables in the order of their directions in the plane of the first two components."
                .to_owned(),
        ];
        if pairs.names.len() < pairs.n_variables {
            notes.push(format!(
                "The {} of {} that those components describe best are drawn.",
                pairs.names.len(),
                counted(pairs.n_variables, "variable")
            ));
        }
        let card = Card {
            width: settings.size_or(720.0, 640.0).0,
            height: settings.size_or(720.0, 640.0).1,
            least_drawing: 240.0,
            title: settings.title_or("Correlations of the variables".to_owned()),
            subtitle: format!(
                "{}, {}",
                counted(pairs.n_variables, "variable"),
                counted(pairs.n_rows, "unit")
            ),
            description: words.clone(),
            notes,
            ..Card::default()
        };
        let svg = card.draw(|svg, room| {
            draw_key(svg, Area { top: room.bottom - KEY_HEIGHT, ..room });
            draw_cells(svg, Area { bottom: room.bottom - KEY_HEIGHT - 6.0, ..room }, pairs);
        });
        let n = pairs.names.len();
        let lower = (1..n).flat_map(|row| (0..row).map(move |column| (row, column)));
        let correlations = numbers(lower.map(|pair| pairs.correlations[pair]));
        let numbers = json!({ "variables": pairs.names, "correlations by rows": correlations });
        Ok(Drawing { svg, words, numbers })
    }
}

fn draw_cells(svg: &mut Svg, room: Area, pairs: &Pairs) {
    let n = pairs.names.len();
    // The last name needs room to the right of its diagonal cell.
    let size = (11.0f64).min(room.height() / n as f64 * 0.9).max(5.0);
    let last = pairs.names.last().map_or(0.0, |name| width(name, size, Weight::Regular));
    let side = (room.height() / n as f64).min((room.width() - last.min(180.0) - 8.0) / n as f64);
    let (left, top) = (room.left, room.top);
    svg.element("g").with("class", "cells").with("stroke", CARD).around(|svg| {
        for row in 1..n {
            for column in 0..row {
                let value = pairs.correlations[(row, column)];
                let title = format!(
                    "{} and {}: {}",
                    shortened(&pairs.names[row], 40),
                    shortened(&pairs.names[column], 40),
                    typographic(&fixed(value, 3))
                );
                svg.element("rect")
                    .at("x", left + column as f64 * side)
                    .at("y", top + row as f64 * side)
                    .at("width", side)
                    .at("height", side)
                    .with("fill", &shade(value).0)
                    .around(|svg| svg.element("title").text(&title));
            }
        }
    });
    if side >= LEAST_NUMBERED {
        draw_numbers(svg, (left, top), side, pairs);
    } else {
        draw_strokes(svg, (left, top), side, pairs);
    }
    let labels = svg.element("g").with("class", "labels").at("font-size", size);
    labels.with("fill", INK).around(|svg| {
        for (place, name) in pairs.names.iter().enumerate() {
            let x = left + place as f64 * side + 5.0;
            let y = top + (place as f64 + 0.5) * side + size * 0.36;
            let text = fitted(name, size, Weight::Regular, room.right - x);
            push_text(svg, (x, y), "start", &text);
        }
    });
}

fn draw_numbers(svg: &mut Svg, (left, top): (f64, f64), side: f64, pairs: &Pairs) {
    let size = (side * 0.36).clamp(9.0, 12.0);
    let text = svg.element("g").at("font-size", size).with("text-anchor", "middle");
    text.with("pointer-events", "none").around(|svg| {
        for row in 1..pairs.names.len() {
            for column in 0..row {
                let value = pairs.correlations[(row, column)];
                svg.element("text")
                    .at("x", left + (column as f64 + 0.5) * side)
                    .at("y", top + (row as f64 + 0.5) * side + size * 0.36)
                    .with("fill", shade(value).1)
                    .text(&short(value));
            }
        }
    });
}

/// Without numbers, a stroke through the cell is the second cue for what is negative.
fn draw_strokes(svg: &mut Svg, (left, top): (f64, f64), side: f64, pairs: &Pairs) {
    let mut path = String::new();
    for row in 1..pairs.names.len() {
        for column in 0..row {
            if pairs.correlations[(row, column)] < 0.0 {
                let (x, y) = (left + column as f64 * side, top + (row as f64 + 1.0) * side);
                path.push_str(&format!(
                    "M{} {}l{} {}",
                    tenth(x),
                    tenth(y),
                    tenth(side),
                    tenth(-side)
                ));
            }
        }
    }
    if !path.is_empty() {
        svg.element("path")
            .with("d", &path)
            .with("stroke", CARD)
            .with("stroke-width", ".8")
            .with("pointer-events", "none")
            .done();
    }
}

/// Two decimals without the zero in front: a correlation is never above one.
fn short(value: f64) -> String {
    let text = typographic(&fixed(value, 2));
    match text.strip_prefix("0.") {
        Some(rest) => format!(".{rest}"),
        None => text.replacen("\u{2212}0.", "\u{2212}.", 1),
    }
}

/// A strip of shades from −1 to 1.
fn draw_key(svg: &mut Svg, area: Area) {
    let left = area.left;
    let cell = 26.0;
    for (place, tenths) in (-10..=10).step_by(2).enumerate() {
        let value = f64::from(tenths) / 10.0;
        let x = left + place as f64 * cell;
        svg.element("rect")
            .at("x", x)
            .at("y", area.top + 6.0)
            .at("width", cell)
            .at("height", 11.0)
            .with("fill", &shade(value).0)
            .with("stroke", CARD)
            .done();
        if value < 0.0 {
            let stroke = format!("M{} {}l11 -11", tenth(x + 7.0), tenth(area.top + 17.0));
            svg.element("path")
                .with("d", &stroke)
                .with("stroke", CARD)
                .with("stroke-width", ".8")
                .done();
        }
        if place % 5 == 0 {
            let texts = svg.element("g").at("font-size", 11.0).with("fill", INK_SOFT);
            texts.around(|svg| {
                push_text(
                    svg,
                    (x + cell / 2.0, area.top + 30.0),
                    "middle",
                    &typographic(&fixed(value, 0)),
                );
            });
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_order_begins_behind_the_widest_gap() {
        assert_eq!(behind_widest_gap(&[-3.0, -2.9, 0.5, 0.6]), 2);
        assert_eq!(behind_widest_gap(&[-1.0, -0.9, -0.8]), 0);
    }

    #[test]
    fn short_numbers_keep_their_sign() {
        assert_eq!(short(0.834), ".83");
        assert_eq!(short(-0.5), "\u{2212}.50");
        assert_eq!(short(1.0), "1.00");
        assert_eq!(short(-1.0), "\u{2212}1.00");
    }
}
