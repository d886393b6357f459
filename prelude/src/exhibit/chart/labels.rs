//! Labels that cover neither each other nor the marks.
//!
//! Labels are placed one after the other, the most important first, each at the best of a few
//! places around its point; a label for which there is none is left out, and the chart says how
//! many are. What is drawn already is kept as counts in a grid of small cells, so that a try
//! costs the same among ten marks and among twenty thousand.

use super::card::Area;
use super::measure::{Weight, fitted, width};
use super::palette::{CARD, FAINT, INK};
use super::svg::Svg;

const CELL: f64 = 3.0;
const HEIGHT: f64 = 1.15;
// How far beyond its first place a label may move, with a thin line back to its point.
const REACHES: [f64; 4] = [0.0, 11.0, 22.0, 36.0];

/// A label to be placed.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Wish {
    /// The point that is labelled.
    pub x: f64,
    pub y: f64,
    pub text: String,
    /// Room to keep to the point: the radius of its mark.
    pub clearance: f64,
    /// The direction that is tried first, in radians, counted as on paper (up is positive).
    pub outward: f64,
}

/// A label with its place.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct PlacedLabel {
    pub area: Area,
    pub text: String,
    /// The ends of the line to the point, when the label stands away from it.
    pub leader: Option<((f64, f64), (f64, f64))>,
}

/// Where labels may stand, and what is in their way.
pub(super) struct LabelSpace {
    area: Area,
    columns: usize,
    // Per cell: marks, which a label must not cover, and lines, which it should not.
    marks: Vec<u16>,
    lines: Vec<u16>,
    labels: Vec<Area>,
}

impl LabelSpace {
    pub fn new(area: Area) -> Self {
        let columns = (area.width().max(0.0) / CELL).ceil() as usize + 1;
        let rows = (area.height().max(0.0) / CELL).ceil() as usize + 1;
        let cells = vec![0; columns * rows];
        LabelSpace { area, columns, marks: cells.clone(), lines: cells, labels: Vec::new() }
    }

    /// Keeps labels off a mark.
    pub fn add_mark(&mut self, x: f64, y: f64, radius: f64) {
        let reach = (radius / CELL).ceil() as i64;
        for dy in -reach..=reach {
            for dx in -reach..=reach {
                let (dx, dy) = (dx as f64 * CELL, dy as f64 * CELL);
                if dx.hypot(dy) <= radius
                    && let Some(cell) = self.cell(x + dx, y + dy)
                {
                    self.marks[cell] = self.marks[cell].saturating_add(1);
                }
            }
        }
    }

    /// Makes labels avoid a line where they can.
    pub fn add_line(&mut self, from: (f64, f64), to: (f64, f64)) {
        let length = (to.0 - from.0).hypot(to.1 - from.1);
        let steps = (length / CELL).ceil().min(10_000.0) as usize;
        for step in 0..=steps {
            let t = step as f64 / steps.max(1) as f64;
            let (x, y) = (from.0 + t * (to.0 - from.0), from.1 + t * (to.1 - from.1));
            if let Some(cell) = self.cell(x, y) {
                self.lines[cell] = self.lines[cell].saturating_add(1);
            }
        }
    }

    /// Places labels in the order of the wishes; `None` for one that finds no place.
    pub fn place(
        &mut self,
        wishes: &[Wish],
        size: f64,
        most_width: f64,
    ) -> Vec<Option<PlacedLabel>> {
        wishes
            .iter()
            .map(|wish| {
                let text = fitted(&wish.text, size, Weight::Regular, most_width);
                let extent = (width(&text, size, Weight::Regular) + 2.0, size * HEIGHT);
                let (area, leader) = self.best(wish, extent)?;
                self.labels.push(area);
                Some(PlacedLabel { area, text, leader })
            })
            .collect()
    }

    #[allow(clippy::type_complexity, reason = "a place and the line to it, used here only")]
    fn best(
        &self,
        wish: &Wish,
        extent: (f64, f64),
    ) -> Option<(Area, Option<((f64, f64), (f64, f64))>)> {
        use std::f64::consts::FRAC_PI_8;
        let mut best: Option<(f64, Area, Option<((f64, f64), (f64, f64))>)> = None;
        for (ring, reach) in REACHES.into_iter().enumerate() {
            // Directions to both sides of the wished one, the nearest first.
            for turn in 0..16 {
                let side = if turn % 2 == 0 { 1.0 } else { -1.0 };
                let angle = wish.outward + side * ((turn + 1) / 2) as f64 * FRAC_PI_8;
                let area = area_towards(wish, angle, wish.clearance + 2.5 + reach, extent);
                if !self.area.contains(&area)
                    || self.labels.iter().any(|label| label.overlaps(&widened(&area)))
                {
                    continue;
                }
                let (n_marks, n_lines) = self.covered(&area);
                if n_marks > 0 {
                    continue;
                }
                let cost = n_lines as f64 * 4.0 + turn as f64 + ring as f64 * 6.0;
                if best.as_ref().is_none_or(|(least, ..)| cost < *least) {
                    let leader = (ring > 0).then(|| leader(wish, angle, &area));
                    best = Some((cost, area, leader));
                }
            }
        }
        best.map(|(_, area, leader)| (area, leader))
    }

    fn covered(&self, area: &Area) -> (usize, usize) {
        let (mut n_marks, mut n_lines) = (0, 0);
        let mut y = area.top;
        while y <= area.bottom {
            let mut x = area.left;
            while x <= area.right {
                if let Some(cell) = self.cell(x, y) {
                    n_marks += usize::from(self.marks[cell] > 0);
                    n_lines += usize::from(self.lines[cell] > 0);
                }
                x += CELL;
            }
            y += CELL;
        }
        (n_marks, n_lines)
    }

