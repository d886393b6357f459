//! Robust estimates as tables.

use super::components::RobustComponents;
use super::result::RobustScatter;
use crate::distances::{CAUTION, Standing};
use crate::exhibit::{
    Abridged, Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, grouped, significant,
    stacked,
};

const RESULTS: NumberFormat = NumberFormat::Significant(4);
const LOADINGS: NumberFormat = NumberFormat::Decimals(3);
const MOST_LISTED: usize = 20;
const MOST_COMPONENTS: usize = 8;

/// Centre and spread of each variable, and the rows beyond the cut-off.
impl Exhibit for RobustScatter {
    fn exhibit(&self) -> Bundle {
        stacked(&[&centre(self), &far_rows(self)])
    }
}

fn centre(scatter: &RobustScatter) -> Table {
    let data = scatter.data().values();
    let spread = scatter.covariance().values().diagonal().map(f64::sqrt);
    let names = scatter.variables().iter().map(String::as_str);
    let share =
        NumberFormat::Percent.format(scatter.subset_size() as f64 / scatter.n_rows() as f64);
    let mut table = Table::new(format!(
        "Robust centre and spread: {} of {} beyond the cut-off",
        scatter.flagged().len(),
        counted(scatter.n_rows(), "row")
    ))
    .column(TableColumn::texts("variable", names).as_row_heads())
    .column(TableColumn::numbers("robust centre", scatter.centre().iter().copied(), RESULTS))
    .column(TableColumn::numbers("mean", data.row_mean().iter().copied(), RESULTS))
    .column(TableColumn::numbers("robust deviation", spread.iter().copied(), RESULTS))
    .column(TableColumn::numbers(
        "deviation",
        data.column_iter().map(|column| {
            let mean = column.mean();
            let squares: f64 = column.iter().map(|value| (value - mean).powi(2)).sum();
            (squares / (column.len() as f64 - 1.0)).sqrt()
        }),
        RESULTS,
    ))
    .note(format!(
        "Minimum covariance determinant (Rousseeuw and Van Driessen 1999) of {} rows ({share} of \
         {}), then the {} within the cut-off; {} starts, seed {}; logarithm of the determinant {}.",
        grouped(scatter.subset_size()),
        grouped(scatter.n_rows()),
        grouped(scatter.kept().iter().filter(|kept| **kept).count()),
        grouped(scatter.options().n_starts()),
        scatter.seed(),
        significant(scatter.log_determinant(), 6),
    ))
    .note(format!(
        "Covariance multiplied by {} for consistency (Croux and Haesbroeck 1999) and by {} for few \
         rows (Pison, Van Aelst and Willems 2002); divisors are counts − 1; 4 significant digits.",
        significant(scatter.consistency_factor(), 4),
        significant(scatter.small_sample_factor(), 4),
    ));
    if !scatter.converged() {
        table = table.note("The search was still improving when it was cut off.");
    }
    table
}

fn far_rows(scatter: &RobustScatter) -> Table {
    let (distances, limit) = (scatter.distances(), scatter.limit());
    let mut order: Vec<usize> =
        (0..scatter.n_rows()).filter(|&row| distances[row] > limit).collect();
    order.sort_by(|&a, &b| distances[b].total_cmp(&distances[a]).then(a.cmp(&b)));
    let shown = Abridged::of(order.len(), MOST_LISTED, MOST_LISTED, 0);
    let listed: Vec<usize> = shown.indices().map(|place| order[place]).collect();
    let labels = scatter.labels();
    Table::new("Rows beyond the cut-off, the furthest first")
        .with_rows_left_out(shown.head, shown.left_out)
        .column(
            TableColumn::texts("row", listed.iter().map(|&r| labels[r].as_str())).as_row_heads(),
        )
        .column(TableColumn::numbers("distance", listed.iter().map(|&r| distances[r]), RESULTS))
        .note(format!(
            "Cut-off {}: root of the 97.5 % quantile of χ² with {} of freedom. Of rows that follow \
             the model about 2.5 % pass it.",
            significant(limit, 4),
            counted(scatter.n_variables(), "degree"),
        ))
        .note(CAUTION)
}

/// Variances with their shares, loadings, and how the rows stand.
impl Exhibit for RobustComponents {
    fn exhibit(&self) -> Bundle {
        stacked(&[&variances(self), &loadings(self), &standings(self)])
    }
}

fn variances(robust: &RobustComponents) -> Table {
    Table::new("Robust variance of each component")
        .column(TableColumn::counts("component", 1..=robust.n_components()).as_row_heads())
        .column(TableColumn::numbers("variance", robust.variances().iter().copied(), RESULTS))
        .column(TableColumn::numbers(
            "share",
            robust.proportions().iter().copied(),
            NumberFormat::Percent,
        ))
        .column(TableColumn::numbers(
            "together",
            robust.cumulative().iter().copied(),
            NumberFormat::Percent,
        ))
        .note(format!(
            "{} and {}, {} scaling; {} trusted; by way of: {}; seed {}; total variance {}; \
             4 significant digits.",
            counted(robust.n_rows(), "row"),
            counted(robust.n_variables(), "variable"),
            robust.scaling(),
            counted(robust.subset_size(), "row"),
            robust.route(),
            robust.seed(),
            significant(robust.total_variance(), 4),
        ))
}

fn loadings(robust: &RobustComponents) -> Table {
    let values = robust.loadings().values();
    let n_shown = robust.n_components().min(MOST_COMPONENTS);
    let names = robust.variables().iter().map(String::as_str);
    let mut table =
        Table::new("Loadings").column(TableColumn::texts("variable", names).as_row_heads());
    for component in 0..n_shown {
        let column = values.column(component).iter().copied().collect::<Vec<f64>>();
        let heading = (component + 1).to_string();
        table = table.column(TableColumn::numbers(heading, column, LOADINGS).shaded_up_to(1.0));
    }
    if n_shown < robust.n_components() {
        let n_left_out = robust.n_components() - n_shown;
        table = table.column(TableColumn::left_out(n_left_out, robust.n_variables()));
    }
    table.note(
        "Coefficients of unit length, not correlations; in each component the largest in absolute \
         value is positive.",
    )
}

fn standings(robust: &RobustComponents) -> Table {
    let distances = robust.distances();
    let flagged = robust.flagged();
    let shown = Abridged::of(flagged.len(), MOST_LISTED, MOST_LISTED, 0);
    let listed: Vec<&str> = shown.indices().map(|place| flagged[place]).collect();
    let names = if listed.is_empty() { "none".to_owned() } else { listed.join(", ") };
    let more = match shown.left_out {
        0 => String::new(),
        count => format!(" and {} more", grouped(count)),
    };
    Table::new(format!("{} of {} beyond a cut-off", flagged.len(), counted(robust.n_rows(), "row")))
        .column(TableColumn::texts("standing", Standing::ALL.map(|s| s.to_string())).as_row_heads())
        .column(TableColumn::counts("rows", Standing::ALL.map(|s| distances.count(s))))
        .note(format!("Beyond: {names}{more}. Distances and cut-offs: `distances()`."))
        .note(CAUTION)
}
