//! Components and reconstructions as tables, with the conventions they were computed by.

mod meaning;

use super::fitted::FittedComponents;
use super::options::Scaling;
use super::result::{PrincipalComponents, Reconstruction};
use crate::exhibit::{
    Abridged, Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, grouped, significant,
    stacked,
};

const VARIANCES: NumberFormat = NumberFormat::Significant(4);
const LOADINGS: NumberFormat = NumberFormat::Decimals(3);
const MOST_COMPONENTS: usize = 8;
const MOST_GROUPS: usize = 4;

/// Variances with their shares, and the loadings of the leading components.
impl Exhibit for PrincipalComponents {
    fn exhibit(&self) -> Bundle {
        self.fitted().exhibit()
    }
}

/// Variances with their shares, and the loadings of the leading components.
impl Exhibit for FittedComponents {
    fn exhibit(&self) -> Bundle {
        stacked(&[&variances(self), &loadings(self)])
    }
}

/// Rows as a few components describe them.
impl Exhibit for Reconstruction {
    fn exhibit(&self) -> Bundle {
        let labels = self.labels();
        let residuals = self.row_residuals();
        let mut order: Vec<usize> = (0..labels.len()).collect();
        order.sort_by(|&a, &b| residuals[b].total_cmp(&residuals[a]).then(a.cmp(&b)));
        let shown = Abridged::of(order.len(), 12, 12, 0);
        let worst: Vec<usize> = shown.indices().map(|place| order[place]).collect();
        let table = Table::new(format!(
            "Rows least well described by {}",
            counted(self.n_components(), "component")
        ))
        .with_rows_left_out(shown.head, shown.left_out)
        .column(
            TableColumn::texts("row", worst.iter().map(|&row| labels[row].as_str())).as_row_heads(),
        )
        .column(TableColumn::numbers(
            "residual",
            worst.iter().map(|&row| residuals[row]),
            VARIANCES,
        ))
        .note(format!(
            "{} of the variance is kept; sum of squared residuals {}.",
            NumberFormat::Percent.format(self.proportion()),
            significant(self.residual_sum_of_squares(), 4)
        ))
        .note(
            "Residual: sum over variables of squared differences, scaled as the analysis scales \
                 them. A large one is a statement about the table: statistical limits are not \
                 safety limits.",
        );
        table.exhibit()
    }
}

fn variances(pca: &FittedComponents) -> Table {
    let mut table = Table::new("Variance of each component")
        .column(TableColumn::counts("component", 1..=pca.n_components()).as_row_heads())
        .column(TableColumn::numbers("variance", pca.variances().iter().copied(), VARIANCES))
        .column(TableColumn::numbers(
            "share",
            pca.proportions().iter().copied(),
            NumberFormat::Percent,
        ))
        .column(TableColumn::numbers(
            "together",
            pca.cumulative().iter().copied(),
            NumberFormat::Percent,
        ));
    if let Some(approximation) = pca.approximation() {
        let residuals = approximation.residuals().iter().copied();
        table = table.column(TableColumn::numbers("residual", residuals, VARIANCES));
    }
    let mut table = table.note(format!(
        "{}{} and {} {}; total variance {}; divisor n − 1 = {}; variances to 4 significant \
         digits; by {}.",
        counted(pca.n_rows(), "row"),
        if pca.is_weighted() { " of unequal weight" } else { "" },
        counted(pca.n_variables(), "variable"),
        match pca.scaling() {
            Scaling::Correlation => "brought to unit variance (correlation)",
            Scaling::Covariance => "in their own units (covariance)",
        },
        significant(pca.total_variance(), 4),
        grouped(pca.divisor()),
        pca.route(),
    ));
    for note in [transformed(pca), left_out(pca), searched(pca), tied(pca)].into_iter().flatten() {
        table = table.note(note);
    }
    table
}

fn transformed(pca: &FittedComponents) -> Option<String> {
    let chain: Vec<String> = pca.transformations().iter().map(|t| t.to_string()).collect();
    (!chain.is_empty()).then(|| format!("Transformed beforehand: {}.", chain.join("; then ")))
}

fn left_out(pca: &FittedComponents) -> Option<String> {
    let left = pca.left_out_variance();
    (!pca.is_complete()).then(|| {
        format!(
            "Only the first {} kept; {} of the total variance, {}, is left out.",
            counted(pca.n_components(), "component"),
            significant(left, 4),
            NumberFormat::Percent.format(left / pca.total_variance())
        )
    })
}

fn searched(pca: &FittedComponents) -> Option<String> {
    let search = pca.approximation()?;
    Some(format!(
        "{} searched at random, refined {}, seed {}. Within the residual of each component lies \
         a variance of the exact decomposition; no variance is short of its own by more than {} \
         (Halko, Martinsson and Tropp 2011, equation 4.3; fails once in 10 billion searches).",
        counted(search.n_directions(), "direction"),
        counted(search.n_power_iterations(), "time"),
        search.seed(),
        significant(search.norm_bound().powi(2), 2)
    ))
}

fn tied(pca: &FittedComponents) -> Option<String> {
    let groups = pca.tied();
    let listed: Vec<String> = groups
        .iter()
        .take(MOST_GROUPS)
        .map(|group| match group.as_slice() {
            [first, second] => format!("{first} and {second}"),
            [first, .., last] => format!("{first} to {last}"),
            _ => String::new(),
        })
        .collect();
    let more = if groups.len() > MOST_GROUPS { ", and more" } else { "" };
    (!groups.is_empty()).then(|| {
        format!(
            "Equal variances as far as the computation can tell: {}{more}. Directions within such \
             a group are arbitrary.",
            listed.join(", ")
        )
    })
}

fn loadings(pca: &FittedComponents) -> Table {
    let values = pca.loadings().values();
    let n_shown = pca.n_components().min(MOST_COMPONENTS);
    // All p loadings of a component are this large when every variable has the same part in it.
    let threshold = 1.0 / (pca.n_variables() as f64).sqrt();
    let mut table = Table::new("Loadings").column(
        TableColumn::texts("variable", pca.variables().iter().map(String::as_str)).as_row_heads(),
    );
    for component in 0..n_shown {
        let column = values.column(component);
        table = table.column(
            TableColumn::numbers((component + 1).to_string(), column.iter().copied(), LOADINGS)
                .dimmed_below(threshold)
                .shaded_up_to(1.0),
        );
    }
    if n_shown < pca.n_components() {
        let n_left_out = pca.n_components() - n_shown;
        table = table.column(TableColumn::left_out(n_left_out, pca.n_variables()));
    }
    table.note(format!(
        "Coefficients of unit length for each component, not correlations; in each component the \
         largest in absolute value is positive. Dimmed where the client can: those below 1/√p = \
         {} in absolute value, the size when all variables share equally.",
        LOADINGS.format(threshold)
    ))
}
