//! Adequacy and normality as tables.

use super::result::{Adequacy, MultivariateNormality};
use crate::exhibit::{
    Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, significant, stacked,
};

const MEASURES: NumberFormat = NumberFormat::Decimals(3);
const STATISTICS: NumberFormat = NumberFormat::Significant(4);
const P_VALUES: NumberFormat = NumberFormat::Significant(2);

/// Below this Kaiser (1974) has no use for a set of variables.
const LEAST_USEFUL: f64 = 0.5;

const NOT_SAFETY: &str = "A test says what the rows say, no more: statistical limits are not \
                          safety limits.";

/// The measure for each variable, the test of sphericity, and the tests of normality.
impl Exhibit for Adequacy {
    fn exhibit(&self) -> Bundle {
        let weak = self.by_variable().iter().filter(|value| **value < LEAST_USEFUL).count();
        let verdict = match (self.overall() < LEAST_USEFUL, weak) {
            (true, _) => "below 0.5, variables share too little".to_owned(),
            (false, 0) => "no variable below 0.5".to_owned(),
            (false, weak) => format!("{} below 0.5", counted(weak, "variable")),
        };
        let sphericity = self.sphericity();
        let measures = Table::new(format!(
            "Sampling adequacy (Kaiser, Meyer, Olkin): {} together, {verdict}",
            MEASURES.format(self.overall())
        ))
        .column(
            TableColumn::texts("variable", self.variables().iter().map(String::as_str))
                .as_row_heads(),
        )
        .column(TableColumn::numbers("measure", self.by_variable().iter().copied(), MEASURES))
        .column(TableColumn::texts(
            "verdict",
            self.by_variable()
                .iter()
                .map(|value| if *value < LEAST_USEFUL { "below 0.5" } else { "0.5 or more" }),
        ))
        .note(
            "Squared correlations over squared correlations and squared partial correlations \
             (Kaiser 1974, who has no use for less than 0.5).",
        )
        .note(format!(
            "Test of sphericity (Bartlett 1951): χ² = {}, {} degrees of freedom, p = {}; it takes \
             normal rows. Determinant {}, condition number {}.",
            STATISTICS.format(sphericity.statistic),
            sphericity.freedom,
            P_VALUES.format(sphericity.p_value),
            significant(self.determinant(), 3),
            significant(self.condition_number(), 3)
        ));
        stacked(&[&measures, &normality_table(self.normality())])
    }
}

/// Statistics and p-values of the tests.
impl Exhibit for MultivariateNormality {
    fn exhibit(&self) -> Bundle {
        normality_table(self).exhibit()
    }
}

fn normality_table(found: &MultivariateNormality) -> Table {
    let (skewness, kurtosis) = (found.skewness(), found.kurtosis());
    let last = found.henze_zirkler();
    let p_values = [skewness.p_value, skewness.corrected_p_value, kurtosis.p_value, last.p_value];
    let against = p_values.iter().filter(|p| **p < 0.05).count();
    let verdict = match against {
        0 => "nothing at the 5 % level speaks against it".to_owned(),
        4 => "all tests speak against it at the 5 % level".to_owned(),
        some => format!("{some} of 4 tests speak against it at the 5 % level"),
    };
    let names = ["skewness", "skewness, corrected", "kurtosis", "Henze–Zirkler"];
    Table::new(format!("Multivariate normality: {verdict}"))
        .column(TableColumn::texts("test", names).as_row_heads())
        .column(TableColumn::numbers_where(
            "measure",
            [Some(skewness.skewness), None, Some(kurtosis.kurtosis), None],
            STATISTICS,
        ))
        .column(TableColumn::numbers(
            "statistic",
            [skewness.statistic, skewness.corrected_statistic, kurtosis.statistic, last.statistic],
            STATISTICS,
        ))
        .column(TableColumn::texts(
            "refers to",
            [
                format!("χ² with {} degrees of freedom", skewness.freedom),
                format!("χ² with {} degrees of freedom", skewness.freedom),
                "standard normal, both tails".to_owned(),
                format!("lognormal, smoothing {}", significant(last.smoothing, 3)),
            ],
        ))
        .column(TableColumn::numbers("p", p_values, P_VALUES))
        .note(format!(
            "{} and {}; covariances with divisor n. Mardia (1970), correction for small samples \
             of Mardia (1974); Henze and Zirkler (1990).",
            counted(found.n_rows(), "row"),
            counted(found.n_variables(), "variable")
        ))
        .note(format!(
            "With few rows a large p says little; with many a small one may not matter. {NOT_SAFETY}"
        ))
}
