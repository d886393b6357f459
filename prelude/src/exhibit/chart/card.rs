//! The card that every chart is drawn on: title, subtitle, legend, drawing, notes.
//!
//! The card takes the width it is given and scales down with the cell. Everything around the
//! drawing is measured first, so that the drawing gets exactly what is left.

use super::marks::push_mark;
use super::measure::{FONTS, Weight, fitted, width, wrapped};
use super::palette::{CARD, CARD_EDGE, Cue, INK, INK_SOFT};
use super::svg::Svg;

const MARGIN: f64 = 18.0;
const TITLE_SIZE: f64 = 16.0;
const SUBTITLE_SIZE: f64 = 12.0;
const SUBTITLE_LINE: f64 = 18.0;
const LEGEND_SIZE: f64 = 12.0;
const LEGEND_LINE: f64 = 19.0;
const LEGEND_ENTRY_MOST: f64 = 220.0;
const LEGEND_LINES_MOST: usize = 4;
const NOTE_SIZE: f64 = 11.0;
const NOTE_LINE: f64 = 15.0;

/// A rectangle in the units of the drawing; y grows downwards.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Area {
    pub left: f64,
    pub top: f64,
    pub right: f64,
    pub bottom: f64,
}

impl Area {
    pub fn width(&self) -> f64 {
        self.right - self.left
    }

    pub fn height(&self) -> f64 {
        self.bottom - self.top
    }

    pub fn overlaps(&self, other: &Area) -> bool {
        self.left < other.right
            && other.left < self.right
            && self.top < other.bottom
            && other.top < self.bottom
    }

    pub fn contains(&self, other: &Area) -> bool {
        self.left <= other.left
            && other.right <= self.right
            && self.top <= other.top
            && other.bottom <= self.bottom
    }
}

/// One entry of a legend.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct LegendEntry {
    pub sign: LegendSign,
    pub text: String,
}

/// What stands before the text of a legend's entry.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum LegendSign {
    Mark(Cue),
    Line { color: &'static str, dashes: &'static str },
    Nothing,
}

/// What stands around a drawing.
#[derive(Debug, Clone, Default, PartialEq)]
pub(super) struct Card {
    pub width: f64,
    pub height: f64,
    pub title: String,
    pub subtitle: String,
    /// What the chart says, in words, for those who cannot see it.
    pub description: String,
    pub legend: Vec<LegendEntry>,
    pub notes: Vec<String>,
    /// Lines to keep free for notes at least.
    pub least_note_lines: usize,
    /// Height that the drawing needs at least.
    pub least_drawing: f64,
}

impl Card {
    /// Writes the whole document; `drawing` fills the area that is left.
    pub fn draw(&self, drawing: impl FnOnce(&mut Svg, Area)) -> String {
        let inner = self.width - 2.0 * MARGIN;
        let legend = self.legend_lines(inner);
        let notes = self.note_lines();
        let height = self.grown_height(legend.len());
        let mut svg = Svg::new();
        let (title_name, text_name) = (Svg::name("title"), Svg::name("text"));
        svg.element("svg")
            .with("xmlns", "http://www.w3.org/2000/svg")
            .at("width", self.width)
            .at("height", height)
            .with("viewBox", &format!("0 0 {} {}", self.width, height))
            .with("style", "max-width:100%;height:auto")
            .with("role", "img")
            .with("aria-labelledby", &format!("{title_name} {text_name}"))
            .with("font-family", FONTS)
            .around(|svg| {
                svg.element("title").with("id", &title_name).text(&self.title);
                svg.element("desc").with("id", &text_name).text(&self.description);
                self.draw_ground(svg, height);
                let mut y = self.draw_head(svg, inner);
                for line in &legend {
                    y += LEGEND_LINE;
                    for (x, entry) in line {
                        draw_entry(svg, MARGIN + x, y, entry);
                    }
                }
                let notes_top = height - 14.0 - self.n_note_lines() as f64 * NOTE_LINE;
                for (place, line) in notes.iter().enumerate() {
                    svg.element("text")
                        .at("x", MARGIN)
                        .at("y", notes_top + (place as f64 + 0.8) * NOTE_LINE)
                        .at("font-size", NOTE_SIZE)
                        .with("fill", INK_SOFT)
                        .text(line);
                }
                let area = Area {
                    left: MARGIN,
                    top: y + 12.0,
                    right: self.width - MARGIN,
                    bottom: notes_top - 8.0,
                };
                drawing(svg, area);
            });
        svg.finish()
    }

    // A card grows when titles, legend and notes would leave too little for the drawing.
    fn grown_height(&self, n_legend_lines: usize) -> f64 {
        let inner = self.width - 2.0 * MARGIN;
        let n_subtitle_lines = wrapped(&self.subtitle, SUBTITLE_SIZE, inner).len();
        let around = MARGIN
            + 43.0
            + n_subtitle_lines as f64 * SUBTITLE_LINE
            + n_legend_lines as f64 * LEGEND_LINE
            + self.n_note_lines() as f64 * NOTE_LINE;
        self.height.max(around + self.least_drawing)
    }

