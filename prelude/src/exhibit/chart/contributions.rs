//! Contributions of one unit: which variables make it stand out.

use serde_json::json;

use super::Chart;
use super::card::{Area, Card};
use super::frame::{Axis, Frame, TICK_SIZE};
use super::measure::{Weight, fitted};
use super::palette::{CARD, INK_SOFT, NEGATIVE, POSITIVE};
use super::picture::{Drawing, Picture, numbers};
use super::row_names::RowNames;
use super::settings::{Setting, Settings};
use super::svg::Svg;
use crate::distances::Contributions;
use crate::error::Result;
use crate::exhibit::numbers::{counted, fixed, percent, significant, typographic};
use crate::exhibit::text::shortened;

const MOST_BARS: usize = 30;
const GAP: f64 = 22.0;

/// What each variable contributes to the T² and the Q of one unit, the largest first.
///
/// Both panels add up to the statistic. Bars are dark where the unit lies above the centre (in Q:
/// above what the components expect) and ochre where it lies below. Beyond 30 variables the largest
/// are drawn, and the chart says so.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::distances::t_squared_and_q;
/// use semiaxis::exhibit::contribution_plot;
///
/// let of_one = t_squared_and_q(&pca, 1)?.contributions("3")?;
/// // A bar for each of three variables in each of two panels.
/// assert_eq!(contribution_plot(&of_one).svg().matches("class=\"bar\"").count(), 6);
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn contribution_plot(contributions: &Contributions) -> Chart {
    Chart::new(Plot { of_one: contributions.clone() })
}

/// The contributions to one unit's statistics.
#[derive(Debug)]
struct Plot {
    of_one: Contributions,
}

/// One statistic taken apart.
struct Panel<'a> {
    title: String,
    parts: &'a [f64],
    /// Whose sign says to which side the unit lies.
    sides: &'a [f64],
}

impl Picture for Plot {
    fn kind(&self) -> &'static str {
        "chart of contributions"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::Labels]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        settings.check_variables(self.of_one.variables().len())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let c = &self.of_one;
        let names = settings.names_or(c.variables());
        let share = |variable: usize| {
            let of = |part: f64, whole: f64| if whole > 0.0 { part / whole } else { 0.0 };
            of(c.to_t_squared()[variable], c.t_squared()).max(of(c.to_q()[variable], c.q()))
        };
        let mut order: Vec<usize> = (0..names.len()).collect();
        order.sort_by(|&a, &b| share(b).total_cmp(&share(a)).then(a.cmp(&b)));
        order.truncate(MOST_BARS);
        let unit = shortened(c.label(), 60).into_owned();
        let panels = [
            Panel {
                title: format!("to T² = {}", significant(c.t_squared(), 3)),
                parts: c.to_t_squared().as_slice(),
                sides: c.deviations().as_slice(),
            },
            Panel {
                title: format!("to Q = {}", significant(c.q(), 3)),
                parts: c.to_q().as_slice(),
                sides: c.residuals().as_slice(),
            },
        ];
        let words = self.words(&names);
        let mut notes = vec![
            "Contributions add up to the statistic. Dark: above the centre, or above what the \
             components expect; ochre: below. A large one shows where to look first, not what is \
             at fault."
                .to_owned(),
        ];
        if order.len() < names.len() {
            notes.push(format!(
                "The {} largest of {} are drawn.",
                order.len(),
                counted(names.len(), "variable")
            ));
        }
        let usual = 190.0 + 21.0 * order.len() as f64;
        let card = Card {
            width: settings.size_or(720.0, usual).0,
            height: settings.size_or(720.0, usual).1,
            least_drawing: 60.0 + 11.0 * order.len() as f64,
            title: settings.title_or(format!("What makes {unit} stand out")),
            subtitle: format!(
                "{}, {} kept",
                counted(names.len(), "variable"),
                counted(c.n_components(), "component")
            ),
            description: words.clone(),
            notes,
            ..Card::default()
        };
        let svg = card.draw(|svg, room| draw_panels(svg, room, &panels, &names, &order));
        let numbers = json!({
            "unit": c.label(),
            "variables": names,
            "to t squared": numbers(c.to_t_squared().iter().copied()),
            "to q": numbers(c.to_q().iter().copied()),
        });
        Ok(Drawing { svg, words, numbers })
    }
}

impl Plot {
    fn words(&self, names: &[String]) -> String {
        let c = &self.of_one;
        let largest = |parts: &[f64], whole: f64| {
            let mut order: Vec<usize> = (0..parts.len()).collect();
            order.sort_by(|&a, &b| parts[b].total_cmp(&parts[a]).then(a.cmp(&b)));
            let top: Vec<String> = order
                .into_iter()
                .take(3)
                .filter(|_| whole > 0.0)
                .map(|v| format!("{} ({})", shortened(&names[v], 40), percent(parts[v] / whole)))
                .collect();
            top.join(", ")
        };
        format!(
            "Contributions to {}: T squared {}, most from {}; Q {}, most from {}.",
            shortened(c.label(), 60),
            significant(c.t_squared(), 3),
            largest(c.to_t_squared().as_slice(), c.t_squared()),
            significant(c.q(), 3),
            largest(c.to_q().as_slice(), c.q())
        )
    }
}

fn draw_panels(svg: &mut Svg, room: Area, panels: &[Panel; 2], names: &[String], order: &[usize]) {
    let shown = || order.iter().map(|&variable| names[variable].as_str());
    let row_names = RowNames::fit(room, shown(), 0.0);
    let names_room = row_names.room;
    let (top, bottom) = (room.top + 22.0, room.bottom - 22.0);
    let row = (bottom - top) / order.len() as f64;
    let y_of = |place: usize| top + (place as f64 + 0.5) * row;
    let thickness = (row * 0.62).min(15.0);
    row_names.draw(svg, shown().enumerate().map(|(place, name)| (name, y_of(place))));
    let panel_width = (room.width() - names_room - GAP) / 2.0 - 6.0;
    for (number, panel) in panels.iter().enumerate() {
        let left = room.left + names_room + number as f64 * (panel_width + GAP);
        let area = Area { left, right: left + panel_width, top, bottom };
        let largest = panel.parts.iter().copied().fold(0.0, f64::max);
        let reach = if largest > 0.0 { largest * 1.06 } else { 1.0 };
        let frame = Frame::within(area, left, Axis::Numbers(0.0, reach), Axis::Places(order.len()));
        frame.draw_grid(svg);
        svg.element("text")
            .at("x", area.left)
            .at("y", top - 8.0)
            .at("font-size", TICK_SIZE)
            .with("fill", INK_SOFT)
            .text(&fitted(&panel.title, TICK_SIZE, Weight::Regular, panel_width + GAP));
        for (place, &variable) in order.iter().enumerate() {
            let (part, side) = (panel.parts[variable], panel.sides[variable]);
            let title = format!(
                "{} · {} · {} {}",
                shortened(&names[variable], 60),
                typographic(&significant(part, 3)),
                typographic(&fixed(side, 2)),
                if side < 0.0 { "below" } else { "above" }
            );
            svg.element("rect")
                .with("class", "bar")
                .at("x", area.left)
                .at("y", y_of(place) - thickness / 2.0)
                .at("width", (frame.across(part) - area.left).max(0.0))
                .at("height", thickness)
                .with("fill", if side < 0.0 { NEGATIVE } else { POSITIVE })
                .with("stroke", CARD)
                .around(|svg| svg.element("title").text(&title));
        }
    }
}
