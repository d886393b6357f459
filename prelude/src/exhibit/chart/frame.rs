//! A pair of axes with scales of their own, for charts where angles carry no meaning.
//!
//! The vertical axis is titled above its top end, level, where it can be read without turning the
//! head, as in a plane of equal scales.

use super::card::Area;
use super::measure::{Weight, fitted, width};
use super::palette::{GRID, INK_SOFT, ZERO};
use super::plane::axis_title;
use super::svg::Svg;
use super::ticks::Ticks;

pub(super) const TICK_SIZE: f64 = 11.0;
/// How far a tick's text may reach beyond its frame where another frame follows.
pub(super) const OVERHANG: f64 = 1.0;
const BELOW: f64 = 40.0;
const ABOVE: f64 = 24.0;
/// Room that a tick's text needs across and down.
const LEAST_ACROSS: f64 = 46.0;
const LEAST_DOWN: f64 = 40.0;

/// What one axis shows.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Axis {
    /// Numbers from low to high.
    Numbers(f64, f64),
    /// This many places in a row, with texts of their own for some or all of them.
    Places(usize),
}

/// Two axes fitted into an area.
#[derive(Debug, Clone)]
pub(super) struct Frame {
    /// Where things are drawn.
    pub area: Area,
    title_left: f64,
    x: Axis,
    y: Axis,
    x_ticks: Ticks,
    y_ticks: Ticks,
}

impl Frame {
    /// Fits the axes into what is left of the card.
    pub fn fit(room: Area, x: Axis, y: Axis) -> Self {
        let bare = Area { top: room.top + ABOVE, bottom: room.bottom - BELOW, ..room };
        let y_ticks = ticks(&y, bare.height(), LEAST_DOWN);
        let texts = y_ticks.values().map(|value| y_ticks.text(value));
        let widest = texts.map(|text| width(&text, TICK_SIZE, Weight::Regular)).fold(0.0, f64::max);
        let area =
            Area { left: room.left + widest.max(22.0) + 10.0, right: room.right - 6.0, ..bare };
        Self::within(area, room.left, x, y)
    }

    /// Puts the axes into an area that is known.
    pub fn within(area: Area, title_left: f64, x: Axis, y: Axis) -> Self {
        let x_ticks = ticks(&x, area.width(), LEAST_ACROSS);
        let y_ticks = ticks(&y, area.height(), LEAST_DOWN);
        Frame { area, title_left, x, y, x_ticks, y_ticks }
    }

    /// Where a value of the horizontal axis lies.
    pub fn across(&self, value: f64) -> f64 {
        self.area.left + part(&self.x, value) * self.area.width()
    }

    /// Where a value of the vertical axis lies.
    pub fn up(&self, value: f64) -> f64 {
        self.area.bottom - part(&self.y, value) * self.area.height()
    }

    /// Where a point lies.
    pub fn place(&self, x: f64, y: f64) -> (f64, f64) {
        (self.across(x), self.up(y))
    }

    /// Grid, tick texts and titles; an axis of places has no ticks.
    pub fn draw(&self, svg: &mut Svg, x_title: &str, y_title: &str) {
        self.draw_grid(svg);
        let most = self.area.width() * 0.9;
        let Area { top, right, bottom, .. } = self.area;
        if !y_title.is_empty() {
            axis_title(svg, self.title_left, top - 13.0, "start", &format!("↑ {y_title}"), most);
        }
        if !x_title.is_empty() {
            axis_title(svg, right, bottom + 33.0, "end", &format!("{x_title} →"), most);
        }
    }

    /// Grid and tick texts alone.
    pub fn draw_grid(&self, svg: &mut Svg) {
        self.draw_rules(svg);
        let axes = svg.element("g").with("class", "axes");
        axes.at("font-size", TICK_SIZE).with("fill", INK_SOFT).around(|svg| {
            self.text_ticks_below(svg, f64::INFINITY);
            self.text_ticks_left(svg);
        });
    }

    /// The lines of the grid.
    pub fn draw_rules(&self, svg: &mut Svg) {
        let Area { left, top, right, bottom } = self.area;
        for value in self.x_ticks.values() {
            let x = self.across(value);
            push_rule(svg, (x, top), (x, bottom), value == 0.0);
        }
        for value in self.y_ticks.values() {
            let y = self.up(value);
            push_rule(svg, (left, y), (right, y), value == 0.0);
        }
    }

    /// The texts of the horizontal axis that reach at most so far beyond its ends: those of
    /// neighbouring frames must not meet.
    pub fn text_ticks_below(&self, svg: &mut Svg, overhang: f64) {
        for value in self.x_ticks.values() {
            let (x, text) = (self.across(value), self.x_ticks.text(value));
            let half = width(&text, TICK_SIZE, Weight::Regular) / 2.0;
            let inside =
                x - half >= self.area.left - overhang && x + half <= self.area.right + overhang;
            if inside {
                push_text(svg, (x, self.area.bottom + 15.0), "middle", &text);
            }
        }
    }

    /// The texts of the vertical axis.
    pub fn text_ticks_left(&self, svg: &mut Svg) {
        for value in self.y_ticks.values() {
            let at = (self.area.left - 6.0, self.up(value) + 4.0);
            push_text(svg, at, "end", &self.y_ticks.text(value));
        }
    }

