//! Marks for units, from one to twenty thousand, and counts beyond.
//!
//! Few marks carry a hover title each. Many marks of a group go into one path, at some eight
//! bytes a mark. Beyond [`MOST_MARKS`] units a picture of marks says no more than a
//! picture of counts, and the drawing counts units in hexagons instead.

use std::collections::BTreeMap;
use std::fmt::Write;

use super::palette::{CARD, COUNTS, Cue, INK, Shape};
use super::svg::{Svg, tenth};
use crate::exhibit::numbers::counted;
use crate::exhibit::text::push_markup;

/// As many units as are drawn one by one.
pub(super) const MOST_MARKS: usize = 20_000;
/// Bytes that hover titles may take in one chart.
const MOST_HOVER_BYTES: usize = 280_000;
const HEXAGON_RADIUS: f64 = 7.0;

/// A unit's place in the drawing.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Spot {
    pub x: f64,
    pub y: f64,
    /// Which unit it is.
    pub unit: usize,
}

/// The radius of marks when there are so many.
pub(super) fn mark_radius(n_marks: usize) -> f64 {
    match n_marks {
        0..=80 => 4.4,
        81..=400 => 3.7,
        401..=2_000 => 2.8,
        2_001..=8_000 => 1.9,
        _ => 1.5,
    }
}

/// Whether hover titles of these texts fit into a chart.
pub(super) fn hover_fits(texts: impl ExactSizeIterator<Item = String>) -> bool {
    // A mark with a title takes about this many bytes besides the text.
    const MARKUP: usize = 80;
    let mut room = MOST_HOVER_BYTES.checked_sub(texts.len() * MARKUP);
    let mut escaped = String::new();
    for text in texts {
        if room.is_none() {
            break;
        }
        escaped.clear();
        push_markup(&mut escaped, &text);
        room = room.and_then(|room| room.checked_sub(escaped.len()));
    }
    room.is_some()
}

/// One mark.
pub(super) fn push_mark(svg: &mut Svg, cue: Cue, at: (f64, f64), radius: f64, hover: Option<&str>) {
    let finish = |element: super::svg::Element<'_>| match hover {
        Some(text) => element.around(|svg| svg.element("title").text(text)),
        None => element.done(),
    };
    if cue.shape == Shape::Disc {
        let disc = svg.element("circle").at("cx", at.0).at("cy", at.1).at("r", radius);
        finish(disc.with("fill", cue.color));
    } else {
        let outline = outline(cue.shape, at, radius);
        finish(svg.element("path").with("d", &outline).with("fill", cue.color));
    }
}

/// The marks of one group, each with its hover text.
pub(super) fn push_hovering(
    svg: &mut Svg,
    cue: Cue,
    spots: &[Spot],
    (radius, opacity): (f64, &str),
    hover: impl Fn(usize) -> String,
) {
    svg.element("g")
        .with("fill", cue.color)
        .with("fill-opacity", opacity)
        .with("stroke", CARD)
        .with("stroke-width", ".7")
        .with("class", "marks")
        .around(|svg| {
            for spot in spots {
                let mark = if cue.shape == Shape::Disc {
                    svg.element("circle").at("cx", spot.x).at("cy", spot.y).at("r", radius)
                } else {
                    let outline = outline(cue.shape, (spot.x, spot.y), radius);
                    svg.element("path").with("d", &outline)
                };
                mark.around(|svg| svg.element("title").text(&hover(spot.unit)));
            }
        });
}

/// The marks of one group in one path, without hover texts.
///
/// The path itself is invisible; every corner of it carries the group's mark, so that a mark costs
/// the bytes of a step and no more, whatever its shape. `stem` must differ between groups.
pub(super) fn push_dense(
    svg: &mut Svg,
    cue: Cue,
    spots: &[Spot],
    (radius, opacity): (f64, &str),
    stem: &str,
) {
    let name = Svg::name(stem);
    svg.element("marker")
        .with("id", &name)
        .with("viewBox", "-2 -2 4 4")
        .with("markerUnits", "userSpaceOnUse")
        .at("markerWidth", 4.0 * radius)
        .at("markerHeight", 4.0 * radius)
        .around(|svg| push_mark(svg, cue, (0.0, 0.0), 1.0, None));
    let mut path = String::with_capacity(spots.len() * 9);
    let (mut from_x, mut from_y) = (0i64, 0i64);
    for (place, spot) in in_rows(spots).iter().enumerate() {
        // Steps between whole tenths of a unit are exact, so errors do not add up along the path.
        let (x, y) = ((spot.x * 10.0).round() as i64, (spot.y * 10.0).round() as i64);
        let step = tenth((x - from_x) as f64 / 10.0);
        path.push(if place == 0 { 'm' } else { ' ' });
        path.push_str(&step);
        let step = tenth((y - from_y) as f64 / 10.0);
        if !step.starts_with('-') {
            path.push(' ');
        }
        path.push_str(&step);
        (from_x, from_y) = (x, y);
    }
    let marker = format!("url(#{name})");
    svg.element("path")
        .with("class", "marks")
        .with("d", &path)
        .with("fill", "none")
        .with("opacity", opacity)
        .with("marker-start", &marker)
        .with("marker-mid", &marker)
        .with("marker-end", &marker)
        .done();
}

