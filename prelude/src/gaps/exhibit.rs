//! Completed tables, choices and probabilistic components as tables to read.

use super::options::ComponentRule;
use super::probabilistic::ProbabilisticComponents;
use super::result::{Completed, ComponentChoice, EstimatedCell, Starts};
use crate::components::Scaling;
use crate::exhibit::{
    Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, grouped, significant, stacked,
};

const VALUES: NumberFormat = NumberFormat::Significant(4);
const LOADINGS: NumberFormat = NumberFormat::Decimals(3);
const CAUTION: &str = "Estimates are no measurements: an analysis of the completed table takes \
                       them for such and looks surer than it is, and a limit that matters for \
                       safety needs the cell measured. They hold if cells are missing for reasons \
                       that do not depend on what they would have shown.";

/// Estimated cells with their standard deviations, how they came about, and how many components.
impl Exhibit for Completed {
    fn exhibit(&self) -> Bundle {
        let n_cells = self.source().values().len();
        let share = self.cells().len() as f64 / n_cells as f64;
        let mut table = cell_table(
            format!(
                "{} of {} estimated ({})",
                counted(self.cells().len(), "cell"),
                grouped(n_cells),
                NumberFormat::Percent.format(share)
            ),
            self.cells(),
        )
        .note(format!(
            "{}, by {}; {}; {}; {}; seed {}.",
            capital(&self.method().to_string()),
            self.scaling(),
            components_used(self),
            ending(self.converged(), self.n_iterations(), self.last_change(), self.tolerance),
            starts(self.starts()),
            self.seed()
        ));
        let by_column = &self.data().notes().estimated;
        if !by_column.is_empty() {
            let listed: Vec<String> = by_column
                .iter()
                .take(12)
                .map(|column| format!("{} in {}", column.count, column.column))
                .collect();
            let more = by_column.len().saturating_sub(listed.len());
            let more = if more > 0 {
                format!(" and {}", counted(more, "more column"))
            } else {
                String::new()
            };
            table = table.note(format!("Estimated: {}{more}.", listed.join(", ")));
        }
        table = table
            .note(
                "Standard deviation: of what the cell may hold given the rest of its row and the \
                 fitted model, which leaves out that the model was fitted. Values to 4 significant \
                 digits.",
            )
            .note(match self.draws().len() {
                0 => "No completed tables were drawn.".to_owned(),
                n => format!(
                    "{} drawn, each from a fit to resampled rows: repeat the analysis on them to \
                     see how far the missing cells move it.",
                    counted(n, "completed table")
                ),
            })
            .note(CAUTION);
        match self.choice() {
            Some(choice) => stacked(&[&table, &choice_table(choice)]),
            None => table.exhibit(),
        }
    }
}

/// The error of each number of components.
impl Exhibit for ComponentChoice {
    fn exhibit(&self) -> Bundle {
        choice_table(self).exhibit()
    }
}

/// Axes, noise and how the fit ended.
impl Exhibit for ProbabilisticComponents {
    fn exhibit(&self) -> Bundle {
        let n_missing = self.source().n_missing();
        let variances = Table::new(format!(
            "{} with noise of variance {}",
            counted(self.n_components(), "probabilistic component"),
            significant(self.noise_variance(), 4)
        ))
        .column(TableColumn::counts("component", 1..=self.n_components()).as_row_heads())
        .column(TableColumn::numbers("variance", self.variances().iter().copied(), VALUES))
        .column(TableColumn::numbers(
            "share",
            self.proportions().iter().copied(),
            NumberFormat::Percent,
        ))
        .note(format!(
            "{}, {}, {} missing; {}; variance: squared loadings and noise; divisor n.",
            counted(self.source().n_rows(), "row"),
            counted(self.source().n_cols(), "variable"),
            counted(n_missing, "cell"),
            match self.scaling() {
                Scaling::Correlation => {
                    "brought to unit variance by their observed cells (correlation)"
                }
                Scaling::Covariance => "in their own units (covariance)",
            }
        ))
        .note(if n_missing == 0 {
            format!(
                "Closed form (Tipping and Bishop 1999, equations 7 and 8); log-likelihood {}.",
                significant(self.log_likelihood(), 6)
            )
        } else {
            format!(
                "Maximum likelihood by EM; {}; log-likelihood {}; {}; seed {}.",
                ending(self.converged(), self.n_iterations(), self.last_change(), self.tolerance()),
                significant(self.log_likelihood(), 6),
                starts(self.starts()),
                self.seed()
            )
        });
        let loadings = self.loadings();
        let n_shown = self.n_components().min(8);
        let mut table = Table::new("Loadings").column(
            TableColumn::texts("variable", loadings.row_names().iter().map(String::as_str))
                .as_row_heads(),
        );
        for s in 0..n_shown {
            let column = loadings.values().column(s);
            let format = match self.scaling() {
                Scaling::Correlation => LOADINGS,
                Scaling::Covariance => VALUES,
            };
            table = table.column(TableColumn::numbers(
                (s + 1).to_string(),
                column.iter().copied(),
                format,
            ));
        }
        if n_shown < self.n_components() {
            let left = self.n_components() - n_shown;
            table = table.column(TableColumn::left_out(left, loadings.n_rows()));
        }
        let table = table.note(
            "Length of a column: the root of its variance less the noise; `axes()` gives unit \
             length. In each component the largest in absolute value is positive.",
        );
        if self.cells().is_empty() {
            return stacked(&[&variances, &table]);
        }
        let cells = cell_table("Missing cells as the fit sees them", self.cells()).note(CAUTION);
        stacked(&[&variances, &table, &cells])
    }
}

