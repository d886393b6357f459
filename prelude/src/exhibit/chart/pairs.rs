//! Pairs of variables: how each is spread, and how any two go together.

use serde_json::json;

use super::Chart;
use super::card::{Area, Card};
use super::frame::{Axis, Frame, OVERHANG, range};
use super::groups::{Group, Groups};
use super::marks::{MOST_MARKS, Spot, mark_radius, push_dense};
use super::measure::{Weight, fitted};
use super::palette::{CARD_EDGE, INK, INK_SOFT, shade};
use super::picture::{Drawing, Picture, numbers};
use super::settings::{Setting, Settings};
use super::svg::{Svg, tenth};
use crate::error::{Error, Result};
use crate::exhibit::numbers::{counted, fixed, typographic};
use crate::exhibit::text::shortened;
use crate::quantile::{ascending, deviation, mean, quantile};
use crate::table::DataMatrix;

const MOST: usize = 10;
const MARK_BYTES: usize = 11;
const MOST_BYTES: usize = 300_000;
const GAP: f64 = 5.0;
const STEPS: usize = 64;

/// Every pair of a few variables as points, each variable's density on the diagonal, and the
/// correlations above it.
///
/// Densities are kernel estimates with a normal kernel of bandwidth
///
/// ```text
/// h = 0.9 min(s, IQR / 1.34) n^(−1/5)
/// ```
///
/// (B. W. Silverman (1986), "Density Estimation for Statistics and Data Analysis", equation 3.31),
/// with s the standard deviation (divisor n − 1) and IQR the distance of the quartiles; a group's
/// density is scaled by its share of the units. Two to ten variables; choose some with
/// [`select`](DataMatrix::select).
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// use semiaxis::exhibit::pairs;
///
/// assert_eq!(pairs(&x).svg().matches("class=\"density\"").count(), 3);
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn pairs(x: &DataMatrix) -> Chart {
    Chart::new(Pairs { x: x.clone() })
}

/// The units as they were measured.
#[derive(Debug)]
struct Pairs {
    x: DataMatrix,
}

impl Picture for Pairs {
    fn kind(&self) -> &'static str {
        "chart of pairs"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::Groups]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        if self.x.n_rows() < 2 {
            let method = "a chart of pairs";
            return Err(Error::TooFewRows { method, needed: 2, found: self.x.n_rows() });
        }
        if !(2..=MOST).contains(&self.x.n_cols()) {
            return Err(Error::OptionOutOfRange {
                option: "number of variables",
                value: self.x.n_cols() as f64,
                accepted: "2 to 10; choose some with `select`",
            });
        }
        settings.check_units(self.x.n_rows())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let x = &self.x;
        let columns: Vec<Vec<f64>> =
            x.values().column_iter().map(|column| column.iter().copied().collect()).collect();
        let n = columns.len();
        let groups = Groups::new(settings.groups.as_deref(), &vec![(0.0, 0.0); x.n_rows()], None);
        let most = (MOST_BYTES / MARK_BYTES / (n * (n - 1) / 2)).min(MOST_MARKS);
        let every = x.n_rows().div_ceil(most).max(1);
        let correlations: Vec<Vec<f64>> =
            columns.iter().map(|a| columns.iter().map(|b| correlation(a, b)).collect()).collect();
        let words = words(x, &correlations, &groups);
        let mut notes = vec![
            "Diagonal: densities by a normal kernel, bandwidth after Silverman (1986); above it: \
             correlations over all units."
                .to_owned(),
        ];
        if every > 1 {
            notes.push(format!(
                "{} of {} drawn as points, evenly spaced in row order.",
                x.n_rows().div_ceil(every),
                counted(x.n_rows(), "unit")
            ));
        }
        let card = Card {
            width: settings.size_or(760.0, 760.0).0,
            height: settings.size_or(760.0, 760.0).1,
            least_drawing: 60.0 * n as f64,
            title: settings.title_or("Pairs of variables".to_owned()),
            subtitle: format!("{}, {}", counted(x.n_rows(), "unit"), counted(n, "variable")),
            description: words.clone(),
            legend: groups.legend(),
            notes,
            ..Card::default()
        };
        let panels = Panels {
            names: x.variables(),
            columns: &columns,
            correlations: &correlations,
            groups: &groups,
            every,
        };
        let svg = card.draw(|svg, room| panels.draw(svg, room));
        let numbers = json!({
            "variables": x.variables(),
            "values by variable":
                columns.iter().map(|column| numbers(column.iter().copied())).collect::<Vec<_>>(),
            "correlations":
                correlations.iter().map(|row| numbers(row.iter().copied())).collect::<Vec<_>>(),
        });
        Ok(Drawing { svg, words, numbers })
    }
}

/// What all panels share.
struct Panels<'a> {
    names: &'a [String],
    columns: &'a [Vec<f64>],
    correlations: &'a [Vec<f64>],
    groups: &'a Groups,
    every: usize,
}

