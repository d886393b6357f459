//! Distances, statistics and contributions as tables: the most unusual rows first.

use super::contributions::{Contributions, largest_first};
use super::hotelling::TSquaredAndQ;
use super::result::{Distances, Standing};
use crate::exhibit::{
    Abridged, Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, significant, stacked,
};

const DISTANCES: NumberFormat = NumberFormat::Significant(4);
const DATA: NumberFormat = NumberFormat::Stored(6);
const MOST_LISTED: usize = 20;
const MOST_VARIABLES: usize = 15;

/// What every table of limits says beneath.
pub(crate) const CAUTION: &str = "Statistical limits are not safety limits: a row within them \
    may be unsafe and a row beyond them sound. Local codes and licensed practice decide.";

/// How many rows stand how, and the rows beyond a cut-off.
impl Exhibit for Distances {
    fn exhibit(&self) -> Bundle {
        stacked(&[&standings(self), &unusual_rows(self)])
    }
}

fn standings(distances: &Distances) -> Table {
    let n_beyond = distances.n_rows() - distances.count(Standing::Within);
    let off = distances.orthogonal_limit().map_or("none".to_owned(), |limit| significant(limit, 4));
    let share = NumberFormat::Percent.format(distances.coverage());
    let counts = Standing::ALL.map(|standing| distances.count(standing));
    Table::new(format!(
        "{} of {} beyond a cut-off, by distances from {}",
        n_beyond,
        rows(distances.n_rows(), distances.are_new_rows()),
        components(distances.n_components(), distances.is_robust())
    ))
    .column(TableColumn::texts("standing", Standing::ALL.map(|s| s.to_string())).as_row_heads())
    .column(TableColumn::counts("rows", counts))
    .note(format!(
        "Cut-offs at coverage {share}: score distance {} (root of χ² with {}), orthogonal distance \
         {off} (Wilson and Hilferty's power, robust centre and spread of the fitted rows; Hubert, \
         Rousseeuw and Vanden Branden 2005). Of rows that follow the model about {} pass each \
         cut-off.",
        significant(distances.score_limit(), 4),
        counted(distances.n_components(), "degree") + " of freedom",
        NumberFormat::Percent.format(1.0 - distances.coverage()),
    ))
}

fn unusual_rows(distances: &Distances) -> Table {
    // In order of the larger of the two distances, each in units of its cut-off.
    let size = |row: usize| {
        let off = distances.orthogonal_limit();
        let off = off.map_or(0.0, |limit| distances.orthogonal_distances()[row] / limit);
        off.max(distances.score_distances()[row] / distances.score_limit())
    };
    let beyond: Vec<usize> = (0..distances.n_rows())
        .filter(|&row| distances.standings()[row] != Standing::Within)
        .collect();
    let sizes: Vec<f64> = beyond.iter().map(|&row| size(row)).collect();
    let order: Vec<usize> = largest_first(&sizes).into_iter().map(|place| beyond[place]).collect();
    let shown = Abridged::of(order.len(), MOST_LISTED, MOST_LISTED, 0);
    let listed: Vec<usize> = shown.indices().map(|place| order[place]).collect();
    let labels = distances.labels();
    Table::new("Rows beyond a cut-off, the furthest first")
        .with_rows_left_out(shown.head, shown.left_out)
        .column(
            TableColumn::texts("row", listed.iter().map(|&r| labels[r].as_str())).as_row_heads(),
        )
        .column(TableColumn::numbers(
            "score distance",
            listed.iter().map(|&row| distances.score_distances()[row]),
            DISTANCES,
        ))
        .column(TableColumn::numbers(
            "orthogonal distance",
            listed.iter().map(|&row| distances.orthogonal_distances()[row]),
            DISTANCES,
        ))
        .column(TableColumn::texts(
            "standing",
            listed.iter().map(|&row| distances.standings()[row].to_string()),
        ))
        .note(
            "Distances to 4 significant digits, in scaled units; order by the larger of the two \
               in units of its cut-off.",
        )
        .note(CAUTION)
}

/// The limits by every rule, and the rows beyond one.
impl Exhibit for TSquaredAndQ {
    fn exhibit(&self) -> Bundle {
        stacked(&[&limits(self), &rows_beyond(self)])
    }
}

