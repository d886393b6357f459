//! T² and Q in the order of the rows: when does something stand out?

use serde_json::json;

use super::Chart;
use super::card::{Area, Card};
use super::frame::{Axis, Frame, TICK_SIZE};
use super::groups::Groups;
use super::labels::{LabelSpace, Wish, push_labels};
use super::marks::{mark_radius, push_mark};
use super::measure::{Weight, fitted};
use super::palette::{Cue, FAINT, GROUPS, INK, Shape};
use super::picture::{Drawing, Picture, number, numbers};
use super::scores::{LABEL_MOST, LABEL_SIZE, draw_settled};
use super::settings::{Setting, Settings};
use super::svg::{Svg, tenth};
use super::units::listed;
use crate::distances::TSquaredAndQ;
use crate::error::Result;
use crate::exhibit::numbers::{counted, significant, stored, typographic};
use crate::exhibit::text::shortened;

const MOST_NAMED: usize = 12;
/// Marks with a hover text each; with more units only those beyond a limit have one.
const MOST_HOVERS: usize = 1_200;
const BETWEEN: f64 = 34.0;

/// T² and Q of each unit in row order, with their limits; units beyond a limit are named.
///
/// Rows are taken to be in the order of time or production. T² says how unusual a unit is within
/// the kept components, Q how much of it they do not describe.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::distances::t_squared_and_q;
/// use semiaxis::exhibit::sequence_plot;
///
/// let svg = sequence_plot(&t_squared_and_q(&pca, 1)?).svg();
/// assert!(svg.contains("Statistical limits are not safety limits"));
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn sequence_plot(statistics: &TSquaredAndQ) -> Chart {
    Chart::new(Sequence { statistics: statistics.clone() })
}

/// The statistics of some rows.
#[derive(Debug)]
struct Sequence {
    statistics: TSquaredAndQ,
}

/// One statistic of every row.
struct Track<'a> {
    name: &'static str,
    values: &'a [f64],
    limit: Option<f64>,
    rule: String,
}

impl Track<'_> {
    fn beyond(&self) -> Vec<usize> {
        let Some(limit) = self.limit else { return Vec::new() };
        let mut order: Vec<usize> =
            (0..self.values.len()).filter(|&unit| self.values[unit] > limit).collect();
        order.sort_by(|&a, &b| self.values[b].total_cmp(&self.values[a]).then(a.cmp(&b)));
        order
    }
}

impl Picture for Sequence {
    fn kind(&self) -> &'static str {
        "sequence plot"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::Groups, Setting::Labels]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        settings.check_drawn_units(self.statistics.n_rows())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let s = &self.statistics;
        let names = settings.names_or(s.labels());
        let groups = Groups::new(settings.groups.as_deref(), &vec![(0.0, 0.0); s.n_rows()], None);
        let tracks = [
            Track {
                name: "T²",
                values: s.t_squared().as_slice(),
                limit: s.t_squared_limit(),
                rule: s.t_squared_rule().to_string(),
            },
            Track {
                name: "Q",
                values: s.q().as_slice(),
                limit: s.q_limit(),
                rule: s.q_rule().map_or("no component is left out".to_owned(), |r| r.to_string()),
            },
        ];
        let words = words(s, &tracks, &names);
        let card = |notes: Vec<String>| Card {
            width: settings.size_or(760.0, 560.0).0,
            height: settings.size_or(760.0, 560.0).1,
            least_drawing: 300.0,
            title: settings.title_or("T² and Q in row order".to_owned()),
            subtitle: format!(
                "{}{}, {} kept",
                counted(s.n_rows(), "unit"),
                if s.are_new_rows() { " that took no part in the fit" } else { "" },
                counted(s.n_components(), "component")
            ),
            description: words.clone(),
            legend: groups.legend(),
            notes,
            ..Card::default()
        };
        let svg = draw_settled(card, |svg, room| {
            let mut notes = Vec::new();
            let half = (room.height() - BETWEEN) / 2.0;
            for (place, track) in tracks.iter().enumerate() {
                let top = room.top + place as f64 * (half + BETWEEN);
                // The lower axis alone is titled, and keeps the room for it.
                let area = Area { top, bottom: top + half, ..room };
                notes.extend(draw_track(svg, area, track, &names, &groups, place == 1));
            }
            notes.push(format!(
                "Limits hold {} % of units that follow the model. Statistical limits are not \
                 safety limits: an alarm here says look closer, and no alarm does not say safe.",
                stored(100.0 * s.coverage(), 4)
            ));
            notes
        });
        let numbers = json!({
            "units": names,
            "t squared": numbers(tracks[0].values.iter().copied()),
            "q": numbers(tracks[1].values.iter().copied()),
            "t squared limit": tracks[0].limit.map(number),
            "q limit": tracks[1].limit.map(number),
        });
        Ok(Drawing { svg, words, numbers })
    }
}

