//! Rotated loadings as tables.

use super::options::Rotation;
use super::result::Rotated;
use crate::exhibit::{
    Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, significant, stacked, stored,
};

const LOADINGS: NumberFormat = NumberFormat::Decimals(3);
const VARIANCES: NumberFormat = NumberFormat::Significant(4);

/// Pattern loadings with communalities, what each component explains, and factor correlations.
impl Exhibit for Rotated {
    fn exhibit(&self) -> Bundle {
        let (loadings, variances) = (loadings(self), variances(self));
        if self.rotation.is_oblique() {
            stacked(&[&loadings, &variances, &correlations(self)])
        } else {
            stacked(&[&loadings, &variances])
        }
    }
}

fn loadings(rotated: &Rotated) -> Table {
    let order = shown_order(rotated);
    let names = rotated.loadings().row_names();
    let communalities = rotated.communalities();
    let together = rotated.proportions().sum();
    let k = rotated.loadings().n_cols();
    let mut table = Table::new(format!(
        "{} rotated ({}): together {} of the variance",
        counted(k, "component"),
        rotated.rotation,
        NumberFormat::Percent.format(together)
    ))
    .column(
        TableColumn::texts("variable", order.iter().map(|&row| names[row].as_str())).as_row_heads(),
    );
    for (name, column) in
        rotated.loadings().column_names().iter().zip(rotated.loadings().column_iter())
    {
        let cells: Vec<f64> = order.iter().map(|&row| column[row]).collect();
        table = table.column(
            TableColumn::numbers(name.clone(), cells, LOADINGS)
                .dimmed_below(rotated.dimmed_below)
                .shaded_up_to(1.0),
        );
    }
    table = table.column(TableColumn::numbers(
        "communality",
        order.iter().map(|&row| communalities[row]),
        LOADINGS,
    ));
    for note in loading_notes(rotated) {
        table = table.note(note);
    }
    table
}

/// Variables as given, or by home and descending absolute loading there.
fn shown_order(rotated: &Rotated) -> Vec<usize> {
    let mut order: Vec<usize> = (0..rotated.loadings().n_rows()).collect();
    if rotated.sorted {
        let home = rotated.home_idx();
        let size = |row: usize| rotated.loadings()[(row, home[row])].abs();
        order.sort_by(|&a, &b| home[a].cmp(&home[b]).then(size(b).total_cmp(&size(a))));
    }
    order
}

fn loading_notes(rotated: &Rotated) -> Vec<String> {
    let mut notes = Vec::new();
    let kind = if rotated.rotation.is_oblique() {
        "Pattern loadings: the coefficients that make up each variable, not its correlations; those \
         are in `structure()`."
    } else {
        "Loadings: correlations of variables with rotated components, when correlations were \
         rotated."
    };
    notes.push(format!(
        "{kind} In each component the largest in absolute value is positive. Dimmed where the client \
         can: those below {} in absolute value, a choice and not a test{}.",
        stored(rotated.dimmed_below, 4),
        if rotated.sorted { "; variables by the component they load on most" } else { "" }
    ));
    let goal = match rotated.rotation {
        Rotation::Promax { .. } => "the varimax criterion it starts from",
        Rotation::Oblimin { .. } => "criterion (smaller is simpler)",
        _ => "criterion (larger is simpler)",
    };
    notes.push(format!(
        "{}; {goal}: {}, {} for the loadings as given. {} of {} reached it, seed {}.",
        if rotated.options.is_kaiser_normalised() {
            "Kaiser normalisation"
        } else {
            "Without Kaiser normalisation"
        },
        significant(rotated.criterion, 5),
        significant(rotated.start_criterion, 5),
        rotated.n_reached,
        counted(rotated.options.n_starts(), "start"),
        rotated.seed
    ));
    if rotated.n_collapsed > 0 {
        notes.push(format!(
            "In {} two components fell together; a smaller γ keeps them apart.",
            counted(rotated.n_collapsed, "start")
        ));
    }
    notes.push(if rotated.converged() {
        format!("Converged after {}.", counted(rotated.iterations, "iteration"))
    } else {
        format!(
            "NOT CONVERGED after {}: gradient {} above the tolerance {}; allow more iterations.",
            counted(rotated.iterations, "iteration"),
            significant(rotated.gradient, 2),
            stored(rotated.options.chosen_tolerance(), 2)
        )
    });
    notes
}

fn variances(rotated: &Rotated) -> Table {
    let shares = rotated.proportions();
    let mut sum = 0.0;
    let together: Vec<f64> = shares
        .iter()
        .map(|share| {
            sum += share;
            sum
        })
        .collect();
    let names = rotated.loadings().column_names();
    let table = Table::new("What each rotated component explains")
        .column(TableColumn::texts("component", names.iter().map(String::as_str)).as_row_heads())
        .column(TableColumn::numbers("variance", rotated.variances().iter().copied(), VARIANCES))
        .column(TableColumn::numbers("share", shares.iter().copied(), NumberFormat::Percent))
        .column(TableColumn::numbers("together", together, NumberFormat::Percent));
    if rotated.rotation.is_oblique() {
        table.note(
            "Sums of pattern times structure. Oblique components overlap: what they share is divided \
             between them in one of several possible ways.",
        )
    } else {
        table.note(if rotated.variances.iter().all(|variance| (variance - 1.0).abs() < 1e-9) {
            "Sums of squared loadings; a rotation divides their total anew and keeps it."
        } else {
            "Sums of squared loadings, each times its variable's variance; a rotation divides their \
             total anew and keeps it."
        })
    }
}

fn correlations(rotated: &Rotated) -> Table {
    let names = rotated.factor_correlations().column_names();
    let mut table = Table::new("Factor correlations")
        .column(TableColumn::texts("component", names.iter().map(String::as_str)).as_row_heads());
    for (name, column) in names.iter().zip(rotated.factor_correlations().column_iter()) {
        table = table.column(
            TableColumn::numbers(name.clone(), column.iter().copied(), LOADINGS).shaded_up_to(1.0),
        );
    }
    table.note("Correlations of the rotated components with one another, to 3 decimals.")
}