/// Counts in hexagons; returns the bounds of the shades, from few to many.
pub(super) fn push_counts(svg: &mut Svg, spots: &[Spot]) -> Vec<(usize, usize, &'static str)> {
    let mut counts: BTreeMap<(i64, i64), usize> = BTreeMap::new();
    for spot in spots {
        *counts.entry(hexagon_of(spot.x, spot.y)).or_default() += 1;
    }
    let most = counts.values().copied().max().unwrap_or(1);
    let classes = count_classes(most);
    svg.element("g").with("class", "counts").around(|svg| {
        for (&(row, column), &count) in &counts {
            let (x, y) = hexagon_centre(row, column);
            let color = classes
                .iter()
                .find(|(low, high, _)| (*low..=*high).contains(&count))
                .map_or(INK, |class| class.2);
            let h = HEXAGON_RADIUS * 0.5;
            let w = HEXAGON_RADIUS * 3f64.sqrt() / 2.0;
            let mut path = String::from("M");
            push_pair(&mut path, x, y - HEXAGON_RADIUS);
            for (dx, dy) in [(w, h), (0.0, 2.0 * h), (-w, h), (-w, -h), (0.0, -2.0 * h)] {
                path.push('l');
                push_pair(&mut path, dx, dy);
            }
            path.push('z');
            svg.element("path")
                .with("d", &path)
                .with("fill", color)
                .around(|svg| svg.element("title").text(&counted(count, "unit")));
        }
    });
    classes
}

// Bounds grow by one factor, because counts of a cloud range over orders of magnitude.
fn count_classes(most: usize) -> Vec<(usize, usize, &'static str)> {
    let n = COUNTS.len();
    let factor = (most as f64).powf(1.0 / n as f64);
    let mut classes: Vec<(usize, usize, &'static str)> = Vec::new();
    let mut low = 1;
    for (place, color) in COUNTS.iter().enumerate() {
        let high =
            if place + 1 == n { most } else { factor.powi(place as i32 + 1).floor() as usize };
        if high >= low {
            classes.push((low, high, color));
            low = high + 1;
        }
    }
    classes
}

// Rows of pointy hexagons are 1.5 radii apart and every second one is shifted by half a width.
fn hexagon_of(x: f64, y: f64) -> (i64, i64) {
    let near = (y / (1.5 * HEXAGON_RADIUS)).floor() as i64;
    let mut best = ((0, 0), f64::INFINITY);
    for row in [near, near + 1] {
        let shift = if row.rem_euclid(2) == 1 { 0.5 } else { 0.0 };
        let column = (x / hexagon_width() - shift).round() as i64;
        let centre = hexagon_centre(row, column);
        let distance = (centre.0 - x).powi(2) + (centre.1 - y).powi(2);
        if distance < best.1 {
            best = ((row, column), distance);
        }
    }
    best.0
}

fn hexagon_centre(row: i64, column: i64) -> (f64, f64) {
    let shift = if row.rem_euclid(2) == 1 { 0.5 } else { 0.0 };
    ((column as f64 + shift) * hexagon_width(), row as f64 * 1.5 * HEXAGON_RADIUS)
}

fn hexagon_width() -> f64 {
    3f64.sqrt() * HEXAGON_RADIUS
}

// Row by row, back and forth, so that the steps between marks are short to write.
fn in_rows(spots: &[Spot]) -> Vec<Spot> {
    const ROW: f64 = 6.0;
    let mut sorted = spots.to_vec();
    sorted.sort_by(|a, b| {
        let (row_a, row_b) = ((a.y / ROW).floor(), (b.y / ROW).floor());
        let along = if row_a as i64 % 2 == 0 { a.x.total_cmp(&b.x) } else { b.x.total_cmp(&a.x) };
        row_a.total_cmp(&row_b).then(along).then(a.unit.cmp(&b.unit))
    });
    sorted
}

fn outline(shape: Shape, at: (f64, f64), radius: f64) -> String {
    let mut path = String::from("M");
    let (x, y) = shape.corners()[0];
    push_pair(&mut path, at.0 + x * radius, at.1 + y * radius);
    path.push_str(&corner_steps(shape, radius));
    path
}

// The outline from its first corner on, in steps.
fn corner_steps(shape: Shape, radius: f64) -> String {
    let mut path = String::new();
    for pair in shape.corners().windows(2) {
        path.push('l');
        push_pair(&mut path, (pair[1].0 - pair[0].0) * radius, (pair[1].1 - pair[0].1) * radius);
    }
    path.push('z');
    path
}

fn push_pair(path: &mut String, x: f64, y: f64) {
    let y = tenth(y);
    let gap = if y.starts_with('-') { "" } else { " " };
    let _ = write!(path, "{}{gap}{y}", tenth(x));
}