fn draw_track(
    svg: &mut Svg,
    room: Area,
    track: &Track,
    names: &[String],
    groups: &Groups,
    is_last: bool,
) -> Vec<String> {
    let n = track.values.len();
    let largest = track.values.iter().copied().filter(|v| v.is_finite()).fold(0.0, f64::max);
    let top = largest.max(track.limit.unwrap_or(0.0));
    let top = if top > 0.0 { top * 1.12 } else { 1.0 };
    let frame = Frame::fit(room, Axis::Numbers(0.5, n as f64 + 0.5), Axis::Numbers(0.0, top));
    frame.draw(svg, if is_last { "Row" } else { "" }, track.name);
    let place = |unit: usize| frame.place(unit as f64 + 1.0, track.values[unit]);
    let path = track_path(&frame, track.values);
    svg.element("path")
        .with("class", "track")
        .with("d", &path)
        .with("fill", "none")
        .with("stroke", FAINT)
        .with("stroke-opacity", ".6")
        .done();
    let beyond = track.beyond();
    let n_marked = beyond.len().min(MOST_HOVERS);
    let mut marked = vec![n <= MOST_HOVERS; n];
    for &unit in &beyond[..n_marked] {
        marked[unit] = true;
    }
    let group_of = groups.of_units(n);
    let radius = mark_radius(n) * 0.7;
    svg.element("g").with("class", "marks").around(|svg| {
        let is_beyond = |unit: usize| track.limit.is_some_and(|limit| track.values[unit] > limit);
        for unit in (0..n).filter(|&unit| marked[unit]) {
            let mut cue = group_of[unit].cue;
            if !groups.are_set() {
                // One colour for all would hide what the chart is about.
                let color = if is_beyond(unit) { GROUPS[2] } else { GROUPS[0] };
                cue = Cue {
                    color,
                    shape: if is_beyond(unit) { Shape::Diamond } else { Shape::Disc },
                };
            }
            let grown = if is_beyond(unit) { 1.5 } else { 1.0 };
            let title = format!(
                "{} · {} {}",
                shortened(&names[unit], 60),
                track.name,
                typographic(&significant(track.values[unit], 3))
            );
            push_mark(svg, cue, place(unit), radius * grown, Some(&title));
        }
    });
    draw_limit(svg, &frame, track);
    let mut space = LabelSpace::new(frame.area);
    for unit in 0..n {
        let (x, y) = place(unit);
        space.add_mark(x, y, radius);
    }
    let wishes: Vec<Wish> = beyond
        .iter()
        .take(MOST_NAMED)
        .filter(|&&unit| !names[unit].trim().is_empty())
        .map(|&unit| {
            let (x, y) = place(unit);
            Wish { x, y, text: names[unit].clone(), clearance: radius * 1.5, outward: 0.9 }
        })
        .collect();
    let placed: Vec<_> =
        space.place(&wishes, LABEL_SIZE, LABEL_MOST).into_iter().flatten().collect();
    push_labels(svg, &placed, LABEL_SIZE);
    let mut notes = Vec::new();
    if track.limit.is_none() {
        notes.push(format!("{} has no limit: {}.", track.name, track.rule));
    }
    if n_marked < beyond.len() {
        notes.push(format!("{}: the {n_marked} largest are marked.", track.name));
    }
    if placed.len() < beyond.len() {
        notes.push(format!(
            "{}: {} of {} beyond the limit named, the largest first.",
            track.name,
            placed.len(),
            counted(beyond.len(), "unit")
        ));
    }
    notes
}

/// A line through all values; where several rows share a pixel, from the least to the largest.
fn track_path(frame: &Frame, values: &[f64]) -> String {
    let per_pixel = (values.len() as f64 / frame.area.width().max(1.0)).ceil().max(1.0) as usize;
    let mut path = String::new();
    for (place, chunk) in values.chunks(per_pixel).enumerate() {
        let middle = (place * per_pixel) as f64 + (chunk.len() as f64 + 1.0) / 2.0;
        let least = chunk.iter().copied().fold(f64::INFINITY, f64::min);
        let largest = chunk.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        for value in [least, largest].into_iter().take(if per_pixel == 1 { 1 } else { 2 }) {
            let (x, y) = frame.place(middle, value);
            path.push(if path.is_empty() { 'M' } else { 'L' });
            path.push_str(&format!("{} {}", tenth(x), tenth(y)));
        }
    }
    path
}

fn draw_limit(svg: &mut Svg, frame: &Frame, track: &Track) {
    let Some(limit) = track.limit else { return };
    let y = frame.up(limit);
    let area = frame.area;
    let words = format!("limit {} ({})", typographic(&significant(limit, 3)), track.rule);
    svg.element("path")
        .with("class", "limit")
        .with("d", &format!("M{} {}H{}", tenth(area.left), tenth(y), tenth(area.right)))
        .with("stroke", INK)
        .with("stroke-width", "1.3")
        .with("stroke-dasharray", "7 4")
        .around(|svg| svg.element("title").text(&words));
    svg.element("text")
        .at("x", area.right)
        .at("y", area.top - 13.0)
        .at("font-size", TICK_SIZE)
        .with("text-anchor", "end")
        .with("fill", INK)
        .text(&fitted(&words, TICK_SIZE, Weight::Regular, area.width() * 0.8));
}

fn words(s: &TSquaredAndQ, tracks: &[Track; 2], names: &[String]) -> String {
    let mut words = format!(
        "T squared and Q of {} in row order, {} kept.",
        counted(s.n_rows(), "unit"),
        counted(s.n_components(), "component")
    );
    for track in tracks {
        let beyond = track.beyond();
        let first: Vec<String> =
            beyond.iter().map(|&unit| shortened(&names[unit], 40).into_owned()).collect();
        match beyond.len() {
            0 => words.push_str(&format!(" {}: none beyond its limit.", track.name)),
            n => words.push_str(&format!(
                " {}: {} beyond its limit, {}.",
                track.name,
                counted(n, "unit"),
                listed(&first, 5)
            )),
        }
    }
    words
}
