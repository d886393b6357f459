//! Shares of variance: how much of each variable the first components hold.

use serde_json::json;

use super::Chart;
use super::card::{Area, Card, LegendEntry, LegendSign};
use super::frame::{Axis, Frame, TICK_SIZE, push_text};
use super::measure::{Weight, width};
use super::palette::{CARD, Cue, FAINT, INK, LAYERS, Shape};
use super::picture::{Drawing, Picture, numbers};
use super::row_names::RowNames;
use super::settings::{Setting, Settings};
use super::source::Source;
use super::svg::Svg;
use crate::components::PrincipalComponents;
use crate::error::{Error, Result};
use crate::exhibit::numbers::{counted, percent};
use crate::exhibit::text::shortened;

const USUAL: usize = 3;
const MOST_COMPONENTS: usize = LAYERS.len();
const MOST_BARS: usize = 48;
const TOTAL: &str = "all variables";

/// How much of each variable's variance the first components hold, a segment for each component.
///
/// The bar on top stands for the total variance. [`first`](Chart::first) says how many components
/// (three unless stated, at most four). A segment is the squared correlation of the variable with
/// the component, and a whole bar the variable's communality. Beyond 48 variables the least and
/// the most described are drawn, and the chart says so.
///
/// ```
/// # use semiaxis::nalgebra::dmatrix;
/// # use semiaxis::components::{Scaling, principal_components};
/// # use semiaxis::table::DataMatrix;
/// # let x = DataMatrix::from_unnamed(dmatrix![
/// #     1.0, 2.0, 0.5; 2.0, 1.0, 0.0; 3.0, 5.0, 1.5; 4.0, 4.0, 1.0; 2.5, 3.0, 2.0])?;
/// # let pca = principal_components(&x, Scaling::Correlation)?;
/// use semiaxis::exhibit::variance_shares;
///
/// // Two components in three variables and in the total.
/// assert_eq!(variance_shares(&pca).first(2).svg().matches("class=\"segment\"").count(), 8);
/// # Ok::<(), semiaxis::Error>(())
/// ```
pub fn variance_shares(pca: &PrincipalComponents) -> Chart {
    let source = Source::without_units(pca);
    let squares = pca.structure().into_values().map(|r| if r.is_nan() { 0.0 } else { r * r });
    Chart::new(Shares { source: Source { loadings: squares, ..source } })
}

/// Squared correlations of variables with components, in place of loadings.
#[derive(Debug)]
struct Shares {
    source: Source,
}

impl Shares {
    fn first(&self, settings: &Settings) -> usize {
        settings.first.unwrap_or(USUAL.min(self.source.n_components()))
    }

    fn held(&self, variable: usize, n: usize) -> f64 {
        self.source.loadings.row(variable).columns(0, n).sum()
    }
}

impl Picture for Shares {
    fn kind(&self) -> &'static str {
        "chart of variance shares"
    }

    fn takes(&self) -> &'static [Setting] {
        &[Setting::First, Setting::Labels]
    }

    fn check(&self, settings: &Settings) -> Result<()> {
        let (asked, available) = (self.first(settings), self.source.n_components());
        if !(1..=available).contains(&asked) {
            return Err(Error::ComponentOutOfRange { asked, available });
        }
        if asked > MOST_COMPONENTS {
            let (value, accepted) = (asked as f64, "1 to 4 components");
            return Err(Error::OptionOutOfRange { option: "first", value, accepted });
        }
        settings.check_variables(self.source.variables.len())
    }

    fn draw(&self, settings: &Settings) -> Result<Drawing> {
        let source = &self.source;
        let n = self.first(settings);
        let names = settings.names_or(&source.variables);
        let mut order: Vec<usize> = (0..names.len()).collect();
        order.sort_by(|&a, &b| self.held(b, n).total_cmp(&self.held(a, n)).then(a.cmp(&b)));
        let all = order.clone();
        if order.len() > MOST_BARS {
            order.drain(MOST_BARS / 2..order.len() - MOST_BARS / 2);
        }
        let total: Vec<f64> = (1..=n).map(|k| source.share(k)).collect();
        let describe = |variable: &usize| {
            format!("{} ({})", shortened(&names[*variable], 40), percent(self.held(*variable, n)))
        };
        let words = format!(
            "The first {} hold {} of the total variance; most of {}, least of {}.",
            counted(n, "component"),
            percent(total.iter().sum()),
            all.first().map(describe).unwrap_or_default(),
            all.last().map(describe).unwrap_or_default()
        );
        let mut notes = vec![
            "Segments are squared correlations of variable and component; a whole bar is the \
                  variable's communality. Variables in the order of their bars."
                .to_owned(),
        ];
        if order.len() < all.len() {
            notes.push(format!(
                "The {} most and the {} least described of {} are drawn.",
                MOST_BARS / 2,
                MOST_BARS / 2,
                counted(all.len(), "variable")
            ));
        }
        let usual = 200.0 + 21.0 * (order.len() + 1) as f64;
        let card = Card {
            width: settings.size_or(720.0, usual).0,
            height: settings.size_or(720.0, usual).1,
            least_drawing: 60.0 + 11.0 * (order.len() + 1) as f64,
            title: settings.title_or(format!(
                "Share of each variable's variance in the first {}",
                counted(n, "component")
            )),
            subtitle: format!(
                "{} {}, {}",
                counted(names.len(), "variable"),
                source.scaling_words(),
                counted(source.n_rows, "unit")
            ),
            description: words.clone(),
            legend: (0..n)
                .map(|k| LegendEntry {
                    sign: LegendSign::Mark(Cue { color: LAYERS[k], shape: Shape::Square }),
                    text: format!("component {}", k + 1),
                })
                .collect(),
            notes,
            ..Card::default()
        };
        let svg = card.draw(|svg, room| self.draw_bars(svg, room, (&names, &order), &total));
        let numbers = json!({
            "variables": names,
            "total by component": numbers(total.iter().copied()),
            "shares by component": (0..n)
                .map(|k| numbers(source.loadings.column(k).iter().copied()))
                .collect::<Vec<_>>(),
        });
        Ok(Drawing { svg, words, numbers })
    }
}