fn limits(found: &TSquaredAndQ) -> Table {
    let mut names = vec![format!("T², {}", found.t_squared_rule())];
    let mut values = vec![found.t_squared_limit()];
    let mut remarks = vec![match found.t_squared_limit() {
        Some(_) => counted(found.beyond_t_squared().len(), "row") + " beyond",
        None => "no degrees of freedom are left".to_owned(),
    }];
    for limit in found.q_limits() {
        names.push(format!("Q, {}", limit.rule()));
        values.push(limit.value());
        remarks.push(match (limit.value(), limit.why_not()) {
            (Some(value), _) => {
                let n_beyond = found.q().iter().filter(|q| **q > value).count();
                counted(n_beyond, "row") + " beyond"
            }
            (None, why) => format!("does not apply: {}", why.unwrap_or_default()),
        });
    }
    let judged = match found.q_rule() {
        Some(rule) => format!("Rows are judged on Q by the rule of {rule}."),
        None => "No component is left out, so that Q is zero and has no limit.".to_owned(),
    };
    Table::new(format!(
        "{}: {} beyond the limit on T², {} beyond that on Q, with {}",
        rows(found.n_rows(), found.are_new_rows()),
        found.beyond_t_squared().len(),
        found.beyond_q().len(),
        components(found.n_components(), false)
    ))
    .column(TableColumn::texts("limit", names).as_row_heads())
    .column(TableColumn::numbers_where("value", values, DISTANCES))
    .column(TableColumn::texts("rows", remarks))
    .note(format!(
        "Coverage {}; analysis of {}, divisor n − 1. {judged}",
        NumberFormat::Percent.format(found.coverage()),
        counted(found.n_fitted_rows(), "row"),
    ))
    .note(
        "T²: Tracy, Young and Mason 1992. Q: Jackson and Mudholkar 1979; Box 1954; Wold and \
         Sjöström 1977 (F ratio); Nomikos and MacGregor 1995 (matched moments). All take rows as \
         normal and directions as known.",
    )
}

fn rows_beyond(found: &TSquaredAndQ) -> Table {
    let over = |values: &nalgebra::DVector<f64>, limit: Option<f64>, row: usize| {
        limit.map_or(0.0, |limit| values[row] / limit)
    };
    let t_over = |row| over(found.t_squared(), found.t_squared_limit(), row);
    let q_over = |row| over(found.q(), found.q_limit(), row);
    let sizes: Vec<f64> = (0..found.n_rows()).map(|row| t_over(row).max(q_over(row))).collect();
    let order: Vec<usize> =
        largest_first(&sizes).into_iter().take_while(|&row| sizes[row] > 1.0).collect();
    let shown = Abridged::of(order.len(), MOST_LISTED, MOST_LISTED, 0);
    let listed: Vec<usize> = shown.indices().map(|place| order[place]).collect();
    let beyond = |row: usize| match (t_over(row) > 1.0, q_over(row) > 1.0) {
        (true, true) => "T² and Q",
        (true, false) => "T²",
        _ => "Q",
    };
    let labels = found.labels();
    Table::new("Rows beyond a limit, the furthest first")
        .with_rows_left_out(shown.head, shown.left_out)
        .column(
            TableColumn::texts("row", listed.iter().map(|&r| labels[r].as_str())).as_row_heads(),
        )
        .column(TableColumn::numbers("T²", listed.iter().map(|&r| found.t_squared()[r]), DISTANCES))
        .column(TableColumn::numbers("Q", listed.iter().map(|&r| found.q()[r]), DISTANCES))
        .column(TableColumn::texts("beyond", listed.iter().map(|&row| beyond(row))))
        .note("To 4 significant digits; order by the larger of the two in units of its limit.")
        .note(CAUTION)
}

/// Contributions to both statistics, the biggest first.
impl Exhibit for Contributions {
    fn exhibit(&self) -> Bundle {
        let t_squared = ("T²", self.to_t_squared().as_slice(), self.t_squared());
        let q = ("Q", self.to_q().as_slice(), self.q());
        let (t_squared, q) = (contributions(self, t_squared), contributions(self, q));
        let q = q
            .note(
                "Complete decompositions: none is negative, and they sum to the statistic. A large \
                 one shows where to look first, not which variable is at fault.",
            )
            .note(CAUTION);
        stacked(&[&t_squared, &q])
    }
}

fn contributions(found: &Contributions, (name, parts, whole): (&str, &[f64], f64)) -> Table {
    let order = largest_first(parts);
    let shown = Abridged::of(order.len(), MOST_VARIABLES, MOST_VARIABLES, 0);
    let listed: Vec<usize> = shown.indices().map(|place| order[place]).collect();
    let take = |values: &[f64]| listed.iter().map(|&j| values[j]).collect::<Vec<f64>>();
    let names = listed.iter().map(|&j| found.variables()[j].as_str());
    let shares = take(parts).into_iter().map(|part| if whole > 0.0 { part / whole } else { 0.0 });
    Table::new(format!(
        "Contributions to {name} = {} of row {}, {}",
        significant(whole, 4),
        found.label(),
        components(found.n_components(), false)
    ))
    .with_rows_left_out(shown.head, shown.left_out)
    .column(TableColumn::texts("variable", names).as_row_heads())
    .column(TableColumn::numbers("value", take(found.values().as_slice()), DATA))
    .column(TableColumn::numbers("deviation", take(found.deviations().as_slice()), DISTANCES))
    .column(TableColumn::numbers("left over", take(found.residuals().as_slice()), DISTANCES))
    .column(TableColumn::numbers("contribution", take(parts), DISTANCES))
    .column(TableColumn::numbers("share", shares, NumberFormat::Percent))
    .note(
        "Deviation: from the centre, scaled as the analysis scales it. Left over: what the kept \
         components leave of it.",
    )
}

fn rows(count: usize, new: bool) -> String {
    counted(count, if new { "new row" } else { "row" })
}

fn components(count: usize, robust: bool) -> String {
    counted(count, if robust { "robust component" } else { "component" })
}