impl Panels<'_> {
    fn draw(&self, svg: &mut Svg, room: Area) {
        let n = self.columns.len();
        let left = room.left + 40.0;
        let bottom = room.bottom - 22.0;
        let across = (room.right - left - GAP * (n as f64 - 1.0)) / n as f64;
        let down = (bottom - room.top - GAP * (n as f64 - 1.0)) / n as f64;
        for row in 0..n {
            for column in 0..n {
                let x = left + column as f64 * (across + GAP);
                let y = room.top + row as f64 * (down + GAP);
                let area = Area { left: x, top: y, right: x + across, bottom: y + down };
                match row.cmp(&column) {
                    std::cmp::Ordering::Equal => self.draw_density(svg, area, row),
                    std::cmp::Ordering::Less => self.draw_correlation(svg, area, row, column),
                    std::cmp::Ordering::Greater => self.draw_points(svg, area, row, column),
                }
            }
        }
    }

    fn draw_points(&self, svg: &mut Svg, area: Area, row: usize, column: usize) {
        push_panel(svg, area);
        let (x, y) = (&self.columns[column], &self.columns[row]);
        let axis = |values: &[f64]| {
            let (low, high) = range(values.iter().copied());
            Axis::Numbers(low, high)
        };
        let frame = Frame::within(area, area.left, axis(x), axis(y));
        frame.draw_rules(svg);
        let radius = mark_radius(x.len()) * 0.62;
        for (place, group) in self.groups.list().iter().enumerate() {
            let spot = |unit: usize| {
                let (x, y) = frame.place(x[unit], y[unit]);
                Spot { x, y, unit }
            };
            let kept = group.members.iter().copied().filter(|unit| unit % self.every == 0);
            let spots: Vec<Spot> = kept.map(spot).collect();
            if !spots.is_empty() {
                let stem = format!("mark{place}of{row}x{column}");
                push_dense(svg, group.cue, &spots, (radius, ".7"), &stem);
            }
        }
        let texts = svg.element("g").with("class", "axes").at("font-size", 11.0);
        texts.with("fill", INK_SOFT).around(|svg| {
            if column == 0 {
                frame.text_ticks_left(svg);
            }
            if row + 1 == self.columns.len() {
                frame.text_ticks_below(svg, OVERHANG);
            }
        });
    }

    fn draw_density(&self, svg: &mut Svg, area: Area, variable: usize) {
        push_panel(svg, area);
        let values = &self.columns[variable];
        let (low, high) = range(values.iter().copied());
        let densities: Vec<(&Group, Vec<f64>)> = self
            .groups
            .list()
            .iter()
            .filter_map(|group| {
                let members: Vec<f64> = group.members.iter().map(|&unit| values[unit]).collect();
                let share = members.len() as f64 / values.len() as f64;
                let density = density(&members, low, high)?;
                Some((group, density.into_iter().map(|d| d * share).collect()))
            })
            .collect();
        let highest = densities.iter().flat_map(|(_, d)| d).copied().fold(0.0, f64::max);
        let top = Area { top: area.top + 20.0, ..area };
        let axes = (Axis::Numbers(low, high), Axis::Numbers(0.0, highest.max(1e-300) * 1.05));
        let frame = Frame::within(top, area.left, axes.0, axes.1);
        for (group, density) in &densities {
            let mut path = String::new();
            for (step, value) in density.iter().enumerate() {
                let at = low + (high - low) * step as f64 / (STEPS - 1) as f64;
                let (x, y) = frame.place(at, *value);
                path.push(if step == 0 { 'M' } else { 'L' });
                path.push_str(&format!("{} {}", tenth(x), tenth(y)));
            }
            let who = if group.name.is_empty() { "all units" } else { &group.name };
            let title = format!("density of {}", shortened(who, 40));
            svg.element("path")
                .with("class", "density")
                .with("d", &path)
                .with("fill", group.cue.color)
                .with("fill-opacity", ".1")
                .with("stroke", group.cue.color)
                .with("stroke-width", "1.6")
                .around(|svg| svg.element("title").text(&title));
        }
        svg.element("text")
            .with("class", "name")
            .at("x", area.left + 5.0)
            .at("y", area.top + 14.0)
            .at("font-size", 11.0)
            .with("font-weight", "bold")
            .with("fill", INK)
            .text(&fitted(&self.names[variable], 11.0, Weight::Bold, area.width() - 10.0));
        let texts = svg.element("g").with("class", "axes").at("font-size", 11.0);
        texts.with("fill", INK_SOFT).around(|svg| {
            if variable + 1 == self.columns.len() {
                frame.text_ticks_below(svg, OVERHANG);
            }
        });
    }

    fn draw_correlation(&self, svg: &mut Svg, area: Area, row: usize, column: usize) {
        let value = self.correlations[row][column];
        let (x, y) = ((area.left + area.right) / 2.0, (area.top + area.bottom) / 2.0);
        let (ground, ink, text) = match value.is_nan() {
            true => (shade(0.0).0, INK, "–".to_owned()),
            false => (shade(value).0, shade(value).1, typographic(&fixed(value, 2))),
        };
        let side = area.width().min(area.height()) * 0.5;
        svg.element("rect")
            .with("class", "correlation")
            .at("x", x - side)
            .at("y", y - side / 2.0)
            .at("width", side * 2.0)
            .at("height", side)
            .at("rx", 4.0)
            .with("fill", &ground)
            .done();
        svg.element("text")
            .at("x", x)
            .at("y", y + 5.0)
            .at("font-size", 14.0)
            .with("text-anchor", "middle")
            .with("fill", ink)
            .text(&text);
    }
}

