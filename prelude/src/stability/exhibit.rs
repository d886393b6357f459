//! Stability as tables.

use super::result::{AsymptoticErrors, Bootstrap, LeaveOut};
use crate::components::Scaling;
use crate::exhibit::{
    Abridged, Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, significant, stacked,
    stored,
};
use crate::table::NamedMatrix;

const VARIANCES: NumberFormat = NumberFormat::Significant(4);
const LOADINGS: NumberFormat = NumberFormat::Decimals(3);
const DEGREES: NumberFormat = NumberFormat::Decimals(1);
const MOST_COMPONENTS: usize = 6;
const MOST_ROWS: usize = 12;

/// Beyond this angle a direction is said not to be settled. Common practice, no source: from there
/// on the linear theory behind an error of a direction is off by a tenth.
const SETTLED: f64 = 30.0;

const LIMITS: &str = "Each interval holds by itself, not all together. Statistical limits are not \
                      safety limits.";

/// Variances with errors and intervals, and loadings with theirs.
impl Exhibit for AsymptoticErrors {
    fn exhibit(&self) -> Bundle {
        let confidence = stored(100.0 * self.confidence(), 4);
        let settled = self.direction_errors().iter().filter(|angle| **angle <= SETTLED).count();
        let variances = Table::new(format!(
            "Sampling errors by theory: {settled} of {} known to within {SETTLED}°",
            counted(self.variances().len(), "direction")
        ))
        .column(TableColumn::counts("component", 1..=self.variances().len()).as_row_heads())
        .column(TableColumn::numbers("variance", self.variances().iter().copied(), VARIANCES))
        .column(TableColumn::numbers(
            "standard error",
            self.variance_errors().iter().copied(),
            VARIANCES,
        ))
        .column(TableColumn::numbers(
            format!("{confidence} % from"),
            self.variance_bands().low().iter().copied(),
            VARIANCES,
        ))
        .column(TableColumn::numbers("to", self.variance_bands().high().iter().copied(), VARIANCES))
        .column(TableColumn::numbers(
            "direction, degrees",
            self.direction_errors().iter().copied(),
            DEGREES,
        ))
        .note(match self.scaling() {
            Scaling::Covariance => format!(
                "For normal rows and variances that differ, n = {} (Girshick 1939; Anderson 1963).",
                self.n_rows()
            ),
            Scaling::Correlation => format!(
                "For normal rows and variances that differ, n = {}; correlation matrix, so by \
                 Girshick (1939) and Konishi (1979), intervals on the logarithmic scale.",
                self.n_rows()
            ),
        })
        .note(format!(
            "Direction: root mean square angle by the linear theory, which means nothing much \
             beyond {SETTLED}°. Heavy tails make all of this too small: see the bootstrap. {LIMITS}"
        ));
        let loadings = loadings_with(
            self.loadings(),
            &self.loadings_low(),
            &self.loadings_high(),
            format!("Loadings with {confidence} % intervals by theory"),
        );
        stacked(&[&variances, &loadings])
    }
}

/// Spread of variances, of loadings, and of the leading subspace.
impl Exhibit for Bootstrap {
    fn exhibit(&self) -> Bundle {
        let loadings = loadings_with(
            self.loadings(),
            &self.loadings_low(),
            &self.loadings_high(),
            format!(
                "Loadings with {} % percentile intervals",
                stored(100.0 * self.confidence(), 4)
            ),
        )
        .note(format!("Resamples beside the data: {}.", self.alignment()));
        stacked(&[&variance_table(self), &direction_table(self), &loadings])
    }
}

/// The rows that move the analysis most.
impl Exhibit for LeaveOut {
    fn exhibit(&self) -> Bundle {
        let shown = Abridged::of(self.n_rows(), MOST_ROWS, MOST_ROWS, 0);
        let rows: Vec<usize> = shown.indices().map(|place| self.order()[place]).collect();
        let labels = self.variance_changes().row_names();
        let first = self.order().first().map_or("", |&row| labels[row].as_str());
        let caption = match self.order().first() {
            Some(&row) if !self.whole_space && self.angles()[row].is_finite() => format!(
                "Rows the analysis hangs on: without {first}, the space of {} turns by {}°",
                counted(self.n_components(), "component"),
                DEGREES.format(self.angles()[row])
            ),
            _ => format!("Rows the analysis hangs on: {first} most"),
        };
        let mut table = Table::new(caption)
            .with_rows_left_out(shown.head, shown.left_out)
            .column(
                TableColumn::texts("row", rows.iter().map(|&row| labels[row].as_str()))
                    .as_row_heads(),
            )
            .column(TableColumn::numbers(
                "angle, degrees",
                rows.iter().map(|&row| self.angles()[row]),
                NumberFormat::Decimals(2),
            ));
        for c in 0..self.n_components().min(MOST_COMPONENTS) {
            let changes = self.variance_changes().column(c);
            table = table.column(TableColumn::numbers(
                format!("variance {}", c + 1),
                rows.iter().map(|&row| changes[row]),
                NumberFormat::Percent,
            ));
        }
        for c in 0..self.n_components().min(MOST_COMPONENTS) {
            let changes = self.loading_changes().column(c);
            table = table.column(TableColumn::numbers(
                format!("loadings {}", c + 1),
                rows.iter().map(|&row| changes[row]),
                NumberFormat::Decimals(4),
            ));
        }
        for (label, columns) in self.needed() {
            table = table.note(format!(
                "Without {label} the analysis cannot be made: {} would not vary.",
                if columns.is_empty() { "the columns".to_owned() } else { columns.join(", ") }
            ));
        }
        table
            .note(format!(
                "{}: the analysis is made again without each row. Angle: the largest between the \
                 spaces of {} with and without the row. Variance: relative change. Loadings: one \
                 less the congruence.",
                counted(self.n_rows(), "row"),
                counted(self.n_components(), "component")
            ))
            .note(
                "A row that moves the analysis is not wrong for that: it should be looked at. \
                 Statistical limits are not safety limits.",
            )
            .exhibit()
    }
}

