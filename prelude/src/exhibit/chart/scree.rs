//! The scree: how much variance each component has, and what to compare that with.
//!
//! Above, each component's variance as a stem with its share of the total; below, a strip as long
//! as the total variance, divided among the components, under which the shares add up.

use serde_json::{Value, json};

use super::Chart;
use super::card::{Area, Card, LegendEntry, LegendSign};
use super::measure::{Weight, width};
use super::palette::{CARD, FAINT, GRID, GROUPS, INK, INK_SOFT, SEGMENTS};
use super::picture::{Drawing, Picture, number, numbers};
use super::plane::axis_title;
use super::references::{Band, Line, bands, lines, notes};
use super::settings::{Setting, Settings};
use super::source::Source;
use super::svg::{Svg, tenth};
use super::ticks::Ticks;
use super::units::listed;
use crate::components::PrincipalComponents;
use crate::error::Result;
use crate::exhibit::numbers::{counted, percent, significant, typographic};

const MOST_SHOWN: usize = 40;
const TEXT: f64 = 11.0;
const DOT: f64 = 4.6;
// Texts of smaller shares would stand on the base line; their hover texts say them.
const LEAST_NAMED_SHARE: f64 = 0.02;
const STRIP_HEIGHT: f64 = 18.0;
const BELOW_STEMS: f64 = 112.0;

/// The variances of the components, largest first, with each one's share of the total.
///
/// A dashed line marks the mean variance unless [`reference`](Chart::reference) asks for others.
/// Below the variances, a strip divides the total variance among the components.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::{Reference, scree};
///
/// let svg = scree(&pca).reference(Reference::BrokenStick).svg();
/// // One mark with a hover text for each component.
/// assert_eq!(svg.matches("· variance ").count(), pca.n_components());
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn scree(pca: &PrincipalComponents) -> Chart {
    Chart::new(Scree { source: Source::without_units(pca) })
}

/// The variances of an analysis.
#[derive(Debug)]
struct Scree {
    source: Source,
}

impl Picture for Scree {
    fn kind(&self) -> &'static str {
        "scree"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::Reference]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        settings.check_references(&self.source)
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        Ok(draw(&self.source, settings))
    }
}

fn draw(source: &Source, settings: &Settings) -> Drawing {
    let lines = lines(source, settings);
    let bands = bands(settings);
    let n_shown = source.n_components().min(MOST_SHOWN);
    let words = words(source, &lines);
    let mut notes = notes(settings);
    notes.extend(bands.iter().map(|band| format!("Whiskers: {}.", band.words)));
    if n_shown < source.n_components() {
        let rest: f64 = (n_shown + 1..=source.n_components()).map(|k| source.share(k)).sum();
        notes.push(format!(
            "The first {n_shown} of {} are drawn; the others hold {} of the variance together.",
            counted(source.n_components(), "component"),
            percent(rest)
        ));
    }
    let card = Card {
        width: settings.size_or(720.0, 480.0).0,
        height: settings.size_or(720.0, 480.0).1,
        least_drawing: 220.0,
        title: settings.title_or("Variance of each component".to_owned()),
        subtitle: format!(
            "{} of {} and {} {}",
            counted(source.n_components(), "component"),
            counted(source.n_rows, "unit"),
            counted(source.variables.len(), "variable"),
            source.scaling_words()
        ),
        description: words.clone(),
        legend: lines
            .iter()
            .map(|line| LegendEntry {
                sign: LegendSign::Line { color: line.color, dashes: line.dashes },
                text: line.name.clone(),
            })
            .collect(),
        notes,
        ..Card::default()
    };
    let svg = card.draw(|svg, room| {
        let area = Area {
            left: room.left + 44.0,
            top: room.top + 22.0,
            right: room.right - 4.0,
            bottom: room.bottom - BELOW_STEMS,
        };
        draw_stems(svg, area, source, (&lines, &bands), n_shown);
        let strip =
            Area { top: room.bottom - STRIP_HEIGHT - 22.0, bottom: room.bottom - 22.0, ..area };
        draw_strip(svg, strip, source);
    });
    Drawing { svg, words, numbers: behind(source, &lines, &bands) }
}