    /// A text under each place of the horizontal axis, level where all have room, else aslant.
    pub fn name_places(&self, svg: &mut Svg, names: &[String]) {
        let slot = self.area.width() / names.len().max(1) as f64;
        let widest =
            names.iter().map(|name| width(name, TICK_SIZE, Weight::Regular)).fold(0.0, f64::max);
        let level = widest <= slot - 4.0;
        let axes = svg.element("g").with("class", "axes");
        axes.at("font-size", TICK_SIZE).with("fill", INK_SOFT).around(|svg| {
            for (place, name) in names.iter().enumerate() {
                let x = self.across(place as f64);
                let y = self.area.bottom + 15.0;
                if level {
                    push_text(svg, (x, y), "middle", name);
                } else {
                    // What stands aslant under the first places must not leave the card.
                    let most = SLANTED_MOST.min((x - 8.0) * std::f64::consts::SQRT_2);
                    push_slanted(svg, (x + 4.0, y - 3.0), name, most);
                }
            }
        });
    }
}

/// How far slanted names of places reach below their axis, when each may be `slot` wide.
pub(super) fn places_room(names: &[String], slot: f64) -> f64 {
    let widest =
        names.iter().map(|name| width(name, TICK_SIZE, Weight::Regular)).fold(0.0, f64::max);
    if widest <= slot - 4.0 { 18.0 } else { slant(widest.min(SLANTED_MOST)) + 12.0 }
}

const SLANTED_MOST: f64 = 150.0;

fn slant(length: f64) -> f64 {
    length * std::f64::consts::FRAC_1_SQRT_2
}

fn push_slanted(svg: &mut Svg, (x, y): (f64, f64), text: &str, most: f64) {
    let turn = format!("rotate(-45 {x:.1} {y:.1})");
    svg.element("text")
        .at("x", x)
        .at("y", y)
        .with("text-anchor", "end")
        .with("transform", &turn)
        .text(&fitted(text, TICK_SIZE, Weight::Regular, most));
}

pub(super) fn push_text(svg: &mut Svg, (x, y): (f64, f64), anchor: &str, text: &str) {
    svg.element("text").at("x", x).at("y", y).with("text-anchor", anchor).text(text);
}

pub(super) fn push_rule(svg: &mut Svg, from: (f64, f64), to: (f64, f64), is_zero: bool) {
    svg.element("line")
        .at("x1", from.0)
        .at("y1", from.1)
        .at("x2", to.0)
        .at("y2", to.1)
        .with("stroke", if is_zero { ZERO } else { GRID })
        .done();
}

fn ticks(axis: &Axis, length: f64, least_apart: f64) -> Ticks {
    match axis {
        Axis::Numbers(low, high) => {
            Ticks::within(*low, *high, (length / least_apart).ceil().clamp(2.0, 8.0) as usize)
        }
        Axis::Places(_) => Ticks::within(0.0, 0.0, 1),
    }
}

/// The share of an axis that lies before a value; the middle of its slot for a place.
fn part(axis: &Axis, value: f64) -> f64 {
    match axis {
        Axis::Numbers(low, high) if high > low => (value - low) / (high - low),
        Axis::Numbers(..) => 0.5,
        Axis::Places(count) => (value + 0.5) / *count as f64,
    }
}

/// A range that holds all values, with a little room beyond them; one that is empty gets some.
pub(super) fn range(values: impl IntoIterator<Item = f64>) -> (f64, f64) {
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for value in values.into_iter().filter(|value| value.is_finite()) {
        (low, high) = (low.min(value), high.max(value));
    }
    if low > high {
        return (0.0, 1.0);
    }
    let slack = (high - low) * 0.04;
    if slack > 0.0 { (low - slack, high + slack) } else { (low - 0.5, high + 0.5) }
}

#[cfg(test)]
mod tests {
    use super::*;

    const ROOM: Area = Area { left: 18.0, top: 40.0, right: 700.0, bottom: 500.0 };

    #[test]
    fn values_lie_where_the_scales_say() {
        let frame = Frame::fit(ROOM, Axis::Numbers(0.0, 10.0), Axis::Numbers(-1.0, 1.0));
        assert_eq!(frame.across(0.0), frame.area.left);
        assert_eq!(frame.across(10.0), frame.area.right);
        assert_eq!(frame.up(-1.0), frame.area.bottom);
        assert!((frame.up(0.0) - (frame.area.top + frame.area.bottom) / 2.0).abs() < 1e-9);
        let places = Frame::fit(ROOM, Axis::Places(4), Axis::Numbers(0.0, 1.0));
        let slot = places.area.width() / 4.0;
        assert!((places.across(0.0) - places.area.left - slot / 2.0).abs() < 1e-9);
    }

    #[test]
    fn a_range_holds_its_values_and_is_never_empty() {
        assert_eq!(range([0.0, 100.0]), (-4.0, 104.0));
        assert_eq!(range([3.0, 3.0, f64::NAN]), (2.5, 3.5));
        assert_eq!(range([]), (0.0, 1.0));
    }
}
