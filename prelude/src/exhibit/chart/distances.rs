//! The distance plot: how far out a unit lies on the pattern of the others, and how far off it.

use serde_json::json;

use super::Chart;
use super::card::Card;
use super::cloud::draw_cloud;
use super::frame::{Axis, Frame};
use super::groups::{Group, Groups};
use super::labels::{LabelSpace, Wish, push_labels};
use super::marks::mark_radius;
use super::palette::INK;
use super::picture::{Drawing, Picture, number, numbers};
use super::scores::{LABEL_MOST, LABEL_SIZE, draw_settled};
use super::settings::{Setting, Settings};
use super::svg::{Svg, tenth};
use super::units::listed;
use crate::distances::{Distances, Standing};
use crate::error::Result;
use crate::exhibit::numbers::{counted, significant, stored, typographic};
use crate::exhibit::text::shortened;

const MOST_NAMED: usize = 20;

/// Score distance against orthogonal distance of each unit, with the cut-offs of both.
///
/// Units beyond a cut-off are named, the most unusual first. To the right lie units that are far
/// out on the pattern of the others, above those that are off it.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::distances::distances;
/// use semiaxis::exhibit::distance_plot;
///
/// let svg = distance_plot(&distances(&pca, 1)?).svg();
/// assert!(svg.contains("Statistical limits are not safety limits"));
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn distance_plot(distances: &Distances) -> Chart {
    Chart::new(Plot { distances: distances.clone() })
}

/// The distances of some rows.
#[derive(Debug)]
struct Plot {
    distances: Distances,
}

impl Picture for Plot {
    fn kind(&self) -> &'static str {
        "distance plot"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::Groups, Setting::Labels]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        settings.check_drawn_units(self.distances.n_rows())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let d = &self.distances;
        let n = d.n_rows();
        let names = settings.names_or(d.labels());
        let (across, up) = (d.score_distances(), d.orthogonal_distances());
        let groups = Groups::new(settings.groups.as_deref(), &vec![(0.0, 0.0); n], None);
        let limits = (Some(d.score_limit()), d.orthogonal_limit());
        let order = self.unusual();
        let words = self.words(&order, &names);
        let hover = |unit: usize, group: &Group| {
            let mut text = shortened(&names[unit], 60).into_owned();
            if groups.are_set() {
                text.push_str(&format!(" · {}", shortened(&group.name, 30)));
            }
            text.push_str(&format!(
                " · score distance {} · orthogonal distance {} · {}",
                typographic(&significant(across[unit], 3)),
                typographic(&significant(up[unit], 3)),
                d.standings()[unit]
            ));
            text
        };
        let card = |notes: Vec<String>| Card {
            width: settings.size_or(720.0, 560.0).0,
            height: settings.size_or(720.0, 560.0).1,
            least_drawing: 240.0,
            title: settings.title_or("Distances of the units".to_owned()),
            subtitle: format!(
                "{}{}, {} kept{}",
                counted(n, "unit"),
                if d.are_new_rows() { " that took no part in the fit" } else { "" },
                counted(d.n_components(), "component"),
                if d.is_robust() { ", robust fit" } else { "" }
            ),
            description: words.clone(),
            legend: groups.legend(),
            notes,
            ..Card::default()
        };
        let svg = draw_settled(card, |svg, room| {
            let (right, top) = (reach(across.max(), limits.0), reach(up.max(), limits.1));
            let frame = Frame::fit(room, Axis::Numbers(0.0, right), Axis::Numbers(0.0, top));
            frame.draw(
                svg,
                "Score distance, on the pattern",
                "Orthogonal distance, off the pattern",
            );
            let place = |unit: usize| frame.place(across[unit], up[unit]);
            push_limits(svg, &frame, limits, d.coverage());
            let mut notes: Vec<String> =
                draw_cloud(svg, &groups, n, place, hover).into_iter().collect();
            let mut space = LabelSpace::new(frame.area);
            let radius = mark_radius(n);
            for (x, y) in (0..n).map(place).filter(|(x, y)| x.is_finite() && y.is_finite()) {
                space.add_mark(x, y, radius);
            }
            if let Some(limit) = limits.0 {
                let x = frame.across(limit);
                space.add_line((x, frame.area.top), (x, frame.area.bottom));
            }
            if let Some(limit) = limits.1 {
                let y = frame.up(limit);
                space.add_line((frame.area.left, y), (frame.area.right, y));
            }
            let wishes: Vec<Wish> = order
                .iter()
                .take(MOST_NAMED)
                .filter(|&&unit| !names[unit].trim().is_empty())
                .map(|&unit| {
                    let (x, y) = place(unit);
                    Wish { x, y, text: names[unit].clone(), clearance: radius, outward: 0.6 }
                })
                .collect();
            let placed: Vec<_> =
                space.place(&wishes, LABEL_SIZE, LABEL_MOST).into_iter().flatten().collect();
            push_labels(svg, &placed, LABEL_SIZE);
            if placed.len() < order.len() {
                notes.push(format!(
                    "{} of {} beyond a cut-off named, the most unusual first.",
                    placed.len(),
                    counted(order.len(), "unit")
                ));
            }
            notes.push(format!(
                "Cut-offs hold {} % of units that follow the pattern. Statistical limits are not \
                 safety limits.",
                stored(100.0 * d.coverage(), 4)
            ));
            notes
        });
        let numbers = json!({
            "units": names,
            "score distances": numbers(across.iter().copied()),
            "orthogonal distances": numbers(up.iter().copied()),
            "score cut-off": number(d.score_limit()),
            "orthogonal cut-off": d.orthogonal_limit().map(number),
        });
        Ok(Drawing { svg, words, numbers })
    }
}