fn draw_stems(
    svg: &mut Svg,
    area: Area,
    source: &Source,
    (lines, bands): (&[Line], &[Band]),
    n_shown: usize,
) {
    let shown = &source.variances[..n_shown];
    let highest = lines
        .iter()
        .flat_map(|line| line.values.iter().take(n_shown))
        .chain(shown)
        .copied()
        .chain(bands.iter().flat_map(|band| band.ends.iter().take(n_shown).map(|ends| ends.1)))
        .filter(|value| value.is_finite())
        .fold(0.0, f64::max)
        * 1.04;
    let ticks = Ticks::within(0.0, highest, (area.height() / 48.0).clamp(2.0, 8.0) as usize);
    let slot = area.width() / n_shown as f64;
    let x_of = |place: usize| area.left + (place as f64 + 0.5) * slot;
    let y_of = |value: f64| area.bottom - value / highest * area.height();
    svg.element("g").with("class", "axes").at("font-size", TEXT).with("fill", INK_SOFT).around(
        |svg| {
            for value in ticks.values() {
                svg.element("line")
                    .at("x1", area.left)
                    .at("y1", y_of(value))
                    .at("x2", area.right)
                    .at("y2", y_of(value))
                    .with("stroke", if value == 0.0 { FAINT } else { GRID })
                    .done();
                svg.element("text")
                    .at("x", area.left - 6.0)
                    .at("y", y_of(value) + 4.0)
                    .with("text-anchor", "end")
                    .text(&ticks.text(value));
            }
            let every = if slot >= 17.0 { 1 } else { 5 };
            for number in (1..=n_shown).filter(|number| *number == 1 || number % every == 0) {
                svg.element("text")
                    .at("x", x_of(number - 1))
                    .at("y", area.bottom + 15.0)
                    .with("text-anchor", "middle")
                    .text(&number.to_string());
            }
        },
    );
    axis_title(svg, area.left - 44.0, area.top - 10.0, "start", "↑ Variance", area.width());
    axis_title(svg, area.right, area.bottom + 33.0, "end", "Component →", area.width());
    let dots: Vec<(f64, f64)> =
        shown.iter().enumerate().map(|(place, &value)| (x_of(place), y_of(value))).collect();
    push_path(svg, &dots, FAINT, "1", "");
    for line in lines {
        let mut points: Vec<(f64, f64)> = line
            .values
            .iter()
            .take(n_shown)
            .enumerate()
            .map(|(place, &value)| (x_of(place), y_of(value)))
            .collect();
        if let [first, .., last] = points[..]
            && line.values.windows(2).all(|pair| pair[0] == pair[1])
        {
            // A level that is the same everywhere runs the whole width.
            points = vec![(area.left, first.1), (area.right, last.1)];
        }
        push_path(svg, &points, line.color, "2", line.dashes);
    }
    for band in bands {
        draw_band(svg, band, n_shown, (highest, area.bottom), (&x_of, &y_of));
    }
    draw_dots(svg, area, source, &dots);
    draw_shares(svg, area, source, &dots);
}

/// A whisker behind each stem, a little to its left, so that the stem does not hide it.
fn draw_band(
    svg: &mut Svg,
    band: &Band,
    n_shown: usize,
    (highest, bottom): (f64, f64),
    (x_of, y_of): (&dyn Fn(usize) -> f64, &dyn Fn(f64) -> f64),
) {
    let mut path = String::new();
    for (place, (low, high)) in band.ends.iter().take(n_shown).enumerate() {
        let x = x_of(place) - 5.5;
        let (top, foot) = (y_of(high.min(highest)), y_of(low.max(0.0)).min(bottom));
        path.push_str(&format!(
            "M{} {}h6M{} {}V{}M{} {}h6",
            tenth(x - 3.0),
            tenth(top),
            tenth(x),
            tenth(top),
            tenth(foot),
            tenth(x - 3.0),
            tenth(foot)
        ));
    }
    let whiskers = svg.element("path").with("class", "whiskers").with("d", &path);
    whiskers
        .with("fill", "none")
        .with("stroke", INK)
        .with("stroke-width", "1.2")
        .around(|svg| svg.element("title").text(&band.words));
}

fn draw_dots(svg: &mut Svg, area: Area, source: &Source, dots: &[(f64, f64)]) {
    svg.element("g")
        .with("class", "marks")
        .with("fill", GROUPS[0])
        .with("stroke", GROUPS[0])
        .around(|svg| {
            let mut sum = 0.0;
            for (place, &(x, y)) in dots.iter().enumerate() {
                let share = source.share(place + 1);
                sum += share;
                svg.element("path")
                    .with("d", &format!("M{} {}V{}", tenth(x), tenth(area.bottom), tenth(y)))
                    .with("stroke-width", "2.4")
                    .done();
                let variance = significant(source.variances[place], 4);
                let text = format!(
                    "component {} · variance {} · {} of the total · {} so far",
                    place + 1,
                    typographic(&variance),
                    percent(share),
                    percent(sum)
                );
                svg.element("circle")
                    .at("cx", x)
                    .at("cy", y)
                    .at("r", DOT)
                    .with("stroke", CARD)
                    .around(|svg| svg.element("title").text(&text));
            }
        });
}

// Shares stand right above their dots, as far as they leave the neighbours' dots and texts free.
fn draw_shares(svg: &mut Svg, area: Area, source: &Source, dots: &[(f64, f64)]) {
    let mut taken: Vec<Area> = Vec::new();
    svg.element("g")
        .with("class", "labels")
        .at("font-size", TEXT)
        .with("fill", INK)
        .with("stroke", CARD)
        .with("stroke-width", "2.5")
        .with("stroke-linejoin", "round")
        .with("paint-order", "stroke")
        .around(|svg| {
            for (place, &(x, y)) in dots.iter().enumerate() {
                let share = source.share(place + 1);
                if share < LEAST_NAMED_SHARE {
                    break;
                }
                let text = percent(share);
                let left = x + DOT + 2.0;
                let room = Area {
                    left,
                    top: y - 15.0,
                    right: left + width(&text, TEXT, Weight::Regular),
                    bottom: y - 3.0,
                };
                let next = dots.get(place + 1).map(|&(x, y)| Area {
                    left: x - DOT,
                    top: y - DOT,
                    right: x + DOT,
                    bottom: y + DOT,
                });
                let free = taken.iter().chain(&next).all(|other| !room.overlaps(other));
                if free && room.right <= area.right {
                    svg.element("text").at("x", left).at("y", y - 4.5).text(&text);
                    taken.push(room);
                }
            }
        });
}