    /// The lines that notes take, and those kept free for them.
    pub fn n_note_lines(&self) -> usize {
        self.note_lines().len().max(self.least_note_lines)
    }

    fn note_lines(&self) -> Vec<String> {
        let inner = self.width - 2.0 * MARGIN;
        self.notes.iter().flat_map(|note| wrapped(note, NOTE_SIZE, inner)).collect()
    }

    fn draw_ground(&self, svg: &mut Svg, height: f64) {
        svg.element("rect")
            .at("x", 0.5)
            .at("y", 0.5)
            .at("width", self.width - 1.0)
            .at("height", height - 1.0)
            .at("rx", 6.0)
            .with("fill", CARD)
            .with("stroke", CARD_EDGE)
            .done();
    }

    fn draw_head(&self, svg: &mut Svg, inner: f64) -> f64 {
        let mut y = MARGIN + 13.0;
        svg.element("text")
            .at("x", MARGIN)
            .at("y", y)
            .at("font-size", TITLE_SIZE)
            .with("font-weight", "bold")
            .with("fill", INK)
            .text(&fitted(&self.title, TITLE_SIZE, Weight::Bold, inner));
        for line in wrapped(&self.subtitle, SUBTITLE_SIZE, inner) {
            y += SUBTITLE_LINE;
            svg.element("text")
                .at("x", MARGIN)
                .at("y", y)
                .at("font-size", SUBTITLE_SIZE)
                .with("fill", INK_SOFT)
                .text(&line);
        }
        y + 4.0
    }

    // Entries flow from left to right; what does not fit the lines that a legend may take is
    // counted in its last entry.
    fn legend_lines(&self, inner: f64) -> Vec<Vec<(f64, LegendEntry)>> {
        let mut lines: Vec<Vec<(f64, LegendEntry)>> = Vec::new();
        let mut x = f64::INFINITY;
        for (place, entry) in self.legend.iter().enumerate() {
            let most = LEGEND_ENTRY_MOST.min(inner - 26.0);
            let text = fitted(&entry.text, LEGEND_SIZE, Weight::Regular, most);
            let room = sign_room(&entry.sign) + width(&text, LEGEND_SIZE, Weight::Regular);
            if x + room > inner {
                if lines.len() == LEGEND_LINES_MOST {
                    let left = self.legend.len() - place;
                    return with_rest(lines, left, inner);
                }
                lines.push(Vec::new());
                x = 0.0;
            }
            if let Some(line) = lines.last_mut() {
                line.push((x, LegendEntry { sign: entry.sign.clone(), text }));
            }
            x += room + 18.0;
        }
        lines
    }
}

fn with_rest(
    mut lines: Vec<Vec<(f64, LegendEntry)>>,
    mut left: usize,
    inner: f64,
) -> Vec<Vec<(f64, LegendEntry)>> {
    if let Some(line) = lines.last_mut() {
        // The last entries make way until the count fits behind them.
        while let Some((x, entry)) = line.last() {
            let end = x + sign_room(&entry.sign) + width(&entry.text, LEGEND_SIZE, Weight::Regular);
            let text = format!("and {left} more");
            if end + 18.0 + width(&text, LEGEND_SIZE, Weight::Regular) <= inner {
                let entry = LegendEntry { sign: LegendSign::Nothing, text };
                line.push((end + 18.0, entry));
                break;
            }
            line.pop();
            left += 1;
        }
    }
    lines
}

fn sign_room(sign: &LegendSign) -> f64 {
    match sign {
        LegendSign::Mark(_) => 16.0,
        LegendSign::Line { .. } => 32.0,
        LegendSign::Nothing => 0.0,
    }
}

fn draw_entry(svg: &mut Svg, x: f64, y: f64, entry: &LegendEntry) {
    match &entry.sign {
        LegendSign::Mark(cue) => push_mark(svg, *cue, (x + 6.0, y - 4.2), 4.6, None),
        LegendSign::Line { color, dashes } => {
            let line = svg
                .element("path")
                .with("d", &format!("M{x:.0} {:.0}h26", y - 4.0))
                .with("stroke", color)
                .with("stroke-width", "2")
                .with("fill", "none");
            if dashes.is_empty() {
                line.done()
            } else {
                line.with("stroke-dasharray", dashes).done()
            }
        }
        LegendSign::Nothing => {}
    }
    svg.element("text")
        .at("x", x + sign_room(&entry.sign))
        .at("y", y)
        .at("font-size", LEGEND_SIZE)
        .with("fill", INK)
        .text(&entry.text);
}