fn cell_table(caption: impl Into<String>, cells: &[EstimatedCell]) -> Table {
    let number = |of: fn(&EstimatedCell) -> f64| cells.iter().map(of).collect::<Vec<f64>>();
    Table::new(caption)
        .column(
            TableColumn::texts("row", cells.iter().map(|cell| cell.label.as_str())).as_row_heads(),
        )
        .column(TableColumn::texts("variable", cells.iter().map(|cell| cell.variable.as_str())))
        .column(TableColumn::numbers("estimate", number(|cell| cell.value), VALUES))
        .column(TableColumn::numbers(
            "standard deviation",
            number(|cell| cell.standard_deviation),
            NumberFormat::Significant(2),
        ))
}

fn choice_table(choice: &ComponentChoice) -> Table {
    let errors = choice.errors();
    let means_only = errors.first().and_then(|error| error.mean_squared);
    let relative = errors.iter().map(|error| Some(error.mean_squared? / means_only?));
    let most = errors.last().map_or(0, |error| error.n_components);
    let chosen = choice.n_components();
    let verdicts = errors.iter().map(|error| match error.mean_squared {
        None => "cannot be fitted",
        Some(_) if error.n_components == chosen => "smallest",
        Some(_) => "",
    });
    let mut table = Table::new(format!("{} predict best", counted(chosen, "component")))
        .column(
            TableColumn::counts("components", errors.iter().map(|error| error.n_components))
                .as_row_heads(),
        )
        .column(TableColumn::numbers_where(
            "mean squared error",
            errors.iter().map(|error| error.mean_squared),
            VALUES,
        ))
        .column(TableColumn::numbers_where(
            "beside column means",
            relative,
            NumberFormat::Decimals(3),
        ));
    if errors.iter().any(|error| error.standard_error.is_some()) {
        table = table.column(TableColumn::numbers_where(
            "standard error",
            errors.iter().map(|error| error.standard_error),
            NumberFormat::Significant(2),
        ));
    }
    table = table.column(TableColumn::texts("verdict", verdicts)).note(match choice.rule() {
        ComponentRule::Generalised => format!(
            "Generalised cross-validation over {}, nothing hidden (Josse and Husson 2012).",
            counted(choice.n_predicted(), "observed cell")
        ),
        rule => format!(
            "{}: {} hidden in turn, each once; standard error from the spread between parts; seed \
             {}.",
            capital(&rule.to_string()),
            counted(choice.n_predicted(), "observed cell"),
            choice.seed()
        ),
    });
    if let Some(fewest) = choice.fewest_within_error().filter(|fewest| *fewest < chosen) {
        table = table.note(format!(
            "Within one standard error of the smallest error: {} already.",
            counted(fewest, "component")
        ));
    }
    if choice.n_unconverged() > 0 {
        table = table.note(format!(
            "{} reached the iteration limit.",
            counted(choice.n_unconverged(), "fit")
        ));
    }
    if chosen == 0 {
        table = table.note(
            "The means of the columns predict as well as anything tried: the variables say little \
             about each other.",
        );
    } else if chosen == most {
        table = table.note("The largest number that was tried; more may do better.");
    }
    table
}

fn components_used(completed: &Completed) -> String {
    let count = counted(completed.n_components(), "component");
    match completed.choice() {
        None => format!("{count}, as given"),
        Some(choice) => format!("{count}, {}", choice.rule()),
    }
}

fn ending(converged: bool, n_iterations: usize, last_change: f64, tolerance: f64) -> String {
    let (change, iterations) = (significant(last_change, 2), counted(n_iterations, "iteration"));
    if converged {
        format!("converged after {iterations}, last change {change} (tolerance {tolerance:e})")
    } else {
        format!(
            "NOT CONVERGED in {iterations}: last change {change}, tolerance {tolerance:e}; allow \
             more iterations before relying on it"
        )
    }
}

fn starts(starts: Starts) -> String {
    match starts.n_starts {
        1 => "one start".to_owned(),
        n => format!("{n} starts, {} of which ended at the best fit", starts.n_agreeing),
    }
}

fn capital(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or(String::new(), |first| first.to_uppercase().chain(letters).collect())
}
