//! Two components as a plane with equal scales.
//!
//! Distances and angles carry meaning in every plot of two components, so one unit is as long
//! upwards as sideways, and both axes share one step. The vertical axis is titled above its top
//! end, level, where it can be read without turning the head.

use super::card::Area;
use super::measure::{Weight, fitted, width};
use super::palette::{GRID, INK, INK_SOFT, ZERO};
use super::svg::Svg;
use super::ticks::{Ticks, nice_step};

const TICK_SIZE: f64 = 11.0;
const TITLE_SIZE: f64 = 12.0;
const BELOW: f64 = 40.0;
const ABOVE: f64 = 24.0;

/// A plane fitted into an area of the card.
#[derive(Debug, Clone)]
pub(super) struct Plane {
    /// Where things are drawn.
    pub area: Area,
    /// Length of one data unit in the drawing.
    pub scale: f64,
    title_left: f64,
    // The data coordinates of the area's centre.
    centre: (f64, f64),
    x_ticks: Ticks,
    y_ticks: Ticks,
}

/// The smallest box around some points, in data coordinates.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Extent {
    pub x: (f64, f64),
    pub y: (f64, f64),
}

impl Extent {
    /// The origin alone; it is part of every plane.
    pub fn origin() -> Self {
        Extent { x: (0.0, 0.0), y: (0.0, 0.0) }
    }

    /// Grows to hold a point; one that is not finite is passed over.
    pub fn include(&mut self, x: f64, y: f64) {
        if x.is_finite() && y.is_finite() {
            self.x = (self.x.0.min(x), self.x.1.max(x));
            self.y = (self.y.0.min(y), self.y.1.max(y));
        }
    }
}

impl Plane {
    /// Fits what must be seen into what is left of the card.
    pub fn fit(room: Area, extent: Extent) -> Self {
        // The room that texts of the vertical axis usually take; more is made for longer ones.
        const TEXTS: f64 = 44.0;
        let area = Area {
            left: room.left + TEXTS,
            top: room.top + ABOVE,
            right: room.right - 4.0,
            bottom: room.bottom - BELOW,
        };
        let plane = Self::with_area(room.left, area, extent);
        let texts = plane.y_ticks.values().map(|value| plane.y_ticks.text(value));
        let widest =
            texts.map(|text| width(&text, TICK_SIZE, Weight::Regular)).fold(0.0, f64::max) + 10.0;
        if widest <= TEXTS {
            return plane;
        }
        Self::with_area(room.left, Area { left: room.left + widest, ..area }, extent)
    }

    fn with_area(title_left: f64, area: Area, extent: Extent) -> Self {
        // Marks and labels need room beyond the outermost points.
        const SLACK: f64 = 1.16;
        let span = |(low, high): (f64, f64)| high / 2.0 - low / 2.0;
        let middle = |(low, high): (f64, f64)| low / 2.0 + high / 2.0;
        let (half_x, half_y) = (span(extent.x) * SLACK, span(extent.y) * SLACK);
        let (half_w, half_h) = (area.width().max(40.0) / 2.0, area.height().max(40.0) / 2.0);
        let scale = match (half_x > 0.0, half_y > 0.0) {
            (true, true) => (half_w / half_x).min(half_h / half_y),
            (true, false) => half_w / half_x,
            (false, true) => half_h / half_y,
            (false, false) => half_h,
        };
        let centre = (middle(extent.x), middle(extent.y));
        let (reach_x, reach_y) = (half_w / scale, half_h / scale);
        // About five lines along the shorter axis, but texts of ticks must not meet.
        const LEAST_APART: f64 = 46.0;
        let step = nice_step((reach_x.min(reach_y) / 2.5).max(LEAST_APART / scale));
        Plane {
            area,
            scale,
            title_left,
            centre,
            x_ticks: Ticks::stepped(centre.0 - reach_x, centre.0 + reach_x, step),
            y_ticks: Ticks::stepped(centre.1 - reach_y, centre.1 + reach_y, step),
        }
    }

    /// Where a point of the data lies in the drawing.
    pub fn place(&self, x: f64, y: f64) -> (f64, f64) {
        (
            (self.area.left + self.area.right) / 2.0 + (x - self.centre.0) * self.scale,
            (self.area.top + self.area.bottom) / 2.0 - (y - self.centre.1) * self.scale,
        )
    }

    /// Grid, zero lines, tick texts and titles.
    pub fn draw(&self, svg: &mut Svg, x_title: &str, y_title: &str) {
        let area = &self.area;
        svg.element("g")
            .with("class", "axes")
            .at("font-size", TICK_SIZE)
            .with("fill", INK_SOFT)
            .around(|svg| {
                for value in self.x_ticks.values() {
                    let (x, _) = self.place(value, 0.0);
                    line(svg, (x, area.top), (x, area.bottom), value == 0.0);
                    svg.element("text")
                        .at("x", x)
                        .at("y", area.bottom + 15.0)
                        .with("text-anchor", "middle")
                        .text(&self.x_ticks.text(value));
                }
                for value in self.y_ticks.values() {
                    let (_, y) = self.place(0.0, value);
                    line(svg, (area.left, y), (area.right, y), value == 0.0);
                    svg.element("text")
                        .at("x", area.left - 6.0)
                        .at("y", y + 4.0)
                        .with("text-anchor", "end")
                        .text(&self.y_ticks.text(value));
                }
            });
        let most = area.width() * 0.9;
        axis_title(svg, self.title_left, area.top - 13.0, "start", &format!("↑ {y_title}"), most);
        axis_title(svg, area.right, area.bottom + 33.0, "end", &format!("{x_title} →"), most);
    }
}

pub(super) fn axis_title(svg: &mut Svg, x: f64, y: f64, anchor: &str, text: &str, most: f64) {
    svg.element("text")
        .at("x", x)
        .at("y", y)
        .at("font-size", TITLE_SIZE)
        .with("fill", INK)
        .with("text-anchor", anchor)
        .text(&fitted(text, TITLE_SIZE, Weight::Regular, most));
}

fn line(svg: &mut Svg, from: (f64, f64), to: (f64, f64), is_zero: bool) {
    svg.element("line")
        .at("x1", from.0)
        .at("y1", from.1)
        .at("x2", to.0)
        .at("y2", to.1)
        .with("stroke", if is_zero { ZERO } else { GRID })
        .done();
}