impl Shares {
    fn draw_bars(
        &self,
        svg: &mut Svg,
        room: Area,
        (names, order): (&[String], &[usize]),
        total: &[f64],
    ) {
        let least = width(TOTAL, TICK_SIZE, Weight::Bold);
        let row_names = RowNames::fit(room, order.iter().map(|&v| names[v].as_str()), least);
        // Room for the text behind a bar that is full.
        let area = Area {
            left: room.left + row_names.room,
            top: room.top,
            right: room.right - 52.0,
            bottom: room.bottom - 22.0,
        };
        let frame = Frame::within(area, room.left, Axis::Numbers(0.0, 100.0), Axis::Places(1));
        frame.draw_grid(svg);
        push_percent(svg, area, room);
        let n_bars = order.len() + 1;
        let row = area.height() / (n_bars as f64 + 0.6);
        let thickness = (row * 0.66).min(16.0);
        let labels = svg.element("g").with("class", "labels").at("font-size", TICK_SIZE);
        labels.with("fill", INK).around(|svg| {
            for bar in 0..n_bars {
                // The total stands a little apart.
                let y = area.top + (bar as f64 + if bar == 0 { 0.5 } else { 1.1 }) * row;
                let (name, parts) = match bar.checked_sub(1).map(|place| order[place]) {
                    None => (TOTAL, total.to_vec()),
                    Some(variable) => {
                        let shares = self.source.loadings.row(variable);
                        (
                            names[variable].as_str(),
                            shares.columns(0, total.len()).iter().copied().collect(),
                        )
                    }
                };
                row_names.push(svg, name, y);
                push_segments(svg, &frame, (y, thickness), name, &parts);
                let sum: f64 = parts.iter().sum();
                let at = (frame.across(100.0 * sum) + 6.0, y + 4.0);
                push_text(svg, at, "start", &percent(sum));
            }
        });
    }
}

fn push_segments(
    svg: &mut Svg,
    frame: &Frame,
    (y, thickness): (f64, f64),
    name: &str,
    parts: &[f64],
) {
    let mut from = 0.0;
    for (k, part) in parts.iter().enumerate() {
        let title = format!("{} · component {}: {}", shortened(name, 60), k + 1, percent(*part));
        let (left, right) = (frame.across(100.0 * from), frame.across(100.0 * (from + part)));
        svg.element("rect")
            .with("class", "segment")
            .at("x", left)
            .at("y", y - thickness / 2.0)
            .at("width", (right - left).max(0.0))
            .at("height", thickness)
            .with("fill", LAYERS[k])
            .with("stroke", CARD)
            .around(|svg| svg.element("title").text(&title));
        from += part;
    }
}

fn push_percent(svg: &mut Svg, area: Area, room: Area) {
    svg.element("text")
        .at("x", room.right)
        .at("y", area.bottom + 15.0)
        .at("font-size", TICK_SIZE)
        .with("fill", FAINT)
        .with("text-anchor", "end")
        .text("%");
}
