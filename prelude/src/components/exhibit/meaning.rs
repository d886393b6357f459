//! Communalities and supplementary elements as tables.

use super::{LOADINGS, MOST_COMPONENTS, VARIANCES};
use crate::components::{Communalities, SupplementaryColumns, SupplementaryGroups};
use crate::exhibit::{Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, stacked};
use crate::table::NamedMatrix;

/// The share of each variable that components carry.
impl Exhibit for Communalities {
    fn exhibit(&self) -> Bundle {
        let least = self
            .variables()
            .iter()
            .zip(self.values().iter())
            .filter(|(_, value)| !value.is_nan())
            .min_by(|a, b| a.1.total_cmp(b.1));
        let of = counted(self.n_components(), "component");
        let caption = match least {
            Some((variable, value)) => format!(
                "Communalities with {of}: least of {variable}, {}",
                NumberFormat::Percent.format(*value)
            ),
            None => format!("Communalities with {of}"),
        };
        Table::new(caption)
            .column(TableColumn::texts("variable", self.variables()).as_row_heads())
            .column(
                TableColumn::numbers("communality", self.values().iter().copied(), LOADINGS)
                    .shaded_up_to(1.0),
            )
            .column(TableColumn::numbers("left out", self.left_out().iter().copied(), LOADINGS))
            .note(
                "Communality: the share of the variable's variance that the components carry, the \
                 sum of its squared correlations with them; three decimals.",
            )
            .exhibit()
    }
}

/// Correlations of columns that took no part.
impl Exhibit for SupplementaryColumns {
    fn exhibit(&self) -> Bundle {
        let correlations = self.correlations();
        let table = by_component(
            Table::new("Supplementary columns: correlations with the components")
                .column(TableColumn::texts("column", correlations.row_names()).as_row_heads()),
            correlations,
            LOADINGS,
            Some(1.0),
        );
        table
            .note(format!(
                "{}; the columns took no part in the analysis. Three decimals.",
                counted(self.n_rows(), "row")
            ))
            .exhibit()
    }
}

/// Mean scores of groups, and how far they are from what chance would give.
impl Exhibit for SupplementaryGroups {
    fn exhibit(&self) -> Bundle {
        let heads = |table: Table| {
            table
                .column(TableColumn::texts("group", self.names()).as_row_heads())
                .column(TableColumn::counts("rows", self.counts().iter().copied()))
        };
        let means = heads(Table::new("Supplementary groups: mean scores"));
        let means =
            by_component(means, self.means(), VARIANCES, None).note(if self.is_weighted() {
                "Weighted means, to 4 significant digits; the groups took no part in the analysis."
            } else {
                "To 4 significant digits; the groups took no part in the analysis."
            });
        let errors = heads(Table::new("Standard errors of the mean scores"));
        let errors = by_component(errors, self.standard_errors(), VARIANCES, None)
            .note("From the spread within each group; a group of one has none.");
        let tests = heads(Table::new("Test values of the mean scores"));
        let tests = by_component(tests, self.test_values(), NumberFormat::Decimals(2), Some(4.0))
            .note(
                "Distance from zero in standard deviations of a mean of as many rows drawn at random \
                 from all (Lebart, Morineau and Piron 1995). Beyond ±1.96 once in twenty for groups \
                 that have nothing to do with the component: a guide where many are looked at.",
            );
        stacked(&[&means, &errors, &tests])
    }
}

/// Adds a column for each of the leading components.
fn by_component(
    mut table: Table,
    values: &NamedMatrix,
    format: NumberFormat,
    shaded_up_to: Option<f64>,
) -> Table {
    for (k, column) in values.values().column_iter().take(MOST_COMPONENTS).enumerate() {
        let mut shown = TableColumn::numbers((k + 1).to_string(), column.iter().copied(), format);
        if let Some(full) = shaded_up_to {
            shown = shown.shaded_up_to(full);
        }
        table = table.column(shown);
    }
    match values.n_cols().saturating_sub(MOST_COMPONENTS) {
        0 => table,
        more => table.column(TableColumn::left_out(more, values.n_rows())),
    }
}