impl Plot {
    /// The rows beyond a cut-off, the farthest beyond first.
    fn unusual(&self) -> Vec<usize> {
        let d = &self.distances;
        let beyond = |unit: usize| {
            let far = d.score_distances()[unit] / d.score_limit();
            let off =
                d.orthogonal_limit().map_or(0.0, |limit| d.orthogonal_distances()[unit] / limit);
            far.max(off)
        };
        let mut order: Vec<usize> =
            (0..d.n_rows()).filter(|&unit| d.standings()[unit] != Standing::Within).collect();
        order.sort_by(|&a, &b| beyond(b).total_cmp(&beyond(a)).then(a.cmp(&b)));
        order
    }

    fn words(&self, order: &[usize], names: &[String]) -> String {
        let d = &self.distances;
        let counts: Vec<String> = Standing::ALL
            .iter()
            .filter(|standing| d.count(**standing) > 0)
            .map(|standing| format!("{} {standing}", d.count(*standing)))
            .collect();
        let mut words = format!(
            "Distances of {} with {} kept: {}.",
            counted(d.n_rows(), "unit"),
            counted(d.n_components(), "component"),
            listed(&counts, 4)
        );
        if !order.is_empty() {
            let first: Vec<String> =
                order.iter().map(|&unit| shortened(&names[unit], 40).into_owned()).collect();
            words.push_str(&format!(" Most unusual: {}.", listed(&first, 5)));
        }
        words
    }
}

/// The end of an axis that holds the largest value and the limit, with some air.
fn reach(largest: f64, limit: Option<f64>) -> f64 {
    let reach = largest.max(limit.unwrap_or(0.0));
    if reach > 0.0 && reach.is_finite() { reach * 1.08 } else { 1.0 }
}

fn push_limits(
    svg: &mut Svg,
    frame: &Frame,
    (across, up): (Option<f64>, Option<f64>),
    coverage: f64,
) {
    let area = frame.area;
    let mut push = |path: String, title: String| {
        svg.element("path")
            .with("class", "limit")
            .with("d", &path)
            .with("fill", "none")
            .with("stroke", INK)
            .with("stroke-width", "1.3")
            .with("stroke-dasharray", "7 4")
            .around(|svg| svg.element("title").text(&title));
    };
    let share = stored(100.0 * coverage, 4);
    if let Some(limit) = across {
        let x = tenth(frame.across(limit));
        let path = format!("M{x} {}V{}", tenth(area.top), tenth(area.bottom));
        push(path, format!("cut-off of score distances, {share} %: {}", significant(limit, 3)));
    }
    if let Some(limit) = up {
        let y = tenth(frame.up(limit));
        let path = format!("M{} {y}H{}", tenth(area.left), tenth(area.right));
        push(
            path,
            format!("cut-off of orthogonal distances, {share} %: {}", significant(limit, 3)),
        );
    }
}