fn draw_strip(svg: &mut Svg, area: Area, source: &Source) {
    svg.element("text")
        .at("x", area.left)
        .at("y", area.top - 7.0)
        .at("font-size", TEXT)
        .with("fill", INK_SOFT)
        .text("Shares of the total variance, adding up");
    let (mut from, mut sum, mut last_right) = (area.left, 0.0, area.left - 4.0);
    for component in 1..=source.n_components() {
        let share = source.share(component);
        sum += share;
        let to = area.left + sum.min(1.0) * area.width();
        // Shares descend, so all that follow are slivers too: hundreds of invisible elements in a
        // wide table, and therefore one.
        if to - from < 1.0 && component < source.n_components() {
            let rest = percent(1.0 - (sum - share));
            let words = format!("the remaining components, from {component} on: {rest}");
            push_segment(svg, area, (from, area.right), SEGMENTS[3].0, &words);
            return;
        }
        let (color, ink) = SEGMENTS[(component - 1).min(SEGMENTS.len() - 1)];
        let words = format!("component {component}: {}, together {}", percent(share), percent(sum));
        push_segment(svg, area, (from, to), color, &words);
        if to - from >= 18.0 {
            svg.element("text")
                .at("x", (from + to) / 2.0)
                .at("y", area.bottom - 5.0)
                .at("font-size", TEXT)
                .with("fill", ink)
                .with("text-anchor", "middle")
                .text(&component.to_string());
        }
        let text = percent(sum);
        let room = width(&text, TEXT, Weight::Regular);
        if to - room > last_right + 6.0 && to <= area.right + 0.5 {
            svg.element("text")
                .at("x", to)
                .at("y", area.bottom + 14.0)
                .at("font-size", TEXT)
                .with("fill", INK_SOFT)
                .with("text-anchor", "end")
                .text(&text);
            last_right = to;
        }
        from = to;
    }
}

fn push_segment(svg: &mut Svg, area: Area, (from, to): (f64, f64), color: &str, words: &str) {
    svg.element("rect")
        .with("class", "segment")
        .at("x", from)
        .at("y", area.top)
        .at("width", (to - from).max(0.0))
        .at("height", area.height())
        .with("fill", color)
        .with("stroke", CARD)
        .around(|svg| svg.element("title").text(words));
}

fn push_path(svg: &mut Svg, points: &[(f64, f64)], color: &str, thickness: &str, dashes: &str) {
    let mut path = String::new();
    for (place, (x, y)) in points.iter().enumerate() {
        path.push(if place == 0 { 'M' } else { 'L' });
        path.push_str(&format!("{} {}", tenth(*x), tenth(*y)));
    }
    let line = svg
        .element("path")
        .with("d", &path)
        .with("fill", "none")
        .with("stroke", color)
        .with("stroke-width", thickness);
    if dashes.is_empty() { line.done() } else { line.with("stroke-dasharray", dashes).done() }
}

fn behind(source: &Source, lines: &[Line], bands: &[Band]) -> Value {
    let references: Vec<Value> = lines
        .iter()
        .map(|line| json!({ "name": line.name, "values": numbers(line.values.iter().copied()) }))
        .collect();
    json!({
        "variances": numbers(source.variances.iter().copied()),
        "total variance": number(source.total_variance),
        "references": references,
        "intervals": bands
            .iter()
            .map(|band| {
                json!({
                    "name": band.words,
                    "low": numbers(band.ends.iter().map(|ends| ends.0)),
                    "high": numbers(band.ends.iter().map(|ends| ends.1)),
                })
            })
            .collect::<Vec<Value>>(),
    })
}

fn words(source: &Source, lines: &[Line]) -> String {
    let shares: Vec<String> =
        (1..=source.n_components().min(3)).map(|k| percent(source.share(k))).collect();
    let first = shares.len();
    let together: f64 = (1..=first).map(|k| source.share(k)).sum();
    let mut words = format!(
        "Scree of {} from {} and {} {}. ",
        counted(source.n_components(), "component"),
        counted(source.n_rows, "unit"),
        counted(source.variables.len(), "variable"),
        source.scaling_words()
    );
    if first == 1 {
        words.push_str(&format!("It holds {} of the variance.", shares[0]));
    } else {
        words.push_str(&format!(
            "The first {first} hold {} of the variance, together {}.",
            listed(&shares, 3),
            percent(together)
        ));
    }
    for line in lines {
        let above = source
            .variances
            .iter()
            .zip(&line.values)
            .take_while(|(variance, limit)| *variance > *limit)
            .count();
        words.push_str(&format!(
            " Leading components above the reference \"{}\": {above}.",
            line.name
        ));
    }
    words
}