    fn cell(&self, x: f64, y: f64) -> Option<usize> {
        let (column, row) = ((x - self.area.left) / CELL, (y - self.area.top) / CELL);
        let inside = column >= 0.0 && row >= 0.0 && (column as usize) < self.columns;
        let cell = if inside { row as usize * self.columns + column as usize } else { usize::MAX };
        (cell < self.marks.len()).then_some(cell)
    }
}

/// Writes placed labels; a rim in the card's colour keeps them readable over lines.
pub(super) fn push_labels(svg: &mut Svg, labels: &[PlacedLabel], size: f64) {
    svg.element("g")
        .with("class", "leaders")
        .with("stroke", FAINT)
        .with("stroke-width", ".8")
        .around(|svg| {
            for (from, to) in labels.iter().filter_map(|label| label.leader) {
                svg.element("line")
                    .at("x1", from.0)
                    .at("y1", from.1)
                    .at("x2", to.0)
                    .at("y2", to.1)
                    .done();
            }
        });
    svg.element("g")
        .with("class", "labels")
        .at("font-size", size)
        .with("fill", INK)
        .with("text-anchor", "middle")
        .with("stroke", CARD)
        .with("stroke-width", "2.5")
        .with("stroke-linejoin", "round")
        .with("paint-order", "stroke")
        .around(|svg| {
            for label in labels {
                // A middle anchor centres the text in the room measured for it, whatever the
                // reader's font and the direction of writing.
                svg.element("text")
                    .at("x", (label.area.left + label.area.right) / 2.0)
                    .at("y", label.area.bottom - size * 0.26)
                    .text(&label.text);
            }
        });
}

// Neighbouring labels on one line need a space between them.
fn widened(area: &Area) -> Area {
    const GAP: f64 = 5.0;
    Area { left: area.left - GAP, right: area.right + GAP, ..*area }
}

// The box that touches the circle of the given radius around the point in a direction.
fn area_towards(wish: &Wish, angle: f64, radius: f64, (w, h): (f64, f64)) -> Area {
    let (cos, sin) = (angle.cos(), -angle.sin());
    let (x, y) = (wish.x + radius * cos, wish.y + radius * sin);
    // A smooth rule would slide the box along; thirds give the usual eight places.
    let shift = |part: f64| {
        if part > 0.38 {
            0.0
        } else if part < -0.38 {
            1.0
        } else {
            0.5
        }
    };
    let (left, top) = (x - w * shift(cos), y - h * shift(sin));
    Area { left, top, right: left + w, bottom: top + h }
}

fn leader(wish: &Wish, angle: f64, area: &Area) -> ((f64, f64), (f64, f64)) {
    let (cos, sin) = (angle.cos(), -angle.sin());
    let start = (wish.x + wish.clearance * cos, wish.y + wish.clearance * sin);
    let end =
        (start.0.clamp(area.left, area.right), start.1.clamp(area.top + 2.0, area.bottom - 2.0));
    (start, end)
}

#[cfg(test)]
mod tests {
    use super::*;

    const SPACE: Area = Area { left: 0.0, top: 0.0, right: 400.0, bottom: 300.0 };

    fn wish(x: f64, y: f64, text: &str) -> Wish {
        Wish { x, y, text: text.to_owned(), clearance: 4.0, outward: 0.0 }
    }

    #[test]
    fn labels_keep_clear_of_each_other_and_of_marks() {
        let mut space = LabelSpace::new(SPACE);
        let points: Vec<(f64, f64)> =
            (0..40).map(|i| (60.0 + (i * 37 % 280) as f64, 40.0 + (i * 53 % 220) as f64)).collect();
        for &(x, y) in &points {
            space.add_mark(x, y, 4.0);
        }
        let wishes: Vec<Wish> = points
            .iter()
            .enumerate()
            .map(|(i, &(x, y))| wish(x, y, &format!("tile {i}")))
            .collect();
        let placed: Vec<PlacedLabel> =
            space.place(&wishes, 11.0, 100.0).into_iter().flatten().collect();
        assert!(placed.len() > 20, "{}", placed.len());
        for (i, a) in placed.iter().enumerate() {
            assert!(SPACE.contains(&a.area));
            assert!(placed[..i].iter().all(|b| !a.area.overlaps(&b.area)));
            for &(x, y) in &points {
                let (dx, dy) = (
                    x.clamp(a.area.left, a.area.right) - x,
                    y.clamp(a.area.top, a.area.bottom) - y,
                );
                assert!(dx.hypot(dy) > 1.0, "label {} covers the mark at {x}, {y}", a.text);
            }
        }
    }

    #[test]
    fn a_label_without_room_is_left_out() {
        let mut space = LabelSpace::new(SPACE);
        for x in 0..130 {
            for y in 0..100 {
                space.add_mark(x as f64 * 3.0, y as f64 * 3.0, 3.0);
            }
        }
        assert_eq!(space.place(&[wish(200.0, 150.0, "tile")], 11.0, 100.0), [None]);
    }

    #[test]
    fn the_wished_side_comes_first() {
        let mut space = LabelSpace::new(SPACE);
        let up = Wish { outward: std::f64::consts::FRAC_PI_2, ..wish(200.0, 150.0, "tile") };
        let placed = space.place(&[up], 11.0, 100.0);
        assert!(placed[0].as_ref().is_some_and(|label| label.area.bottom < 150.0));
    }
}