fn push_panel(svg: &mut Svg, area: Area) {
    svg.element("rect")
        .with("class", "panel")
        .at("x", area.left)
        .at("y", area.top)
        .at("width", area.width())
        .at("height", area.height())
        .with("fill", "none")
        .with("stroke", CARD_EDGE)
        .done();
}

/// A kernel density at evenly spaced places from low to high; none for values that do not vary.
fn density(values: &[f64], low: f64, high: f64) -> Option<Vec<f64>> {
    let sorted = ascending(values.to_vec());
    let spread = (quantile(&sorted, 0.75) - quantile(&sorted, 0.25)) / 1.34;
    let s = deviation(values);
    let narrow = if spread > 0.0 { s.min(spread) } else { s };
    let n = values.len() as f64;
    let bandwidth = 0.9 * narrow * n.powf(-0.2);
    if !(bandwidth > 0.0 && bandwidth.is_finite()) {
        return None;
    }
    let norm = 1.0 / (n * bandwidth * std::f64::consts::TAU.sqrt());
    let at = |step: usize| low + (high - low) * step as f64 / (STEPS - 1) as f64;
    Some(
        (0..STEPS)
            .map(|step| {
                let kernel = |value: &f64| (-0.5 * ((at(step) - value) / bandwidth).powi(2)).exp();
                norm * sorted.iter().map(kernel).sum::<f64>()
            })
            .collect(),
    )
}

/// The correlation of two lists; NaN where one does not vary.
fn correlation(a: &[f64], b: &[f64]) -> f64 {
    let (mean_a, mean_b) = (mean(a), mean(b));
    let (mut ab, mut aa, mut bb) = (0.0, 0.0, 0.0);
    for (x, y) in a.iter().zip(b) {
        let (x, y) = (x - mean_a, y - mean_b);
        ab += x * y;
        aa += x * x;
        bb += y * y;
    }
    (ab / (aa.sqrt() * bb.sqrt())).clamp(-1.0, 1.0)
}

fn words(x: &DataMatrix, correlations: &[Vec<f64>], groups: &Groups) -> String {
    let mut pairs: Vec<(usize, usize)> =
        (1..x.n_cols()).flat_map(|row| (0..row).map(move |column| (row, column))).collect();
    let size = |pair: &(usize, usize)| correlations[pair.0][pair.1].abs();
    pairs.sort_by(|a, b| size(b).total_cmp(&size(a)).then(a.cmp(b)));
    let strongest: Vec<String> = pairs
        .into_iter()
        .take(3)
        .map(|(row, column)| {
            format!(
                "{} with {} ({})",
                shortened(&x.variables()[row], 40),
                shortened(&x.variables()[column], 40),
                fixed(correlations[row][column], 2)
            )
        })
        .collect();
    format!(
        "Pairs of {} over {}. Strongest correlations: {}.{}",
        counted(x.n_cols(), "variable"),
        counted(x.n_rows(), "unit"),
        super::units::listed(&strongest, 3),
        match groups.are_set() {
            true => format!(" {}.", counted(groups.list().len(), "group")),
            false => String::new(),
        }
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_density_holds_the_whole_of_its_values() {
        // A wide range around the values, so that the area under the curve is one.
        let values: Vec<f64> = (0..50).map(|i| (f64::from(i) * 0.7).sin()).collect();
        let density = density(&values, -4.0, 4.0).unwrap();
        let area: f64 = density.iter().sum::<f64>() * 8.0 / (STEPS - 1) as f64;
        assert!((area - 1.0).abs() < 1e-6, "{area}");
    }

    #[test]
    fn what_does_not_vary_has_no_density() {
        assert!(density(&[3.0, 3.0, 3.0], 0.0, 6.0).is_none());
        assert!(density(&[1.0], 0.0, 6.0).is_none());
    }

    #[test]
    fn correlations_are_those_of_the_definition() {
        assert!((correlation(&[1.0, 2.0, 3.0], &[2.0, 4.0, 6.0]) - 1.0).abs() < 1e-15);
        assert!((correlation(&[1.0, 2.0, 3.0], &[1.0, 3.0, 2.0]) - 0.5).abs() < 1e-15);
        assert!(correlation(&[1.0, 1.0], &[1.0, 2.0]).is_nan());
    }
}
