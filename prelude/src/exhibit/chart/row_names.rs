//! Names of rows at the left of charts that lie on their side.

use super::card::Area;
use super::frame::{TICK_SIZE, push_text};
use super::measure::{Weight, fitted, width};
use super::palette::INK;
use super::svg::Svg;

/// The longest name that is set whole, and its distance from the rows.
const MOST: f64 = 170.0;
const APART: f64 = 8.0;

/// Where the names of rows end, and the room that they take.
#[derive(Debug, Clone, Copy)]
pub(super) struct RowNames {
    left: f64,
    /// From the left edge to the beginning of the rows.
    pub room: f64,
}

impl RowNames {
    /// Room for the widest of some names and at least this much, but never the greater part.
    pub fn fit<'a>(room: Area, names: impl Iterator<Item = &'a str>, least: f64) -> Self {
        let widest =
            names.map(|name| width(name, TICK_SIZE, Weight::Regular)).fold(least, f64::max);
        RowNames { left: room.left, room: widest.min(MOST).min(room.width() * 0.4) + APART }
    }

    /// Draws the name of each row at its height.
    pub fn draw<'a>(self, svg: &mut Svg, rows: impl Iterator<Item = (&'a str, f64)>) {
        let labels = svg.element("g").with("class", "labels").at("font-size", TICK_SIZE);
        labels.with("fill", INK).around(|svg| {
            for (name, y) in rows {
                self.push(svg, name, y);
            }
        });
    }

    /// One name, inside a group that says how it looks.
    pub fn push(self, svg: &mut Svg, name: &str, y: f64) {
        let text = fitted(name, TICK_SIZE, Weight::Regular, self.room - APART);
        push_text(svg, (self.left + self.room - APART, y + 4.0), "end", &text);
    }
}