fn variance_table(bootstrap: &Bootstrap) -> Table {
    let spread = bootstrap.variance_spread();
    let confidence = stored(100.0 * bootstrap.confidence(), 4);
    let column = |heading: &str, values: &nalgebra::DVector<f64>| {
        TableColumn::numbers(heading, values.iter().copied(), VARIANCES)
    };
    let usable = bootstrap.n_replicates() - bootstrap.n_degenerate();
    let mut table = Table::new(format!(
        "Resampled rows: order of the first {} kept in {} of resamples",
        counted(bootstrap.n_components(), "component"),
        NumberFormat::Percent.format(1.0 - bootstrap.any_order_change())
    ))
    .column(TableColumn::counts("component", 1..=bootstrap.variances().len()).as_row_heads())
    .column(column("variance", bootstrap.variances()))
    .column(column("bias", spread.bias()))
    .column(column("standard error", spread.standard_error()))
    .column(column(&format!("{confidence} % from"), spread.percentile().low()))
    .column(column("to", spread.percentile().high()))
    .column(column("corrected from", spread.bca().low()).with_detail("BCa"))
    .column(column("to", spread.bca().high()).with_detail("BCa"))
    .note(format!(
        "{} of {} by {}, seed {}; no distribution assumed, rows taken as independent. Variance k \
         is the k-th largest of each resample. Percentile intervals; corrected ones after Efron \
         (1987). To 4 significant digits.",
        counted(usable, "resample"),
        counted(bootstrap.n_rows(), "row"),
        bootstrap.scaling(),
        bootstrap.seed()
    ))
    .note(format!(
        "Large variances come out too large and small ones too small in samples and again in \
         resamples: see the bias. {LIMITS}"
    ));
    if bootstrap.n_degenerate() > 0 {
        let names: Vec<String> = bootstrap
            .degenerate_columns()
            .iter()
            .map(|at| format!("{} ({} times)", at.column, at.count))
            .collect();
        table = table.note(format!(
            "{} could not be analysed and are left out of every number: columns without variation \
             {}.",
            counted(bootstrap.n_degenerate(), "resample"),
            names.join(", ")
        ));
    }
    table
}

fn direction_table(bootstrap: &Bootstrap) -> Table {
    let k = bootstrap.n_components();
    // Shares from 0 to 1 are accepted without exception.
    let at = |share: f64| bootstrap.angle_quantile(share).unwrap_or(f64::NAN);
    Table::new(format!(
        "Directions: the space of {} turns by {}° (median), by less than {}° in 95 % of resamples",
        counted(k, "component"),
        DEGREES.format(at(0.5)),
        DEGREES.format(at(0.95))
    ))
    .column(TableColumn::counts("component", 1..=k).as_row_heads())
    .column(TableColumn::numbers(
        "congruence, mean",
        bootstrap.congruences().iter().copied(),
        LOADINGS,
    ))
    .column(TableColumn::numbers(
        "at another place",
        bootstrap.order_changes().iter().copied(),
        NumberFormat::Percent,
    ))
    .note(
        "Congruence: cosine between the loadings of the data and those of a resample. At another \
         place: share of resamples in which the component's counterpart stood elsewhere in the \
         order; such components should be read together, as a space.",
    )
    .note(format!(
        "Angle: the largest principal angle (Björck and Golub 1973); its quartiles are {}° and \
         {}°.",
        significant(at(0.25), 3),
        significant(at(0.75), 3)
    ))
}

fn loadings_with(
    loadings: &NamedMatrix,
    low: &NamedMatrix,
    high: &NamedMatrix,
    caption: String,
) -> Table {
    let n_shown = loadings.n_cols().min(MOST_COMPONENTS);
    let mut table = Table::new(caption).column(
        TableColumn::texts("variable", loadings.row_names().iter().map(String::as_str))
            .as_row_heads(),
    );
    for c in 0..n_shown {
        let intervals = (0..loadings.n_rows()).map(|j| {
            let (low, high) = (low.values()[(j, c)], high.values()[(j, c)]);
            let clear = if low > 0.0 || high < 0.0 { "" } else { " ·" };
            format!("{} to {}{clear}", LOADINGS.format(low), LOADINGS.format(high))
        });
        let values = loadings.values().column(c);
        table = table
            .column(
                TableColumn::numbers((c + 1).to_string(), values.iter().copied(), LOADINGS)
                    .shaded_up_to(1.0),
            )
            .column(TableColumn::texts("interval", intervals));
    }
    if n_shown < loadings.n_cols() {
        let n_left_out = loadings.n_cols() - n_shown;
        table = table.column(TableColumn::left_out(n_left_out, loadings.n_rows()));
    }
    table.note("A dot marks intervals that hold zero: the sign of that loading is not settled.")
}
