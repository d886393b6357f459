//! A parallel analysis as a table.

use super::options::{Noise, RootsOf};
use super::result::ParallelAnalysis;
use crate::exhibit::{Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, stored};

const VARIANCES: NumberFormat = NumberFormat::Significant(4);

/// Observed variances beside those of noise.
impl Exhibit for ParallelAnalysis {
    fn exhibit(&self) -> Bundle {
        let places = 1..=self.observed().len();
        let percentile = stored(self.percentile(), 4);
        let verdicts = self.observed().iter().zip(self.noise_percentile().iter());
        let verdicts =
            verdicts.map(|(seen, limit)| if seen > limit { "above noise" } else { "within noise" });
        let (heading, things) = match self.roots_of() {
            RootsOf::Correlation => ("variance", "Components"),
            RootsOf::ReducedCorrelation => ("root", "Roots of reduced correlations"),
        };
        let noise = match self.noise() {
            Noise::Normal => "independent normal values",
            Noise::Permuted => "the data's own columns, each shuffled by itself",
        };
        Table::new(format!(
            "{things} against noise: {} by the percentile, {} by the mean",
            self.n_by_percentile(),
            self.n_by_mean()
        ))
        .column(TableColumn::counts("component", places).as_row_heads())
        .column(TableColumn::numbers(heading, self.observed().iter().copied(), VARIANCES))
        .column(TableColumn::numbers("noise, mean", self.noise_mean().iter().copied(), VARIANCES))
        .column(TableColumn::numbers(
            format!("noise, percentile {percentile}"),
            self.noise_percentile().iter().copied(),
            VARIANCES,
        ))
        .column(TableColumn::texts("verdict", verdicts))
        .note(format!(
            "{} of {noise}, {} × {}, seed {}. Leading components above the mean (Horn 1965) or above \
             percentile {percentile} (Glorfeld 1995) are counted until the first that is not.",
            counted(self.n_replicates(), "table"),
            counted(self.n_rows(), "row"),
            counted(self.n_variables(), "column"),
            self.seed()
        ))
        .note(match self.roots_of() {
            RootsOf::Correlation => "Variances of the correlation matrix, to 4 significant digits.",
            RootsOf::ReducedCorrelation => {
                "Roots of the correlation matrix with squared multiple correlations on the \
                 diagonal (Humphreys and Ilgen 1969), to 4 significant digits; those of what \
                 variables do not share are negative."
            }
        })
        .exhibit()
    }
}
